"""From weather to the predictors of the daily correlation: of days alone, or of days seen through their steps."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.brine import basin_heat_capacity
from stillfield.physics.correlation import Day
from stillfield.physics.gain_table import GainRows
from stillfield.physics.heat_balance import Forcing
from stillfield.physics.still import Still
from stillfield.physics.sun import day_length
from stillfield.physics.vapour import dew_point

Array = NDArray[np.floating[Any]]

#: Heat transfer coefficient by which a basin forgets: from night to day [W m-2 K-1], and within the day, where
#: evaporation adds to it. Own choice: they made the correlation best over the shipped designs.
SLOW_TRANSFER_W_M2_K = 8.0
QUICK_TRANSFER_W_M2_K = 12.0
LONGEST_SMOOTHING_HOURS = 8.0
#: Hour at which the yield day starts, as in the heat balance. [h]
DAY_START_HOUR = 6.0
#: Least absorbed sunshine that weights the hours of a day. [W m-2]
LEAST_WEIGHT_W_M2 = 1e-3
MOST_PEAKED = 10.0


def basin_memory(still: Still) -> float:
    """Share of what the basin remembers that is left a day later.

    Parameters
    ----------
    still : Still
        The design; its condition does not matter.

    Returns
    -------
    float
        exp(-24 h · 8 W m-2 K-1 / C): near 0 for a few centimetres, 0.44 for 20 cm. [1]
    """
    return float(np.exp(-86400.0 * SLOW_TRANSFER_W_M2_K / _capacity(still)))


def _capacity(still: Still) -> float:
    return float(
        basin_heat_capacity(still.brine_depth_m, still.basin_salinity_g_kg, still.liner_heat_capacity_j_m2_k)
    )


def variant_of(known: Iterable[str]) -> str:
    """Name the variant of the correlation that daily weather allows.

    Parameters
    ----------
    known : iterable of str
        Vocabulary names of the weather there is.

    Returns
    -------
    str
        A key of `stillfield.physics.correlation.VARIANTS`.

    Examples
    --------
    >>> variant_of(["irradiation", "temp_air", "wind_speed", "temp_dew"])
    'daily-humidity'
    """
    there = set(known)
    name = "daily-range" if {"temp_air_min", "temp_air_max"} <= there else "daily"
    return f"{name}-humidity" if there & {"temp_dew", "relative_humidity"} else name


@dataclass(frozen=True)
class DayWeather:
    """Daily weather of some days and cells, arrays of shape (day, cell).

    Attributes
    ----------
    irradiation : ndarray
        [MJ m-2]
    temp_air, wind_speed : ndarray
        Means of the day. [degC], [m s-1]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.
    temp_air_min, temp_air_max : ndarray, optional
        Of use together. [degC]
    temp_dew, relative_humidity : ndarray, optional
        Either; the dew point counts where both are there. [degC], [%]
    """

    irradiation: Array
    temp_air: Array
    wind_speed: Array
    day_of_year: NDArray[np.integer[Any]]
    temp_air_min: Array | None = None
    temp_air_max: Array | None = None
    temp_dew: Array | None = None
    relative_humidity: Array | None = None

    def names(self, variant: str) -> tuple[str, ...]:
        """Names of the fields that a variant takes, all of them there."""
        names = ["irradiation", "temp_air", "wind_speed", "day_of_year"]
        names += ["temp_air_min", "temp_air_max"] if "range" in variant else []
        if "humidity" in variant:
            names.append("temp_dew" if self.temp_dew is not None else "relative_humidity")
        return tuple(names)


def day_from_days(weather: DayWeather, rows: GainRows) -> Day:
    """Predictors from daily weather.

    Parameters
    ----------
    weather : DayWeather
        Of the days.
    rows : GainRows
        Daily gain of the design at the cells' latitudes.

    Returns
    -------
    Day
    """
    span = None
    if weather.temp_air_min is not None and weather.temp_air_max is not None:
        span = weather.temp_air_max - weather.temp_air_min
    sun = rows.sunshine(weather.irradiation, weather.day_of_year)
    return Day(
        transmitted=sun.transmitted,
        temp_air=weather.temp_air,
        wind_speed=weather.wind_speed,
        day_length=sun.day_length,
        clearness=sun.clearness,
        temp_range=span,
        dew_depression=_dew_depression(weather),
    )


def _dew_depression(weather: DayWeather) -> Array | None:
    if weather.temp_dew is not None:
        return np.asarray(weather.temp_air - weather.temp_dew)
    if weather.relative_humidity is not None:
        return np.asarray(weather.temp_air - dew_point(weather.temp_air, weather.relative_humidity))
    return None


def day_from_steps(
    weather: Mapping[str, Array], forcing: Forcing, transmitted: Array, still: Still, *,
    latitude: Array, day_of_year: NDArray[np.integer[Any]], steps_per_day: int,
) -> Day:
    """Predictors from the steps of the days.

    Parameters
    ----------
    weather : mapping of str to ndarray, shape (day * steps_per_day, cell)
        ``temp_air`` [degC] and ``wind_speed`` [m s-1].
    forcing : Forcing
        What drives the balance in the same steps, from `stillfield.physics.forcing.step_forcing`.
    transmitted : ndarray, shape (day, cell)
        S, from the same function. [MJ m-2 of basin]
    still : Still
        The design.
    latitude : ndarray, shape (cell,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.
    steps_per_day : int
        Steps in a day.

    Returns
    -------
    Day
        With every predictor of the variant 'hourly'.
    """
    plain = plain_day(
        weather, forcing, transmitted, latitude=latitude, day_of_year=day_of_year, steps_per_day=steps_per_day
    )
    return replace(plain, peakiness=peakiness(forcing.absorbed, still, steps_per_day))


def plain_day(
    weather: Mapping[str, Array], forcing: Forcing, transmitted: Array, *,
    latitude: Array, day_of_year: NDArray[np.integer[Any]], steps_per_day: int,
) -> Day:
    """Predictors that follow from the steps of their own day: all of the variant 'hourly' but the peakiness.

    Parameters
    ----------
    weather, forcing, transmitted, latitude, day_of_year, steps_per_day
        As in `day_from_steps`.

    Returns
    -------
    Day
    """
    def fold(values: Array) -> Array:
        return values.reshape(len(day_of_year), steps_per_day, -1)

    temp, wind = weather["temp_air"], weather["wind_speed"]
    weight = fold(forcing.absorbed + LEAST_WEIGHT_W_M2)
    weight = weight / weight.sum(axis=1, keepdims=True)
    warm = (weight * fold(temp)).sum(axis=1)
    mean_temp, mean_wind = fold(temp).mean(axis=1), fold(wind).mean(axis=1)
    return Day(
        transmitted=transmitted,
        temp_air=mean_temp,
        wind_speed=mean_wind,
        day_length=day_length(latitude, day_of_year),
        temp_range=fold(temp).max(axis=1) - fold(temp).min(axis=1),
        warm_hours=warm - mean_temp,
        sky_depression=warm - (weight * fold(forcing.temp_sky)).sum(axis=1),
        windy_hours=(np.sqrt((weight * fold(wind)).sum(axis=1)) - np.sqrt(mean_wind)) / np.sqrt(2.0),
    )


def peakiness(absorbed: Array, still: Still, steps_per_day: int) -> Array:
    """How much a day's sunshine comes at once: mean square over squared mean, as the basin feels it.

    Yield grows faster than sunshine, so the same energy in fewer hours gives more litres; what comes and goes
    quicker than the basin warms does not count. Each step is smoothed over the time constant of the basin.

    Parameters
    ----------
    absorbed : ndarray, shape (day * steps_per_day, cell)
        Sunshine absorbed in the basin; NaN counts as none. [W m-2]
    still : Still
        The design.
    steps_per_day : int
        Steps in a day.

    Returns
    -------
    ndarray, shape (day, cell)
        1 for even light round the clock, about 2.5 for a clear day of 12 h, at most 10. [1]
    """
    fade = smoothing_fade(still, steps_per_day)
    smooth = smoothed(absorbed, fade, np.zeros(absorbed.shape[1]))
    shifted = np.roll(smooth, -first_step(steps_per_day), axis=0)
    return peak_of_days(shifted.reshape(-1, steps_per_day, absorbed.shape[1]))


def first_step(steps_per_day: int) -> int:
    """Step with which the yield day starts.

    Parameters
    ----------
    steps_per_day : int
        Steps in a day.

    Returns
    -------
    int

    Examples
    --------
    >>> first_step(24), first_step(4)
    (6, 1)
    """
    return round(DAY_START_HOUR * steps_per_day / 24.0)


def smoothing_fade(still: Still, steps_per_day: int) -> float:
    """Share of the smoothed sunshine that is left a step later.

    Parameters
    ----------
    still : Still
        The design.
    steps_per_day : int
        Steps in a day.

    Returns
    -------
    float
        [1]
    """
    hours = min(_capacity(still) / QUICK_TRANSFER_W_M2_K / 3600.0, LONGEST_SMOOTHING_HOURS)
    return float(np.exp(-24.0 / steps_per_day / hours))


def smoothed(absorbed: Array, fade: float, before: Array) -> Array:
    """Sunshine as the basin feels it: every step takes 1 - `fade` of itself and `fade` of the one before.

    Parameters
    ----------
    absorbed : ndarray, shape (step, cell)
        NaN counts as none. [W m-2]
    fade : float
        From `smoothing_fade`. [1]
    before : ndarray, shape (cell,)
        Smoothed sunshine of the step before the first. [W m-2]

    Returns
    -------
    ndarray, shape (step, cell)
        [W m-2]
    """
    from scipy.signal import lfilter  # half a second to load, and compiled runs do without

    return np.asarray(lfilter([1.0 - fade], [1.0, -fade], np.nan_to_num(absorbed), axis=0, zi=fade * before[None])[0])


def peak_of_days(smooth: Array) -> Array:
    """Mean square over squared mean of the steps of days.

    Parameters
    ----------
    smooth : ndarray, shape (day, step, cell)
        Smoothed sunshine. [W m-2]

    Returns
    -------
    ndarray, shape (day, cell)
        [1]
    """
    square = np.square(smooth).mean(axis=1)
    return np.asarray(np.minimum(square / np.maximum(smooth.mean(axis=1), LEAST_WEIGHT_W_M2) ** 2, MOST_PEAKED))
