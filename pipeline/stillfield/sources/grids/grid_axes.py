"""Axes of gridded files, recognised by CF attributes and brought into one form.

Canonical: latitude ascending; longitude ascending within -180..180 (`region.run_on` puts the columns of a box
across the antimeridian side by side in the end), a repeated meridian dropped; values rounded to a millionth of a
degree, so that single and double precision name the same cell; time the start of each interval, in the file's own
calendar.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NoReturn

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError

Array = NDArray[np.floating[Any]]

_NAMES = {"latitude": ("latitude", "lat"), "longitude": ("longitude", "lon"), "time": ("valid_time", "time")}
_DEGREES = {"degrees_north", "degree_north", "degrees_n", "degree_n", "degreesn", "degreen",
            "degrees_east", "degree_east", "degrees_e", "degree_e", "degreese", "degreee"}
#: Spacing of columns may vary by this share.
_UNEVEN = 0.01
#: Spacing of rows may change by this factor from one to the next; more means that a row is missing.
_SMOOTH = 1.3
_FIGURES = 6


@dataclass(frozen=True)
class Axes:
    """Names of the axes of one file.

    Attributes
    ----------
    latitude, longitude, time : str
        Variables that hold the coordinates.
    site_dim : str or None
        Dimension shared by latitude and longitude, for station files.
    """

    latitude: str
    longitude: str
    time: str
    site_dim: str | None


def find_axes(weather: xr.Dataset, *, where: str, timeless: bool = False) -> Axes:
    """Find latitude, longitude and time of an open file.

    Parameters
    ----------
    weather : xarray.Dataset
        As opened.
    where : str
        File, for errors.
    timeless : bool
        Whether the file holds no time; `Axes.time` is empty then.

    Returns
    -------
    Axes

    Raises
    ------
    WeatherError
        If an axis is missing, or the grid is curvilinear, rotated or unstructured.
    """
    import cf_xarray  # noqa: F401  (registers the accessor)

    candidates = [name for name, variable in weather.variables.items()
                  if str(variable.attrs.get("units", "")).lower() in _DEGREES]
    coordinates = weather.set_coords([name for name in candidates if name in weather.data_vars])
    found = {axis: _find(coordinates, axis, where=where) for axis in ("latitude", "longitude")}
    latitude, longitude = weather[found["latitude"]], weather[found["longitude"]]
    if latitude.ndim > 1 or longitude.ndim > 1:
        raise WeatherError(
            "the grid is curvilinear or rotated: latitude and longitude have two dimensions", where=where,
            got=f"{latitude.name}({', '.join(map(str, latitude.dims))})", wanted="one latitude per row, one longitude "
            "per column", cure="Regrid it to a regular latitude-longitude grid first.",
        )
    site_dim = None
    if latitude.ndim == 1 and latitude.dims == longitude.dims:
        site_dim = str(latitude.dims[0])
        _refuse_unstructured(weather, latitude, where=where)
    time = "" if timeless else _find_time(weather, where=where)
    return Axes(found["latitude"], found["longitude"], time, site_dim)


def _find(weather: xr.Dataset, axis: str, *, where: str) -> str:
    by_attributes = [str(name) for name in weather.cf.coordinates.get(axis, [])]
    by_name = [str(name) for name in weather.variables if str(name).lower() in _NAMES[axis]]
    found = [name for name in by_attributes if name in weather.variables] or by_name
    on_data = [name for name in found if weather[name].ndim <= 1] or found
    if not on_data:
        raise WeatherError(
            f"no {axis} was found", where=where, got=", ".join(map(str, weather.variables))[:200],
            wanted=f"a coordinate with units 'degrees_{'north' if axis == 'latitude' else 'east'}' or called {axis}",
            cure="Projected and unstructured grids have to be regridded to latitude and longitude first; of "
                 "stations the file must hold both.",
        )
    return on_data[0]


def _find_time(weather: xr.Dataset, *, where: str) -> str:
    by_standard = [str(name) for name, variable in weather.variables.items()
                   if variable.attrs.get("standard_name") == "time"]
    by_name = [name for name in _NAMES["time"] if name in weather.variables]
    found = list(dict.fromkeys([*[n for n in by_name if n == "valid_time"], *by_standard, *by_name]))
    if not found:
        raise WeatherError("no time axis was found", where=where, got=", ".join(map(str, weather.variables))[:200],
                           wanted="a coordinate called time or valid_time")
    name = found[0]
    time = weather[name]
    if time.ndim > 1:
        raise WeatherError("time has two dimensions (forecast start and lead)", where=where,
                           got=f"{name}({', '.join(map(str, time.dims))})",
                           wanted="one time axis", cure="Flatten the forecasts to one series first.")
    if "climatology" in time.attrs:
        raise WeatherError("this is a climatology, not a series of days or hours", where=where,
                           cure="Use daily or hourly weather, or kind 'monthly-means'.")
    decoded = np.issubdtype(time.dtype, np.datetime64) or (time.dtype == object and time.size > 0)
    if not decoded:
        raise WeatherError("the time axis is not in dates", where=where,
                           got=f"{name} in units '{time.attrs.get('units', 'none')}'",
                           wanted="CF time such as 'hours since 1970-01-01'")
    return name


def _refuse_unstructured(weather: xr.Dataset, latitude: xr.DataArray, *, where: str) -> None:
    corners = weather.get(str(latitude.attrs.get("bounds", latitude.encoding.get("bounds", ""))))
    if corners is not None and corners.ndim == 2 and corners.shape[-1] > 2:
        raise WeatherError("the grid is unstructured: its cells are polygons", where=where,
                           got=f"{latitude.size} cells with {corners.shape[-1]} corners",
                           cure="Regrid it to a regular latitude-longitude grid first.")


def clean_degrees(values: Any) -> Array:
    """Coordinates in double precision, rounded to a millionth of a degree.

    A single-precision number is taken as the shortest decimal it stands for, 25.7 and not 25.700001.

    Examples
    --------
    >>> clean_degrees(np.array([0.1, 25.7], dtype=np.float32)).tolist()
    [0.1, 25.7]
    """
    raw = np.atleast_1d(np.asarray(values))
    if raw.dtype == np.float32:
        raw = raw.astype(str)
    return np.round(raw.astype(np.float64), _FIGURES) + 0.0


def snapped(values: xr.DataArray, reference: xr.DataArray) -> xr.DataArray:
    """Coordinates of one variable put on those of another that mean the same cells.

    Grids written in single and in double precision differ in the last digits.

    Parameters
    ----------
    values, reference : DataArray
        With coordinates latitude and longitude, or site.

    Returns
    -------
    DataArray
        `values`, its coordinates replaced where each is within a hundredth of a cell of one of `reference`.
    """
    for axis in (dim for dim in values.dims if dim in {"latitude", "longitude"}):
        own, wanted = values.indexes[axis], reference.indexes[axis]
        if own.equals(wanted):
            continue
        cell = float(np.abs(np.diff(wanted)).min()) if len(wanted) > 1 else 0.01
        nearest = wanted.get_indexer(own, method="nearest", tolerance=0.01 * cell)
        values = values.assign_coords({axis: np.where(nearest >= 0, wanted[nearest], own)})
    return values


def latitude_order(latitude: Array, *, where: str) -> NDArray[np.intp]:
    """Order that makes latitudes ascend.

    Parameters
    ----------
    latitude : ndarray
        Clean. [deg north]
    where : str
        File, for errors.

    Returns
    -------
    ndarray of int

    Raises
    ------
    WeatherError
        If a latitude is impossible, comes twice, or a row seems to be missing. Spacing that changes smoothly,
        as between Gaussian latitudes, is fine.
    """
    _check_finite(latitude, 90.0, "latitude", where=where)
    order = np.argsort(latitude, kind="stable")
    steps = np.diff(latitude[order])
    if steps.size and steps.min() <= 0.0:
        twice = latitude[order][int(np.argmin(steps))]
        raise WeatherError("a latitude comes twice", where=where, got=f"{twice:g}", cure="Correct the file.")
    if steps.size > 1:
        jump = np.maximum(steps[1:] / steps[:-1], steps[:-1] / steps[1:])
        if jump.max() > _SMOOTH:
            _refuse_uneven(latitude, "latitude", where=where)
    return order


def longitude_order(longitude: Array, *, where: str) -> tuple[NDArray[np.intp], Array, list[str]]:
    """Order and values that make longitudes ascend within -180..180, a repeated meridian left out.

    Parameters
    ----------
    longitude : ndarray
        Clean; any range of 360 degrees or a little more. [deg east]
    where : str
        File, for errors.

    Returns
    -------
    order : ndarray of int
    longitude : ndarray, shape of `order`
        [deg east]
    notes : list of str

    Raises
    ------
    WeatherError
        If a longitude is impossible or the columns are unevenly spaced.

    Examples
    --------
    >>> order, longitude, notes = longitude_order(np.array([0.0, 90.0, 180.0, 270.0, 360.0]), where="x")
    >>> longitude.tolist(), order.tolist(), notes
    ([-180.0, -90.0, 0.0, 90.0], [2, 3, 0, 1], ['1 repeated meridian was dropped.'])
    """
    _check_finite(longitude, 720.0, "longitude", where=where)
    wrapped = clean_degrees((longitude + 180.0) % 360.0 - 180.0)
    unique, order = np.unique(wrapped, return_index=True)
    if not _is_even(longitude):  # a box across Greenwich in 0..360 is even only once it is wrapped
        _check_even(unique, "longitude", where=where)
    repeated = longitude.size - unique.size
    notes = []
    if repeated:
        word = "meridian was" if repeated == 1 else "meridians were"
        notes.append(f"{repeated} repeated {word} dropped.")
    return order, unique, notes


def _check_finite(values: Array, limit: float, name: str, *, where: str) -> None:
    bad = ~(np.abs(values) <= limit)
    if bad.any():
        raise WeatherError(f"impossible {name}", where=where, got=f"{values[bad][0]:g}",
                           wanted=f"-{limit:g} to {limit:g}", cure="Check the coordinates of the file.")


def _is_even(values: Array) -> bool:
    steps = np.diff(values)
    if steps.size == 0:
        return True
    usual = float(np.median(steps))
    return usual != 0.0 and bool(np.all(np.abs(steps - usual) <= _UNEVEN * abs(usual)))


def _check_even(values: Array, name: str, *, where: str) -> None:
    if not _is_even(values):
        _refuse_uneven(values, name, where=where)


def _refuse_uneven(values: Array, name: str, *, where: str) -> NoReturn:
    steps = np.diff(values)
    usual = float(np.median(steps))
    at = int(np.argmax(np.abs(steps - usual)))
    raise WeatherError(f"{name} is not evenly spaced", where=where,
                       got=f"{values[at]:g} is followed by {values[at + 1]:g}",
                       wanted=f"steps of {usual:g}", cure="Regrid it to a regular grid first.")
