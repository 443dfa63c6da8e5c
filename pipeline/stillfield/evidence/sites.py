"""Typical years as the yield methods take them: blocks of days and of hours for several sites."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.api import open_weather
from stillfield.engine.labelled import on_local_days
from stillfield.errors import WeatherError
from stillfield.methods import Block, Method, whole_record
from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]

#: Real weather everyone who has pvlib has: Miami, Greensboro and, north of 45 degrees, Sand Point.
DEFAULT_WEATHER = ("pvlib:data/12839.tm2", "pvlib:data/723170TYA.CSV", "pvlib:data/703165TY.csv")
MIAMI = DEFAULT_WEATHER[0]
MONTHS = 12


@dataclass(frozen=True)
class Sites:
    """Weather of whole typical years.

    Attributes
    ----------
    names : tuple of str
        Of the sites.
    by_days, by_steps : Block
        The same weather as days and as steps.
    month : ndarray of int, shape (day,)
        1 to 12.
    """

    names: tuple[str, ...]
    by_days: Block
    by_steps: Block
    month: NDArray[np.int64]

    def monthly(self, method: Method, still: Still, without: Sequence[str] = ()) -> tuple[Array, NDArray[np.bool_]]:
        """Litres of every month and site, and whether there was frost in it.

        Parameters
        ----------
        method : Method
            Yield method.
        still : Still
            Design in its central condition.
        without : sequence of str
            Weather the method must do without.

        Returns
        -------
        litres : ndarray, shape (12, site)
            [L m-2 month-1]
        frost : ndarray of bool, same shape
        """
        block = self.by_days if method.resolution == "daily" else self.by_steps
        kept = {name: values for name, values in block.weather.items() if name not in without}
        found = whole_record(method, replace(block, weather=kept), still, [still.condition])[0]
        frost = np.zeros(found.litres.shape, dtype=bool) if found.frost is None else found.frost
        starts = np.searchsorted(self.month, np.arange(1, MONTHS + 1))
        return np.add.reduceat(found.litres, starts, axis=0), np.logical_or.reduceat(frost, starts, axis=0)


def open_sites(files: Sequence[str]) -> Sites:
    """Open typical years.

    Parameters
    ----------
    files : sequence of str
        Typical-year files, globs, or ``package:path``.

    Returns
    -------
    Sites

    Raises
    ------
    WeatherError
        If they cannot be read, or are no typical years in steps shorter than a day.
    """
    weather = open_weather(list(files))
    if weather.attrs.get("record") != "typical-year" or "site" not in weather.dims:
        raise WeatherError("evidence is worked out on typical years", where=", ".join(files),
                           got=str(weather.attrs.get("origin")), cure="Name typical-year files of stations.")
    prepared = on_local_days(weather)
    if prepared.steps is None:
        raise WeatherError("evidence needs steps shorter than a day", where=", ".join(files), got="days")
    names = weather["name"] if "name" in weather.coords else weather["site"]
    month = prepared.daily["time"].dt.month.to_numpy().astype(np.int64)
    return Sites(tuple(map(str, names.to_numpy())), _block(prepared.daily), _block(prepared.steps), month)


def _block(source: xr.Dataset) -> Block:
    steps = source.sizes.get("step", 1)
    sites = source.sizes["site"]
    lead = ("time", "step") if "step" in source.dims else ("time",)
    weather = {
        str(name): values.transpose(*lead, "site").to_numpy().astype(np.float64).reshape(-1, sites)
        for name, values in source.data_vars.items() if set(values.dims) == {*lead, "site"}
    }
    clock = source["clock_to_solar_hours"].to_numpy() if "clock_to_solar_hours" in source.coords else np.zeros(sites)
    return Block(
        weather, latitude=source["latitude"].to_numpy(), day_of_year=source["time"].dt.dayofyear.to_numpy(),
        steps_per_day=steps, clock_to_solar_hours=np.asarray(clock), cyclic=True,
    )
