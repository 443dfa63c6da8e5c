"""Times of station tables: dates and hours in columns, as text or numbers, to one time per row."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.errors import Fault, WeatherError
from stillfield.sources.stations.station_columns import numbers
from stillfield.sources.stations.station_rows import Rows

_ZONE = re.compile(r"[T:\s]\S*(?:Z|[+-]\d\d:?\d\d)$")


@dataclass(frozen=True)
class Times:
    """Time of every row.

    Attributes
    ----------
    stamps : ndarray of datetime64
        NaT where a cell is at fault.
    utc : bool
        Whether the text says that they are UTC or gives an offset, which was taken off.
    notes : tuple of str
    """

    stamps: NDArray[np.datetime64]
    utc: bool
    notes: tuple[str, ...]


def read_times(
    rows: Rows, places: Mapping[str, str], *, date_format: str | None, monthly: bool, nominal_year: int,
    faults: list[Fault],
) -> Times:
    """Read the times of a table.

    Parameters
    ----------
    rows : Rows
        One table.
    places : mapping of str to str
        Columns, from `station_columns.find_places`.
    date_format : str or None
        Of dates that are not ISO 8601, as for `datetime.strptime`.
    monthly : bool
        Whether rows are months: then the day may be absent, and the year too.
    nominal_year : int
        Year of months without a year.
    faults : list of Fault
        Grows by each cell that is no time.

    Returns
    -------
    Times

    Raises
    ------
    WeatherError
        If no columns of time are there, or the dates are of an unknown form.
    """
    have = set(places)
    notes: list[str] = []
    if {"year", "month", "day"} <= have or (monthly and "month" in have):
        stamps, utc = _from_numbers(rows, places, monthly, nominal_year, faults), False
    elif "year" in have and have & {"day_of_year", "day"}:
        stamps, utc = _from_day_of_year(rows, places, faults), False
    elif "date" in have:
        stamps, utc = _from_text(rows, places["date"], date_format, faults)
    else:
        raise WeatherError("no column holds the time", where=str(rows.path), got=", ".join(rows.headings),
                           wanted="date; or year, month and day; or year and day_of_year",
                           cure="Name the columns under `table.columns` in the run file.")
    if not monthly:
        stamps, said = _with_hours(rows, places, stamps, faults)
        notes += said
    return Times(stamps, utc, tuple(notes))


def _from_numbers(
    rows: Rows, places: Mapping[str, str], monthly: bool, nominal_year: int, faults: list[Fault]
) -> NDArray[np.datetime64]:
    parts = {word: numbers(rows, places[word], (), faults) for word in ("year", "month", "day") if word in places}
    count = len(rows.cells)
    year = parts.get("year", np.full(count, float(nominal_year)))
    day = np.ones(count) if monthly else parts["day"]
    frame = pd.DataFrame({"year": year, "month": parts["month"], "day": day})
    return _checked(rows, places["month"], pd.to_datetime(frame, errors="coerce"), faults)


def _from_day_of_year(rows: Rows, places: Mapping[str, str], faults: list[Fault]) -> NDArray[np.datetime64]:
    word = "day_of_year" if "day_of_year" in places else "day"
    year, day = (numbers(rows, places[name], (), faults) for name in ("year", word))
    whole = np.isfinite(year) & np.isfinite(day) & (day >= 1) & (day <= 366)
    first = pd.to_datetime(pd.Series(np.where(whole, year, 1)).astype(int).astype(str).str.zfill(4) + "-01-01",
                           errors="coerce")
    stamps = (first + pd.to_timedelta(np.where(whole, day, 1) - 1, unit="D")).where(whole)
    return _checked(rows, places[word], stamps, faults)


def _from_text(
    rows: Rows, heading: str, date_format: str | None, faults: list[Fault]
) -> tuple[NDArray[np.datetime64], bool]:
    text = rows.cells[heading]
    utc = date_format is None and bool(text.str.contains(_ZONE).any())
    stamps = pd.to_datetime(text, format=date_format or "ISO8601", errors="coerce", utc=utc)
    if stamps.isna().all():
        raise WeatherError(
            "the dates cannot be read" if date_format else "the dates are not ISO 8601",
            where=f"{rows.path}, {heading}", got=repr(text.iloc[0]), wanted=date_format or "2013-01-09",
            cure="State their form under `table.date_format`, for example '%d/%m/%Y' or '%d-%b-%y'.",
        )
    return _checked(rows, heading, stamps.dt.tz_localize(None) if utc else stamps, faults), utc


def _checked(rows: Rows, heading: str, stamps: pd.Series, faults: list[Fault]) -> NDArray[np.datetime64]:
    bad = stamps.isna().to_numpy()
    faults += [Fault(int(line), heading, f"is no date (got '{rows.cells.loc[line, heading]}')")
               for line in rows.cells.index[bad][:5]]
    return stamps.to_numpy().astype("datetime64[ns]")


def _with_hours(
    rows: Rows, places: Mapping[str, str], stamps: NDArray[np.datetime64], faults: list[Fault]
) -> tuple[NDArray[np.datetime64], list[str]]:
    heading = places.get("hour") or (places.get("time") if places.get("time") != places.get("date") else None)
    if heading is None:
        return stamps, []
    text = rows.cells[heading]
    if text.str.contains(":").all():
        parts = text.str.extract(r"^(\d{1,2}):(\d{2})(?::(\d{2}))?$").fillna("0").astype(float)
        hours = (parts[0] + parts[1] / 60.0 + parts[2] / 3600.0).to_numpy()
    else:
        hours = numbers(rows, heading, (), faults)
    odd = ~((hours >= 0.0) & (hours <= 24.0))
    faults += [Fault(int(line), heading, f"should be an hour from 0 to 24 (got '{text.loc[line]}')")
               for line in rows.cells.index[odd][:5]]
    notes = []
    whole = np.where(odd, 0.0, hours)
    if whole.max() == 24.0 and whole.min() >= 1.0:
        whole = whole - 1.0
        notes = ["Hours run from 1 to 24 and mark the end of the hour; they were moved to its start."]
    return stamps + (np.round(whole * 3600.0) * 1e9).astype("timedelta64[ns]"), notes
