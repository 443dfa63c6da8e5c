"""Places from a layer of a GeoPackage (OGC 12-128), which is an SQLite database with geometry in blobs."""

from __future__ import annotations

import sqlite3
from collections import Counter
from collections.abc import Iterator, Mapping
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.parse import quote

from stillfield.errors import PlacesError
from stillfield.sources.places.geometry import point_of, remark_on_kinds
from stillfield.sources.places.raw_table import (
    MAX_ROWS,
    Cell,
    Faults,
    Point,
    RawTable,
    Row,
    enough,
    listed,
    quoted,
    within_limits,
)

#: WGS 84, with height or without, and its European and American twins, which are within metres of it.
_DEGREES = {4326, 4979, 4258, 4269}
#: Bytes of the envelope by its code, GeoPackage 1.4, clause 2.1.3.
_ENVELOPES = {0: 0, 1: 32, 2: 48, 3: 48, 4: 64}
#: Steps of the database machine before a query is stopped: a view can run for ever.
_MOST_STEPS = 200


@dataclass(frozen=True)
class Layer:
    """A table of a GeoPackage and, where it has geometry, its column and reference system."""

    name: str
    geometry: str | None = None
    system: int | None = None


def read_geopackage(path: Path, mapping: Mapping[str, str], *, layer: str | None, where: str) -> RawTable:
    """Read one layer.

    Parameters
    ----------
    path : Path
        The file.
    mapping : mapping of str to str
        Columns named in the run file.
    layer : str or None
        Name of the layer; None takes the only one that can be a table of places.
    where : str
        File, for messages.

    Returns
    -------
    RawTable

    Raises
    ------
    PlacesError
        If it is no GeoPackage, the layer is not there or cannot be told, its coordinates are no degrees, or it is
        beyond the limits.
    """
    try:
        address = f"file:{quote(str(path.resolve()))}?mode=ro"
        with closing(sqlite3.connect(address, uri=True)) as database:
            database.text_factory = lambda text: text.decode("utf-8", errors="replace")
            steps = iter(range(_MOST_STEPS))
            database.set_progress_handler(lambda: next(steps, None) is None, 1_000_000)
            chosen = _choose(database, _layers(database, where=where), layer, mapping, where=where)
            return _read(database, chosen, where=f"{where}, layer {quoted(chosen.name)}")
    except (sqlite3.Error, ValueError, TypeError) as error:  # the last two: numbers of its own tables that are none
        raise PlacesError("cannot be read as a GeoPackage", where=where, got=quoted(error, 100),
                          cure="Copy or save the file again.") from None


def _named(name: str) -> str:
    return '"' + name.replace('"', '""') + '"'


def _layers(database: sqlite3.Connection, *, where: str) -> list[Layer]:
    tables = {name for (name,) in database.execute("SELECT name FROM sqlite_master")}
    if "gpkg_contents" not in tables:
        raise PlacesError("is an SQLite database, but no GeoPackage", where=where,
                          cure="Save the places as GeoPackage.")
    layers = []
    geometry: dict[str, tuple[str, int]] = {}
    if "gpkg_geometry_columns" in tables:
        asked = database.execute("SELECT table_name, column_name, srs_id FROM gpkg_geometry_columns")
        geometry = {str(table): (str(column), int(system)) for table, column, system in asked}
    for name, kind in database.execute("SELECT table_name, data_type FROM gpkg_contents"):
        if kind in ("features", "attributes") and name in tables:
            layers.append(Layer(str(name), *geometry.get(str(name), (None, None))))
    if not layers:
        raise PlacesError("the GeoPackage has no layer of features", where=where)
    return layers


def _headings(database: sqlite3.Connection, layer: Layer) -> list[str]:
    told = database.execute(f"PRAGMA table_info({_named(layer.name)})")
    return [str(row[1]) for row in told if str(row[1]) != layer.geometry]


