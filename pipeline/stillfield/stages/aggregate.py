"""Aggregate: days to months, months to years and a climatology, with day counts beside every figure.

A month is the mean of its valid days times the days it has in its calendar, never the sum of the days that
happen to be there; with too few valid days it is missing, not small.
"""

from __future__ import annotations

import json
from functools import partial
from typing import Any

import dask.array as da
import numpy as np
import xarray as xr
from dask.base import compute
from numpy.typing import NDArray

from stillfield.sources.tally import COUNT, COUNTS, sentences, totals
from stillfield.vocabulary import YIELD

MONTHS = 12

_MEANT = ("daily_yield", "daily_yield_low", "daily_yield_high", "daily_yield_rule")
_COUNTED = ("frost", "outside_fit")
#: Share of years whose month is better than the poor-year month. [1]
POOR_YEAR_REACHED = 0.9


def aggregate(daily: xr.Dataset, *, min_valid_days_share: float = 0.8) -> xr.Dataset:
    """Monthly litres of every cell: by year, climatology, band, rule, annual and worst month.

    Parameters
    ----------
    daily : xarray.Dataset
        Daily yields as `estimate` gives them; may be lazy, everything is worked in one pass.
    min_valid_days_share : float
        A month with a smaller share of valid days is missing. [1]

    Returns
    -------
    xarray.Dataset
        In memory; dimension ``month`` (1 to 12), ``year`` for the yearly values, and space.
        ``monthly_yield``, ``monthly_yield_low``, ``monthly_yield_high``, ``monthly_yield_rule``
        [L m-2 month-1], means over the years; ``monthly_yield_by_year``; ``monthly_yield_poor_year``,
        reached or passed in 9 of 10 years (absent for typical years); ``annual_yield`` [L m-2 year-1];
        ``worst_month`` (1 to 12, fewest litres per day) and ``worst_month_yield`` [L m-2 d-1];
        ``days_used`` and ``days_expected`` (all years together), ``frost_days_share``,
        ``outside_fit_share`` of the days used. Attribute ``counts`` (JSON: quantity, kind, number; see
        `stillfield.sources.tally`) says what was clipped, filled, missing or dropped in the weather.
    """
    years, month_of, starts, ends = _calendar(daily["time"])
    expected = _days_in_month(daily["time"], starts)
    sums, counted = _month_sums(daily, starts, ends)
    counts = sums["count"]
    enough = counts >= min_valid_days_share * expected[(slice(None), *[None] * (counts.ndim - 1))]
    space = [dim for dim in daily["daily_yield"].dims if dim != "time"]
    slot = (years - years[0]) * MONTHS + month_of - 1
    shape = (int(years[-1] - years[0]) + 1, MONTHS, *[daily.sizes[dim] for dim in space])
    by_year = {
        name: _filled(np.where(enough, sums[name] / np.maximum(counts, 1) * _stretch(expected, counts), np.nan),
                      slot, shape)
        for name in _MEANT
    }
    used = _filled(np.where(enough, counts, 0.0), slot, shape, empty=0.0)
    flags = {name: _filled(np.where(enough, sums[name], 0.0), slot, shape, empty=0.0) for name in _COUNTED}
    length = _filled(np.broadcast_to(_stretch(expected, counts), counts.shape), slot, shape)
    result = _climatology(by_year, used, flags, length)
    result["monthly_yield_by_year"] = by_year["daily_yield"]
    typical = daily.attrs.get("record") == "typical-year"
    if not typical and shape[0] > 1:
        result["monthly_yield_poor_year"] = _quantile(by_year["daily_yield"], 1.0 - POOR_YEAR_REACHED)
    year_axis = np.unique(np.arange(years[0], years[-1] + 1))
    labelled = _labelled(result, daily, space, year_axis)
    return _with_counts(labelled, totals(daily[COUNT].to_numpy(), counted)) if COUNTS in daily else labelled


def _with_counts(result: xr.Dataset, counted: dict[str, dict[str, int]]) -> xr.Dataset:
    """Result with the counts of its weather, in figures and, where something happened, in words."""
    said = dict.fromkeys([*result.attrs.get("conventions", []), *sentences(counted)])
    return result.assign_attrs(counts=json.dumps(counted), conventions=list(said))


