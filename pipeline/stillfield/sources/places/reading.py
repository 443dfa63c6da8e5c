"""Village tables as people make them, read into one table in vocabulary units.

Cells stay text until their column is known, so that an id "007" stays "007" and a place called "NA" keeps its name.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import pandas as pd

from stillfield.errors import PlacesError
from stillfield.sources.places.cell_values import places_of
from stillfield.sources.places.columns import Match, match_columns
from stillfield.sources.places.geojson import read_geojson
from stillfield.sources.places.geopackage import read_geopackage
from stillfield.sources.places.raw_table import MAX_BYTES, Faults, RawTable, listed, quoted
from stillfield.sources.places.sheet import read_sheet
from stillfield.sources.places.text_table import read_text_table

#: How files begin that are often given for a table.
_KINDS = (
    (b"\xd0\xcf\x11\xe0", "an old XLS or a protected workbook", "Save it as XLSX without a password, or as CSV."),
    (b"%PDF", "a PDF document", "Save the table itself as CSV or XLSX."),
    (b"<", "a web page or XML", "Save the table as CSV, GeoJSON, GeoPackage or XLSX; KML can be saved as GeoJSON."),
    (b"\x00\x00\x27\x0a", "a shapefile", "Save the layer as GeoPackage or GeoJSON."),
    (b"\x1f\x8b", "a compressed file", "Unpack it."),
)


def read_places(
    path: str | Path, columns: Mapping[str, str] | None = None, *, sheet: str | None = None, layer: str | None = None
) -> pd.DataFrame:
    """Read a table of places: CSV, GeoJSON, GeoPackage or XLSX, told apart by their content.

    CSV may be UTF-8, UTF-16 or Windows-1252, divided by comma, semicolon, tab or ``|``, with decimal point or comma.
    Columns are recognised in several languages (`stillfield.sources.places.columns`); a unit in a heading is converted.

    Parameters
    ----------
    path : path
        The table.
    columns : mapping of str to str, optional
        stillfield's column name to the table's; wins over the known names.
    sheet, layer : str, optional
        Which sheet of a workbook or layer of a GeoPackage; without it the only one that has names and positions.

    Returns
    -------
    pandas.DataFrame
        In the order of the table: ``row`` (as the file's own program numbers it), ``name``, ``id``, ``latitude``,
        ``longitude`` (-180 to 180) and whichever of ``population``, ``households``, ``feed_salinity_g_kg``,
        ``distance_to_feed_km``, ``elevation_m``, ``note`` the table has. ``attrs["remarks"]`` lists in sentences what
        was left out, converted or looks doubtful.

    Raises
    ------
    PlacesError
        All faults at once, each with the row number of the file.
    """
    path, mapping = Path(path), dict(columns or {})
    table = _raw_table(path, mapping, sheet=sheet, layer=layer)
    faults = Faults(table.where, table.counted)
    found = _matched(table, mapping, faults)
    faults.refuse()
    frame = pd.DataFrame(places_of(table, found, faults))
    _refuse_contradictions(frame, faults)
    faults.refuse()
    remarks = [*table.remarks, *_remarks(table, found, frame)]
    beyond = frame["longitude"] >= 180.0
    frame["longitude"] = frame["longitude"].where(~beyond, frame["longitude"] - 360.0)
    _name_the_nameless(frame, remarks)
    frame.attrs["remarks"] = remarks
    return frame


def _raw_table(path: Path, mapping: Mapping[str, str], *, sheet: str | None, layer: str | None) -> RawTable:
    try:
        size = path.stat().st_size
        if size > MAX_BYTES:
            raise PlacesError("the table of places is too large", where=str(path), got=f"{size / 1e6:.0f} MB",
                              wanted=f"at most {MAX_BYTES / 1e6:.0f} MB", cure="Keep only the columns that are needed.")
        raw = path.read_bytes()
    except (OSError, ValueError) as error:
        raise PlacesError("cannot read the table of places", where=str(path),
                          got=getattr(error, "strerror", None) or str(error), cure="Correct places.table.") from error
    begins = raw[:200].removeprefix(b"\xef\xbb\xbf").lstrip()
    kind = {b"PK": "xlsx", b"SQ": "gpkg"}.get(begins[:2] if begins[:15] in (b"SQLite format 3",) or
                                             begins[:4] in (b"PK\x03\x04", b"PK\x05\x06") else b"", "text")
    for key, given, wanted in (("sheet", sheet, "xlsx"), ("layer", layer, "gpkg")):
        if given is not None and kind != wanted:
            raise PlacesError(f"the table has no {key}s", where=str(path), got=quoted(given),
                              cure=f"Leave out places.{key}.")
    if kind == "xlsx":
        return read_sheet(raw, mapping, sheet=sheet, where=str(path))
    if kind == "gpkg":
        return read_geopackage(path, mapping, layer=layer, where=str(path))
    for start, told, cure in _KINDS:
        if begins.startswith(start):
            raise PlacesError(f"the file is {told}", where=str(path), wanted="CSV, GeoJSON, GeoPackage or XLSX",
                              cure=cure)
    if begins.startswith(b"{"):
        return read_geojson(raw, where=str(path))
    return read_text_table(raw, mapping, where=str(path))


def _matched(table: RawTable, mapping: Mapping[str, str], faults: Faults) -> dict[str, Match]:
    found, complaints = match_columns(table.header, mapping)
    for complaint in complaints:
        faults.add(table.header_row, "", complaint)
    # Geometry is the position, unless the run file names columns for it.
    if table.has_points and not {"latitude", "longitude", "position"} & set(mapping):
        for name in ("latitude", "longitude", "position"):
            found.pop(name, None)
        needed = ["name"]
    elif {"latitude", "longitude"} <= set(found) or "position" not in found:
        found.pop("position", None)
        needed = ["name", "latitude", "longitude"]
    else:
        needed = ["name", "position"]
    missing = [name for name in needed if name not in found and not any(f"'{name}'" in told for told in complaints)]
    if missing:
        has = listed(heading for heading in table.header if heading) or "no headings"
        faults.add(table.header_row, "", f"no column for {', '.join(missing)} (the table has {has}); rename the "
                                         "columns or map them under places.columns")
    return found


def _refuse_contradictions(frame: pd.DataFrame, faults: Faults) -> None:
    """Duplicated ids and the 0/0 of an empty coordinate."""
    for row in frame.loc[(frame["latitude"] == 0.0) & (frame["longitude"] == 0.0), "row"]:
        faults.add(int(row), "latitude, longitude", "are both 0, which is open sea; give the real position")
    if "id" not in frame:
        return
    given = frame.loc[frame["id"].fillna("") != ""]
    for identity, group in given.loc[given["id"].duplicated(keep=False)].groupby("id", sort=False):
        faults.add(int(group["row"].iloc[0]), "id", f"{quoted(identity)} stands in rows {_numbers(group['row'])}")


def _numbers(rows: pd.Series[int]) -> str:
    shown = ", ".join(str(row) for row in rows[:10])
    return shown + (f" and {len(rows) - 10} more" if len(rows) > 10 else "")


def _remarks(table: RawTable, found: Mapping[str, Match], frame: pd.DataFrame) -> list[str]:
    """What was converted, what is not used, and places that look the same."""
    said = []
    for name, match in found.items():
        if match.factor != 1.0:
            said.append(f"Column {quoted(match.label)} is converted to {name} (times {match.factor:g}).")
        elif name == "feed_salinity_g_kg" and match.label.casefold() != name:
            said.append(f"Column {quoted(match.label)} is taken as g/kg.")
    used = {match.position for match in found.values()}
    spare = [heading for index, heading in enumerate(table.header) if index not in used and heading]
    if spare:
        said.append(f"Not used: {listed(spare)}.")
    place = frame.assign(name=frame["name"].str.casefold(), latitude=frame["latitude"].round(5),
                         longitude=frame["longitude"].round(5))
    keys = ["name", "latitude", "longitude"]
    for _, group in list(place.loc[place.duplicated(keys, keep=False)].groupby(keys, sort=False))[:20]:
        name = str(frame.loc[group.index[0], "name"])
        said.append(f"{quoted(name)} stands at the same position in {table.counted}s {_numbers(group['row'])}; "
                    "is it one place?")
    return said


def _name_the_nameless(frame: pd.DataFrame, remarks: list[str]) -> None:
    """Give an id to places without one: their running number, or their row where others have one."""
    if "id" not in frame:
        frame.insert(2, "id", [str(number) for number in range(1, len(frame) + 1)])
        return
    blank = frame["id"] == ""
    if blank.any():
        taken = set(frame["id"])
        for index in frame.index[blank]:
            name = f"row-{int(frame['row'].iloc[index])}"
            while name in taken:
                name += "-"
            frame.at[index, "id"] = name
        first = quoted(frame.loc[blank, "id"].iloc[0])
        remarks.append(f"Places without an id are named by their row, such as {first}.")
