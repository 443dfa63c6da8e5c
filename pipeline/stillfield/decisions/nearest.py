"""Which weather cell a place takes: the nearest valid one on the globe, how far and how much higher it lies.

Plain arrays, so that places can be given their cells before anything is computed as well as after it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import PlacesError

EARTH_RADIUS_KM = 6371.0088  # mean radius, IUGG 1980

#: Fall of temperature with height in the lowest 11 km [K km-1]: ICAO Standard Atmosphere, ISO 2533:1975, table 4.
STANDARD_LAPSE_K_PER_KM = 6.5

#: Cells that are compared exactly where several are about equally near.
_NEIGHBOURS = 9
#: Distances that differ by less are equal: a millimetre.
_EQUAL_KM = 1e-6

Array = NDArray[np.float64]


@dataclass(frozen=True)
class NearestCells:
    """Cells of places; every array has one entry per place.

    Attributes
    ----------
    cell : ndarray of int
        Index of the nearest valid cell; -1 where no cell is valid.
    distance_km : ndarray
        Great-circle distance to its centre; inf where no cell is valid. [km]
    reached : ndarray of bool
        Whether that is near enough.
    substituted : ndarray of bool
        Whether a nearer cell exists but is not valid, so that another one stands in for it.
    closest_cell : ndarray of int
        Index of the nearest cell, valid or not.
    closest_distance_km : ndarray
        Distance to the nearest cell, valid or not. [km]
    height_difference_m : ndarray
        Place minus cell; NaN where either is not known. [m]
    """

    cell: NDArray[np.int64]
    distance_km: Array
    reached: NDArray[np.bool_]
    substituted: NDArray[np.bool_]
    closest_cell: NDArray[np.int64]
    closest_distance_km: Array
    height_difference_m: Array


def great_circle_km(
    latitude_a: ArrayLike, longitude_a: ArrayLike, latitude_b: ArrayLike, longitude_b: ArrayLike
) -> Array:
    """Great-circle distance by the haversine formula on a sphere of the mean radius.

    Parameters
    ----------
    latitude_a, longitude_a, latitude_b, longitude_b : array_like
        Broadcast against each other. [deg]

    Returns
    -------
    ndarray
        [km]

    Examples
    --------
    A quarter of the equator:

    >>> round(float(great_circle_km(0.0, 0.0, 0.0, 90.0)), 1)
    10007.6
    """
    lat_a, lon_a, lat_b, lon_b = (
        np.radians(np.asarray(x, dtype=float)) for x in (latitude_a, longitude_a, latitude_b, longitude_b)
    )
    half_chord = (
        np.sin((lat_b - lat_a) / 2) ** 2 + np.cos(lat_a) * np.cos(lat_b) * np.sin((lon_b - lon_a) / 2) ** 2
    )
    return np.asarray(2.0 * EARTH_RADIUS_KM * np.arcsin(np.sqrt(np.minimum(half_chord, 1.0))))


def nearest_cells(
    latitude: ArrayLike,
    longitude: ArrayLike,
    cell_latitude: ArrayLike,
    cell_longitude: ArrayLike,
    valid: ArrayLike,
    *,
    max_distance_km: float = np.inf,
    height_m: ArrayLike | None = None,
    cell_height_m: ArrayLike | None = None,
) -> NearestCells:
    """Give every place the nearest valid cell.

    The search runs in chords on the unit sphere (a k-d tree), so poles and antimeridian are no edges. Cells that are
    equally near are told apart by their position, whatever their order: the lesser latitude is taken, then the lesser
    longitude counted from -180.

    Parameters
    ----------
    latitude, longitude : array_like, shape (place,)
        Any turn of longitude will do. [deg]
    cell_latitude, cell_longitude : array_like, shape (cell,)
        Centres of the cells or sites; a grid is laid out by `cell_centres`. [deg]
    valid : array_like of bool, shape (cell,)
        Which cells have weather.
    max_distance_km : float
        A cell farther than this does not reach the place. [km]
    height_m : array_like, shape (place,), optional
        Height of the places, NaN where it is not known. [m]
    cell_height_m : array_like, shape (cell,), optional
        Height of the cells. [m]

    Returns
    -------
    NearestCells

    Raises
    ------
    PlacesError
        If there is no cell at all, or a position is not finite.

    Examples
    --------
    The cell at 41 E is sea; the one at 40 E stands in for it:

    >>> found = nearest_cells([10.0], [40.8], [10.0, 10.0], [40.0, 41.0], [True, False])
    >>> found.cell.tolist(), found.substituted.tolist(), found.distance_km.round(1).tolist()
    ([0], [True], [87.6])
    """
    places = _positions(latitude, longitude, what="place")
    cells = _positions(cell_latitude, cell_longitude, what="cell")
    usable = np.asarray(valid, dtype=bool).ravel()
    if not cells.shape[1]:
        raise PlacesError("there is no cell that a place could take", where="weather")
    if usable.size != cells.shape[1]:
        raise ValueError(f"{usable.size} flags for {cells.shape[1]} cells")
    closest, closest_km = _search(places, cells, np.arange(usable.size))
    if usable.all():
        cell, distance = closest, closest_km
    elif usable.any():
        cell, distance = _search(places, cells, np.flatnonzero(usable))
    else:
        cell, distance = np.full(closest.shape, -1, dtype=np.int64), np.full(closest.shape, np.inf)
    reached = (cell >= 0) & (distance <= max_distance_km)
    difference = np.full(cell.shape, np.nan)
    if height_m is not None and cell_height_m is not None:
        cell_height = np.asarray(cell_height_m, dtype=float).ravel()
        difference = np.where(cell >= 0, np.asarray(height_m, dtype=float).ravel() - cell_height[cell], np.nan)
    substituted = (cell >= 0) & (distance > closest_km + _EQUAL_KM)
    return NearestCells(cell, distance, reached, substituted, closest, closest_km, difference)


def _positions(latitude: ArrayLike, longitude: ArrayLike, *, what: str) -> Array:
    """Latitude and longitude in two rows [deg]."""
    both = np.stack([np.asarray(latitude, dtype=float).ravel(), np.asarray(longitude, dtype=float).ravel()])
    bad = ~np.isfinite(both).all(axis=0)
    if bad.any():
        raise PlacesError(f"a {what} has no position", where=f"{what} {int(np.flatnonzero(bad)[0]) + 1}",
                          got=f"{both[0, bad][0]:g}, {both[1, bad][0]:g}")
    return both


def _on_sphere(positions: Array) -> Array:
    latitude, longitude = np.radians(positions)
    return np.column_stack(
        [np.cos(latitude) * np.cos(longitude), np.cos(latitude) * np.sin(longitude), np.sin(latitude)]
    )


def _search(places: Array, cells: Array, among: NDArray[np.intp]) -> tuple[NDArray[np.int64], Array]:
    """Nearest of some cells and the distance to it [km]."""
    from scipy.spatial import cKDTree

    if not places.shape[1]:
        return np.empty(0, dtype=np.int64), np.empty(0)
    some = cells[:, among]
    # Lesser latitudes first, then lesser longitudes: the order in which ties are settled.
    order = np.lexsort((np.mod(some[1] + 180.0, 360.0), some[0]))
    tree = cKDTree(_on_sphere(some[:, order]))
    _, found = tree.query(_on_sphere(places), k=min(_NEIGHBOURS, order.size))
    near = order[np.asarray(found, dtype=np.int64).reshape(places.shape[1], -1)]
    distance = great_circle_km(
        places[0][:, None], places[1][:, None], some[0][near], some[1][near]
    )
    rank = np.empty(order.size, dtype=np.int64)
    rank[order] = np.arange(order.size)
    tied = distance <= distance.min(axis=1, keepdims=True) + _EQUAL_KM
    best = np.where(tied, rank[near], order.size).argmin(axis=1)
    rows = np.arange(places.shape[1])
    return among[near[rows, best]].astype(np.int64), distance[rows, best]


def cell_centres(latitude: ArrayLike, longitude: ArrayLike) -> tuple[Array, Array]:
    """Lay out a grid as a list of cells, longitude running fastest.

    Parameters
    ----------
    latitude : array_like, shape (latitude,)
        [deg]
    longitude : array_like, shape (longitude,)
        [deg]

    Returns
    -------
    latitude, longitude : ndarray, shape (latitude * longitude,)
        [deg]

    Examples
    --------
    >>> [axis.tolist() for axis in cell_centres([10.0, 11.0], [40.0, 41.0])]
    [[10.0, 10.0, 11.0, 11.0], [40.0, 41.0, 40.0, 41.0]]
    """
    north, east = np.meshgrid(np.asarray(latitude, dtype=float), np.asarray(longitude, dtype=float), indexing="ij")
    return north.ravel(), east.ravel()


def height_correction(height_difference_m: ArrayLike, *, lapse_k_per_km: float = 0.0) -> Array:
    """Warmth of the place against its cell because it lies higher or lower.

    Off unless a lapse is given; `STANDARD_LAPSE_K_PER_KM` is that of the standard atmosphere. Real lapses run from 3
    (moist air) to 10 K/km (dry air), and the other way round in a cold-air pool (common knowledge, no source).

    Parameters
    ----------
    height_difference_m : array_like
        Place minus cell; NaN where it is not known. [m]
    lapse_k_per_km : float
        Fall of temperature with height. [K km-1]

    Returns
    -------
    ndarray, shape of the height difference
        What is to be added to the cell's air temperature; 0 where the difference is not known. [K]

    Examples
    --------
    >>> height_correction([200.0, -200.0, float("nan")], lapse_k_per_km=STANDARD_LAPSE_K_PER_KM).tolist()
    [-1.3, 1.3, 0.0]
    """
    difference = np.nan_to_num(np.asarray(height_difference_m, dtype=float), nan=0.0)
    return np.asarray(-lapse_k_per_km * difference / 1000.0 + 0.0)
