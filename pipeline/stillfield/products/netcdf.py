"""The monthly result as NetCDF that describes itself: CF-1.11 names, units, bounds and grid mapping."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from stillfield.errors import OutputError
from stillfield.products.grid import cell_edges, is_grid
from stillfield.vocabulary import WATER_CAUTION, YIELD

MONTH_NAMES = ("January", "February", "March", "April", "May", "June", "July", "August", "September",
               "October", "November", "December")

_SUMMARY = ("Distillate of a passive solar still per square metre of basin, for every month and place, "
            "with the band that build and upkeep of the still leave open.")

#: Units and meaning where the dataset does not state its own.
_KNOWN: dict[str, tuple[str, str]] = {
    "monthly_yield": (YIELD["monthly_yield"].unit, YIELD["monthly_yield"].meaning),
    "monthly_yield_low": ("L m-2 month-1", "Distillate of a calendar month, low end of the band"),
    "monthly_yield_high": ("L m-2 month-1", "Distillate of a calendar month, high end of the band"),
    "monthly_yield_rule": ("L m-2 month-1", "Distillate of a calendar month by the constant-efficiency rule"),
    "monthly_yield_by_year": ("L m-2 month-1", "Distillate of a calendar month in each year"),
    "monthly_yield_poor_year": ("L m-2 month-1", "Distillate of a calendar month reached in 9 of 10 years"),
    "annual_yield": (YIELD["annual_yield"].unit, YIELD["annual_yield"].meaning),
    "annual_yield_low": ("L m-2 year-1", "Distillate of a year, low end of the band"),
    "annual_yield_high": ("L m-2 year-1", "Distillate of a year, high end of the band"),
    "worst_month": ("1", "Month with the fewest litres per day"),
    "worst_month_yield": ("L m-2 d-1", "Daily distillate in the worst month"),
    "days_used": ("d", "Valid days behind the figure"),
    "days_expected": ("d", "Days a complete record has"),
    "days_in_month": ("d", "Days of the month"),
    "month": ("1", "Calendar month"),
    "year": ("1", "Calendar year"),
    "elevation": ("m", "Height above mean sea level"),
    "utc_offset_hours": ("h", "Hours to add to UTC for local standard time"),
    "clock_to_solar_hours": ("h", "Hours to add to the clock for local mean solar time"),
}
_STANDARD_NAMES = {"latitude": "latitude", "longitude": "longitude", "elevation": "surface_altitude"}
_AXES = {
    "latitude": {"units": "degrees_north", "long_name": "Latitude of the cell centre", "axis": "Y"},
    "longitude": {"units": "degrees_east", "long_name": "Longitude of the cell centre", "axis": "X"},
}
_CELL_METHODS = {
    "monthly": "time: sum (interval: 1 day comment: mean of the valid days times the days of the month)",
    "annual": "time: sum (interval: 1 month)",
    "worst": "time: mean (interval: 1 day)",
}
#: Variables written as whole numbers; the fill value is no possible count or month.
_WHOLE = {"worst_month": "int8", "days_used": "int32", "days_expected": "int32"}
_FILL_WHOLE = -1

# WGS 84 in WKT 2 (ISO 19162); the test reads it back as EPSG:4326.
_WKT = (
    'GEOGCRS["WGS 84",DATUM["World Geodetic System 1984",ELLIPSOID["WGS 84",6378137,298.257223563,'
    'LENGTHUNIT["metre",1]]],PRIMEM["Greenwich",0,ANGLEUNIT["degree",0.0174532925199433]],CS[ellipsoidal,2],'
    'AXIS["geodetic latitude (Lat)",north,ORDER[1],ANGLEUNIT["degree",0.0174532925199433]],'
    'AXIS["geodetic longitude (Lon)",east,ORDER[2],ANGLEUNIT["degree",0.0174532925199433]],ID["EPSG",4326]]'
)
_GRID_MAPPING = {
    "grid_mapping_name": "latitude_longitude",
    "semi_major_axis": 6378137.0,
    "inverse_flattening": 298.257223563,
    "longitude_of_prime_meridian": 0.0,
    "crs_wkt": _WKT,
}


def write_netcdf(
    dataset: xr.Dataset,
    path: str | Path,
    *,
    title: str,
    history: str,
    source: str | None = None,
    summary: str = _SUMMARY,
    caution: str = WATER_CAUTION,
) -> None:
    """Write a monthly result, on a grid or at sites, as one NetCDF-4 file after CF-1.11.

    Numbers are single precision, deflated at level 1 with shuffle; missing is NaN, and -1 for counts and
    months. A grid has cell bounds and a grid mapping. Sites carry their positions as auxiliary coordinates
    and their id with ``cf_role``; month numbers are no CF time axis, so no featureType is claimed. The same
    data and words give the same file; no clock is read.

    Parameters
    ----------
    dataset : Dataset
        Dimensions month and latitude, longitude or site; may be lazy. Attributes ``origin``,
        ``conventions`` and ``record`` are passed on.
    path : str or Path
        File to write, exactly as named.
    title, history : str
        Global attributes; a time stamp, if wanted, is part of `history`.
    source : str, optional
        What the numbers come from; by default the dataset's ``origin``.
    summary, caution : str
        Global attributes.

    Raises
    ------
    OutputError
        When a variable has no unit, or the grid is none.

    Examples
    --------
    >>> import tempfile
    >>> sites = xr.Dataset({"annual_yield": ("site", [900.0])}, coords={"site": ["hill"]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_netcdf(sites, f"{folder}/a.nc", title="One site", history="example")
    ...     with xr.open_dataset(f"{folder}/a.nc") as back:
    ...         print(back["annual_yield"].attrs["units"], back.attrs["Conventions"])
    L m-2 year-1 CF-1.11
    """
    # Loaded first: lazy blocks would be laid down in the order in which they happen to be finished.
    described = described_dataset(dataset).load()
    described.attrs = {
        "Conventions": "CF-1.11",
        "title": title,
        "summary": summary,
        "source": source or str(dataset.attrs.get("origin", "not stated")),
        "history": history,
        "caution": caution,
        **_passed_on(dataset.attrs),
    }
    described.to_netcdf(path, engine="netcdf4", format="NETCDF4", encoding=_encoding(described))


def described_dataset(dataset: xr.Dataset) -> xr.Dataset:
    """Give every variable of a monthly result its CF attributes, bounds and grid mapping.

    Parameters
    ----------
    dataset : Dataset
        A monthly result.

    Returns
    -------
    Dataset
        The same values, described.

    Raises
    ------
    OutputError
        When a variable has no unit, or the grid is none.

    Examples
    --------
    >>> grid = xr.Dataset({"annual_yield": (("latitude", "longitude"), [[900.0, 950.0]])},
    ...                   coords={"latitude": [10.0], "longitude": [40.0, 40.5]})
    >>> described_dataset(grid)["latitude_bnds"].values.tolist()
    [[9.75, 10.25]]
    """
    out = dataset.copy()
    out.attrs = {}
    for name, variable in out.variables.items():
        variable.attrs = _attributes(str(name), dataset)
        variable.encoding = {}
    if is_grid(dataset):
        _add_grid(out, dataset)
    elif "site" in dataset.dims:
        _add_sites(out)
    return out


def _attributes(name: str, dataset: xr.Dataset) -> dict[str, Any]:
    own = {key: value for key, value in dataset[name].attrs.items() if isinstance(value, str | int | float)}
    units, meaning = _KNOWN.get(name, (None, name.replace("_", " ")))
    numeric = dataset[name].dtype.kind in "iufb"
    attributes: dict[str, Any] = {"long_name": meaning, **({"units": units} if units and numeric else {}), **own}
    if name in _STANDARD_NAMES:
        attributes["standard_name"] = _STANDARD_NAMES[name]
    if name in _AXES:
        attributes |= {key: value for key, value in _AXES[name].items() if key != "axis"}
        if dataset[name].dims == (name,):
            attributes["axis"] = _AXES[name]["axis"]
        else:
            attributes["long_name"] = name.capitalize()
    if name == "elevation":
        attributes["positive"] = "up"
    if name in ("month", "worst_month"):
        attributes["flag_values"] = np.arange(1, 13, dtype=np.int8)
        attributes["flag_meanings"] = " ".join(MONTH_NAMES).lower()
    method = _CELL_METHODS.get(name.split("_", maxsplit=1)[0])
    if method and "_yield" in name:
        attributes["cell_methods"] = method
    if numeric and "units" not in attributes:
        raise OutputError("a variable without a unit", where=name, cure="State it as attribute units.")
    return attributes


def _add_grid(out: xr.Dataset, dataset: xr.Dataset) -> None:
    edges = cell_edges(dataset)
    for name, values in (("latitude", edges.latitude), ("longitude", edges.longitude)):
        # Bounds that share an edge are equal to the last bit, whichever way the axis runs.
        out[f"{name}_bnds"] = ((name, "bnds"), np.column_stack([values[:-1], values[1:]]))
        out[name].attrs["bounds"] = f"{name}_bnds"
    out["crs"] = xr.DataArray(np.int32(0), attrs=_GRID_MAPPING)
    for label in dataset.data_vars:
        if is_grid(dataset[label]):
            out[label].attrs["grid_mapping"] = "crs"


def _add_sites(out: xr.Dataset) -> None:
    if "site" in out.coords:
        out["site"].attrs = {"long_name": "Identifier of the site", "cf_role": "timeseries_id"}
        if out["site"].dtype.kind not in "iu":
            out["site"] = out["site"].astype(str)
    for label, coord in out.coords.items():
        if coord.dtype.kind == "O":
            out[label] = coord.astype(str)


def _encoding(dataset: xr.Dataset) -> dict[str, dict[str, Any]]:
    encoding: dict[str, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        key = str(name)
        if key in dataset.coords or key.endswith("_bnds") or key == "crs":
            # CF: coordinates and bounds have no missing values.
            encoding[key] = {"_FillValue": None} if variable.dtype.kind == "f" else {}
            continue
        if variable.dtype.kind in "iufb" and variable.ndim > 0:
            encoding[key] = {
                "zlib": True, "complevel": 1, "shuffle": True, "chunksizes": _chunks(variable),
                **({"dtype": _WHOLE[key], "_FillValue": _FILL_WHOLE} if key in _WHOLE
                   else {"dtype": "float32", "_FillValue": np.float32(np.nan)}),
            }
    for key, kind in (("month", "int8"), ("year", "int32")):
        if key in dataset.coords:
            encoding[key] = {"dtype": kind, "_FillValue": None}
    return encoding


def _chunks(variable: xr.Variable) -> tuple[int, ...]:
    """One month to a chunk and at most 512 cells a side: a reader of one map inflates little else."""
    return tuple(1 if dim in ("month", "year") else max(1, min(512, size))
                 for dim, size in zip(variable.dims, variable.shape, strict=True))


def _passed_on(attributes: dict[Any, Any]) -> dict[str, str]:
    passed = {}
    if attributes.get("conventions"):
        passed["conventions_assumed"] = " ".join(map(str, attributes["conventions"]))
    if attributes.get("record"):
        passed["record"] = str(attributes["record"])
    return passed
