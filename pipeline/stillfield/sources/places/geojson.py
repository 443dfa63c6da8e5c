"""Places from GeoJSON (RFC 7946)."""

from __future__ import annotations

import json
import re
from collections import Counter
from collections.abc import Iterator
from typing import Any

from stillfield.errors import PlacesError
from stillfield.sources.places.columns import recognised
from stillfield.sources.places.geometry import point_of, remark_on_kinds
from stillfield.sources.places.raw_table import Cell, Faults, Point, RawTable, Row, quoted, within_limits

#: WGS 84, with height or without, and its European and American twins, which are within metres of it.
_DEGREES = re.compile(r"CRS:?:?84|EPSG:[\d.]*:?(4326|4979|4258|4269)", re.IGNORECASE)


def read_geojson(raw: bytes, *, where: str) -> RawTable:
    """Read a collection of features.

    Parameters
    ----------
    raw : bytes
        The file.
    where : str
        File, for messages.

    Returns
    -------
    RawTable

    Raises
    ------
    PlacesError
        If it is no GeoJSON of features in degrees, or beyond the limits.
    """
    features = _features(_parsed(raw, where=where), where=where)
    names: dict[str, int] = {}
    for feature in features:
        for name in _properties(feature):
            names.setdefault(name, len(names))
    with_id = "id" not in recognised(list(names), {}) and any("id" in feature for feature in features)
    faults, kinds = Faults(where, "feature"), Counter[str]()
    rows = list(within_limits(_rows(features, list(names), faults, kinds, with_id=with_id), where=where,
                              counted="feature"))
    faults.refuse()
    if not rows:
        raise PlacesError("the table of places is empty", where=where, wanted="a feature per place")
    header = (*names, "id") if with_id else tuple(names)
    return RawTable(where, "feature", tuple(name.strip() for name in header), None, rows, has_points=True,
                    usual_mark=".", remarks=remark_on_kinds(kinds))


def _parsed(raw: bytes, *, where: str) -> Any:
    try:
        return json.loads(raw.decode("utf-8-sig"))
    except (ValueError, RecursionError) as error:
        told = "nested too deeply" if isinstance(error, RecursionError) else str(error)
        raise PlacesError("cannot be read as GeoJSON", where=where, got=quoted(told, 120),
                          cure="Save it again as GeoJSON in UTF-8.") from None


def _features(document: Any, *, where: str) -> list[dict[str, Any]]:
    kind = document.get("type") if isinstance(document, dict) else None
    features = document.get("features") if kind == "FeatureCollection" else [document] if kind == "Feature" else None
    if not isinstance(features, list) or not all(isinstance(feature, dict) for feature in features):
        raise PlacesError("is no GeoJSON of places", where=where, got=quoted(kind) if kind else None,
                          wanted="a FeatureCollection with a feature per place")
    system = document.get("crs")
    if system is not None:
        named = system.get("properties") if isinstance(system, dict) else None
        name = named.get("name") if isinstance(named, dict) else None
        if not (isinstance(name, str) and _DEGREES.search(name)):
            raise PlacesError("the coordinates are in another system", where=where, got=quoted(name or system),
                              wanted="WGS 84 (EPSG:4326), as GeoJSON must be", cure="Reproject it to EPSG:4326.")
    return features


def _properties(feature: dict[str, Any]) -> dict[str, Any]:
    found = feature.get("properties")
    return {str(name): value for name, value in found.items()} if isinstance(found, dict) else {}


def _rows(
    features: list[dict[str, Any]], names: list[str], faults: Faults, kinds: Counter[str], *, with_id: bool
) -> Iterator[Row]:
    for number, feature in enumerate(features, start=1):
        properties = _properties(feature)
        cells = [_cell(properties.get(name)) for name in names]
        if with_id:
            cells.append(_cell(feature.get("id")))
        point: Point | None = None
        try:
            point, kind = point_of(_shape(feature.get("geometry")))
            if kind:
                kinds[kind] += 1
        except ValueError as error:
            faults.add(number, "geometry", str(error))
        yield Row(number, tuple(cells), point)


def _shape(geometry: Any) -> Any:
    import shapely

    if geometry is None:
        return None
    try:
        return shapely.from_geojson(json.dumps(geometry))
    except (shapely.errors.GEOSException, ValueError, TypeError, RecursionError):
        raise ValueError("is no geometry of GeoJSON") from None


def _cell(value: Any) -> Cell:
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value).upper()
    if isinstance(value, int | float):
        return value
    return value.strip() if isinstance(value, str) else json.dumps(value, ensure_ascii=False)
