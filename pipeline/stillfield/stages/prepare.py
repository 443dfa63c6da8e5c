"""Prepare: weather steps to local days.

The day is the local solar day of the cell. A UTC day cuts the sunshine of one day in two wherever the
longitude is far from Greenwich; so hourly UTC weather is shifted by whole steps, per column of the grid, as it
is read. Station files keep their local standard day. Daily weather keeps its own days.

`LocalDays` tells from the labels of a record alone where each of its steps falls; the functions below work on
arrays of steps already in their place, of shape (day * steps_per_day, cell).
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.calendars import solar_day_of_year
from stillfield.vocabulary import STEP_HOURS_DAILY

Array = NDArray[np.floating[Any]]

MJ_PER_WH = 3600.0 / 1e6
MIDSTEP_MINUTES_PER_HOUR = 30.0


@dataclass(frozen=True)
class LocalDays:
    """How the records of some weather fall into local days.

    Slots count the steps of a regular axis from the first record on; absent records leave their slot empty.

    Attributes
    ----------
    time : xarray.DataArray
        Dates of the days, any CF calendar: every day that is whole for at least one cell.
    steps_per_day : int
        1 for daily weather.
    slots : ndarray of int, shape (record,)
        Slot of every record; rising.
    start : ndarray of int, shape (column,)
        Slot at which the first day begins in each column of the grid, or at each site; negative where the record
        begins later.
    clock_to_solar_hours : ndarray, shape (cell,)
        Hours from the clock by which days are cut to local mean solar time. [h]
    latitude : ndarray, shape (cell,)
        [deg north]
    """

    time: xr.DataArray
    steps_per_day: int
    slots: NDArray[np.int64]
    start: NDArray[np.int64]
    clock_to_solar_hours: Array
    latitude: Array

    @property
    def step_hours(self) -> float:
        """Length of a step [h]."""
        return STEP_HOURS_DAILY / self.steps_per_day

    def whole_steps(self, hours: float) -> int:
        """Whole steps within some hours of a record in steps; none of daily weather."""
        return int(hours / self.step_hours + 1e-9) if self.steps_per_day > 1 else 0

    @property
    def days(self) -> int:
        """Number of days."""
        return int(self.time.size)

    @property
    def day_of_year(self) -> NDArray[np.int64]:
        """1 to 366, as the sun knows it, of every day."""
        return solar_day_of_year(self.time)

    def held(self) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Days that the record holds whole, and days that it begins or ends within, by column.

        Examples
        --------
        >>> hours = xr.DataArray(np.arange("2019-03-01", "2019-03-03", dtype="M8[h]").astype("M8[ns]"), dims="time")
        >>> cells = {"time": hours, "latitude": [0.0], "longitude": [0.0, 150.0]}
        >>> weather = xr.Dataset(coords=cells, attrs={"step_hours": 1.0, "clock": "UTC"})
        >>> [held.tolist() for held in local_days(weather).held()]
        [[2, 1], [0, 2]]
        """
        first, length = -self.start, int(self.slots[-1]) + 1
        begin, end = first / self.steps_per_day, (first + length) / self.steps_per_day
        whole = np.maximum(np.floor(end) - np.ceil(begin), 0.0)
        touched = np.ceil(end) - np.floor(begin)
        return whole.astype(np.int64), (touched - whole).astype(np.int64)


def local_days(weather: xr.Dataset) -> LocalDays:
    """Find out how the steps of weather fall into local days, from its labels alone.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it.

    Returns
    -------
    LocalDays

    Raises
    ------
    WeatherError
        If the steps are uneven, run backward, do not divide the day, or the record holds no whole day.
    """
    step_hours = float(weather.attrs["step_hours"])
    latitude = over_cells(weather, weather["latitude"]) if "latitude" in weather.coords else np.zeros(_cells(weather))
    if step_hours == STEP_HOURS_DAILY:
        records = np.arange(weather.sizes["time"])
        columns = np.zeros(_columns(weather), dtype=np.int64)
        return LocalDays(weather["time"].drop_vars(list(set(weather["time"].coords) - {"time"})), 1, records, columns,
                         np.zeros(latitude.size), latitude)
    per_day = round(STEP_HOURS_DAILY / step_hours)
    if abs(per_day * step_hours - STEP_HOURS_DAILY) > 1e-6:
        raise WeatherError(
            "the time step does not divide the day", got=f"{step_hours:g} h", wanted="0.25, 0.5, 1, 2, 3, 4 or 6 h"
        )
    slots = _slots(weather, step_hours)
    shift_hours, rest_hours = _clock_shift(weather, step_hours)
    shifts = np.round(shift_hours / step_hours).astype(np.int64)
    first, days = _day_axis(weather, per_day, shifts, int(slots[-1]) + 1)
    return LocalDays(xr.DataArray(days, dims="time", coords={"time": days}), per_day, slots, first - shifts,
                     over_cells(weather, rest_hours), latitude)


