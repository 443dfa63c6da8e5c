"""Survey: what a planner wants to know of opened weather, told from its labels and sizes alone.

Everything here is plain text and numbers, ready for JSON; no value of lazy weather is computed.
"""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from stillfield.products.grid import cell_edges, is_grid
from stillfield.vocabulary import DAY_WEATHER, STEP_HOURS_DAILY, STEP_WEATHER

#: How a source says it knew a variable, in one word.
_HOW = {"the run file": "mapped", "its standard_name": "standard_name", "its usual name": "alias"}
#: Places or sites named one by one; beyond it only their number is told.
MOST_NAMED = 20


def survey_variables(weather: xr.Dataset) -> list[dict[str, Any]]:
    """Variables that were recognised, in the order of the source.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it.

    Returns
    -------
    list of dict
        ``name`` in the file (None where the format gives it), ``units`` in the file, ``quantity`` and its ``unit``
        in stillfield, ``recognised_by`` ('mapped', 'standard_name', 'alias', or in words).
    """
    table = DAY_WEATHER if float(weather.attrs["step_hours"]) >= STEP_HOURS_DAILY else STEP_WEATHER
    told = [json.loads(text) for text in weather.attrs.get("recognised", [])]
    if not told:
        told = [{"name": None, "quantity": str(name), "units": None, "how": "the source"}
                for name in weather.data_vars if name in table]
    return [
        {
            "name": one["name"], "units": one["units"], "quantity": one["quantity"],
            "unit": table[one["quantity"]].unit if one["quantity"] in table else None,
            "recognised_by": _HOW.get(one["how"], one["how"]),
        }
        for one in told
    ]


def survey_time(weather: xr.Dataset, days: pd.Index) -> dict[str, Any]:
    """Span, step and clock of weather, and its local days.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it.
    days : pandas.Index
        Its local days.

    Returns
    -------
    dict
        ``record``, ``clock``, ``step_hours``, ``first`` and ``last`` step, ``first_day``, ``last_day``, ``days``,
        ``years`` (calendar years touched), ``calendar``.
    """
    steps = weather.indexes["time"]
    return {
        "record": str(weather.attrs["record"]),
        "clock": str(weather.attrs["clock"]),
        "step_hours": float(weather.attrs["step_hours"]),
        "first": _stamp(steps[0])[:16],
        "last": _stamp(steps[-1])[:16],
        "first_day": _stamp(days[0])[:10],
        "last_day": _stamp(days[-1])[:10],
        "days": len(days),
        "years": int(days[-1].year - days[0].year + 1),
        "calendar": str(weather["time"].dt.calendar),
    }


def _stamp(time: Any) -> str:
    return str(time.isoformat())


def survey_space(daily: xr.Dataset) -> dict[str, Any]:
    """Cells or sites of weather.

    Parameters
    ----------
    daily : xarray.Dataset
        Cut to the region.

    Returns
    -------
    dict
        ``kind`` 'grid' or 'sites'; ``cells``; ``land_cells`` (None where only the values would tell); ``rows``,
        ``columns`` and ``resolution_deg`` (latitude, longitude) of a grid, ``sites`` (the first ids) otherwise;
        ``box`` with south, north, west and east [deg], of outer cell edges or of sites.
    """
    if not is_grid(daily):
        latitude, longitude = (daily[name].to_numpy() for name in ("latitude", "longitude"))
        return {
            "kind": "sites", "cells": int(daily.sizes["site"]), "land_cells": None, "rows": None, "columns": None,
            "resolution_deg": None, "sites": [str(name) for name in daily["site"].to_numpy()[:MOST_NAMED]],
            "box": _box(longitude.min(), latitude.min(), longitude.max(), latitude.max()),
        }
    rows, columns = daily.sizes["latitude"], daily.sizes["longitude"]
    west, south, east, north = cell_edges(daily).box
    height = daily["elevation"].to_numpy() if "elevation" in daily.coords else np.zeros(0)
    at_sea = bool(height.shape == (rows, columns) and np.isnan(height).any())
    return {
        "kind": "grid", "cells": rows * columns, "land_cells": int(np.isfinite(height).sum()) if at_sea else None,
        "rows": rows, "columns": columns,
        "resolution_deg": [_rounded((north - south) / rows), _rounded((east - west) / columns)],
        "sites": None, "box": _box(west, south, east, north),
    }


def _box(west: float, south: float, east: float, north: float) -> dict[str, float]:
    return {"south": _rounded(south), "north": _rounded(north), "west": _rounded(west), "east": _rounded(east)}


def _rounded(degrees: float) -> float:
    return round(float(degrees), 6)


def outside_box(places: pd.DataFrame, box: dict[str, float]) -> NDArray[np.bool_]:
    """Tell which villages lie outside the box of a grid.

    Parameters
    ----------
    places : pandas.DataFrame
        With ``latitude`` and ``longitude``. [deg]
    box : dict
        Of `survey_space`; east may pass 180. [deg]

    Returns
    -------
    ndarray of bool

    Examples
    --------
    >>> villages = pd.DataFrame({"latitude": [1.0, 1.0, 5.0], "longitude": [-179.5, 0.0, 179.0]})
    >>> outside_box(villages, {"south": 0.0, "north": 2.0, "west": 178.0, "east": 181.0}).tolist()
    [False, True, True]
    """
    latitude, longitude = places["latitude"].to_numpy(), places["longitude"].to_numpy()
    across = (longitude - box["west"]) % 360.0 <= box["east"] - box["west"]
    return np.asarray(~(across & (latitude >= box["south"]) & (latitude <= box["north"])))


def survey_places(places: pd.DataFrame, outside: NDArray[np.bool_], max_cell_distance_km: float) -> dict[str, Any]:
    """Count the villages and those the weather does not reach.

    Parameters
    ----------
    places : pandas.DataFrame
        As `read_places` gives it.
    outside : ndarray of bool
        Which lie outside the weather.
    max_cell_distance_km : float
        How far a place may lie from its cell; passed on. [km]

    Returns
    -------
    dict
        ``count``, ``outside``, ``outside_names`` (the first of them), ``max_cell_distance_km``.
    """
    return {
        "count": len(places), "outside": int(outside.sum()),
        "outside_names": [str(name) for name in places["name"][outside][:MOST_NAMED]],
        "max_cell_distance_km": max_cell_distance_km,
    }
