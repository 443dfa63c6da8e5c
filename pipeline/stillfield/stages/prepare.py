"""Prepare: weather steps to local days, with the hours that count beside every value.

The day is the local solar day of the cell. A UTC day cuts the sunshine of one day in two wherever the
longitude is far from Greenwich; so hourly UTC weather is shifted by whole steps, per column of the grid,
before days are summed. Station files keep their local standard day. Daily input passes through.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.gaps import fill_gaps
from stillfield.sources.plausible import count_doubtful
from stillfield.sources.tally import COUNTS, cell_counts, with_counts
from stillfield.vocabulary import DAY_WEATHER, STEP_HOURS_DAILY, STEP_WEATHER

MJ_PER_WH = 3600.0 / 1e6
MIDSTEP_MINUTES_PER_HOUR = 30.0
_SPANS = ("whole_days", "edge_days")


@dataclass(frozen=True)
class Prepared:
    """Weather on local days.

    Attributes
    ----------
    daily : xarray.Dataset
        Dimensions ``time`` (day) and space; `vocabulary.DAY_WEATHER` variables and units.
    steps : xarray.Dataset or None
        Dimensions ``time`` (day), ``step`` and space; `vocabulary.STEP_WEATHER` variables, aligned to the
        same days; coordinate ``clock_to_solar_hours`` on space. None for daily weather.
    """

    daily: xr.Dataset
    steps: xr.Dataset | None = None


def prepare(weather: xr.Dataset, *, min_valid_hours: float = 20.0, fill_hours: float = 3.0) -> Prepared:
    """Bring weather of any step to local days.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it.
    min_valid_hours : float
        A day's mean temperature, wind and humidity need at least this many valid hours; its irradiation
        needs every step, because an hour of sunshine cannot be averaged away. [h]
    fill_hours : float
        Longest gap in temperature, humidity or wind that is bridged by a straight line. [h]

    Returns
    -------
    Prepared
        `Prepared.daily` carries the counts of `stillfield.sources.tally`.

    Raises
    ------
    WeatherError
        If the steps do not divide the day, or the record holds no whole day.
    """
    step_hours = float(weather.attrs["step_hours"])
    if step_hours == STEP_HOURS_DAILY:
        return Prepared(count_doubtful(_pass_daily(weather)))
    steps = align_to_local_days(weather, step_hours, fill_hours=fill_hours)
    whole, edge = (steps[name].reset_coords(drop=True) for name in _SPANS)
    steps = steps.drop_vars(_SPANS)
    daily = _daily_from_steps(steps.drop_vars(COUNTS, errors="ignore"), step_hours, min_valid_hours)
    beyond = daily.sizes["time"] - whole
    gaps = cell_counts(daily["irradiation"], _count_missing, ("missing",))["missing"] - beyond
    lost: dict[str, xr.DataArray | int] = {"edge": edge, "incomplete": gaps.clip(min=0), "values": whole + edge}
    if COUNTS in steps:
        daily = daily.assign({COUNTS: steps[COUNTS]})
    daily = count_doubtful(with_counts(daily, "days", lost))
    return Prepared(daily, steps.drop_vars(COUNTS, errors="ignore"))


def _count_missing(block: NDArray[Any]) -> NDArray[np.int64]:
    return np.asarray(np.count_nonzero(np.isnan(block), axis=0), dtype=np.int64)[np.newaxis]


def _pass_daily(weather: xr.Dataset) -> xr.Dataset:
    daily = weather[[name for name in weather.data_vars if name in DAY_WEATHER]]
    if "valid_hours" not in daily and "irradiation" in daily:
        hours = daily["irradiation"].notnull() * np.float32(STEP_HOURS_DAILY)
        daily = daily.assign(valid_hours=hours.astype(np.float32))
    if COUNTS in weather:
        daily = daily.assign({COUNTS: weather[COUNTS]})
    return daily.assign_attrs(weather.attrs)


def align_to_local_days(weather: xr.Dataset, step_hours: float, *, fill_hours: float = 0.0) -> xr.Dataset:
    """Cut step weather into local days: dimensions ``time`` (day), ``step`` and space.

    Parameters
    ----------
    weather : xarray.Dataset
        Steps shorter than a day; regular in time apart from gaps.
    step_hours : float
        Length of a step; must divide 24. [h]
    fill_hours : float
        As for `prepare`. [h]

    Returns
    -------
    xarray.Dataset
        Every day that is whole for at least one cell; steps before or after the record are NaN. Coordinates
        ``whole_days`` and ``edge_days`` tell how many local days of a cell the record holds whole, and how many
        it begins or ends within.

    Raises
    ------
    WeatherError
        If the step does not divide the day or there is no whole day.
    """
    per_day = round(STEP_HOURS_DAILY / step_hours)
    if abs(per_day * step_hours - STEP_HOURS_DAILY) > 1e-6:
        raise WeatherError(
            "the time step does not divide the day", got=f"{step_hours:g} h", wanted="0.25, 0.5, 1, 2, 3, 4 or 6 h"
        )
    steps = weather[[name for name in weather.data_vars if name in STEP_WEATHER]]
    counts = weather.get(COUNTS)
    steps = fill_gaps(_regular(steps, step_hours).assign({} if counts is None else {COUNTS: counts}),
                      step_hours=step_hours, fill_hours=fill_hours)
    counts = steps.get(COUNTS)
    steps = steps.drop_vars(COUNTS, errors="ignore").drop_dims("count", errors="ignore")
    shift_hours, residual_hours = _clock_shift(weather, step_hours)
    first_step, days = _day_axis(steps, step_hours, per_day, shift_hours)
    starts = first_step - np.round(shift_hours / step_hours).astype(int)
    aligned = _take_windows(steps, starts, len(days) * per_day)
    aligned = _fold_days(aligned, days, per_day)
    like = xr.zeros_like(residual_hours, dtype=np.int64)
    spans = zip(_SPANS, _days_held(-starts, per_day, steps.sizes["time"]), strict=True)
    held = {name: like + xr.DataArray(days_held, dims=weather["longitude"].dims) for name, days_held in spans}
    aligned = aligned.assign_coords({"clock_to_solar_hours": residual_hours, **held})
    aligned = aligned.assign({} if counts is None else {COUNTS: counts})
    return aligned.assign_attrs(weather.attrs)


def _days_held(first: NDArray[np.int_], per_day: int, length: int) -> tuple[NDArray[np.int_], NDArray[np.int_]]:
    """Days that a record of `length` steps from step `first` after some midnight holds whole, and those it cuts."""
    start, end = first / per_day, (first + length) / per_day
    whole = np.maximum(np.floor(end) - np.ceil(start), 0.0)
    touched = np.ceil(end) - np.floor(start)
    return whole.astype(np.int_), (touched - whole).astype(np.int_)


def _regular(steps: xr.Dataset, step_hours: float) -> xr.Dataset:
    """Put steps on a regular axis; gaps become NaN."""
    index = steps.indexes["time"]
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
    if np.allclose(width, step_hours, rtol=1e-4):
        return steps
    at = np.concatenate([[0.0], np.cumsum(width)]) / step_hours
    if not np.allclose(at, np.round(at), atol=1e-3):
        raise WeatherError("time steps are irregular", got=f"steps of {width.min():g} to {width.max():g} h")
    # Whole numbers of steps serve every calendar, where dates of a foreign one cannot be looked up by nearness.
    count = round(at[-1]) + 1
    numbered = steps.assign_coords(time=np.round(at).astype(np.int64)).reindex(time=np.arange(count))
    seconds = round(step_hours * 3600)
    axis = (index[0].to_numpy() + np.arange(count) * np.timedelta64(seconds, "s") if index.dtype.kind == "M"
            else [index[0] + timedelta(seconds=seconds * i) for i in range(count)])
    return numbered.assign_coords(time=axis)


def _clock_shift(weather: xr.Dataset, step_hours: float) -> tuple[np.ndarray, xr.DataArray]:
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
    space = [dim for dim in weather.dims if dim in ("latitude", "longitude", "site")]
    shape = xr.DataArray(
        np.zeros([weather.sizes[dim] for dim in space]), dims=space, coords={d: weather[d] for d in space}
    )
    return shift, (rest.reset_coords(drop=True) + shape).transpose(*space)


def _day_axis(
    steps: xr.Dataset, step_hours: float, per_day: int, shift_hours: np.ndarray
) -> tuple[int, Any]:
    """Return the index of the record's step at 00:00 (clock) of the first local day, and the days."""
    index = steps.indexes["time"]
    first = index[0]
    into_day = (first.hour + first.minute / 60.0 + first.second / 3600.0) / step_hours
    offset = round(into_day)
    if abs(into_day - offset) > 1e-3:
        raise WeatherError("steps do not start on multiples of the step", got=str(first))
    shifts = np.round(shift_hours / step_hours).astype(int)
    length = steps.sizes["time"]
    begin = np.ceil((offset + shifts) / per_day).min()
    end = np.floor((offset + shifts + length) / per_day).max()
    if end <= begin:
        raise WeatherError("the record holds no whole day", got=f"{length} steps of {step_hours:g} h")
    midnight = first.replace(hour=0, minute=0, second=0, microsecond=0)
    if index.dtype.kind == "M":
        midnight = midnight.replace(nanosecond=0).to_datetime64()
        days: Any = midnight + np.arange(int(begin), int(end)) * np.timedelta64(1, "D")
    else:
        days = [midnight + timedelta(days=int(day)) for day in range(int(begin), int(end))]
    return int(begin) * per_day - offset, days