def space_of(weather: xr.Dataset) -> tuple[str, ...]:
    """Name the dimensions of space of weather, in the order in which cells are counted.

    Parameters
    ----------
    weather : xarray.Dataset
        As described in `stillfield.sources.Source`.

    Returns
    -------
    tuple of str
        ('site',) or ('latitude', 'longitude').
    """
    return ("site",) if "site" in weather.dims else ("latitude", "longitude")


def over_cells(weather: xr.Dataset, values: xr.DataArray) -> Array:
    """Values of rows, columns or sites spread over all cells, in their order.

    Parameters
    ----------
    weather : xarray.Dataset
        With the cells.
    values : xarray.DataArray
        On some of the dimensions of space.

    Returns
    -------
    ndarray of float, shape (cell,)
    """
    space = [dim for dim in space_of(weather) if dim in weather.dims]
    template = xr.DataArray(np.zeros([weather.sizes[dim] for dim in space]), dims=space)
    bare = values.drop_vars(list(values.coords))
    return np.asarray((bare + template).transpose(*space).to_numpy().ravel(), dtype=np.float64)


def _cells(weather: xr.Dataset) -> int:
    return int(np.prod([weather.sizes[dim] for dim in space_of(weather) if dim in weather.dims]))


def _columns(weather: xr.Dataset) -> int:
    return int(weather.sizes[space_of(weather)[-1]])


def _slots(weather: xr.Dataset, step_hours: float) -> NDArray[np.int64]:
    """Place of every record on a regular axis."""
    index = weather.indexes["time"]
    if len(index) < 2:
        raise WeatherError("a single time step makes no day", got=f"{len(index)} step")
    marks = index.to_numpy()
    if index.dtype.kind == "M":
        width = np.diff(marks) / np.timedelta64(1, "h")
    else:
        width = np.array([delta / timedelta(hours=1) for delta in np.diff(marks)], dtype=float)
    if (width <= 0).any():
        raise WeatherError(
            "time does not run forward",
            where=str(index[int(np.argmax(width <= 0)) + 1]),
            cure="Remove duplicate records and sort the files.",
        )
    at = np.concatenate([[0.0], np.cumsum(width)]) / step_hours
    if not np.allclose(at, np.round(at), atol=1e-3):
        raise WeatherError("time steps are irregular", got=f"steps of {width.min():g} to {width.max():g} h")
    return np.round(at).astype(np.int64)


def _clock_shift(weather: xr.Dataset, step_hours: float) -> tuple[Array, xr.DataArray]:
    """Hours to add to the record's clock to get the day's clock (per column or site), and the rest to the sun.

    The rest includes the measured misfit between a file's stamps and the sun, where a source reports it.
    """
    # A grid across the antimeridian runs on beyond 180; its days are those of the same cells in -180..180.
    longitude = (weather["longitude"] + 180.0) % 360.0 - 180.0
    if weather.attrs["clock"] == "local-standard":
        shift = np.zeros(longitude.size)
        rest = longitude / 15.0 - weather["utc_offset_hours"]
    else:
        shift = np.round(longitude.to_numpy() / 15.0 / step_hours) * step_hours
        rest = longitude / 15.0 - xr.DataArray(shift, dims=longitude.dims)
    if "sun_offset_minutes" in weather.coords:
        rest = rest + (weather["sun_offset_minutes"] - MIDSTEP_MINUTES_PER_HOUR * step_hours) / 60.0
    return shift, rest


