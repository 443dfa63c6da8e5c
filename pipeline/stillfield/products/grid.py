"""Where the cells of a grid lie: edges from centres, spacing, and the north-up order of rasters."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import OutputError

GRID_DIMS = ("latitude", "longitude")
#: A centre may lie this share of a cell off the even spacing: centres printed with few decimals pass.
_UNEVEN_SHARE = 0.02


@dataclass(frozen=True)
class Edges:
    """Edges of a latitude-longitude grid, in the order of its centres.

    Attributes
    ----------
    latitude : ndarray, shape (n_latitude + 1,)
        [deg north]
    longitude : ndarray, shape (n_longitude + 1,)
        Continuous across the antimeridian. [deg east]
    """

    latitude: NDArray[np.float64]
    longitude: NDArray[np.float64]

    @property
    def box(self) -> tuple[float, float, float, float]:
        """West, south, east and north of the outer edges [deg]."""
        return (float(self.longitude.min()), float(self.latitude.min()),
                float(self.longitude.max()), float(self.latitude.max()))


def is_grid(data: xr.Dataset | xr.DataArray) -> bool:
    """Tell a grid from a list of sites.

    Examples
    --------
    >>> is_grid(xr.Dataset(coords={"latitude": [1.0], "longitude": [2.0]}))
    True
    """
    return all(name in data.dims for name in GRID_DIMS)


def cell_edges(data: xr.Dataset | xr.DataArray) -> Edges:
    """Edges of the cells, half way between neighbouring centres.

    An axis with a single centre takes the spacing of the other axis, or the attribute ``resolution_deg`` of
    its coordinate or of `data` where both have one centre.

    Parameters
    ----------
    data : Dataset or DataArray
        With coordinates latitude and longitude of one dimension each. [deg]

    Returns
    -------
    Edges
        Latitudes are cut at the poles.

    Raises
    ------
    OutputError
        When an axis is missing, does not run one way, or has an unknown spacing.

    Examples
    --------
    >>> grid = xr.Dataset(coords={"latitude": [10.0, 9.5], "longitude": [40.0, 40.5, 41.0]})
    >>> edges = cell_edges(grid)
    >>> edges.latitude.tolist(), edges.longitude.tolist()
    ([10.25, 9.75, 9.25], [39.75, 40.25, 40.75, 41.25])
    """
    latitude, longitude = _centres(data, "latitude"), _centres(data, "longitude")
    longitude = np.unwrap(longitude, period=360.0)
    spacing = {name: _stated_spacing(data, name) for name in GRID_DIMS}
    for name, other in (("latitude", longitude), ("longitude", latitude)):
        if spacing[name] is None and other.size > 1:
            spacing[name] = float(abs(other[-1] - other[0]) / (other.size - 1))
    return Edges(
        np.clip(_midpoints(latitude, spacing["latitude"], "latitude"), -90.0, 90.0),
        _midpoints(longitude, spacing["longitude"], "longitude"),
    )


def _centres(data: xr.Dataset | xr.DataArray, name: str) -> NDArray[np.float64]:
    if name not in data.coords or data[name].dims != (name,) or data[name].size == 0:
        raise OutputError("no latitude-longitude grid", where=name, wanted=f"a coordinate {name}({name})",
                          cure="Bring a curvilinear or rotated grid to latitude and longitude first.")
    return np.asarray(data[name].values, dtype=np.float64)


def _stated_spacing(data: xr.Dataset | xr.DataArray, name: str) -> float | None:
    stated: Any = data[name].attrs.get("resolution_deg", data.attrs.get("resolution_deg"))
    return None if stated is None else float(stated)


def _midpoints(centres: NDArray[np.float64], spacing: float | None, name: str) -> NDArray[np.float64]:
    if centres.size == 1:
        if spacing is None or not spacing > 0.0:
            raise OutputError("a single cell of unknown size", where=name,
                              cure="State its size as attribute resolution_deg.")
        return np.array([centres[0] - spacing / 2, centres[0] + spacing / 2])
    steps = np.diff(centres)
    if not (np.all(steps > 0.0) or np.all(steps < 0.0)):
        raise OutputError("cell centres do not run one way", where=name, wanted="all rising or all falling")
    middles = (centres[:-1] + centres[1:]) / 2
    return np.concatenate([[centres[0] - steps[0] / 2], middles, [centres[-1] + steps[-1] / 2]])


@dataclass(frozen=True)
class NorthUp:
    """Place of a north-up raster.

    Attributes
    ----------
    west, north : float
        Outer corner of the first cell. [deg]
    width_deg, height_deg : float
        Size of a cell, both positive. [deg]
    order : dict of str to ndarray of int
        Positions that bring a grid to north-up, west-to-east order, for ``isel``.
    """

    west: float
    north: float
    width_deg: float
    height_deg: float
    order: dict[str, NDArray[np.intp]]


def north_up(data: xr.Dataset | xr.DataArray) -> NorthUp:
    """Corner, cell size and order of an evenly spaced grid.

    Parameters
    ----------
    data : Dataset or DataArray
        On a latitude-longitude grid, either way round. [deg]

    Returns
    -------
    NorthUp
        West is brought to -180 to 180; a grid across the antimeridian runs on beyond 180.

    Raises
    ------
    OutputError
        When the spacing is uneven, or the grid goes round the Earth more than once.

    Examples
    --------
    >>> place = north_up(xr.Dataset(coords={"latitude": [9.5, 10.0], "longitude": [220.0, 220.5]}))
    >>> place.west, place.north, place.height_deg
    (-140.25, 10.25, 0.5)
    """
    cell_edges(data)  # refuses what is no one-way grid
    latitude = _centres(data, "latitude")
    longitude = np.unwrap(_centres(data, "longitude"), period=360.0)
    steps = {"latitude": _even_step(latitude, "latitude"), "longitude": _even_step(longitude, "longitude")}
    for name, other in (("latitude", "longitude"), ("longitude", "latitude")):
        if steps[name] is None:
            steps[name] = _stated_spacing(data, name) or steps[other]
    height, width = float(steps["latitude"] or 0.0), float(steps["longitude"] or 0.0)
    excess = longitude.size * width - 360.0
    if excess > 0.5 * width:
        raise OutputError("the grid goes round the Earth more than once", where="longitude",
                          got=f"{longitude.size} cells of {width:g} deg", cure="Drop the repeated column.")
    if excess > -0.5 * width:  # a whole turn is cut at the antimeridian, wherever the file cuts it
        longitude = (longitude + 180.0) % 360.0 - 180.0
    first = float(longitude.min())
    west = first - 360.0 * np.floor((first + 180.0) / 360.0) - width / 2
    order = {"latitude": np.argsort(-latitude), "longitude": np.argsort(longitude)}
    return NorthUp(float(west), float(latitude.max()) + height / 2, width, height, order)


def is_even(data: xr.Dataset | xr.DataArray) -> bool:
    """Whether a grid makes a raster: evenly spaced rows and columns.

    Examples
    --------
    >>> is_even(xr.Dataset(coords={"latitude": [9.5, 10.0, 10.9], "longitude": [20.0, 20.5]}))
    False
    """
    try:
        north_up(data)
    except OutputError:
        return False
    return True


def _even_step(centres: NDArray[np.float64], name: str) -> float | None:
    if centres.size == 1:
        return None
    step = (centres[-1] - centres[0]) / (centres.size - 1)
    off = np.abs(centres - np.linspace(centres[0], centres[-1], centres.size)).max()
    if off > _UNEVEN_SHARE * abs(step):
        raise OutputError(
            "uneven spacing cannot be written as a raster", where=name,
            got=f"steps from {np.abs(np.diff(centres)).min():.4g} to {np.abs(np.diff(centres)).max():.4g} deg",
            cure="Take the NetCDF file, which keeps the true cells, or bring the weather to an even grid.")
    return float(abs(step))
