"""Read: sources to one dataset in vocabulary names and units, cut to the region."""

from __future__ import annotations

import os
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import xarray as xr

from stillfield.products.manifest import identity_of, portable_name
from stillfield.sources import open_source
from stillfield.sources.locate import locate
from stillfield.sources.places import read_places
from stillfield.sources.region import Box, Mask, Region, keep_region

__all__ = ["Box", "Mask", "Region", "describe_inputs", "read_places", "read_weather"]


def read_weather(
    kind: str, files: Sequence[str] = (), *, region: Box | Region | None = None, **options: Any
) -> xr.Dataset:
    """Read weather of one kind and cut it to a region.

    Parameters
    ----------
    kind : str
        A kind of source known to `stillfield.sources`.
    files : sequence of str
        Files, globs or ``package:path`` names.
    region : Box or Region, optional
        Keep only cells or sites whose centre lies inside.
    **options
        Passed on to the source.

    Returns
    -------
    xarray.Dataset
        As described in `stillfield.sources.Source`. A grid of one cell comes as a site: nothing tells how large
        such a cell is, so it makes no map.

    Raises
    ------
    WeatherError
        If the weather cannot be read, or no cell lies in the region.
    """
    weather = open_source(kind, files, **options).open()
    if region is not None:
        weather = keep_region(weather, Region(box=region) if isinstance(region, Box) else region)
    single = "site" not in weather.dims and weather.sizes["latitude"] == weather.sizes["longitude"] == 1
    return mark_as_stored(_as_site(weather) if single else weather)


def mark_as_stored(weather: xr.Dataset) -> xr.Dataset:
    """Note that lazy weather is what its files say it is, so that the engine may read them past it.

    Only whoever cuts, joins or checks weather without changing what its values mean may note that. What is done
    to a variable later gives it another graph, which `is_as_stored` sees.

    Parameters
    ----------
    weather : xarray.Dataset
        With ``stored`` in its encoding where its source says how it lies in its files, or ``ungated`` where it was
        checked since and that is what it was before.

    Returns
    -------
    xarray.Dataset
        With ``stored_graphs`` in its encoding, the names of the graphs of its lazy variables; unchanged without these.
    """
    if not {"stored", "ungated"} & set(weather.encoding):
        return weather
    graphs = {str(name): _graph(values) for name, values in weather.data_vars.items()}
    marked = weather.copy(deep=False)
    marked.encoding = {**weather.encoding, "stored_graphs": graphs}
    return marked


def is_as_stored(weather: xr.Dataset, names: Iterable[str]) -> bool:
    """Whether variables are those that `mark_as_stored` has seen.

    Parameters
    ----------
    weather : xarray.Dataset
        Perhaps changed since.
    names : iterable of str
        The variables.

    Returns
    -------
    bool
        False where one is in memory, was changed, or was never marked.
    """
    graphs = weather.encoding.get("stored_graphs", {})
    return all(graphs.get(name) is not None and graphs[name] == _graph(weather[name]) for name in names)


def _graph(values: xr.DataArray) -> str | None:
    return getattr(values.data, "name", None) if values.chunks is not None else None


def _as_site(weather: xr.Dataset) -> xr.Dataset:
    latitude, longitude = float(weather["latitude"][0]), float(weather["longitude"][0])
    longitude -= 360.0 if longitude > 180.0 else 0.0
    name = f"{abs(latitude):g}{'S' if latitude < 0 else 'N'} {abs(longitude):g}{'W' if longitude < 0 else 'E'}"
    site = weather.isel(latitude=0, longitude=0).expand_dims(site=[name])
    site = site.assign_coords(latitude=("site", [latitude]), longitude=("site", [longitude]))
    said = [*weather.attrs.get("conventions", []), "The one cell is taken as a site."]
    return site.transpose("time", "site", ...).assign_attrs(conventions=said)


def describe_inputs(files: Iterable[str], base: Path) -> dict[str, dict[str, Any]]:
    """Identity of every input file: its name as given, digest and size.

    Parameters
    ----------
    files : iterable of str
        Paths or ``package:path`` names.
    base : Path
        Folder of the run file; names are told relative to it.

    Returns
    -------
    dict
        Name to `stillfield.products.manifest.identity_of`. Of absolute paths outside `base` only the end is told; equal
        ends are numbered.
    """
    found: dict[str, dict[str, Any]] = {}
    for name in files:
        (path,) = locate([name])
        shown = told = _told(name, base)
        number = 1
        while told in found:
            number += 1
            told = f"{shown} ({number})"
        found[told] = identity_of(path)
    return found


def _told(name: str, base: Path) -> str:
    """`name` counted from `base`, wherever the program was started; names inside packages as they are."""
    if not Path(name).exists():
        return name
    if Path(name).is_absolute():
        return portable_name(name, base.absolute())
    return Path(os.path.relpath(name, base)).as_posix()
