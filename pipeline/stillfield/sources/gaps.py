"""Short gaps of sub-daily weather: filled where that is safe, and only there.

Temperature, humidity and wind run on smoothly, so a gap of a few hours is bridged by a straight line. Sunshine
does not: a missing hour of it stays missing, and its day with it. Only while the sun is down is a missing
value known, and set to 0.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.sun import declination, equation_of_time, sunset_hour_angle

#: Weather that may be bridged, and weather that is known by night.
SMOOTH = ("temp_air", "temp_dew", "relative_humidity", "wind_speed")
SUNSHINE = ("ghi", "dni", "dhi")


def bridge(values: NDArray[Any], longest: int) -> NDArray[Any]:
    """Draw a straight line across runs of missing values.

    Parameters
    ----------
    values : ndarray, shape (time, ...)
        Equal steps.
    longest : int
        Runs longer than this, and runs at either end, stay missing.

    Returns
    -------
    ndarray, shape of `values`

    Examples
    --------
    >>> bridge(np.array([1.0, np.nan, 3.0, np.nan, np.nan, 9.0, np.nan]), 1).tolist()
    [1.0, 2.0, 3.0, nan, nan, 9.0, nan]
    """
    gap = np.isnan(values)
    if not gap.any():
        return values
    step = np.arange(len(values)).reshape(-1, *[1] * (values.ndim - 1))
    before = np.maximum.accumulate(np.where(gap, -1, step), axis=0)
    after = np.minimum.accumulate(np.where(gap, len(values), step)[::-1], axis=0)[::-1]
    fill = gap & (before >= 0) & (after < len(values)) & (after - before - 1 <= longest)
    if not fill.any():
        return values
    left = np.take_along_axis(values, np.maximum(before, 0), axis=0)
    right = np.take_along_axis(values, np.minimum(after, len(values) - 1), axis=0)
    share = (step - before) / np.maximum(after - before, 1)
    return np.where(fill, left + share * (right - left), values).astype(values.dtype)


def dark(
    solar_hour: NDArray[Any], day_of_year: NDArray[Any], latitude: NDArray[Any], *, step_hours: float
) -> NDArray[np.bool_]:
    """Tell during which steps the sun is down from beginning to end.

    Parameters
    ----------
    solar_hour : ndarray
        Middle of the step in local mean solar time. [h]
    day_of_year : ndarray
        1 to 366.
    latitude : ndarray
        [deg north]
    step_hours : float
        [h]

    Returns
    -------
    ndarray of bool
        Of the shape the three have together.

    Examples
    --------
    >>> dark(np.array([1.5, 6.5, 12.5]), np.array(80), np.array(10.0), step_hours=1.0).tolist()
    [True, False, False]
    """
    sunset_hours = sunset_hour_angle(latitude, declination(day_of_year)) * (12.0 / np.pi)
    from_noon = np.abs((solar_hour + equation_of_time(day_of_year)) % 24.0 - 12.0)
    return np.asarray(from_noon - step_hours / 2.0 >= sunset_hours)