def _calendar(time: xr.DataArray) -> tuple[NDArray[Any], NDArray[Any], NDArray[Any], NDArray[Any]]:
    """Year and month of every calendar month present, and where its days start and end."""
    year, month = time.dt.year.to_numpy(), time.dt.month.to_numpy()
    key = year.astype(np.int64) * MONTHS + month
    starts = np.concatenate([[0], np.flatnonzero(np.diff(key)) + 1])
    ends = np.concatenate([starts[1:], [len(key)]])
    return year[starts], month[starts], starts, ends


def _days_in_month(time: xr.DataArray, starts: NDArray[Any]) -> NDArray[np.float64]:
    return np.asarray(time.dt.days_in_month.to_numpy()[starts], dtype=np.float64)


def _stretch(expected: NDArray[np.float64], like: NDArray[Any]) -> NDArray[np.float64]:
    return expected.reshape(-1, *[1] * (like.ndim - 1))


def _month_sums(
    daily: xr.Dataset, starts: NDArray[Any], ends: NDArray[Any]
) -> tuple[dict[str, NDArray[np.float64]], NDArray[Any]]:
    """Sums over the valid days of each month, and their count, and the counts of the weather; one pass over all."""
    kernel = partial(_block_sums, starts=starts, ends=ends)
    names = [*_MEANT, *_COUNTED]
    arrays = [da.asarray(daily[name].data) for name in names]
    arrays = [array.rechunk({0: -1}) for array in arrays]
    axes = "t" + "yx"[-(arrays[0].ndim - 1):]
    stacked = da.blockwise(
        kernel, "om" + axes[1:], *[item for array in arrays for item in (array, axes)],
        new_axes={"o": len(names) + 1, "m": len(starts)}, concatenate=True, dtype=np.float64,
        meta=np.empty((0,) * (arrays[0].ndim + 1)),
    )
    counts = daily[COUNTS].transpose(COUNT, ...).data if COUNTS in daily else np.empty(0)
    sums, counted = compute(stacked, counts, scheduler="threads")
    return dict(zip([*names, "count"], sums, strict=True)), counted


def _block_sums(*arrays: NDArray[Any], starts: NDArray[Any], ends: NDArray[Any]) -> NDArray[np.float64]:
    central = arrays[0]
    out = np.empty((len(arrays) + 1, len(starts), *central.shape[1:]))
    for month, (start, end) in enumerate(zip(starts, ends, strict=True)):
        valid = np.isfinite(central[start:end])
        for row, values in enumerate(arrays):
            out[row, month] = np.where(valid, values[start:end], 0.0).sum(axis=0, dtype=np.float64)
        out[-1, month] = valid.sum(axis=0)
    return out


def _filled(
    values: NDArray[Any], slot: NDArray[Any], shape: tuple[int, ...], empty: float = np.nan
) -> NDArray[np.float64]:
    """Lay months in the order of the record into a full year-by-month box."""
    box = np.full((shape[0] * MONTHS, *shape[2:]), empty)
    box[slot] = values
    return box.reshape(shape)


def _mean_of_years(values: NDArray[Any]) -> NDArray[np.float64]:
    """Mean over the years that have the month; NaN where none has."""
    valid = np.isfinite(values)
    count = valid.sum(axis=0)
    total = np.where(valid, values, 0.0).sum(axis=0)
    return np.where(count > 0, total / np.maximum(count, 1), np.nan)


def _quantile(values: NDArray[Any], q: float) -> NDArray[np.float64]:
    """Quantile over the valid years, linear between ranks as numpy's default; NaN where there is none.

    By one sort, which puts NaN last: numpy's nanquantile calls Python for every cell.
    """
    ranked = np.sort(values, axis=0)
    count = np.isfinite(values).sum(axis=0)
    place = q * np.maximum(count - 1, 0)
    below = np.floor(place).astype(int)
    above = np.minimum(below + 1, np.maximum(count - 1, 0))
    low = np.take_along_axis(ranked, below[None], axis=0)[0]
    high = np.take_along_axis(ranked, above[None], axis=0)[0]
    return np.where(count > 0, low + (place - below) * (high - low), np.nan)


