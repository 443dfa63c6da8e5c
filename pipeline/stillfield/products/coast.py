"""Coastlines without a download: land shipped with the package, or land the user gives.

The shipped land is Natural Earth 1:50 million (public domain); data/SOURCES.json says where the file
comes from. Its outline is good to about a kilometre: fit for a map of a country, not for a survey. A run
with a better or an invented shore gives its own land as GeoJSON.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from functools import cache
from importlib.resources import files
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import StillfieldError

Ring: TypeAlias = NDArray[np.float64]
#: Outer ring first, then the holes; each ring has shape (n, 2): longitude, latitude [deg].
Polygon: TypeAlias = tuple[Ring, ...]
#: West, south, east, north [deg]; east may exceed 180.
Box: TypeAlias = tuple[float, float, float, float]

_TURN = 360.0


def decode_topojson(topology: dict[str, Any], name: str) -> tuple[Polygon, ...]:
    """Polygons of one object of a quantised TopoJSON topology.

    An arc is a run of integer steps from its first point; ``scale`` and ``translate`` bring it to degrees.
    A ring is a list of arcs, ``~i`` meaning arc i backwards (TopoJSON format specification, "Transforms",
    "Arcs" and "Arc Indexes"). Longitudes are made continuous: a ring across the antimeridian runs on beyond 180.

    Parameters
    ----------
    topology : dict
        The parsed file.
    name : str
        Name of the object, whose geometries are polygons or multipolygons.

    Returns
    -------
    tuple of tuple of ndarray
        Polygons as rings of (longitude, latitude). [deg]

    Examples
    --------
    >>> square = {"transform": {"scale": [1, 1], "translate": [10, 0]},
    ...           "arcs": [[[0, 0], [0, 2], [2, 0]], [[0, 0], [2, 0], [0, 2]]],
    ...           "objects": {"land": {"geometries": [{"type": "Polygon", "arcs": [[0, -2]]}]}}}
    >>> [[float(x), float(y)] for x, y in decode_topojson(square, "land")[0][0]]
    [[10.0, 0.0], [10.0, 2.0], [12.0, 2.0], [12.0, 0.0], [10.0, 0.0]]
    """
    scale, shift = topology["transform"]["scale"], topology["transform"]["translate"]
    arcs = [np.cumsum(arc, axis=0) * scale + shift for arc in topology["arcs"]]

    def ring(indices: Sequence[int]) -> Ring:
        parts = [arcs[i] if i >= 0 else arcs[~i][::-1] for i in indices]
        # Neighbouring arcs share their joint; keep it once.
        points = np.concatenate([part if k == 0 else part[1:] for k, part in enumerate(parts)])
        points[:, 0] = np.unwrap(points[:, 0], period=_TURN)
        return points

    polygons = []
    for geometry in topology["objects"][name]["geometries"]:
        members = [geometry["arcs"]] if geometry["type"] == "Polygon" else geometry["arcs"]
        polygons += [_same_turn(tuple(ring(indices) for indices in member)) for member in members]
    return tuple(polygons)


def _same_turn(polygon: Polygon) -> Polygon:
    """Move holes by whole turns to where the outer ring is."""
    west, east = polygon[0][:, 0].min(), polygon[0][:, 0].max()
    middles = [(ring[:, 0].min() + ring[:, 0].max()) / 2 for ring in polygon]
    turns = [np.ceil((west - middle) / _TURN) if not west <= middle <= east else 0.0 for middle in middles]
    return tuple(ring + np.array([turn * _TURN, 0.0]) for ring, turn in zip(polygon, turns, strict=True))


@cache
def world_land() -> tuple[Polygon, ...]:
    """Land areas of the world shipped with the package, decoded once.

    Returns
    -------
    tuple of tuple of ndarray
        Polygons as rings of (longitude, latitude); Antarctica is closed over the pole. [deg]

    Examples
    --------
    >>> len(world_land()) > 1000
    True
    """
    text = (files("stillfield.products") / "data" / "land-50m.json").read_text(encoding="utf-8")
    polygons = decode_topojson(json.loads(text), "land")
    return tuple(tuple(map(_over_the_pole, filter(_is_shore, polygon))) for polygon in polygons)


def _is_shore(ring: Ring) -> bool:
    return bool(ring[:, 1].max() > -89.9)  # one ring of the file is the South Pole drawn as a line


def _over_the_pole(ring: Ring) -> Ring:
    if abs(ring[-1, 0] - ring[0, 0]) < _TURN / 2:
        return ring
    return np.concatenate([ring, [[ring[-1, 0], -90.0], [ring[0, 0], -90.0]], ring[:1]])


def read_land(land: str | Path | Iterable[Any]) -> tuple[Polygon, ...]:
    """Land areas the user gives in place of the shipped ones.

    Parameters
    ----------
    land : str, Path or iterable of shapely geometries
        A GeoJSON file (any mix of polygons, multipolygons, features and collections), or geometries.

    Returns
    -------
    tuple of tuple of ndarray
        Polygons as rings of (longitude, latitude). [deg]

    Raises
    ------
    StillfieldError
        When the file is no GeoJSON or holds no polygon.

    Examples
    --------
    >>> from shapely.geometry import box
    >>> read_land([box(0, 0, 1, 1)])[0][0].shape
    (5, 2)
    """
    geometries = _geojson_geometries(Path(land)) if isinstance(land, str | Path) else list(land)
    polygons = [polygon for geometry in geometries for polygon in _parts(geometry)]
    if geometries and not polygons:
        where = str(land) if isinstance(land, str | Path) else "land"
        raise StillfieldError("no land area to draw", where=where, wanted="polygons or multipolygons")
    return tuple(
        tuple(np.asarray(ring.coords, dtype=float)[:, :2] for ring in (part.exterior, *part.interiors))
        for part in polygons
    )


def _geojson_geometries(path: Path) -> list[Any]:
    from shapely.errors import ShapelyError
    from shapely.geometry import shape

    try:
        content = json.loads(path.read_text(encoding="utf-8-sig"))
        features = content["features"] if content["type"] == "FeatureCollection" else [content]
        shapes = [shape(feature.get("geometry") or feature) for feature in features]
    except (ValueError, KeyError, TypeError, AttributeError, ShapelyError) as fault:
        raise StillfieldError("not readable as GeoJSON", where=path.name, got=type(fault).__name__,
                              cure="Give polygons in degrees, WGS 84.") from fault
    return shapes


def _parts(geometry: Any) -> list[Any]:
    from shapely.geometry.polygon import orient

    if geometry.geom_type == "Polygon":
        return [] if geometry.is_empty else [orient(geometry)]
    return [polygon for part in getattr(geometry, "geoms", ()) for polygon in _parts(part)]


def land_in(box: Box, land: Iterable[Polygon] | None = None) -> list[Polygon]:
    """Land areas that reach into a box, moved by whole turns to where the box is.

    Parameters
    ----------
    box : tuple of float
        West, south, east, north; longitudes in any turn, such as 170 to 190 or 300 to 340. [deg]
    land : iterable of polygon, optional
        Land to look through; the shipped land by default.

    Returns
    -------
    list of tuple of ndarray
        Whole polygons, not cut at the box. [deg]

    Examples
    --------
    >>> land_in((-31.0, 0.0, -30.0, 1.0))   # mid-Atlantic
    []
    """
    west, south, east, north = box
    found = []
    for polygon in world_land() if land is None else land:
        outer = polygon[0]
        low, high = outer[:, 0].min(), outer[:, 0].max()
        if outer[:, 1].max() < south or outer[:, 1].min() > north:
            continue
        first, last = np.ceil((west - high) / _TURN), np.floor((east - low) / _TURN)
        moves = [np.array([turn * _TURN, 0.0]) for turn in np.arange(first, last + 1)]
        found += [tuple(ring + move for ring in polygon) for move in moves]
    return found


def coastline(box: Box, land: Iterable[Polygon] | None = None) -> list[Ring]:
    """Shores inside a box, as lines to draw.

    Parameters
    ----------
    box : tuple of float
        West, south, east, north; longitudes in any turn. [deg]
    land : iterable of polygon, optional
        Land whose rings are the shores; the shipped land by default.

    Returns
    -------
    list of ndarray, each of shape (n, 2)
        Runs of (longitude, latitude) made of the segments that touch the box; a run may stick out of it
        by its first and last segment. [deg]

    Examples
    --------
    >>> lines = coastline((12.0, 36.5, 15.7, 38.4))   # Sicily
    >>> all(line.shape[1] == 2 for line in lines) and len(lines) > 0
    True
    >>> coastline((24.0, 22.0, 26.0, 24.0))           # inside the Sahara
    []
    """
    west, south, east, north = box
    lines: list[Ring] = []
    for polygon in land_in(box, land):
        for ring in polygon:
            low, high = np.minimum(ring[:-1], ring[1:]), np.maximum(ring[:-1], ring[1:])
            touches = np.all((high >= [west, south]) & (low <= [east, north]), axis=1)
            touches &= low[:, 1] > -90.0  # the closing lines over the pole are no shore
            edges = np.flatnonzero(np.diff(np.concatenate([[0], touches.astype(np.int8), [0]])))
            lines += [ring[start:stop + 1] for start, stop in edges.reshape(-1, 2)]
    return lines
