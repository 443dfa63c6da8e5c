"""Geometry of places: points as they are, everything else by its centre."""

from __future__ import annotations

from typing import Any

from stillfield.sources.places.raw_table import Point

#: Wider than this, a shape lies across the antimeridian or is no village.
_WIDEST_DEG = 90.0


def point_of(shape: Any) -> tuple[Point | None, str]:
    """Position of a geometry.

    Parameters
    ----------
    shape : shapely geometry or None
        In degrees, longitude first.

    Returns
    -------
    point : (longitude, latitude) or None
    kind : str
        Kind of geometry where the centre was taken, else nothing.

    Raises
    ------
    ValueError
        With the rest of a sentence that begins with 'geometry'.
    """
    if shape is None or shape.is_empty:
        return None, ""
    west, south, east, north = shape.bounds
    if max(map(abs, (west, south, east, north))) > 1e9 or not (west <= east and south <= north):
        raise ValueError("has impossible coordinates")
    if shape.geom_type == "Point":
        return (shape.x, shape.y), ""
    if max(map(abs, shape.bounds)) <= 360.0 and east - west > _WIDEST_DEG:
        raise ValueError("spans more than 90 degrees; give the place as a point")
    centre = shape.centroid
    single = shape.geom_type == "MultiPoint" and len(shape.geoms) == 1
    return (centre.x, centre.y), "" if single else str(shape.geom_type)


def remark_on_kinds(kinds: dict[str, int]) -> list[str]:
    """Say of how many places the centre was taken."""
    return [f"{count} place{'s are' if count > 1 else ' is'} given as {kind}; the centre is taken."
            for kind, count in sorted(kinds.items())]
