"""Where the sun stands within the steps of a weather file, measured from the file itself.

Time stamps of weather files are often wrong by minutes to hours, whatever their format promises. The
sunshine tells: on clear days global irradiance follows the cosine of the sun's zenith angle, and the
offset at which it follows best is the moment of each step that the file really describes.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.sun import declination, equation_of_time, extraterrestrial_irradiation

Array = NDArray[np.floating[Any]]

#: Deviation from the middle of the step beyond which a file is said to be misaligned. [min]
TOLERANCE_MINUTES = 45.0
#: Share of the days, clearest first, on which the measurement rests. Clouds that come at the same time of
#: day pull a fit over all days by up to five minutes; on the clearest tenth it is good to about one.
_CLEAR_SHARE = 0.1
_LEAST_DAYS = 8
_LEAST_CORRELATION = 0.85


@dataclass(frozen=True)
class SunFit:
    """Result of fitting global irradiance to the sun.

    Attributes
    ----------
    offset_minutes : float
        Minutes after the start of a step at which the sun's position represents the step best. [min]
    correlation : float
        Correlation of irradiance and cosine of the zenith angle there. [1]
    days : int
        Clear days used.
    """

    offset_minutes: float
    correlation: float
    days: int


def _cos_zenith(day_of_year: Array, solar_hours: Array, latitude: float) -> Array:
    phi, delta = np.radians(latitude), declination(day_of_year)
    angle = (solar_hours - 12.0) * (np.pi / 12.0)
    cosine = np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.cos(angle)
    return np.asarray(np.maximum(cosine, 0.0))


def _clearest_days(daily: Array, latitude: float, day_of_year: Array) -> NDArray[np.intp]:
    outside = extraterrestrial_irradiation(np.array([latitude]), day_of_year)[:, 0]
    usable = np.isfinite(daily) & (outside > 5.0) & (daily > 0.0)
    clearness = np.where(usable, daily / np.maximum(outside, 1e-9), -1.0)
    wanted = max(_LEAST_DAYS, round(_CLEAR_SHARE * daily.size))
    best = np.argsort(-clearness, kind="stable")[:wanted]
    return best[usable[best]]


def measure_sun_offset(
    ghi: Array,
    *,
    latitude: float,
    longitude: float,
    clock_offset_hours: float,
    day_of_year: Array,
) -> SunFit | None:
    """Minutes after the start of a step at which global irradiance fits the sun best.

    The clearest tenth of the days is used. The search covers half a day to either side, so that a clock
    that is wholly wrong is found as well.

    Parameters
    ----------
    ghi : ndarray, shape (day * steps_per_day,)
        Global horizontal irradiance of whole days. [W m-2]
    latitude, longitude : float
        Of the site. [deg north, deg east]
    clock_offset_hours : float
        Clock of the steps minus UTC. [h]
    day_of_year : ndarray, shape (day,)
        1 to 366.

    Returns
    -------
    SunFit or None
        None when there are too few bright days, or nothing that looks like the sun.

    Examples
    --------
    A made-up sky at 10 N on the zone meridian, sampled at the middle of each hour:

    >>> day = np.arange(1.0, 31.0)
    >>> hour = np.tile(np.arange(24) + 0.5, 30)
    >>> sky = 900.0 * _cos_zenith(np.repeat(day, 24), hour + np.repeat(equation_of_time(day), 24), 10.0)
    >>> fit = measure_sun_offset(sky, latitude=10.0, longitude=45.0, clock_offset_hours=3.0, day_of_year=day)
    >>> round(fit.offset_minutes)
    30
    """
    steps = ghi.size // day_of_year.size
    table = np.asarray(ghi, dtype=float).reshape(day_of_year.size, steps)
    chosen = _clearest_days(table.sum(axis=1) * (0.0864 / steps), latitude, day_of_year)
    if chosen.size < _LEAST_DAYS:
        return None
    sky = table[chosen].ravel()
    days = np.repeat(day_of_year[chosen], steps)
    start = np.tile(np.arange(steps) * (24.0 / steps), chosen.size)
    solar = start - clock_offset_hours + longitude / 15.0 + equation_of_time(days)

    def correlations(offsets: Array) -> Array:
        suns = np.array([_cos_zenith(days, solar + offset / 60.0, latitude) for offset in offsets])
        suns -= suns.mean(axis=1, keepdims=True)
        norm = np.sqrt((suns**2).sum(axis=1) * ((sky - sky.mean()) ** 2).sum())
        return np.asarray((suns @ (sky - sky.mean())) / np.maximum(norm, 1e-12))

    coarse = np.arange(-720.0, 720.0, 20.0)
    centre = coarse[int(np.argmax(correlations(coarse)))]
    fine = centre + np.arange(-24.0, 25.0, 4.0)
    score = correlations(fine)
    top = int(np.clip(np.argmax(score), 1, fine.size - 2))
    left, middle, right = score[top - 1 : top + 2]
    bend = left - 2.0 * middle + right
    vertex = 0.0 if bend == 0.0 else 0.5 * (left - right) / bend
    if middle < _LEAST_CORRELATION:
        return None
    return SunFit(float(fine[top] + 4.0 * vertex), float(middle), int(chosen.size))


def whole_hours_off(offset_minutes: float) -> int:
    """Whole hours by which rows must move so that the sun comes near the middle of the step.

    Nothing moves within `TOLERANCE_MINUTES` of the middle.

    Parameters
    ----------
    offset_minutes : float
        From `measure_sun_offset`, hourly steps. [min]

    Returns
    -------
    int
        Positive: rows belong later than they are labelled. [h]

    Examples
    --------
    >>> [whole_hours_off(offset) for offset in (30.0, 10.0, 70.0, 85.0, -30.0)]
    [0, 0, 0, 1, -1]
    """
    deviation = offset_minutes - 30.0
    if abs(deviation) < TOLERANCE_MINUTES:
        return 0
    return round(deviation / 60.0)