def _take_windows(steps: xr.Dataset, starts: np.ndarray, length: int) -> xr.Dataset:
    """Take `length` steps from `starts` on, one start per column or site, padding with NaN outside."""
    along = "site" if "site" in steps.dims else "longitude"
    pieces = []
    cuts = np.flatnonzero(np.diff(starts)) + 1
    for piece in np.split(np.arange(len(starts)), cuts):
        start = int(starts[piece[0]])
        part = steps.isel({along: piece, "time": slice(max(start, 0), max(start + length, 0))})
        before = max(-start, 0)
        after = length - before - part.sizes["time"]
        part = part.drop_vars("time")
        if before or after:
            part = part.pad(time=(before, after))
        pieces.append(part)
    return pieces[0] if len(pieces) == 1 else xr.concat(pieces, dim=along, data_vars="minimal", coords="minimal",
                                                       compat="override", join="exact")


def _fold_days(aligned: xr.Dataset, days: Any, per_day: int) -> xr.Dataset:
    folded = {}
    for name, values in aligned.data_vars.items():
        data = values.transpose("time", ...).data
        folded[name] = (
            ("time", "step", *values.transpose("time", ...).dims[1:]),
            data.reshape(len(days), per_day, *data.shape[1:]),
            values.attrs,
        )
    coords = {name: coord for name, coord in aligned.coords.items() if "time" not in coord.dims}
    return xr.Dataset(folded, coords={**coords, "time": ("time", days)})


