"""An independent coding of the heat balance, solved tightly and in the lagged way.

Nothing of the kernel is used here: vapour pressure, Dunkle's relation and the balances are written anew from the
published equations, with another solver (scipy's solve_ivp) and a root finder for the cover.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from stillfield.physics.brine import basin_heat_capacity, water_activity
from stillfield.physics.heat_balance import Forcing
from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]

SIGMA = 5.670374419e-8  # W m-2 K-4
LEAST_DIFFERENCE = 0.05  # below it the lagged scheme does not divide by a temperature difference [K]


def made_weather(
    days: int, seed: int, *, peak: float, mean_air: float, dtype: type[np.floating[Any]] = np.float64
) -> Forcing:
    """Invent weather of one cell: a sine day with clouds, swings of air, gusts.

    Parameters
    ----------
    days : int
        Days.
    seed : int
        Seed of the generator.
    peak : float
        Global irradiance of a cloudless noon. [W m-2]
    mean_air : float
        Mean air temperature. [degC]
    dtype : type
        Precision.

    Returns
    -------
    Forcing
        Arrays of shape (day * 24, 1).
    """
    draw = np.random.default_rng(seed)
    hour = np.arange(24 * days) + 0.5
    sun = peak * np.maximum(np.sin((hour % 24 - 6.0) / 12.0 * np.pi), 0.0) * draw.uniform(0.4, 1.0, hour.size)
    air = mean_air + 6.0 * np.sin((hour - 9.0) / 12.0 * np.pi) + draw.normal(0.0, 0.7, hour.size)
    wind = draw.uniform(0.0, 7.0, hour.size)
    fields = (0.7 * sun, 0.05 * sun, air, wind, air - 13.0)
    return Forcing(*(field[:, None].astype(dtype) for field in fields))


@dataclass(frozen=True)
class PlainBalance:
    """Equations of model and books in plain scalar form, for fresh or salt water and Dunkle's relation."""

    still: Still

    def pressure(self, celsius: float) -> float:
        """Saturation pressure after Wagner & Pruss 1993, eq. 1, here with arithmetic of its own. [Pa]."""
        tau = 1.0 - (celsius + 273.15) / 647.096
        series = (
            -7.85951783 * tau + 1.84408259 * tau**1.5 - 11.7866497 * tau**3 + 22.6807411 * tau**3.5
            - 15.9618719 * tau**4 + 1.80122502 * tau**7.5
        )
        return 22.064e6 * float(np.exp(647.096 / (celsius + 273.15) * series))

    def coefficients(self, water: float, cover: float) -> tuple[float, float, float]:
        """Convective, evaporative and radiative heat from water to cover. [W m-2]."""
        over_water = float(water_activity(self.still.basin_salinity_g_kg)) * self.pressure(water)
        over_cover = self.pressure(cover)
        lift = water - cover + (over_water - over_cover) * (water + 273.15) / (268900.0 - over_water)
        h = max(0.884 * max(lift, 0.0) ** (1.0 / 3.0), 0.2)
        emittance = 1.0 / (1.0 / self.still.water_emittance + 1.0 / self.still.cover.emittance - 1.0)
        radiated = emittance * SIGMA * ((water + 273.15) ** 4 - (cover + 273.15) ** 4)
        return h * (water - cover), 0.016273 * h * max(over_water - over_cover, 0.0), radiated

    def outward(self, cover: float, air: float, wind: float, sky: float) -> float:
        """Heat from the cover to air and sky. [W m-2]."""
        long_wave = self.still.cover.emittance * SIGMA * ((cover + 273.15) ** 4 - (sky + 273.15) ** 4)
        return self.still.cover_area_ratio * ((2.8 + 3.0 * wind) * (cover - air) + long_wave)

    def cover(self, water: float, gain: float, air: float, wind: float, sky: float) -> float:
        """Cover temperature in balance. [degC]."""

        def excess(cover: float) -> float:
            return gain + sum(self.coefficients(water, cover)) - self.outward(cover, air, wind, sky)

        return float(brentq(excess, -60.0, 110.0, xtol=1e-10))

    def slopes(self, _: float, state: Array, step: Array) -> list[float]:
        """Time derivatives of water temperature [K s-1] and distillate [kg m-2 s-1]."""
        absorbed, gain, air, wind, sky = step
        water = float(state[0])
        convected, evaporated, radiated = self.coefficients(water, self.cover(water, gain, air, wind, sky))
        lost = convected + evaporated + radiated + self.still.state.loss_w_m2_k * (water - air)
        made = (1.0 - self.still.state.leak) * evaporated / (2.501e6 - 2361.0 * water)
        return [(absorbed - lost) / self.capacity(), made]

    def capacity(self) -> float:
        """Heat capacity of brine and liner. [J m-2 K-1]."""
        still = self.still
        return float(
            basin_heat_capacity(still.brine_depth_m, still.basin_salinity_g_kg, still.liner_heat_capacity_j_m2_k)
        )