def _day_axis(weather: xr.Dataset, per_day: int, shifts: NDArray[np.int64], length: int) -> tuple[int, Any]:
    """Slot at 00:00 of the first local day by the record's clock, and the days."""
    index = weather.indexes["time"]
    first = index[0]
    into_day = (first.hour + first.minute / 60.0 + first.second / 3600.0) * per_day / STEP_HOURS_DAILY
    offset = round(into_day)
    if abs(into_day - offset) > 1e-3:
        raise WeatherError("steps do not start on multiples of the step", got=str(first))
    begin = np.ceil((offset + shifts) / per_day).min()
    end = np.floor((offset + shifts + length) / per_day).max()
    if end <= begin:
        raise WeatherError("the record holds no whole day", got=f"{length} steps of {24 / per_day:g} h")
    midnight = first.replace(hour=0, minute=0, second=0, microsecond=0)
    if index.dtype.kind == "M":
        midnight = midnight.replace(nanosecond=0).to_datetime64()
        days: Any = midnight + np.arange(int(begin), int(end)) * np.timedelta64(1, "D")
    else:
        days = [midnight + timedelta(days=int(day)) for day in range(int(begin), int(end))]
    return int(begin) * per_day - offset, days


def count_days(
    local: LocalDays, columns: slice, kept: NDArray[np.bool_], missing_days: NDArray[np.int64]
) -> dict[str, int]:
    """Count the local days that the record cuts, and those with a gap in their sunshine.

    Parameters
    ----------
    local : LocalDays
        How the record falls into days.
    columns : slice
        Columns of the cells.
    kept : ndarray of bool, shape (row, column)
        Cells that count.
    missing_days : ndarray of int, shape (row, column)
        Days without irradiation.

    Returns
    -------
    dict of str to int
        Kinds 'edge', 'incomplete' and 'values' of `stillfield.sources.tally.SENTENCES`, in cell-days.
    """
    whole, edge = (held[columns] for held in local.held())
    gaps = np.maximum(missing_days - (local.days - whole), 0)
    return {
        "edge": int((edge * kept).sum()), "incomplete": int(gaps[kept].sum()),
        "values": int(((whole + edge) * kept).sum()),
    }


def irradiation_of_days(ghi: Array, steps_per_day: int) -> Array:
    """Irradiation of days from the mean irradiance of their steps.

    Parameters
    ----------
    ghi : ndarray, shape (day * steps_per_day, cell)
        [W m-2]
    steps_per_day : int
        Steps in a day.

    Returns
    -------
    ndarray, shape (day, cell)
        NaN where any step is: an hour of sunshine cannot be averaged away. [MJ m-2]

    Examples
    --------
    >>> irradiation_of_days(np.full((24, 1), 250.0), 24).round(3).tolist()
    [[21.6]]
    """
    steps = ghi.reshape(-1, steps_per_day, ghi.shape[-1])
    total = steps.sum(axis=1)
    total *= ghi.dtype.type(STEP_HOURS_DAILY / steps_per_day * MJ_PER_WH)
    return np.asarray(total)


def days_of_steps(weather: dict[str, Array], steps_per_day: int, *, min_valid_hours: float) -> dict[str, Array]:
    """Weather of days from that of their steps.

    Parameters
    ----------
    weather : dict of str to ndarray, shape (day * steps_per_day, cell)
        By name of `vocabulary.STEP_WEATHER`; ``ghi`` must be there.
    steps_per_day : int
        Steps in a day.
    min_valid_hours : float
        A mean of temperature, wind or humidity needs at least this many valid hours. [h]

    Returns
    -------
    dict of str to ndarray, shape (day, cell)
        By name of `vocabulary.DAY_WEATHER`.
    """
    daily = {"irradiation": irradiation_of_days(weather["ghi"], steps_per_day)}
    least = min_valid_hours * steps_per_day / STEP_HOURS_DAILY
    for name in (name for name in ("temp_air", "wind_speed", "temp_dew", "relative_humidity") if name in weather):
        steps = weather[name].reshape(-1, steps_per_day, weather[name].shape[-1])
        valid = np.isfinite(steps)
        count = valid.sum(axis=1)
        known = count >= max(least, 1.0)
        mean = np.where(valid, steps, 0.0).sum(axis=1, dtype=np.float64) / np.maximum(count, 1)
        daily[name] = np.where(known, mean, np.nan).astype(steps.dtype)
        if name == "temp_air":
            daily["temp_air_min"] = np.where(known, np.fmin.reduce(steps, axis=1), np.nan).astype(steps.dtype)
            daily["temp_air_max"] = np.where(known, np.fmax.reduce(steps, axis=1), np.nan).astype(steps.dtype)
    return daily
