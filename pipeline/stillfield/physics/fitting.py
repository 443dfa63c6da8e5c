"""Fit the daily correlation of a still to its hourly balance, over invented climates."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.basin import absorbed
from stillfield.physics.climates import ClimateSet, invented_climates
from stillfield.physics.correlation import (
    FROST_BELOW_DEGC,
    FROST_TERMS,
    VARIANTS,
    DailyCorrelation,
    Day,
    design_matrix,
    evaluate,
    scaled_predictors,
    thaw,
)
from stillfield.physics.day_shape import DayWeather, basin_memory, day_from_days, day_from_steps
from stillfield.physics.forcing import step_forcing
from stillfield.physics.gain_table import GainTable
from stillfield.physics.heat_balance import simulate
from stillfield.physics.still import Still
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.physics.vapour import latent_heat

Array = NDArray[np.floating[Any]]

#: Raised whenever a fit made by older code must not be used again.
FIT_VERSION = 2

CLIMATES = 192
STEPS = 24
#: Days at the start of each climate that are left out, while memory settles.
SETTLING_DAYS = 8
#: Days with less sun than this outside the atmosphere are left out. [MJ m-2]
LEAST_OUTSIDE_MJ = 3.0
#: Water temperature at which the ceiling's latent heat is taken: the warmest, where it is least. [degC]
CEILING_TEMP_DEGC = 80.0
#: Ridge on the normal equations, relative to the mean square of the terms.
RIDGE = 1e-9


@dataclass(frozen=True)
class StillFit:
    """The correlations of one still in one condition.

    Attributes
    ----------
    fingerprint : str
        Of the still and its central condition.
    correlations : mapping of str to DailyCorrelation
        By variant.
    """

    fingerprint: str
    correlations: Mapping[str, DailyCorrelation]


@dataclass(frozen=True)
class _Sample:
    """Truth and predictors on the climates."""

    litres: Array
    frost: NDArray[np.bool_]
    usable: NDArray[np.bool_]
    by_days: Day
    by_steps: Day


def fit_still(still: Still, climates: ClimateSet | None = None) -> StillFit:
    """Fit every variant for `still` in its central condition: a few seconds.

    Parameters
    ----------
    still : Still
        Design and condition.
    climates : ClimateSet, optional
        What to fit on; the built-in set without it.

    Returns
    -------
    StillFit
    """
    sample = _sample(still, climates or invented_climates(CLIMATES))
    memory = basin_memory(still)
    ceiling = float(absorbed(np.array(1.0), still)) * (1.0 - still.state.leak) / _lowest_latent_heat_mj()
    correlations = {
        variant: _fit_variant(variant, sample, memory=memory, ceiling=ceiling) for variant in VARIANTS
    }
    return StillFit(still.fingerprint(), correlations)


def _lowest_latent_heat_mj() -> float:
    return float(latent_heat(CEILING_TEMP_DEGC)) / 1e6


def _sample(still: Still, climates: ClimateSet) -> _Sample:
    weather = {
        "ghi": climates.ghi, "temp_air": climates.temp_air, "temp_dew": climates.temp_dew,
        "wind_speed": climates.wind_speed,
    }
    place: dict[str, Any] = {"latitude": climates.latitude, "day_of_year": climates.day_of_year}
    forcing, transmitted = step_forcing(weather, still, steps_per_day=STEPS, **place)
    result = simulate(forcing, still)
    days = {name: values.reshape(-1, STEPS, values.shape[1]) for name, values in weather.items()}
    daily = {name: values.mean(axis=1) for name, values in days.items() if name != "ghi"}
    daily["irradiation"] = days["ghi"].sum(axis=1) * 3600e-6
    daily["temp_air_min"], daily["temp_air_max"] = days["temp_air"].min(axis=1), days["temp_air"].max(axis=1)
    outside = extraterrestrial_irradiation(climates.latitude, climates.day_of_year)
    usable = outside > LEAST_OUTSIDE_MJ
    usable[:SETTLING_DAYS] = usable[-1:] = False
    rows = GainTable(still).for_latitudes(climates.latitude)
    return _Sample(
        litres=result.daily_yield,
        frost=result.frost,
        usable=usable,
        by_days=day_from_days(DayWeather(**daily, day_of_year=climates.day_of_year), rows),
        by_steps=day_from_steps(weather, forcing, transmitted, still, steps_per_day=STEPS, **place),
    )


def _fit_variant(variant: str, sample: _Sample, *, memory: float, ceiling: float) -> DailyCorrelation:
    day = sample.by_steps if variant == "hourly" else sample.by_days
    predictors = scaled_predictors(day, memory)
    warm = sample.usable & ~sample.frost
    picked = {letter: values[warm] for letter, values in predictors.items()}
    coefficients = _least_squares(design_matrix(picked, VARIANTS[variant]), sample.litres[warm])
    raw = np.maximum(evaluate(variant, predictors, coefficients), 0.0)
    frost = _fit_frost(day, predictors, sample, raw)
    fitted = DailyCorrelation(
        variant=variant, coefficients=coefficients, frost=frost, memory=memory, ceiling=ceiling,
        ranges=_ranges(day, sample.usable), daily_rms=float("nan"), monthly_error=float("nan"),
    )
    litres, _, _ = fitted.litres(day)
    rms = float(np.sqrt(np.mean((litres - sample.litres)[warm] ** 2)))
    return DailyCorrelation(**{
        **vars(fitted), "daily_rms": rms, "monthly_error": _monthly_error(litres, sample),
    })


def _least_squares(matrix: Array, wanted: Array) -> tuple[float, ...]:
    gram = matrix.T @ matrix
    gram[np.diag_indices_from(gram)] += RIDGE * np.trace(gram) / len(gram)
    return tuple(float(value) for value in np.linalg.solve(gram, matrix.T @ wanted))


def _fit_frost(day: Day, predictors: Mapping[str, Array], sample: _Sample, raw: Array) -> tuple[float, ...]:
    """Share of the frost-free litres that is left on cold days."""
    cold = sample.usable & (day.temp_air < FROST_BELOW_DEGC)
    matrix = design_matrix({letter: values[cold] for letter, values in predictors.items()}, FROST_TERMS)
    without, wanted = raw[cold], sample.litres[cold]
    start = np.zeros(len(FROST_TERMS))
    start[:2] = 2.0

    def misfit(x: Array) -> Array:
        return np.asarray(thaw(matrix @ x) * without - wanted)

    from scipy.optimize import least_squares  # only where fits are made

    result = least_squares(misfit, start, method="lm")
    return tuple(float(value) for value in result.x)


def _ranges(day: Day, usable: NDArray[np.bool_]) -> dict[str, tuple[float, float]]:
    """Range of the predictors, without the most extreme thousandth at either end that has one."""
    sunshine, air, wind = (
        values[usable] for values in (day.transmitted, day.temp_air, day.wind_speed)
    )
    return {
        "S": (0.0, round(float(np.quantile(sunshine, 0.9995)), 2)),
        "T": (round(float(np.quantile(air, 0.001)), 1), round(float(np.quantile(air, 0.999)), 1)),
        "u": (0.0, round(float(np.quantile(wind, 0.999)), 1)),
    }


def _monthly_error(litres: Array, sample: _Sample) -> float:
    """Mean relative error of 30-day sums without frost in which it yields anything."""
    blocks = (len(litres) - SETTLING_DAYS - 1) // 30
    span = slice(SETTLING_DAYS, SETTLING_DAYS + 30 * blocks)

    def sums(values: Array) -> Array:
        return np.asarray(values[span].reshape(blocks, 30, -1).sum(axis=1))

    true, ours = sums(sample.litres), sums(litres)
    fine = (sums(sample.frost.astype(float)) == 0) & (sums(sample.usable.astype(float)) == 30) & (true > 3.0)
    return float(np.mean(np.abs(ours[fine] / true[fine] - 1.0)))
