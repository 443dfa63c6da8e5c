"""The log of a trial as people keep it: one row for a still and a day, checked row by row."""

from __future__ import annotations

import csv
import datetime as dt
import io
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from stillfield.errors import Fault, StillfieldError
from stillfield.settings.faults import not_a_choice
from stillfield.settings.text import harmless

#: A log is a table of days; anything much longer is not one.
MAX_BYTES = 32_000_000
_MJ_PER_KWH = 3.6
#: Days whose weather stands in several rows must agree so far. [1]
_SAME = 1e-6


@dataclass(frozen=True)
class _Column:
    """A column: other headings for it, bounds of its numbers, and vocabulary name and factor of its quantity."""

    name: str
    aliases: tuple[str, ...] = ()
    low: float | None = None
    high: float | None = None
    quantity: str | None = None
    factor: float = 1.0


_COLUMNS = (
    _Column("date", ("day",)),
    _Column("still", ("still_id", "still_name")),
    _Column("litres", ("litres_l", "liters", "yield_l", "l"), 0.0, 1e6),
    _Column("remarks", ("remark", "note", "notes", "comment")),
    _Column("irradiation_mj_m2", (), 0.0, 50.0, "irradiation"),
    _Column("irradiation_kwh_m2", (), 0.0, 14.0, "irradiation", _MJ_PER_KWH),
    _Column("temp_air_degc", ("temp_air_deg_c", "temp_air"), -70.0, 60.0, "temp_air"),
    _Column("wind_speed_m_s", ("wind_speed",), 0.0, 75.0, "wind_speed"),
)
_NEEDED = ("date", "still", "litres")
WEATHER_QUANTITIES = ("irradiation", "temp_air", "wind_speed")


@dataclass(frozen=True)
class LogRow:
    """One row of the log.

    Attributes
    ----------
    row : int
        As a spreadsheet numbers it, the heading being 1.
    date : datetime.date
        As written.
    still : str
        Name in the log.
    litres : float or None
        Collected; None where nothing is written. [L]
    weather : mapping of str to float
        `vocabulary.DAY_WEATHER` names and units; what is not written is not there.
    remarks : str
        As written.
    """

    row: int
    date: dt.date
    still: str
    litres: float | None
    weather: Mapping[str, float] = field(default_factory=dict)
    remarks: str = ""


def read_log(
    path: Path, columns: Mapping[str, str], *, date_format: str | None, stills: Sequence[str], weather: bool
) -> tuple[list[LogRow], list[Fault]]:
    """Read a log.

    Parameters
    ----------
    path : Path
        CSV with a heading: UTF-8 or cp1252; comma, semicolon or tab between cells; decimal comma beside the latter.
    columns : mapping of str to str
        stillfield's column name to the heading of the log.
    date_format : str or None
        Form of dates that are not ISO 8601.
    stills : sequence of str
        Names the column of stills may hold.
    weather : bool
        Whether the log must have the weather of its days.

    Returns
    -------
    rows : list of LogRow
        Rows without a fault.
    faults : list of Fault
        Every fault, its line being the row of the log.

    Raises
    ------
    StillfieldError
        If the file cannot be read or is empty.
    """
    cells, decimal_comma = _cells(path)
    heading = [cell.strip() for cell in cells[0]]
    at, faults = _match(heading, columns, weather=weather)
    if faults:
        return [], faults
    rows: list[LogRow] = []
    for number, row in enumerate(cells[1:], start=2):
        if any(cell.strip() for cell in row):
            text = {name: row[place].strip() if place < len(row) else "" for name, place in at.items()}
            made = _row(number, text, (date_format, decimal_comma, stills), faults)
            rows += [] if made is None else [made]
    faults += _contradictions(rows)
    return rows, sorted(faults, key=lambda fault: fault.line or 0)


def _cells(path: Path) -> tuple[list[list[str]], bool]:
    try:
        raw = path.read_bytes() if path.stat().st_size <= MAX_BYTES else None
    except OSError as error:
        raise StillfieldError("cannot be read", where=str(path.name), got=error.strerror) from None
    if raw is None:
        raise StillfieldError("is too large for a log of days", where=path.name, wanted=f"at most {MAX_BYTES} bytes")
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = raw.decode("cp1252", errors="replace")
    delimiter = max(",;\t", key=text.partition("\n")[0].count)
    rows = list(csv.reader(io.StringIO(text, newline=""), delimiter=delimiter))
    if not any(cell.strip() for row in rows[1:] for cell in row):
        raise StillfieldError("the log is empty", where=path.name, wanted="a heading and a row per still and day")
    return rows, delimiter != ","