def _choose(
    database: sqlite3.Connection, layers: list[Layer], wanted: str | None, mapping: Mapping[str, str], *, where: str
) -> Layer:
    if wanted is not None:
        fits = [layer for layer in layers if layer.name == wanted]
        if not fits:
            raise PlacesError("no such layer", where=where, got=quoted(wanted),
                              wanted=listed(layer.name for layer in layers), cure="Correct places.layer.")
        return fits[0]
    if len(layers) == 1:
        return layers[0]
    fits = [layer for layer in layers
            if enough(_headings(database, layer), mapping, points=layer.geometry is not None)]
    if len(fits) != 1:
        raise PlacesError(
            "several layers could be the table of places" if fits else "no layer has a name and a position",
            where=where, got=listed(layer.name for layer in fits or layers), cure="Name one under places.layer.",
        )
    return fits[0]


def _read(database: sqlite3.Connection, layer: Layer, *, where: str) -> RawTable:
    remarks = _check_system(database, layer, where=where) if layer.geometry else []
    header = _headings(database, layer)
    key = [str(row[1]) for row in database.execute(f"PRAGMA table_info({_named(layer.name)})")
           if row[5] and str(row[2]).upper().startswith("INT")]
    asked = [*(_named(name) for name in header), _named(layer.geometry) if layer.geometry else "NULL",
             _named(key[0]) if len(key) == 1 else "NULL"]
    order = f" ORDER BY {_named(key[0])}" if len(key) == 1 else ""
    query = f"SELECT {', '.join(asked)} FROM {_named(layer.name)}{order} LIMIT {MAX_ROWS + 1}"
    faults, kinds = Faults(where, "feature"), Counter[str]()
    rows = list(within_limits(_rows(database.execute(query), faults, kinds), where=where, counted="feature"))
    faults.refuse()
    if not rows:
        raise PlacesError("the table of places is empty", where=where, wanted="a feature per place")
    return RawTable(where, "feature", tuple(name.strip() for name in header), None, rows,
                    has_points=layer.geometry is not None, usual_mark=".", remarks=remarks + remark_on_kinds(kinds))


def _rows(asked: sqlite3.Cursor, faults: Faults, kinds: Counter[str]) -> Iterator[Row]:
    for count, (*values, blob, key) in enumerate(asked, start=1):
        number = key if isinstance(key, int) else count
        point: Point | None = None
        try:
            point, kind = point_of(_shape(blob))
            if kind:
                kinds[kind] += 1
        except ValueError as error:
            faults.add(number, "geometry", str(error))
        yield Row(number, tuple(_cell(value) for value in values), point)


def _cell(value: Any) -> Cell:
    if value is None or isinstance(value, bytes):
        return ""
    return value.strip() if isinstance(value, str) else value


def _shape(blob: Any) -> Any:
    """Geometry of a GeoPackage blob: a head of flags and envelope, then well-known binary."""
    import shapely

    if blob is None:
        return None
    if not isinstance(blob, bytes) or blob[:2] != b"GP" or len(blob) < 8 or blob[3] & 0x20:
        raise ValueError("is no geometry of a GeoPackage")
    start = _ENVELOPES.get(blob[3] >> 1 & 0x07)
    if start is None:
        raise ValueError("is no geometry of a GeoPackage")
    if blob[3] & 0x10:
        return None
    try:
        return shapely.from_wkb(blob[8 + start:])
    except (shapely.errors.GEOSException, ValueError, TypeError):
        raise ValueError("is no geometry of a GeoPackage") from None


def _check_system(database: sqlite3.Connection, layer: Layer, *, where: str) -> list[str]:
    asked = "SELECT srs_name, organization, organization_coordsys_id, definition FROM gpkg_spatial_ref_sys " \
            "WHERE srs_id = ?"
    told = database.execute(asked, (layer.system,)).fetchone()
    name, organisation, code, definition = told or (None, "", None, "")
    if str(organisation).upper() == "EPSG" and code in _DEGREES:
        return []
    wkt = str(definition).upper()
    degrees = wkt.startswith("GEOG") and "GREENWICH" in wkt and "0.01745329251994" in wkt
    if layer.system == 0 or degrees:
        return [f"The coordinates are in {quoted(name or 'an undefined geographic system')}; "
                "they are taken as WGS 84, from which such systems differ by less than a kilometre."]
    raise PlacesError(
        "the coordinates are in another system", where=where,
        got=quoted(f"{name}, {organisation}:{code}") if told else f"srs_id {layer.system}",
        wanted="WGS 84 (EPSG:4326)", cure="Reproject the layer to EPSG:4326.",
    )