def _climatology(
    by_year: dict[str, NDArray[Any]], used: NDArray[Any], flags: dict[str, NDArray[Any]], length: NDArray[Any]
) -> dict[str, NDArray[Any]]:
    result = {
        name.replace("daily_yield", "monthly_yield"): _mean_of_years(values) for name, values in by_year.items()
    }
    days = _mean_of_years(length)
    per_day = result["monthly_yield"] / days
    # A cell with any month missing has no worst month: the missing one might be it.
    known = np.isfinite(per_day).all(axis=0)
    worst = np.argmin(np.where(known, per_day, np.inf), axis=0)
    result["annual_yield"] = result["monthly_yield"].sum(axis=0)
    result["annual_yield_low"] = result["monthly_yield_low"].sum(axis=0)
    result["annual_yield_high"] = result["monthly_yield_high"].sum(axis=0)
    result["worst_month"] = np.where(known, worst + 1, np.nan)
    result["worst_month_yield"] = np.where(known, np.take_along_axis(per_day, worst[None], axis=0)[0], np.nan)
    result["days_used"] = used.sum(axis=0)
    result["days_expected"] = np.nansum(length, axis=0)
    for name, values in flags.items():
        share = values.sum(axis=0) / np.maximum(result["days_used"], 1.0)
        result[f"{name}_share"] = np.where(result["days_used"] > 0, share, np.nan)
    return result


_MEANINGS = {
    "monthly_yield": ("L m-2 month-1", "Distillate of the month per basin area, mean of the years"),
    "monthly_yield_low": ("L m-2 month-1", "Monthly distillate, low end of the condition band"),
    "monthly_yield_high": ("L m-2 month-1", "Monthly distillate, high end of the condition band"),
    "monthly_yield_rule": ("L m-2 month-1", "Monthly distillate by the constant-efficiency rule"),
    "monthly_yield_by_year": ("L m-2 month-1", "Distillate of the month in each year"),
    "monthly_yield_poor_year": ("L m-2 month-1", "Monthly distillate reached or passed in 9 of 10 years"),
    "annual_yield": ("L m-2 year-1", YIELD["annual_yield"].meaning),
    "annual_yield_low": ("L m-2 year-1", "Annual distillate, low end of the condition band"),
    "annual_yield_high": ("L m-2 year-1", "Annual distillate, high end of the condition band"),
    "worst_month": ("1", "Month of the year with the fewest litres per day, 1 to 12"),
    "worst_month_yield": ("L m-2 d-1", "Mean daily distillate in the worst month"),
    "days_used": ("d", "Valid days behind the monthly figure, all years together"),
    "days_expected": ("d", "Days the record should have for the month, all years together"),
    "frost_share": ("1", "Share of the days used on which the brine froze"),
    "outside_fit_share": ("1", "Share of the days used outside the range of the method"),
}


def _labelled(
    result: dict[str, NDArray[Any]], daily: xr.Dataset, space: list[Any], years: NDArray[Any]
) -> xr.Dataset:
    variables: dict[str, Any] = {}
    for name, values in result.items():
        lead = {len(space): (), len(space) + 1: ("month",), len(space) + 2: ("year", "month")}[values.ndim]
        unit, meaning = _MEANINGS[name]
        variables[name] = ((*lead, *space), values, {"units": unit, "long_name": meaning})
    coords = {name: coord for name, coord in daily.coords.items() if "time" not in coord.dims}
    coords |= {"month": ("month", np.arange(1, MONTHS + 1)), "year": ("year", years)}
    for name, text in (("month", "Month of the year"), ("year", "Calendar year")):
        coords[name] = (name, coords[name][1], {"long_name": text, "units": "1"})
    if daily.attrs.get("record") == "typical-year":
        coords["year"] = ("year", np.zeros(1, dtype=int), {"long_name": "Typical year", "units": "1"})
    return xr.Dataset(variables, coords=coords, attrs=daily.attrs)
