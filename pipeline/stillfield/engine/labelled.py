"""Weather on local days as a labelled dataset, for notebooks and checks that want to see what the engine works on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.engine.planning import BlockPlan
from stillfield.engine.readers import LazyReader, quantities
from stillfield.engine.steps import Counts, Steps
from stillfield.stages.prepare import LocalDays, count_days, days_of_steps, local_days, space_of
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER, Quantity


@dataclass(frozen=True)
class OnLocalDays:
    """Weather on local days, in memory.

    Attributes
    ----------
    daily : xarray.Dataset
        Dimensions ``time`` (day) and space; `vocabulary.DAY_WEATHER` variables and units.
    steps : xarray.Dataset or None
        Dimensions ``time`` (day), ``step`` and space; `vocabulary.STEP_WEATHER` variables; coordinate
        ``clock_to_solar_hours`` on space. None for daily weather.
    counts : dict
        What was found and changed: variable to kind to number.
    """

    daily: xr.Dataset
    steps: xr.Dataset | None
    counts: Counts


def on_local_days(weather: xr.Dataset, *, min_valid_hours: float = 20.0, fill_hours: float = 3.0) -> OnLocalDays:
    """Bring weather of any step to local days, as a run does.

    Parameters
    ----------
    weather : xarray.Dataset
        As a source gives it; it must fit into memory.
    min_valid_hours : float
        A day's mean temperature, wind and humidity need at least this many valid hours; its irradiation
        needs every step. [h]
    fill_hours : float
        Longest gap in temperature, humidity or wind that is bridged by a straight line. [h]

    Returns
    -------
    OnLocalDays

    Raises
    ------
    WeatherError
        If the steps do not divide the day, the record holds no whole day, or a value cannot be true.
    """
    local = local_days(weather)
    names = tuple(str(name) for name in weather.data_vars if name in quantities(local.step_hours))
    reader = LazyReader(weather[list(names)])
    _, rows, columns = reader.layout.shape
    whole = slice(0, weather.sizes["time"])
    block = BlockPlan(slice(0, rows), slice(0, columns), (whole,))
    steps = Steps(reader, names, local, block, local.whole_steps(fill_hours))
    _, found = steps.take(whole, last=True)
    if local.steps_per_day == 1:
        return OnLocalDays(_labelled(weather, local, found, DAY_WEATHER, ()), None, steps.counts)
    days: Mapping[str, NDArray[Any]] = days_of_steps(dict(found), local.steps_per_day, min_valid_hours=min_valid_hours)
    gaps = np.isnan(days["irradiation"]).sum(axis=0).reshape(rows, columns)
    counts = {**steps.counts, "days": count_days(local, block.columns, reader.kept(block), gaps)}
    return OnLocalDays(
        _labelled(weather, local, days, DAY_WEATHER, ()),
        _labelled(weather, local, found, STEP_WEATHER, ("step",)), counts,
    )


def _labelled(
    weather: xr.Dataset, local: LocalDays, values: Mapping[str, NDArray[Any]], table: Mapping[str, Quantity],
    within: tuple[str, ...],
) -> xr.Dataset:
    space = space_of(weather)
    sizes = [weather.sizes[dim] for dim in space]
    coords = {name: coord for name, coord in weather.coords.items() if set(coord.dims) <= set(space)}
    coords["time"] = local.time
    coords["clock_to_solar_hours"] = (space, local.clock_to_solar_hours.reshape(sizes))
    lead = [local.days, *([local.steps_per_day] if within else [])]
    return xr.Dataset(
        {name: (("time", *within, *space), np.reshape(array, (*lead, *sizes)).copy(),
                {"units": table[name].unit, "long_name": table[name].meaning}) for name, array in values.items()},
        coords=coords, attrs=weather.attrs,
    )
