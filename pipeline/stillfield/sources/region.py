"""The part of the weather a run is about: a box, polygons, and a mask of land; the rest is cut or missing."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.grids.grid_axes import clean_degrees, find_axes, latitude_order, longitude_order
from stillfield.sources.tally import COUNTS
from stillfield.sources.units import canonical

_TURN = 360.0


@dataclass(frozen=True)
class Box:
    """A region on the map, edges in degrees; `west` > `east` crosses the antimeridian."""

    south: float
    north: float
    west: float
    east: float


@dataclass(frozen=True)
class Mask:
    """Share of land in each cell, from a NetCDF file.

    Attributes
    ----------
    file : Path
        The file.
    variable : str or None
        Its variable; None where it holds only one on latitude and longitude.
    at_least : float
        A cell with a smaller share of land is missing. [1]
    """

    file: Path
    variable: str | None = None
    at_least: float = 0.5


@dataclass(frozen=True)
class Region:
    """What to keep: cells and sites whose centre lies in the box and the polygons, and on land by the mask.

    Attributes
    ----------
    box : Box or None
        Cells outside are cut off.
    polygon : Path or None
        GeoJSON file; cells outside are cut off or missing.
    mask : Mask or None
        Cells at sea are missing.
    """

    box: Box | None = None
    polygon: Path | None = None
    mask: Mask | None = None


def keep_region(weather: xr.Dataset, region: Region) -> xr.Dataset:
    """Cut weather to a region; lazy weather stays lazy.

    A box or polygon across the antimeridian gives columns side by side, with longitudes that run on beyond 180.

    Parameters
    ----------
    weather : Dataset
        As described in `stillfield.sources.Source`.
    region : Region
        What to keep.

    Returns
    -------
    Dataset
        With sentences on what was left out among its ``conventions``.

    Raises
    ------
    WeatherError
        If no cell is left, or polygon or mask cannot be used.
    """
    notes: list[str] = []
    if region.box is not None:
        weather = _in_box(weather, region.box)
    if region.polygon is not None:
        weather, said = _in_polygon(weather, region.polygon)
        notes.append(said)
    if region.mask is not None:
        weather, said = _on_land(weather, region.mask)
        notes.append(said)
    return weather.assign_attrs(conventions=[*weather.attrs.get("conventions", []), *notes])


def _in_box(weather: xr.Dataset, box: Box) -> xr.Dataset:
    latitude, longitude = weather["latitude"].values, weather["longitude"].values
    width = (box.east - box.west) % _TURN or _TURN
    from_west = clean_degrees(longitude - box.west) % _TURN
    inside_lat, inside_lon = (latitude >= box.south) & (latitude <= box.north), from_west <= width
    if "site" in weather.dims:
        cut = weather.isel(site=np.flatnonzero(inside_lon & inside_lat))
    else:
        columns = np.flatnonzero(inside_lon)
        if width < _TURN:
            columns = columns[np.argsort(from_west[columns], kind="stable")]
        cut = _columns(weather.isel(latitude=np.flatnonzero(inside_lat)), columns)
    if 0 in cut.sizes.values():
        raise WeatherError(
            "no weather in the region", where="region",
            got=f"{box.south}..{box.north} N, {box.west}..{box.east} E",
            wanted=f"a box that meets {float(latitude.min()):g}..{float(latitude.max()):g} N, "
            f"{float(longitude.min()):g}..{float(longitude.max()):g} E",
            cure="Correct the box or the weather files.",
        )
    return cut


def _columns(weather: xr.Dataset, columns: NDArray[np.intp]) -> xr.Dataset:
    """Columns of a grid in an order that runs eastward, longitudes continuous from the first on."""
    if columns.size == 0:
        return weather.isel(longitude=columns)
    together = bool((np.diff(columns) == 1).all())
    cut = weather.isel(longitude=slice(columns[0], columns[-1] + 1) if together else columns)
    longitude = cut["longitude"].values
    running = clean_degrees(longitude[0] + (longitude - longitude[0]) % _TURN)
    cut = cut.assign_coords(longitude=("longitude", running, weather["longitude"].attrs))
    return cut if together else _stored_alike(cut)


def _stored_alike(weather: xr.Dataset) -> xr.Dataset:
    """Put what tells where the weather lies in its files on the columns of the weather, whose order is new."""
    stored = weather.encoding.get("stored")
    if stored is None:
        return weather
    longitude = weather["longitude"].values
    places = _nearest(stored.longitude, longitude, "longitude", where=stored.where)
    other = stored.with_columns(places, longitude)
    if other is not None:
        weather.encoding = {**weather.encoding, "stored": other}
    return weather


def run_on(weather: xr.Dataset) -> tuple[xr.Dataset, list[str]]:
    """Put the columns of a grid that lies across the antimeridian side by side.

    Parameters
    ----------
    weather : Dataset
        Longitudes ascend within -180..180.

    Returns
    -------
    weather : Dataset
        Longitudes run on beyond 180 where the widest gap lay inside.
    notes : list of str
    """
    longitude = weather["longitude"].values
    if "site" in weather.dims or longitude.size < 2:
        return weather, []
    gaps = np.diff(longitude)
    widest, around = int(np.argmax(gaps)), _TURN - (longitude[-1] - longitude[0])
    if gaps[widest] <= around + 1e-6:
        return weather, []
    order = np.concatenate([np.arange(widest + 1, longitude.size), np.arange(widest + 1)])
    return _columns(weather, order), ["The grid lies across the antimeridian; its longitudes run on beyond 180."]


def _in_polygon(weather: xr.Dataset, path: Path) -> tuple[xr.Dataset, str]:
    import shapely

    from stillfield.sources.invented.synthetic import read_land

    area = read_land(path, what="polygon")
    shapely.prepare(area)

    def within(longitude: Any, latitude: Any) -> NDArray[np.bool_]:
        turns = [shapely.contains_xy(area, longitude + turn, latitude) for turn in (-_TURN, 0.0, _TURN)]
        return np.asarray(np.any(turns, axis=0))

    latitude, longitude = weather["latitude"].values, weather["longitude"].values
    if "site" in weather.dims:
        inside = within(longitude, latitude)
        cut = weather.isel(site=np.flatnonzero(inside))
    else:
        inside = within(*np.meshgrid(longitude, latitude))
        rows, columns = np.flatnonzero(inside.any(axis=1)), np.flatnonzero(inside.any(axis=0))
        cut = weather
        if inside.any():
            frame = weather.isel(latitude=slice(rows[0], rows[-1] + 1))
            frame, _ = run_on(frame.isel(longitude=columns)) if _gap_inside(longitude[columns]) else \
                (frame.isel(longitude=slice(columns[0], columns[-1] + 1)), [])
            kept = xr.DataArray(within(*np.meshgrid(frame["longitude"].values, frame["latitude"].values)),
                                dims=("latitude", "longitude"))
            cut = _missing_outside(frame, kept)
    if not inside.any():
        west, south, east, north = area.bounds
        raise WeatherError(
            "no cell centre lies inside the polygon", where=f"region.polygon, {path.name}",
            got=f"a polygon of {south:g}..{north:g} N, {west:g}..{east:g} E",
            wanted=f"one that holds centres of {latitude.min():g}..{latitude.max():g} N, "
                   f"{longitude.min():g}..{longitude.max():g} E",
            cure="Correct the polygon (longitude first, degrees), or take a box.",
        )
    told = f"{int(inside.sum())} of {inside.size} cells have their centre inside {path.name}; the others are left out."
    return cut, told


def _gap_inside(longitude: NDArray[Any]) -> bool:
    """Whether columns of a global grid hug the antimeridian from both sides."""
    gaps = np.diff(longitude)
    return bool(gaps.size) and float(gaps.max()) > _TURN - float(longitude[-1] - longitude[0])


def _missing_outside(weather: xr.Dataset, inside: xr.DataArray) -> xr.Dataset:
    """Weather missing in cells outside, which then count nothing either; coordinate ``inside`` tells them apart."""
    kept = {}
    for name, values in weather.data_vars.items():
        if not set(inside.dims) <= set(values.dims):
            continue
        kept[name] = values.where(inside, 0) if name == COUNTS else values.where(inside)
        kept[name].attrs = values.attrs
    if "inside" in weather.coords:
        inside = inside & weather["inside"].drop_vars("inside")
    return weather.assign(kept).assign_coords(inside=inside.drop_vars(list(inside.coords)))


def _on_land(weather: xr.Dataset, mask: Mask) -> tuple[xr.Dataset, str]:
    where = f"region.mask, {mask.file.name}"
    with xr.open_dataset(mask.file, decode_times=False) as file:
        share = _land_share(file, mask, where=where).load()
    cells = {axis: weather[axis].values for axis in ("latitude", "longitude")}
    cells["longitude"] = clean_degrees((cells["longitude"] + 180.0) % _TURN - 180.0)
    spots = {axis: _nearest(share[axis].values, wanted, axis, where=where) for axis, wanted in cells.items()}
    if "site" in weather.dims:
        found = share.isel({axis: xr.DataArray(at, dims="site") for axis, at in spots.items()})
        land = xr.DataArray((found.values >= mask.at_least), dims="site")
    else:
        land = xr.DataArray(share.values[np.ix_(spots["latitude"], spots["longitude"])] >= mask.at_least,
                            dims=("latitude", "longitude"))
    if not land.any():
        raise WeatherError("no cell is land by the mask", where=where, got=f"at_least {mask.at_least:g}",
                           cure="Lower region.mask.at_least, or correct the box.")
    told = f"{int((~land).sum())} of {land.size} cells have less than {mask.at_least:g} land in {mask.file.name}; " \
           "they are missing."
    return _missing_outside(weather, land), told


def _land_share(file: xr.Dataset, mask: Mask, *, where: str) -> xr.DataArray:
    """Share of land on ascending latitude and longitude within -180..180 [1]."""
    axes = find_axes(file, where=where, timeless=True)
    rows, columns = (file[name].dims[0] for name in (axes.latitude, axes.longitude))
    fits = [str(name) for name, one in file.data_vars.items()
            if {rows, columns} <= set(one.dims) and all(one.sizes[dim] == 1 for dim in set(one.dims) - {rows, columns})]
    name = mask.variable or (fits[0] if len(fits) == 1 else None)
    if name not in fits:
        raise WeatherError("the mask's variable is not there" if name else "several variables could be the mask",
                           where=where, got=name or ", ".join(fits), wanted=f"one of {', '.join(fits) or 'none'}",
                           cure="Name it under region.mask.variable.")
    values = file[name].squeeze([dim for dim in file[name].dims if dim not in (rows, columns)], drop=True)
    values = values.transpose(rows, columns)
    latitude, longitude = (clean_degrees(file[axis].values) for axis in (axes.latitude, axes.longitude))
    order, (across, east, _) = latitude_order(latitude, where=where), longitude_order(longitude, where=where)
    percent = canonical(values.attrs.get("units")) == "percent"
    share = np.asarray(values.values, dtype=float)[np.ix_(order, across)] * (0.01 if percent else 1.0)
    if np.nanmin(share) < -1e-6 or np.nanmax(share) > 1.0 + 1e-6:
        raise WeatherError("the mask is no share of land", where=f"{where}, {name}",
                           got=f"values from {np.nanmin(share):g} to {np.nanmax(share):g}"
                               f" in units '{values.attrs.get('units', 'none')}'",
                           wanted="0 to 1, or units '%' and 0 to 100", cure="Make a share of land of it.")
    return xr.DataArray(share, coords={"latitude": latitude[order], "longitude": east}, dims=("latitude", "longitude"))


def _nearest(axis: NDArray[Any], wanted: NDArray[Any], name: str, *, where: str) -> NDArray[np.intp]:
    """Positions on the mask's axis of the centres nearest to those wanted, all within a cell of it."""
    import pandas as pd

    cell = float(np.abs(np.diff(axis)).max()) if axis.size > 1 else 1.0
    known = np.concatenate([axis - _TURN, axis, axis + _TURN]) if name == "longitude" else axis
    found = pd.Index(known).get_indexer(wanted, method="nearest", tolerance=0.51 * cell)
    if (found < 0).any():
        raise WeatherError(f"the mask does not cover the weather ({name})", where=where,
                           got=f"{axis.min():g} to {axis.max():g}", wanted=f"{wanted.min():g} to {wanted.max():g}")
    return np.asarray(found % axis.size, dtype=np.intp)
