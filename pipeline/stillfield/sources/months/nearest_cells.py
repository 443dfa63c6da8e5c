"""One quantity brought to the cells of another: the nearest cell that has values, within a stated distance."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from stillfield.errors import WeatherError
from stillfield.sources.grids.grid_axes import snapped

_EARTH_RADIUS_KM = 6371.0


@dataclass(frozen=True)
class _Layer:
    """Variables that lie on one and the same set of cells."""

    names: list[str]
    points: NDArray[Any]
    valid: NDArray[np.bool_]


def on_cells_of(
    first: str, weather: Mapping[str, xr.DataArray], *, within_km: float | None, where: str
) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Bring all variables to the cells of one of them.

    Variables on other cells take the values of the nearest cell at which every variable of their own grid has
    all its values, by great-circle distance. There is no interpolation, so coasts keep the values of the sea or
    of the land they were given.

    Parameters
    ----------
    first : str
        Variable whose cells are kept.
    weather : mapping of str to DataArray
        Dims time and latitude, longitude or site; in memory.
    within_km : float or None
        Farthest a cell may be taken from; None to refuse grids that differ. [km]
    where : str
        Files, for errors.

    Returns
    -------
    weather : dict of str to DataArray
    notes : list of str
        What was taken from how far.

    Raises
    ------
    WeatherError
        If grids differ and no distance is stated.
    """
    target = weather[first]
    result, layers = {first: target}, dict[bytes, _Layer]()
    for name, values in weather.items():
        if name == first:
            continue
        laid = snapped(values, target) if set(values.dims) == set(target.dims) else values
        if set(laid.dims) == set(target.dims) and _same_space(laid, target):
            result[name] = laid.transpose(*target.dims)
            continue
        if within_km is None:
            raise WeatherError(
                f"{name} and the sunshine lie on different cells", where=where, got=_told(values), wanted=_told(target),
                cure="State how far a value may come from: weather.join_within_km, for example 150.",
            )
        points, valid = _points(values), _valid(values)
        layer = layers.setdefault(points.tobytes(), _Layer([], points, np.ones(len(points), dtype=bool)))
        layer.names.append(name)
        layer.valid[:] &= valid
    notes = []
    for layer in layers.values():
        taken, said = _taken(layer, weather, target, within_km=float(within_km or 0.0))
        result |= taken
        notes.append(said)
    return {name: result[name] for name in weather}, notes


def _space(values: xr.DataArray) -> list[str]:
    return [str(dim) for dim in values.dims if dim != "time"]


def _same_space(one: xr.DataArray, other: xr.DataArray) -> bool:
    return all(one.indexes[dim].equals(other.indexes[dim]) for dim in _space(other))


def _told(values: xr.DataArray) -> str:
    return " by ".join(f"{values.sizes[dim]} values of {dim}" for dim in _space(values))


def _points(values: xr.DataArray) -> NDArray[Any]:
    """Unit vectors to the cells, shape (cell, 3)."""
    latitude, longitude = values["latitude"], values["longitude"]
    if "site" not in values.dims:
        latitude, longitude = xr.broadcast(latitude, longitude)
    phi, lam = np.radians(latitude.values.ravel()), np.radians(longitude.values.ravel())
    return np.stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)], axis=1)


def _ordered(values: xr.DataArray) -> NDArray[Any]:
    """Values as (time, cell), cells in the order of `_points`."""
    dims = ("time", "site") if "site" in values.dims else ("time", "latitude", "longitude")
    return values.transpose(*dims).values.reshape(values.sizes["time"], -1)


def _valid(values: xr.DataArray) -> NDArray[np.bool_]:
    return np.asarray(np.isfinite(_ordered(values)).all(axis=0))


def _taken(
    layer: _Layer, weather: Mapping[str, xr.DataArray], target: xr.DataArray, *, within_km: float
) -> tuple[dict[str, xr.DataArray], str]:
    wanted = np.isfinite(_ordered(target)).any(axis=0)
    numbers = np.flatnonzero(layer.valid)
    source = np.zeros(wanted.size, dtype=np.intp)
    distance = np.full(wanted.size, np.inf)
    if numbers.size and wanted.any():
        chord, near = cKDTree(layer.points[numbers]).query(_points(target)[wanted])
        distance[wanted] = 2.0 * _EARTH_RADIUS_KM * np.arcsin(np.clip(0.5 * chord, 0.0, 1.0))
        source[wanted] = numbers[near]
    found = distance <= within_km
    dims = ("site",) if "site" in target.dims else ("latitude", "longitude")
    shape = [target.sizes[dim] for dim in dims]
    space = {name: coord for name, coord in target.coords.items() if "time" not in coord.dims}
    result = {}
    for name in layer.names:
        laid = np.where(found, _ordered(weather[name])[:, source], np.nan)
        array = xr.DataArray(laid.reshape(-1, *shape), dims=("time", *dims),
                             coords={**space, "time": weather[name]["time"]})
        result[name] = array.transpose(*target.dims)
    lacking = int(wanted.sum() - found.sum())
    far = distance[found] if found.any() else np.zeros(1)
    return result, (
        f"{', '.join(layer.names)}: on other cells than the sunshine; {int(found.sum())} cells take the nearest one "
        f"that has values within {within_km:g} km ({far.mean():.0f} km away on average, {far.max():.0f} km at most); "
        f"{lacking} cells have none so near and stay missing."
    )