def _daily_from_steps(steps: xr.Dataset, step_hours: float, min_valid_hours: float) -> xr.Dataset:
    daily: dict[str, xr.DataArray] = {}
    sunshine = steps["ghi"]
    daily["irradiation"] = (sunshine.clip(min=0.0).sum("step", skipna=False) * (step_hours * MJ_PER_WH)).astype(
        np.float32
    )
    complete = sunshine.notnull()
    for name in ("temp_air", "wind_speed", "temp_dew", "relative_humidity"):
        if name in steps:
            valid = steps[name].notnull()
            enough = valid.sum("step") * step_hours >= min_valid_hours
            daily[name] = steps[name].mean("step").where(enough)
            complete = complete & valid if name in ("temp_air", "wind_speed") else complete
    if "temp_air" in steps:
        daily["temp_air_min"] = steps["temp_air"].min("step").where(daily["temp_air"].notnull())
        daily["temp_air_max"] = steps["temp_air"].max("step").where(daily["temp_air"].notnull())
    daily["valid_hours"] = (complete.sum("step") * step_hours).astype(np.float32)
    for name, values in daily.items():
        quantity = DAY_WEATHER[name]
        values.attrs = {"units": quantity.unit, "long_name": quantity.meaning}
    return xr.Dataset(daily).assign_attrs(steps.attrs)
