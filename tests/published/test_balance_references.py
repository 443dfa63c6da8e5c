"""The heat balance against an independent coding of its equations, solved tightly and in the lagged way.

Nothing of the kernel is used here: vapour pressure, Dunkle's relation and the balances are written anew from
the published equations, with another solver (scipy's solve_ivp) and root finder for the cover.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from stillfield.physics.brine import basin_heat_capacity, water_activity
from stillfield.physics.heat_balance import Forcing, simulate
from stillfield.physics.still import Panel, Still

DAYS = 3
SIGMA = 5.670374419e-8


def made_weather(days: int, seed: int, *, peak: float, mean_air: float, dtype: type = np.float64) -> Forcing:
    """Invented weather of one cell: a sine day with clouds, swings of air, gusts."""
    draw = np.random.default_rng(seed)
    hour = np.arange(24 * days) + 0.5
    sun = peak * np.maximum(np.sin((hour % 24 - 6.0) / 12.0 * np.pi), 0.0) * draw.uniform(0.4, 1.0, hour.size)
    air = mean_air + 6.0 * np.sin((hour - 9.0) / 12.0 * np.pi) + draw.normal(0.0, 0.7, hour.size)
    wind = draw.uniform(0.0, 7.0, hour.size)
    fields = (0.7 * sun, 0.05 * sun, air, wind, air - 13.0)
    return Forcing(*(field[:, None].astype(dtype) for field in fields))


@dataclass(frozen=True)
class Plain:
    """Equations of model and books in plain scalar form, for fresh or salt water and Dunkle's relation."""

    still: Still

    def pressure(self, celsius: float) -> float:
        """Saturation pressure after the International Association, here with math of its own. [Pa]."""
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

    def slopes(self, _: float, state: np.ndarray, step: np.ndarray) -> list[float]:
        """Time derivatives of water temperature and distillate."""
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


def steps_of(forcing: Forcing, days: int) -> np.ndarray:
    """Steps as rows, with the early hours of the last day once more at the end."""
    fields = (forcing.absorbed, forcing.cover_absorbed, forcing.temp_air, forcing.wind_speed, forcing.temp_sky)
    rows = np.stack([np.asarray(field)[:, 0] for field in fields], axis=1)
    return np.concatenate([rows, rows[24 * (days - 1) : 24 * (days - 1) + 6]])


def by_day(made: list[float], days: int) -> np.ndarray:
    """Distillate of yield days from 6 to 6 o'clock."""
    return np.diff([made[6 + 24 * day] for day in range(days + 1)])


def tight_solution(forcing: Forcing, still: Still, days: int) -> np.ndarray:
    """Yield days by solve_ivp, hour by hour because the weather jumps between hours. [kg m-2]."""
    plain = Plain(still)
    state, made = np.array([float(forcing.temp_air[0, 0]), 0.0]), [0.0]
    for step in steps_of(forcing, days):
        solution = solve_ivp(
            plain.slopes, (0.0, 3600.0), state, method="LSODA", rtol=1e-7, atol=1e-8, args=(step,)
        )
        state = solution.y[:, -1]
        made.append(float(state[1]))
    return by_day(made, days)


STILLS = {
    "shallow": Still("shallow", (Panel(1.0, 15.0),), brine_depth_m=0.01, condition="new"),
    "usual": Still("usual", (Panel(0.5, 12.0), Panel(0.5, 12.0, 180.0))),
    "salt": Still("salt", (Panel(1.0, 15.0),), feed_salinity_g_kg=35.0, condition="weathered"),
    "deep": Still("deep", (Panel(1.0, 15.0),), brine_depth_m=0.15, condition="neglected"),
}
CLIMATES = {"hot": (950.0, 32.0), "mild": (600.0, 16.0)}


@pytest.mark.parametrize("climate", CLIMATES)
@pytest.mark.parametrize("name", STILLS)
def test_day_within_half_a_percent_of_a_tight_solution(name, climate):
    peak, air = CLIMATES[climate]
    forcing = made_weather(DAYS, 7, peak=peak, mean_air=air)
    expected = tight_solution(forcing, STILLS[name], DAYS)
    got = simulate(forcing, STILLS[name], spinup_days=0, engine="numpy").daily_yield[:, 0]
    np.testing.assert_allclose(got, expected, rtol=5e-3)
    np.testing.assert_allclose(got.sum(), expected.sum(), rtol=1e-3)


