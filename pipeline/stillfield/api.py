"""The notebook interface: the same stages as the command line, on datasets in memory.

>>> import stillfield as sf
>>> weather = sf.open_weather("pvlib:data/12839.tm2")
>>> still = sf.load_still("config/stills/single-slope-glass.yaml")
>>> monthly = sf.monthly_yield(weather, still, method="rule")
>>> round(float(monthly["annual_yield"][0]))
842
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd
import xarray as xr

from stillfield.decide import Preferences, decide, usual_wishes
from stillfield.engine.job import Missing, months_of, prepare
from stillfield.methods.registry import get_method
from stillfield.physics.rule import USUAL_EFFICIENCY
from stillfield.physics.still import Panel, Still
from stillfield.settings.still_file import load_still_design, load_still_file
from stillfield.sources import guess_kind
from stillfield.sources.gates import gate
from stillfield.sources.places import read_places
from stillfield.stages.read import Box, Mask, Region, mark_as_stored, read_weather
from stillfield.vocabulary import STEP_HOURS_DAILY

__all__ = ["Box", "Mask", "Region", "load_places", "load_still", "monthly_yield", "open_weather", "rank_places"]


def open_weather(
    files: str | Path | Sequence[str | Path],
    kind: str | None = None,
    *,
    region: Box | Region | None = None,
    **options: Any,
) -> xr.Dataset:
    """Open weather of any kind in vocabulary names and units.

    Parameters
    ----------
    files : path or sequence of paths
        Files, globs, or ``package:path`` for a file inside an installed package.
    kind : str, optional
        'typical-year', 'netcdf', ...; recognised from the first file when left out.
    region : Box or Region, optional
        Keep only cells or sites inside.
    **options
        Options of the kind, as in the run file.

    Returns
    -------
    xarray.Dataset
        Dimensions ``time`` and space; see `stillfield.sources.Source`.

    Raises
    ------
    WeatherError
        If the files cannot be read, recognised or believed.
    """
    names = [str(files)] if isinstance(files, str | Path) else [str(name) for name in files]
    weather = read_weather(kind or guess_kind(names), names, region=region, **options)
    checked, _ = gate(weather, where=str(weather.attrs.get("files", "weather")))
    if any(values.chunks is not None for values in weather.data_vars.values()):
        # Of lazy weather the gate counts nothing, and what it puts right the engine would no longer see.
        checked.encoding = {**weather.encoding, "ungated": weather}
    return mark_as_stored(checked)


def load_still(still: str | Path) -> Still:
    """Load a still design.

    Parameters
    ----------
    still : str or path
        A still file.

    Returns
    -------
    Still

    Raises
    ------
    RunFileError
        All faults of the file at once.
    """
    return load_still_file(still)


def load_places(
    table: str | Path, columns: Mapping[str, str] | None = None, *, sheet: str | None = None, layer: str | None = None
) -> pd.DataFrame:
    """Load a table of villages; see `stillfield.sources.places.read_places`."""
    return read_places(table, columns, sheet=sheet, layer=layer)


def rank_places(
    monthly: xr.Dataset, places: pd.DataFrame, still: Still | str | Path | None = None, *,
    litres_per_person_day: float | None = None, max_cell_distance_km: float = 25.0,
    weights: Mapping[str, float] | None = None,
) -> pd.DataFrame:
    """Give every place its cell's litres, the basin area it needs and its rank.

    Parameters
    ----------
    monthly : xarray.Dataset
        As `monthly_yield` gives it.
    places : pandas.DataFrame
        As `load_places` gives it.
    still : Still, str or path, optional
        The design, for feed and brine. A still file brings its prices and its days out of work along, so that the
        areas are those of a run and the litre has a cost. Without it, a basin that works every day.
    litres_per_person_day : float, optional
        Water each person needs; the published figure for drinking without it. [L]
    max_cell_distance_km : float
        A place farther than this from every valid cell stays in the table without litres. [km]
    weights : mapping of str to float, optional
        Weight of each criterion (`stillfield.stages.rank.CRITERIA`); missing ones count 0.

    Returns
    -------
    pandas.DataFrame
        First to visit first, every place kept; `stillfield.products.place_columns` explains the columns. Without
        the days of the record no tank is sized.

    Raises
    ------
    PlacesError
        If the weights are unusable.

    Notes
    -----
    A still is no barrier to volatile contaminants; distillate must be disinfected, remineralised and tested
    before people drink it. See `stillfield.vocabulary.WATER_CAUTION`.
    """
    design, cost = still or Still("stated by nobody", (Panel(1.0, 15.0),)), None
    if not isinstance(design, Still):
        file = load_still_design(design)
        design, cost = file.still, file.cost
    ways = Preferences(weights, max_cell_distance_km=max_cell_distance_km)
    found = decide(monthly, places, still=design, cost=cost, wishes=usual_wishes(litres_per_person_day),
                   preferences=ways)
    return found.places


def monthly_yield(
    weather: xr.Dataset,
    still: Still,
    method: str = "fitted",
    *,
    rule_efficiency: float = USUAL_EFFICIENCY,
    min_valid_hours: float = 20.0,
    fill_hours: float = 3.0,
    min_valid_days_share: float = 0.8,
) -> xr.Dataset:
    """Litres per square metre of basin for every month of the year and every cell or site.

    Parameters
    ----------
    weather : xarray.Dataset
        As `open_weather` gives it.
    still : Still
        As `load_still` gives it.
    method : str
        'fitted', 'heat-balance', 'rule' or 'nafey-2000'.
    rule_efficiency : float
        Efficiency of the rule printed beside every result. [1]
    min_valid_hours : float
        Hours a daily mean needs. [h]
    fill_hours : float
        Longest gap in temperature, humidity or wind that is bridged. [h]
    min_valid_days_share : float
        Share of its days a month needs. [1]

    Returns
    -------
    xarray.Dataset
        ``monthly_yield`` [L m-2 month-1] with its band, the rule, years, worst month and day counts; see
        `stillfield.stages.aggregate.aggregate`.

    Raises
    ------
    MethodError, WeatherError
        If the method does not exist or the weather cannot feed it.

    Notes
    -----
    A still is no barrier to volatile contaminants; distillate must be disinfected, remineralised and tested
    before people drink it. See `stillfield.vocabulary.WATER_CAUTION`.
    """
    hourly = float(weather.attrs["step_hours"]) < STEP_HOURS_DAILY
    prepared = prepare(weather, get_method(method, hourly=hourly))
    missing = Missing(min_valid_hours, fill_hours, min_valid_days_share)
    return months_of(prepared, [still], rule_efficiency=rule_efficiency, missing=missing).monthly[0]
