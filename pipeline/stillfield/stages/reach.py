"""Reach: which cell or site stands for each place, before a run and after it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.nearest import NearestCells, cell_centres, nearest_cells
from stillfield.errors import PlacesError

Array = NDArray[np.floating[Any]]

#: Cells near a place whose daily litres are kept, because the nearest may turn out to have no weather.
NEAR_CELLS = 4
#: Most daily litres that are kept for places; beyond it only those of the nearest cells are. [values]
MOST_FOLLOWED = 60_000_000


def positions_of(weather: xr.Dataset) -> tuple[Array, Array]:
    """Latitude and longitude of every cell or site, in the order in which cells are counted.

    Parameters
    ----------
    weather : xarray.Dataset
        With dimensions latitude and longitude, or site.

    Returns
    -------
    latitude, longitude : ndarray, shape (cell,)
        [deg]
    """
    latitude, longitude = (weather[name].to_numpy().astype(np.float64) for name in ("latitude", "longitude"))
    return (latitude, longitude) if "site" in weather.dims else cell_centres(latitude, longitude)


def cells_to_follow(
    places: pd.DataFrame, weather: xr.Dataset, inside: NDArray[np.bool_], *, values_per_cell: int
) -> list[int]:
    """Cells whose daily litres the places will need.

    Parameters
    ----------
    places : pandas.DataFrame
        With ``latitude`` and ``longitude``. [deg]
    weather : xarray.Dataset
        With the cells.
    inside : ndarray of bool, shape (cell,)
        Cells of the region.
    values_per_cell : int
        Daily litres of a cell, all stills together.

    Returns
    -------
    list of int
        The nearest few of every place while they are few enough, then the nearest only, then none.
    """
    latitude, longitude = positions_of(weather)
    usable = inside.copy()
    found: list[set[int]] = []
    for _ in range(min(NEAR_CELLS, int(usable.sum()))):
        near = nearest_cells(places["latitude"], places["longitude"], latitude, longitude, usable)
        found.append({int(cell) for cell in near.cell if cell >= 0})
        usable[list(found[-1])] = False
        if not usable.any():
            break
    for count in (len(found), 1):
        cells = set().union(*found[:count])
        if len(cells) * values_per_cell <= MOST_FOLLOWED:
            return sorted(cells)
    return []


def reach_places(places: pd.DataFrame, monthly: xr.Dataset, *, max_cell_distance_km: float) -> NearestCells:
    """Give every place the nearest cell that knows its every month.

    Parameters
    ----------
    places : pandas.DataFrame
        With ``latitude``, ``longitude`` [deg] and perhaps ``elevation_m``.
    monthly : xarray.Dataset
        As `aggregate` gives it.
    max_cell_distance_km : float
        A place farther than this from every valid cell gets no litres. [km]

    Returns
    -------
    NearestCells

    Raises
    ------
    PlacesError
        If no cell knows its every month.
    """
    latitude, longitude = positions_of(monthly)
    space = [dim for dim in ("latitude", "longitude", "site") if dim in monthly.dims]
    valid = monthly["worst_month"].transpose(*space).notnull().to_numpy().ravel()
    if not valid.any():
        raise PlacesError(
            "no cell has litres for all twelve months, so no place can be sized on its worst month", where="weather",
            cure="Give weather for every month of a year, lower missing.min_valid_days_share, or leave places out.",
        )
    heights = None
    if "elevation" in monthly.coords and set(monthly["elevation"].dims) == set(space) and "elevation_m" in places:
        heights = monthly["elevation"].transpose(*space).to_numpy().ravel()
    return nearest_cells(
        places["latitude"], places["longitude"], latitude, longitude, valid, max_distance_km=max_cell_distance_km,
        height_m=None if heights is None else places["elevation_m"], cell_height_m=heights,
    )


def daily_of_places(reach: NearestCells, followed: dict[int, Array], still: int) -> Array | None:
    """Daily litres of the cell of every place.

    Parameters
    ----------
    reach : NearestCells
        Cells of the places.
    followed : dict
        Number of a cell to its daily litres, shape (still, day). [L m-2]
    still : int
        Number of the still.

    Returns
    -------
    ndarray, shape (day, place), or None
        NaN for a place whose cell was not followed; None where none was.
    """
    if not followed:
        return None
    days = next(iter(followed.values())).shape[1]
    none = np.full(days, np.nan, np.float32)
    columns = [followed[int(cell)][still] if reached and int(cell) in followed else none
               for cell, reached in zip(reach.cell, reach.reached, strict=True)]
    return np.stack(columns, axis=1)
