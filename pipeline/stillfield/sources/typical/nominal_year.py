"""Rows of a typical-year file, sorted into the 8760 hours of a nominal year.

The months of a typical year come from different calendar years, so rows are placed by month, day and hour
and never by their full date. The nominal year is 2001, which has no 29 February.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError

Array = NDArray[np.floating[Any]]
Integers = NDArray[np.integer[Any]]

YEAR = 2001
HOURS = 8760
#: A file may lack this many hours before it counts as truncated; they stay missing.
_FORGIVEN_HOURS = 24

_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
_DAYS_LEAP = np.array([31, 29, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
_FEB_29 = 31 + 28


@dataclass(frozen=True)
class NominalHours:
    """Hourly values of a nominal year and what was done to get them.

    Attributes
    ----------
    values : mapping of str to ndarray, shape (8760,)
        Hour means, NaN where the file has none.
    notes : tuple of str
        One sentence for each thing dropped, averaged or missing.
    """

    values: Mapping[str, Array]
    notes: tuple[str, ...]


def _minute_of_year(month: Integers, day: Integers, minutes: Integers) -> tuple[Integers, int]:
    """Minutes since 1 January on a calendar without 29 February, -1 for rows of that day; rows dropped."""
    leap = bool(np.any((month == 2) & (day == 29)))
    lengths = _DAYS_LEAP if leap else _DAYS
    first_day = np.concatenate([[0], np.cumsum(lengths)[:-1]])
    whole = int(lengths.sum()) * 1440
    minute = ((first_day[month - 1] + day - 1) * 1440 + minutes) % whole
    if not leap:
        return minute, 0
    of_leap_day = minute // 1440 == _FEB_29
    shifted = np.where(minute // 1440 > _FEB_29, minute - 1440, minute)
    return np.where(of_leap_day, -1, shifted), int(of_leap_day.sum())


def _label(minute: int) -> str:
    stamp = np.datetime64(f"{YEAR}-01-01T00:00") + np.timedelta64(minute, "m")
    return str(stamp)[5:].replace("T", " ")


def _check_whole(counts: Integers, rows: int, *, where: str) -> list[str]:
    missing = np.flatnonzero(counts == 0)
    if missing.size > _FORGIVEN_HOURS:
        raise WeatherError(
            "the file does not hold a whole year",
            where=where,
            got=f"{rows} rows, the first missing hour starts {_label(int(missing[0]) * 60)} (month-day)",
            wanted=f"{HOURS} hours",
            cure="The file is truncated or holds part of a year; get it again.",
        )
    if not missing.size:
        return []
    return [f"{missing.size} of {HOURS} hours are absent from the file and stay missing."]


def place(
    month: Integers, day: Integers, minutes: Integers, values: Mapping[str, Array], *, where: str
) -> NominalHours:
    """Sort rows into the nominal year and average the rows of an hour.

    Parameters
    ----------
    month, day : ndarray of int, shape (row,)
        Of the row's date.
    minutes : ndarray of int, shape (row,)
        Start of the row's interval after midnight of that date; may be negative. [min]
    values : mapping of str to ndarray, shape (row,)
        Any units, NaN where missing.
    where : str
        File, for errors.

    Returns
    -------
    NominalHours

    Raises
    ------
    WeatherError
        If more than a day of hours is absent, or a time comes twice.

    Examples
    --------
    >>> month = np.repeat(np.arange(1, 13), _DAYS * 24)
    >>> day = np.concatenate([np.repeat(np.arange(1, n + 1), 24) for n in _DAYS])
    >>> start = np.tile(np.arange(24) * 60, 365)
    >>> hours = place(month, day, start, {"x": np.arange(8760.0)}, where="demo")
    >>> hours.values["x"][[0, -1]].tolist(), hours.notes
    ([0.0, 8759.0], ())
    """
    minute, dropped = _minute_of_year(month, day, minutes)
    kept = minute >= 0
    notes = [f"29 February ({dropped} rows) was dropped."] if dropped else []
    unique, times = np.unique(minute[kept], return_counts=True)
    if unique.size and times.max() > 1:
        twice = int(unique[np.argmax(times > 1)])
        raise WeatherError(
            f"a time comes {int(times.max())} times",
            where=where,
            got=f"month-day {_label(twice)}",
            wanted="one year, each time once",
            cure="Give one year per file; a series of several years belongs in a NetCDF file.",
        )
    slot = minute[kept] // 60
    counts = np.bincount(slot, minlength=HOURS)
    notes += _check_whole(counts, month.size, where=where)
    if counts.max() > 1:
        notes.append(f"{int(counts.max())} rows of an hour were averaged to hour means.")
    hourly: dict[str, Array] = {}
    for name, column in values.items():
        row = np.asarray(column, dtype=float)[kept]
        good = np.isfinite(row)
        number = np.bincount(slot[good], minlength=HOURS)
        total = np.bincount(slot[good], weights=row[good], minlength=HOURS)
        hourly[name] = np.where(number > 0, total / np.maximum(number, 1), np.nan)
    return NominalHours(hourly, tuple(notes))
