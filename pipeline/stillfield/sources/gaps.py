"""Short gaps of sub-daily weather: filled where that is safe, and only there.

Temperature, humidity and wind run on smoothly, so a gap of a few hours is bridged by a straight line. Sunshine
does not: a missing hour of it stays missing, and its day with it. Only while the sun is down is a missing
value known, and set to 0.
"""

from __future__ import annotations

from functools import partial
from typing import Any

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.physics.sun import declination, equation_of_time, sunset_hour_angle
from stillfield.sources.calendars import solar_day_of_year
from stillfield.sources.tally import cell_counts, with_counts

#: Weather that may be bridged.
SMOOTH = ("temp_air", "temp_dew", "relative_humidity", "wind_speed")
_SUNSHINE = ("ghi", "dni", "dhi")


def fill_gaps(weather: xr.Dataset, *, step_hours: float, fill_hours: float) -> xr.Dataset:
    """Bridge short gaps of smooth weather and set missing sunshine of the night to 0, each counted.

    Parameters
    ----------
    weather : Dataset
        Regular steps along ``time``, marked by their start; attribute ``clock``.
    step_hours : float
        [h]
    fill_hours : float
        Longest gap that is bridged; 0 bridges none. [h]

    Returns
    -------
    Dataset
        Lazy where `weather` is; counts of kind 'filled' and 'night' added.
    """
    result = weather
    longest = int(fill_hours / step_hours + 1e-9)
    for name in (name for name in SMOOTH if name in weather and longest):
        before = weather[name].transpose("time", ...)
        after = before.copy(data=_bridged(before.data, longest))
        result = with_counts(result.assign({name: after}), name, {"filled": _became_valid(before, after)})
    dark = None
    for name in (name for name in _SUNSHINE if name in weather):
        before = weather[name].transpose("time", ...)
        dark = _solar_position(weather, step_hours) if dark is None else dark
        after = xr.apply_ufunc(_dark_is_zero, before, *dark, kwargs={"half_step_hours": step_hours / 2.0},
                               dask="parallelized", output_dtypes=[before.dtype], keep_attrs=True)
        after = after.transpose(*before.dims)
        result = with_counts(result.assign({name: after}), name, {"night": _became_valid(before, after)})
    return result


def _became_valid(before: xr.DataArray, after: xr.DataArray) -> xr.DataArray:
    def missing(values: xr.DataArray) -> xr.DataArray:
        return cell_counts(values, _count_missing, ("missing",))["missing"]

    return missing(before) - missing(after)


def _count_missing(block: NDArray[Any]) -> NDArray[np.int64]:
    return np.asarray(np.count_nonzero(np.isnan(block), axis=0), dtype=np.int64)[np.newaxis]


def _bridged(data: Any, longest: int) -> Any:
    if not isinstance(data, da.Array):
        return bridge(data, longest)
    depth = {0: min(longest + 1, data.shape[0])}
    return da.map_overlap(partial(bridge, longest=longest), data, depth=depth, boundary="none", dtype=data.dtype,
                          meta=np.empty((0,) * data.ndim, data.dtype))


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


def _solar_position(weather: xr.Dataset, step_hours: float) -> tuple[xr.DataArray, xr.DataArray, xr.DataArray]:
    """Day of the year, clock hour of the middle of each step with the equation of time, and place of each cell."""
    time = weather["time"]
    day = solar_day_of_year(time)
    clock = time.dt.hour.values + time.dt.minute.values / 60.0 + step_hours / 2.0 + equation_of_time(day)
    to_solar = weather["longitude"] / 15.0
    if weather.attrs.get("clock") == "local-standard":
        to_solar = to_solar - weather["utc_offset_hours"]
    days = xr.DataArray(np.asarray(day, dtype=float), dims="time")
    middle = xr.DataArray(clock, dims="time") + to_solar.reset_coords(drop=True)
    return days, middle, weather["latitude"].reset_coords(drop=True)


def _dark_is_zero(
    values: NDArray[Any], day: NDArray[Any], solar_hour: NDArray[Any], latitude: NDArray[Any], *, half_step_hours: float
) -> NDArray[Any]:
    gap = np.isnan(values)
    if not gap.any():
        return values
    sunset_hours = sunset_hour_angle(latitude, declination(day)) * (12.0 / np.pi)
    from_noon = np.abs((solar_hour - 12.0 + 12.0) % 24.0 - 12.0)
    dark = from_noon - half_step_hours >= sunset_hours
    return np.where(gap & dark, values.dtype.type(0.0), values)
