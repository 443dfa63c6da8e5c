"""Cells of a village table turned into names, numbers and positions, every fault noted with its row."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping, Sequence

import numpy as np

from stillfield.sources.places.columns import Match
from stillfield.sources.places.number_text import decimal_mark, is_missing, number_of
from stillfield.sources.places.positions import Angle, check_angle, parse_angle, parse_position
from stillfield.sources.places.raw_table import Cell, Faults, RawTable, Row, quoted

MAX_NAME = 200
MAX_NOTE = 2000
#: What a spreadsheet shows where a formula failed.
_FAILED = re.compile(r"#(N/A|REF!|VALUE!|NAME\?|DIV/0!|NUM!|NULL!)")


def places_of(table: RawTable, found: Mapping[str, Match], faults: Faults) -> list[dict[str, object]]:
    """Read the cells of every row.

    Parameters
    ----------
    table : RawTable
        The rows; a remark may be added to it.
    found : mapping of str to Match
        The column of every quantity.
    faults : Faults
        Takes what cannot be read.

    Returns
    -------
    list of dict
        ``row``, ``latitude``, ``longitude`` and what else was found, NaN where it is not known or at fault.
    """
    width = len(table.header)
    marks = _marks(table, found)
    letters: set[str] = set()
    records = []
    for row in table.rows:
        if any(str(cell).strip() for cell in row.cells[width:]):
            faults.add(row.number, "", f"has {len(row.cells)} cells under {width} headings; is there a decimal comma, "
                                       "or a comma in a name, without quotation marks?")
            records.append({"row": row.number, "name": "", "latitude": np.nan, "longitude": np.nan})
            continue
        record: dict[str, object] = {"row": row.number}
        for name, match in found.items():
            cell = row.cell(match.position)
            if name in ("latitude", "longitude", "position"):
                continue
            if match.column.low is None:
                record[name] = _text(cell, match, row.number, faults)
            else:
                record[name] = _number(cell, match, marks[name], row.number, faults)
        record["latitude"], record["longitude"] = _position(row, found, letters, faults)
        records.append(record)
    if {"O", "W"} <= letters:
        faults.add(table.header_row, "longitude", "has both O and W; write west as W or as a negative number and "
                                                  "east as E")
    elif "O" in letters:
        table.remarks.append("The letter O of a longitude is read as west (Ouest, Oeste).")
    return records


def _marks(table: RawTable, found: Mapping[str, Match]) -> dict[str, str | None]:
    """Decimal mark of every column of numbers: its own evidence, else that of the table."""

    def texts(match: Match) -> list[str]:
        cells = (row.cell(match.position) for row in table.rows)
        return [cell for cell in cells if isinstance(cell, str)]

    numeric = {name: match for name, match in found.items() if match.column.low is not None}
    own = {name: decimal_mark(texts(match), degrees=name in ("latitude", "longitude"))
           for name, match in numeric.items()}
    known = {mark for mark in own.values() if mark}
    of_table = known.pop() if len(known) == 1 else table.usual_mark if not known else None
    # Three digits behind the table's decimal mark are no fraction of a person, but perhaps thousands.
    return {
        name: own[name] or (None if match.column.count and _thousands(texts(match), of_table) else of_table)
        for name, match in numeric.items()
    }


def _thousands(texts: Sequence[str], mark: str | None) -> bool:
    """Whether counts of people stand with the table's decimal mark in the way of thousands."""
    shape = rf"\s*[1-9]\d{{0,2}}{re.escape(mark or '.')}\d{{3}}\s*"
    return mark is not None and any(re.fullmatch(shape, one) for one in texts)


def _text(cell: Cell, match: Match, number: int, faults: Faults) -> str:
    """Text of a cell on one line; a number of a workbook as it is shown."""
    text = str(int(cell)) if isinstance(cell, float) and cell.is_integer() and abs(cell) < 1e15 else str(cell)
    text = " ".join(text.split())
    longest = MAX_NOTE if match.column.name == "note" else MAX_NAME
    if not text and match.column.name == "name":
        faults.add(number, match.label, "is empty")
    elif _FAILED.fullmatch(text):
        faults.add(number, match.label, f"holds a formula that failed ({text})")
    elif len(text) > longest:
        faults.add(number, match.label, f"is longer than {longest} characters (got {quoted(text, 20)})")
    elif any(unicodedata.category(sign) in ("Cc", "Cs") for sign in text):
        faults.add(number, match.label, f"holds a control character (got {quoted(text)})")
    return text