def steps_of(forcing: Forcing, days: int) -> Array:
    """Steps as rows, with the early hours of the last day once more at the end."""
    fields = (forcing.absorbed, forcing.cover_absorbed, forcing.temp_air, forcing.wind_speed, forcing.temp_sky)
    rows = np.stack([np.asarray(field)[:, 0] for field in fields], axis=1)
    return np.concatenate([rows, rows[24 * (days - 1) : 24 * (days - 1) + 6]])


def by_day(made: list[float], days: int) -> Array:
    """Distillate of yield days from 6 to 6 o'clock, from its running total after every hour."""
    return np.diff([made[6 + 24 * day] for day in range(days + 1)])


def tight_solution(forcing: Forcing, still: Still, days: int) -> Array:
    """Yield days by solve_ivp, hour by hour because the weather jumps between hours.

    Parameters
    ----------
    forcing : Forcing
        Weather of one cell.
    still : Still
        Design with Dunkle's relation.
    days : int
        Days in `forcing`.

    Returns
    -------
    ndarray, shape (day,)
        [kg m-2]
    """
    plain = PlainBalance(still)
    state, made = np.array([float(forcing.temp_air[0, 0]), 0.0]), [0.0]
    for step in steps_of(forcing, days):
        solution = solve_ivp(plain.slopes, (0.0, 3600.0), state, method="LSODA", rtol=1e-7, atol=1e-8, args=(step,))
        state = solution.y[:, -1]
        made.append(float(state[1]))
    return by_day(made, days)


def lagged_solution(forcing: Forcing, still: Still, days: int, steps_per_hour: int = 10) -> Array:
    """Yield days with the coefficients of the step before, so that both balances are linear.

    Source: Sharma & Mullick 1993, ASME Journal of Solar Energy Engineering 115:231.

    Parameters
    ----------
    forcing, still, days
        As for `tight_solution`.
    steps_per_hour : int
        Steps in an hour.

    Returns
    -------
    ndarray, shape (day,)
        [kg m-2]
    """
    plain = PlainBalance(still)
    water = float(forcing.temp_air[0, 0])
    cover, total, made = water - 2.0, 0.0, [0.0]
    seconds = 3600.0 / steps_per_hour
    for absorbed, gain, air, wind, sky in steps_of(forcing, days):
        for _ in range(steps_per_hour):
            difference = water - cover if abs(water - cover) > LEAST_DIFFERENCE else LEAST_DIFFERENCE
            convected, evaporated, radiated = plain.coefficients(cover + difference, cover)
            inside = (convected + evaporated + radiated) / difference
            above_air = cover - air if abs(cover - air) > LEAST_DIFFERENCE else LEAST_DIFFERENCE
            outside = plain.outward(air + above_air, air, wind, sky) / above_air
            cover = (gain + inside * water + outside * air) / (inside + outside)
            loss = still.state.loss_w_m2_k
            made_now = max(evaporated / difference * (water - cover), 0.0)
            total += (1.0 - still.state.leak) * made_now * seconds / (2.501e6 - 2361.0 * water)
            water += seconds * (absorbed - inside * (water - cover) - loss * (water - air)) / plain.capacity()
        made.append(total)
    return by_day(made, days)