def _match(
    heading: list[str], named: Mapping[str, str], *, weather: bool
) -> tuple[dict[str, int], list[Fault]]:
    folded = {cell.lower().replace(" ", "_"): place for place, cell in reversed(list(enumerate(heading)))}
    at: dict[str, int] = {}
    faults: list[Fault] = []
    for column in _COLUMNS:
        if column.name in named:
            if named[column.name] in heading:
                at[column.name] = heading.index(named[column.name])
            else:
                faults.append(Fault(1, column.name, not_a_choice(named[column.name], heading)))
            continue
        known = next((alias for alias in (column.name, *column.aliases) if alias in folded), None)
        if known is not None:
            at[column.name] = folded[known]
    faults += [Fault(1, name, "there is no such column; rename one or name it under log.columns")
               for name in _NEEDED if name not in at and name not in named]
    have = {column.quantity for column in _COLUMNS if column.name in at}
    missing = [name for name in WEATHER_QUANTITIES if name not in have]
    if weather and missing:
        wanted = ", ".join("/".join(one.name for one in _COLUMNS if one.quantity == name) for name in missing)
        faults.append(Fault(1, "weather", f"there is no column {wanted}; add the weather of each day to the log, or "
                            "name weather in the trial file"))
    if {"irradiation_mj_m2", "irradiation_kwh_m2"} <= set(at):
        faults.append(Fault(1, "irradiation", "stands in two columns, MJ and kWh; name one"))
    return at, faults


def _row(
    number: int, text: Mapping[str, str], how: tuple[str | None, bool, Sequence[str]], faults: list[Fault]
) -> LogRow | None:
    date_format, decimal_comma, stills = how
    before = len(faults)
    day = _date(text["date"], date_format)
    if day is None:
        form = date_format or "such as 2021-03-31"
        faults.append(Fault(number, "date", f"should be a date {form} (got '{harmless(text['date'])}')"))
    if text["still"] not in stills:
        faults.append(Fault(number, "still", not_a_choice(text["still"], stills)))
    values = {
        column.name: _number(number, text[column.name], column, decimal_comma, faults)
        for column in _COLUMNS if column.low is not None and column.name in text
    }
    if len(faults) > before or day is None:
        return None
    weather = {
        column.quantity: value * column.factor for column in _COLUMNS
        if column.quantity is not None and (value := values.get(column.name)) is not None
    }
    return LogRow(number, day, text["still"], values["litres"], weather, text.get("remarks", ""))


def _date(text: str, date_format: str | None) -> dt.date | None:
    try:
        return dt.date.fromisoformat(text) if date_format is None else dt.datetime.strptime(text, date_format).date()
    except ValueError:
        return None


def _number(row: int, text: str, column: _Column, decimal_comma: bool, faults: list[Fault]) -> float | None:
    if not text:
        return None
    try:
        value = float(text.replace(",", ".") if decimal_comma else text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        cure = f"; write {text.replace(',', '.')}" if "," in text else ""
        faults.append(Fault(row, column.name, f"should be a number (got '{harmless(text)}'{cure})"))
        return None
    if column.low is not None and column.high is not None and not column.low <= value <= column.high:
        faults.append(Fault(row, column.name, f"should be between {column.low:g} and {column.high:g} (got {value:g})"))
        return None
    return value


def _contradictions(rows: list[LogRow]) -> list[Fault]:
    """Days that stand twice for a still, and days with two kinds of weather."""
    faults: list[Fault] = []
    first: dict[tuple[str, dt.date], int] = {}
    weather: dict[tuple[dt.date, str], tuple[int, float]] = {}
    for row in rows:
        earlier = first.setdefault((row.still, row.date), row.row)
        if earlier != row.row:
            faults.append(Fault(row.row, "date", f"'{harmless(row.still)}' has {row.date} in row {earlier} already"))
        for name, value in row.weather.items():
            line, known = weather.setdefault((row.date, name), (row.row, value))
            if abs(value - known) > _SAME * max(abs(known), 1.0):
                faults.append(Fault(row.row, name, f"differs from that of the same day in row {line}"))
    return faults
