"""Two runs beside each other: which places are the same ones, and how far the second's figures lie from the first's."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]

#: Positions this near are the same: tables carry five decimals, about a metre; a corrected coordinate is no new place.
SAME_POSITION_DEG = 1e-3


@dataclass(frozen=True)
class PlaceList:
    """Who the places of a run are.

    Attributes
    ----------
    ids, names : sequence of str
        One of each per place; ids differ from each other.
    latitude, longitude : ndarray, shape (place,)
        [deg north], [deg east]
    """

    ids: Sequence[str]
    names: Sequence[str]
    latitude: Array
    longitude: Array


@dataclass(frozen=True)
class Pairs:
    """Places of two runs that are the same.

    Attributes
    ----------
    a, b : ndarray of int, shape (pair,)
        Rows in the one and the other list.
    only_a, only_b : ndarray of int
        Rows without a partner.
    by_position : int
        Pairs with different ids, known by name and position.
    other_place : tuple of str
        Ids that stand in both lists for places that differ in name and position.
    moved : tuple of str
        Ids of pairs whose position differs.
    """

    a: NDArray[np.int64]
    b: NDArray[np.int64]
    only_a: NDArray[np.int64]
    only_b: NDArray[np.int64]
    by_position: int
    other_place: tuple[str, ...]
    moved: tuple[str, ...]


def pair_places(a: PlaceList, b: PlaceList) -> Pairs:
    """Find the places that stand in both lists.

    An id decides, unless name and position both speak against it: a table without ids has its places numbered, and
    then a village more shifts the numbers. What is left is paired where name and position agree.

    Parameters
    ----------
    a, b : PlaceList
        In any order.

    Returns
    -------
    Pairs
        In the order of `a`.

    Examples
    --------
    >>> here, there = np.array([1.0, 2.0]), np.array([5.0, 6.0])
    >>> a = PlaceList(["1", "2"], ["Ash", "Oak"], here, there)
    >>> b = PlaceList(["1", "2"], ["Elm", "Ash"], here[::-1], there[::-1])
    >>> found = pair_places(a, b)
    >>> found.a.tolist(), found.b.tolist(), found.only_a.tolist(), found.only_b.tolist(), found.other_place
    ([0], [1], [1], [0], ('1', '2'))
    """
    spot_b = {identity: row for row, identity in enumerate(b.ids)}
    near = {
        row: spot_b[identity] for row, identity in enumerate(a.ids)
        if identity in spot_b and (a.names[row] == b.names[spot_b[identity]] or _same_spot(a, row, b, spot_b[identity]))
    }
    other = tuple(identity for row, identity in enumerate(a.ids) if identity in spot_b and row not in near)
    free: dict[str, list[int]] = {}
    taken = set(near.values())
    for row, name in enumerate(b.names):
        if row not in taken:
            free.setdefault(name, []).append(row)
    by_position = 0
    for row, name in enumerate(a.names):
        fits = [] if row in near else [one for one in free.get(name, []) if _same_spot(a, row, b, one)]
        if fits:
            near[row] = fits[0]
            free[name].remove(fits[0])
            by_position += 1
    rows_a = np.array(sorted(near), dtype=np.int64)
    rows_b = np.array([near[int(row)] for row in rows_a], dtype=np.int64)
    return Pairs(
        rows_a, rows_b, np.setdiff1d(np.arange(len(a.ids)), rows_a), np.setdiff1d(np.arange(len(b.ids)), rows_b),
        by_position, other, tuple(a.ids[row] for row in rows_a if not _same_spot(a, row, b, near[int(row)])),
    )


def _same_spot(a: PlaceList, row_a: int, b: PlaceList, row_b: int) -> bool:
    east = (a.longitude[row_a] - b.longitude[row_b] + 180.0) % 360.0 - 180.0
    return bool(abs(a.latitude[row_a] - b.latitude[row_b]) <= SAME_POSITION_DEG and abs(east) <= SAME_POSITION_DEG)


def change_percent(a: Array, b: Array) -> NDArray[np.float64]:
    """How much more `b` is than `a`, in per cent of `a`.

    Parameters
    ----------
    a, b : ndarray, any one shape
        Figures of the same kind, 0 or more.

    Returns
    -------
    ndarray of float
        [%]; NaN where either is unknown or `a` is 0.

    Examples
    --------
    >>> change_percent(np.array([2.0, 0.0, 4.0]), np.array([3.0, 1.0, 3.0]))
    array([ 50.,  nan, -25.])
    """
    first, second = np.asarray(a, dtype=np.float64), np.asarray(b, dtype=np.float64)
    known = np.isfinite(first) & np.isfinite(second) & (first > 0.0)
    return np.where(known, 100.0 * (second / np.where(known, first, 1.0) - 1.0), np.nan)


@dataclass(frozen=True)
class Change:
    """How far a figure of the second run lies from that of the first, over places or cells that have it in both.

    Attributes
    ----------
    count : int
        Places or cells behind the figures.
    median_a, median_b : float
        Medians over them, in the unit of the figure.
    percent, percent_low, percent_high : float
        Median, least and greatest of the changes of the single places. [%]
    largest : int
        Number of the place or cell that changes most, in per cent.
    """

    count: int
    median_a: float
    median_b: float
    percent: float
    percent_low: float
    percent_high: float
    largest: int


def change_over(a: Array, b: Array) -> Change | None:
    """Sum up the changes over places or cells.

    The median of the changes is not the change of the medians.

    Parameters
    ----------
    a, b : ndarray, shape (place,)
        Figures of the same kind.

    Returns
    -------
    Change or None
        None where no place has a change.

    Examples
    --------
    >>> change = change_over(np.array([1.0, 2.0, 4.0]), np.array([2.0, 2.0, 3.0]))
    >>> change.count, change.percent, change.percent_low, change.percent_high, change.largest
    (3, 0.0, -25.0, 100.0, 0)
    """
    percent = change_percent(a, b)
    known = np.flatnonzero(np.isfinite(percent))
    if not known.size:
        return None
    there = percent[known]
    return Change(
        int(known.size), float(np.median(np.asarray(a)[known])), float(np.median(np.asarray(b)[known])),
        float(np.median(there)), float(there.min()), float(there.max()), int(known[np.argmax(np.abs(there))]),
    )


def rank_among(rank: Array) -> NDArray[np.float64]:
    """Ranks of some of the places among themselves; ties stay ties.

    Parameters
    ----------
    rank : ndarray, shape (place,)
        Ranks in a longer list; NaN without one.

    Returns
    -------
    ndarray of float, shape (place,)
        1 is best.

    Examples
    --------
    >>> rank_among(np.array([7.0, 2.0, np.nan, 7.0]))
    array([ 2.,  1., nan,  2.])
    """
    values = np.asarray(rank, dtype=np.float64)
    known = np.isfinite(values)
    better = (values[None, known] < values[known, None]).sum(axis=1)
    among = np.full(values.shape, np.nan)
    among[known] = better + 1.0
    return among