def _number(cell: Cell, match: Match, mark: str | None, row: int, faults: Faults) -> float:
    """Number of a cell in the unit of its column; NaN where it is not known or at fault."""
    if isinstance(cell, str) and is_missing(cell):
        return np.nan
    column = match.column
    try:
        value = number_of(cell, mark) if isinstance(cell, str) else float(cell)
    except OverflowError:
        value = np.inf
    except ValueError as error:
        told = str(error)
        faults.add(row, match.label, told if "(got" in told else f"{told} (got {quoted(cell)}{_hint(cell)})")
        return np.nan
    value *= match.factor
    if column.low is None or column.high is None or column.low <= value <= column.high:
        return value
    if np.isnan(value):
        return np.nan
    hint = "; is it in mg/L? Then name the unit in the heading" if column.name == "feed_salinity_g_kg" \
        and match.factor == 1.0 else ""
    unit = f", as {column.name}" if match.factor != 1.0 else ""
    faults.add(row, match.label,
               f"should be between {column.low:g} and {column.high:g}{unit} (got {_shown(cell)}{hint})")
    return np.nan


def _shown(cell: Cell) -> str:
    return quoted(cell).strip("'") if isinstance(cell, str) else f"{cell:g}" if abs(cell) < 1e300 else "a huge number"


def _hint(cell: Cell) -> str:
    """What may have happened to a number that is none."""
    text = str(cell)
    if re.fullmatch(r"\d{4}-\d\d-\d\d", text):
        return "; did the spreadsheet turn a number into a date?"
    if re.match(r"[\d.,]+ ?[^\W\d_]+", text):
        return "; a unit belongs into the heading"
    return ""


def _position(row: Row, found: Mapping[str, Match], letters: set[str], faults: Faults) -> tuple[float, float]:
    """Latitude and longitude of a row, NaN where they are at fault."""
    if "position" in found:
        return _pair(row, found["position"], letters, faults)
    if "latitude" in found:
        north, east = (_angle(row.cell(found[axis].position), axis, found[axis].label, row.number, faults)
                       for axis in ("latitude", "longitude"))
        letters.update((north.letter, east.letter))
        return north.degrees, east.degrees
    if row.point is None:
        faults.add(row.number, "geometry", "is empty")
        return np.nan, np.nan
    for value, axis in zip(row.point, ("longitude", "latitude"), strict=True):
        try:
            check_angle(value, axis)
        except ValueError as error:
            faults.add(row.number, f"geometry, {axis}", _with_got(str(error), f"{value:g}"))
            return np.nan, np.nan
    return row.point[1], row.point[0]


def _pair(row: Row, match: Match, letters: set[str], faults: Faults) -> tuple[float, float]:
    """Latitude and longitude from one cell, NaN where they are at fault."""
    text = str(row.cell(match.position)).strip()
    if is_missing(text):
        faults.add(row.number, match.label, "is empty" + (f" (got {quoted(text)})" if text else ""))
        return np.nan, np.nan
    try:
        pair = parse_position(text, longitude_first=match.longitude_first)
    except ValueError as error:
        faults.add(row.number, match.label, _with_got(str(error), text))
        return np.nan, np.nan
    letters.update(angle.letter for angle in pair)
    return pair[0].degrees, pair[1].degrees


def _angle(cell: Cell, axis: str, label: str, row: int, faults: Faults) -> Angle:
    if isinstance(cell, str) and is_missing(cell):
        faults.add(row, label, "is empty" + (f" (got {quoted(cell)})" if cell.strip() else ""))
        return Angle(np.nan)
    try:
        if isinstance(cell, str):
            return parse_angle(cell, axis)
        value = float(cell)
        check_angle(value, axis)
        return Angle(value)
    except (ValueError, OverflowError) as error:
        faults.add(row, label, _with_got(str(error), cell))
        return Angle(np.nan)


def _with_got(told: str, cell: Cell) -> str:
    return told if "(got" in told else f"{told} (got {quoted(cell)})"
