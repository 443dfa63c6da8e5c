"""Village tables as people make them, read into one table in vocabulary units.

Everything is read as text first, so that an id "007" stays "007" and a place called "NA" keeps its name.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from stillfield.errors import Fault, PlacesError

MAX_FAULTS_SHOWN = 20


@dataclass(frozen=True)
class Column:
    """One column of the places table: its names in the wild, its bounds, whether it must be there."""

    name: str
    aliases: tuple[str, ...]
    low: float | None = None
    high: float | None = None
    required: bool = False

    @property
    def numeric(self) -> bool:
        """True for numbers, False for text."""
        return self.low is not None


COLUMNS = (
    Column("name", ("place", "village", "settlement", "place_name", "village_name"), required=True),
    Column("id", ("place_id", "village_id", "code", "pcode")),
    Column("latitude", ("lat", "latitude_deg", "y"), -90.0, 90.0, required=True),
    Column("longitude", ("lon", "long", "lng", "longitude_deg", "x"), -180.0, 360.0, required=True),
    Column("population", ("people", "inhabitants", "persons", "pop"), 0.0, 5e7),
    Column("households", ("houses", "families"), 0.0, 1e7),
    Column("feed_salinity_g_kg", ("salinity_g_kg", "feed_salinity", "salinity", "tds_g_l"), 0.0, 350.0),
    Column("distance_to_feed_km", ("distance_km", "distance_to_water_km"), 0.0, 500.0),
    Column("elevation_m", ("elevation", "altitude", "altitude_m", "height_m"), -500.0, 6000.0),
    Column("note", ("notes", "remark", "remarks", "comment")),
)


def read_places(path: str | Path, columns: Mapping[str, str] | None = None) -> pd.DataFrame:
    """Read a CSV table of places.

    UTF-8 (with or without byte-order mark) or cp1252; comma, semicolon or tab between the cells; decimal
    comma where the semicolon or tab divides the cells.

    Parameters
    ----------
    path : path
        The table.
    columns : mapping of str to str, optional
        stillfield's column name to the table's; wins over the known aliases.

    Returns
    -------
    pandas.DataFrame
        In the order of the table: ``row`` (line in the file), ``name``, ``id``, ``latitude``,
        ``longitude`` (-180 to 180) and whichever of ``population``, ``households``,
        ``feed_salinity_g_kg``, ``distance_to_feed_km``, ``elevation_m``, ``note`` the table has.

    Raises
    ------
    PlacesError
        All faults at once, each with the row number of the file.
    """
    rows = _rows(Path(path))
    header = [cell.strip() for cell in rows[0]]
    found = _match_columns(header, columns or {}, str(path))
    frame, faults = _parse(rows, header, found)
    faults += _contradictions(frame)
    if faults:
        shown = "".join(f"\n  {fault}" for fault in faults[:MAX_FAULTS_SHOWN])
        more = f"\n  and {len(faults) - MAX_FAULTS_SHOWN} more" if len(faults) > MAX_FAULTS_SHOWN else ""
        raise PlacesError(f"{path} has {len(faults)} fault{'s' if len(faults) > 1 else ''}:{shown}{more}")
    frame["longitude"] = (frame["longitude"] + 180.0) % 360.0 - 180.0
    return frame


def _rows(path: Path) -> list[list[str]]:
    try:
        raw = path.read_bytes()
    except OSError as error:
        raise PlacesError(
            "cannot read the table of places", where=str(path), got=error.strerror, cure="Correct places.table."
        ) from error
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = raw.decode("cp1252", errors="replace")
    first = text.partition("\n")[0]
    delimiter = max(",;\t", key=first.count)
    lines = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter)
    rows = list(lines)
    if len(rows) < 2 or not any(cell.strip() for row in rows[1:] for cell in row):
        raise PlacesError("the table of places is empty", where=str(path), wanted="a header row and a row per place")
    if delimiter != ",":
        rows[1:] = [[_decimal_point(cell) for cell in row] for row in rows[1:]]
    return rows


def _decimal_point(cell: str) -> str:
    candidate = cell.strip().replace(",", ".")
    try:
        float(candidate)
    except ValueError:
        return cell
    return candidate


def _match_columns(header: list[str], mapping: Mapping[str, str], path: str) -> dict[str, int]:
    folded = {cell.lower().replace(" ", "_"): position for position, cell in reversed(list(enumerate(header)))}
    found: dict[str, int] = {}
    for column in COLUMNS:
        if column.name in mapping:
            if mapping[column.name] not in header:
                raise PlacesError(
                    f"no column {mapping[column.name]!r} for '{column.name}'", where=path, wanted=", ".join(header)
                )
            found[column.name] = header.index(mapping[column.name])
            continue
        for alias in (column.name, *column.aliases):
            if alias in folded:
                found[column.name] = folded[alias]
                break
    missing = [column.name for column in COLUMNS if column.required and column.name not in found]
    if missing:
        raise PlacesError(
            f"no column for {', '.join(missing)}", where=path, got=", ".join(header),
            cure="Rename the columns or map them under places.columns.",
        )
    return found


def _parse(
    rows: list[list[str]], header: list[str], found: dict[str, int]
) -> tuple[pd.DataFrame, list[Fault]]:
    faults: list[Fault] = []
    records = []
    for line, row in enumerate(rows[1:], start=2):
        if not any(cell.strip() for cell in row):
            continue
        record: dict[str, object] = {"row": line}
        for column in COLUMNS:
            if column.name not in found:
                continue
            position = found[column.name]
            text = row[position].strip() if position < len(row) else ""
            record[column.name] = _cell(text, column, line, header[position], faults)
        records.append(record)
    frame = pd.DataFrame(records)
    if "id" not in frame:
        frame["id"] = [str(number) for number in range(1, len(frame) + 1)]
    return frame, faults


def _cell(text: str, column: Column, line: int, label: str, faults: list[Fault]) -> object:
    if column.low is None or column.high is None:
        if not text and column.required:
            faults.append(Fault(line, label, "is empty"))
        return text
    if not text:
        if column.required:
            faults.append(Fault(line, label, "is empty"))
        return float("nan")
    try:
        number = float(text)
    except ValueError:
        faults.append(Fault(line, label, f"should be a number (got {text!r})"))
        return float("nan")
    if not column.low <= number <= column.high:
        hint = "; are latitude and longitude swapped?" if column.name == "latitude" else ""
        faults.append(Fault(line, label, f"should be between {column.low:g} and {column.high:g} (got {text}{hint})"))
        return float("nan")
    return number


def _contradictions(frame: pd.DataFrame) -> list[Fault]:
    """Duplicated ids and the 0/0 of an empty coordinate."""
    faults = []
    for line, latitude, longitude in zip(frame["row"], frame["latitude"], frame["longitude"], strict=True):
        if latitude == 0.0 and longitude == 0.0:
            message = "are both 0, which is open sea; give the real position"
            faults.append(Fault(int(line), "latitude, longitude", message))
    given = frame.loc[frame["id"] != ""]
    for identity, group in given.groupby("id", sort=False):
        if len(group) > 1:
            lines = ", ".join(str(line) for line in group["row"])
            faults.append(Fault(int(group["row"].iloc[0]), "id", f"{identity!r} stands in rows {lines}"))
    return faults