def lagged_solution(forcing: Forcing, still: Still, days: int, steps_per_hour: int = 10) -> np.ndarray:
    """Yield days by coefficients of the step before, both balances linear (Sharma & Mullick 1993). [kg m-2]."""
    plain = Plain(still)
    water = float(forcing.temp_air[0, 0])
    cover, total, made = water - 2.0, 0.0, [0.0]
    seconds = 3600.0 / steps_per_hour
    for absorbed, gain, air, wind, sky in steps_of(forcing, days):
        for _ in range(steps_per_hour):
            difference = water - cover if abs(water - cover) > 0.05 else 0.05
            convected, evaporated, radiated = plain.coefficients(cover + difference, cover)
            inside = (convected + evaporated + radiated) / difference
            above_air = cover - air if abs(cover - air) > 0.05 else 0.05
            outside = plain.outward(air + above_air, air, wind, sky) / above_air
            cover = (gain + inside * water + outside * air) / (inside + outside)
            loss = still.state.loss_w_m2_k
            made_now = max(evaporated / difference * (water - cover), 0.0)
            total += (1.0 - still.state.leak) * made_now * seconds / (2.501e6 - 2361.0 * water)
            water += seconds * (absorbed - inside * (water - cover) - loss * (water - air)) / plain.capacity()
        made.append(total)
    return by_day(made, days)


# Sharma & Mullick 1993, ASME J. Solar Energy Eng. 115:231: lagged coefficients give the 24 h output within
# 1.5 %.
@pytest.mark.parametrize("name", ["usual", "salt"])
def test_total_within_the_published_bound_of_the_lagged_scheme(name):
    forcing = made_weather(DAYS, 11, peak=900.0, mean_air=27.0)
    expected = lagged_solution(forcing, STILLS[name], DAYS).sum()
    got = simulate(forcing, STILLS[name], spinup_days=0, engine="numpy").daily_yield.sum()
    assert got == pytest.approx(expected, rel=0.015)


@pytest.mark.parametrize("relation", ["dunkle", "moist-air"])
@pytest.mark.parametrize("depth", [0.01, 0.02, 0.20])
def test_halving_the_step_moves_a_day_by_less_than_two_permille(depth, relation):
    forcing = _several(6, peak=900.0, mean_air=25.0)
    still = Still("any", (Panel(1.0, 15.0),), brine_depth_m=depth, heat_transfer=relation)
    coarse, fine = (simulate(forcing, still, substeps=n, engine="numpy").daily_yield for n in (2, 4))
    np.testing.assert_allclose(coarse, fine, rtol=2e-3)


def _several(cells: int, *, peak: float, mean_air: float, days: int = 4) -> Forcing:
    """Weather of several cells side by side."""
    each = [made_weather(days, seed, peak=peak, mean_air=mean_air) for seed in range(cells)]
    names = ("absorbed", "cover_absorbed", "temp_air", "wind_speed", "temp_sky")
    return Forcing(*(np.concatenate([getattr(one, name) for one in each], axis=1) for name in names))


def test_sub_steps_converge_in_second_order():
    forcing = _several(6, peak=900.0, mean_air=25.0)
    still = STILLS["usual"]
    runs = [simulate(forcing, still, substeps=n, engine="numpy").daily_yield for n in (2, 4, 32)]
    coarse, fine = (float(np.sqrt(np.mean((run - runs[2]) ** 2))) for run in runs[:2])
    assert 3.0 < coarse / fine < 6.0


@pytest.mark.parametrize("relation", ["dunkle", "moist-air"])
def test_compiled_and_numpy_give_the_same_litres(relation):
    forcing = _several(5, peak=900.0, mean_air=6.0)
    forcing.temp_air[30:34, 2] = np.nan
    still = Still("any", (Panel(1.0, 15.0),), heat_transfer=relation, feed_salinity_g_kg=10.0)
    ours, theirs = (simulate(forcing, still, engine=engine) for engine in ("numpy", "compiled"))
    np.testing.assert_allclose(theirs.daily_yield, ours.daily_yield, rtol=1e-12)
    np.testing.assert_array_equal(theirs.frost, ours.frost)
    assert np.isnan(ours.daily_yield).any()


def test_compiled_record_is_that_of_numpy():
    forcing = _several(3, peak=900.0, mean_air=20.0)
    ours, theirs = (simulate(forcing, STILLS["usual"], engine=e, record=True) for e in ("numpy", "compiled"))
    for name, values in vars(ours.record).items():
        np.testing.assert_allclose(getattr(theirs.record, name), values, rtol=1e-9, atol=1e-8, err_msg=name)
    np.testing.assert_allclose(theirs.daily_yield, simulate(forcing, STILLS["usual"], engine="numpy").daily_yield)


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
def test_single_precision_gives_the_same_litres(engine):
    double = _several(4, peak=900.0, mean_air=20.0)
    single = Forcing(*(np.asarray(field, dtype=np.float32) for field in vars(double).values()))
    runs = [simulate(forcing, STILLS["usual"], engine=engine).daily_yield for forcing in (double, single)]
    assert runs[1].dtype == np.float32
    np.testing.assert_allclose(runs[1], runs[0], rtol=1e-4)
