"""Weather files of every kind behind one Protocol; each module knows one family of files."""

from __future__ import annotations

import importlib
import inspect
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

import xarray as xr

from stillfield.errors import WeatherError

#: Kinds of source by the name used in run files, and the function or class that opens each.
KINDS = {
    "typical-year": ("stillfield.sources.typical.typical_year", "open_typical_year"),
    "netcdf": ("stillfield.sources.grids.netcdf", "open_netcdf"),
    "zarr": ("stillfield.sources.grids.stores", "open_zarr"),
    "grib": ("stillfield.sources.grids.stores", "open_grib"),
    "monthly-means": ("stillfield.sources.months.monthly_means", "open_monthly_means"),
    "station-table": ("stillfield.sources.stations.station_table", "open_station_table"),
    "synthetic": ("stillfield.sources.invented.synthetic", "SyntheticSource"),
}


class Source(Protocol):
    """One opened-on-demand weather source.

    The dataset a source gives has

    - dimensions ``time, latitude, longitude`` (grid) or ``time, site`` (stations, with coordinates
      ``latitude``, ``longitude``, ``elevation`` and, for local clocks, ``utc_offset_hours`` on ``site``);
    - variables named and in the units of `vocabulary.STEP_WEATHER` (steps shorter than a day) or
      `vocabulary.DAY_WEATHER` (daily);
    - ``time`` marking the start of the interval;
    - attributes ``record`` ('series' or 'typical-year'), ``step_hours`` (24.0 for daily),
      ``clock`` ('UTC', 'local-standard', or 'own-days' for daily weather whose days are the source's own),
      ``origin`` (one sentence: what was read from where) and ``conventions`` (list of str: every
      assumption made about the file, one sentence each) and ``recognised`` (list of str, each the text of a JSON
      object: ``name`` in the file or null, ``quantity`` by stillfield's name, ``units`` in the file, ``how`` it
      was recognised).
    """

    def open(self) -> xr.Dataset:
        """Read or lazily open the weather."""
        ...


@dataclass(frozen=True)
class FileSource:
    """A source that is read by one function from some files, when it is opened."""

    kind: str
    files: tuple[str, ...]
    options: dict[str, Any] = field(default_factory=dict)

    def open(self) -> xr.Dataset:
        """Read or lazily open the files.

        Returns
        -------
        xarray.Dataset
            As described in `Source`.
        """
        weather: xr.Dataset = _opener(self.kind)(self.files, **self.options)
        return weather


def _opener(kind: str) -> Any:
    module, name = KINDS[kind]
    return getattr(importlib.import_module(module), name)


def open_source(kind: str, files: Sequence[str | Path] = (), **options: Any) -> Source:
    """Source of one kind, not yet opened.

    Parameters
    ----------
    kind : str
        What the files are: a key of `KINDS`.
    files : sequence of str or Path
        Paths, patterns, or ``package:path`` for a file inside an installed package.
        For 'synthetic' the polygon file of the land, unless `land` is among the options.
    **options
        Arguments of the function or class in `KINDS`, for example `netcdf.open_netcdf`.

    Returns
    -------
    Source
        Its ``open()`` gives the dataset.

    Raises
    ------
    WeatherError
        If the kind or an option does not exist.

    Examples
    --------
    >>> open_source("typical-year", ["pvlib:data/12839.tm2"]).open().sizes["time"]
    8760
    """
    if kind not in KINDS:
        raise WeatherError("unknown kind of weather", where="weather.kind", got=kind, wanted=", ".join(KINDS))
    opener = _opener(kind)
    known = inspect.signature(opener).parameters
    unknown = sorted(set(options) - set(known))
    if unknown:
        raise WeatherError(
            f"{kind} weather takes no option '{unknown[0]}'",
            where="weather",
            wanted=", ".join(name for name in known if name != "files"),
        )
    if kind == "synthetic":
        source: Source = opener(**({"land": Path(files[0])} if files else {}) | options)
        return source
    return FileSource(kind, tuple(map(str, files)), dict(options))


def guess_kind(files: Sequence[str | Path]) -> str:
    """Kind of weather files, told from the first bytes of the first one.

    Parameters
    ----------
    files : sequence of str or Path
        Paths, patterns, or ``package:path``.

    Returns
    -------
    str
        'netcdf', 'zarr', 'grib' or 'typical-year'; monthly means and station tables have to be named.

    Raises
    ------
    WeatherError
        If there is no such file, or it is of no known kind.

    Examples
    --------
    >>> guess_kind(["pvlib:data/12839.tm2"])
    'typical-year'
    """
    from stillfield.sources.locate import locate
    from stillfield.sources.typical.year_formats import recognise

    first = locate([str(name) for name in files])[0]
    if first.is_dir():
        return "zarr"
    with first.open("rb") as stream:
        head = stream.read(4000)
    if head.startswith((b"CDF", b"\x89HDF")):
        return "netcdf"
    if head.startswith(b"GRIB"):
        return "grib"
    recognise(head, where=str(first))
    return "typical-year"
