"""Weather of stations in tables of text: one table with all of them, or a table for each.

A table is brought into the form of a station file (times by sites, with units and positions), and from there
goes the way of every other file: the same meanings of sunshine, the same conversions, the same gates.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from stillfield.errors import Fault, WeatherError
from stillfield.sources.gates import gate
from stillfield.sources.grids.netcdf import weather_from_pieces
from stillfield.sources.grids.netcdf_pieces import take_pieces
from stillfield.sources.locate import locate
from stillfield.sources.recognise import Choice, Found, read_mapping
from stillfield.sources.stations.station_columns import Column, find_places, find_quantities, numbers, refuse_faults
from stillfield.sources.stations.station_rows import Rows, read_rows
from stillfield.sources.stations.station_sites import Site, positions, site_of_rows
from stillfield.sources.stations.station_times import read_times

#: A station's clock this far from its sun is no local clock: its days are cut by the sun instead. [h]
_FARTHEST_CLOCK_HOURS = 3.0
_NAMES = {"sun": "irradiation"}
#: Sites of rows that hold remarks or marks in place of weather.
_NO_SITE = ("-99", "-999", "-9999")


@dataclass(frozen=True)
class TableOptions:
    """How a table is written: the keys of ``table`` in the run file."""

    columns: Mapping[str, str] = field(default_factory=dict)
    date_format: str | None = None
    utc_offset_hours: float | None = None
    stations: str | None = None
    site: Mapping[str, Any] | None = None
    missing: Sequence[float] = ()
    comment: str | None = None
    header: bool = True
    skip_lines: int = 0


@dataclass(frozen=True)
class Stations:
    """Tables in the form of a station file, ready for `netcdf_pieces.take_pieces`.

    Attributes
    ----------
    weather : xarray.Dataset
        Dims time and site.
    choices : dict of str to Choice
        What the run file says, by the names used in `weather`.
    notes : list of str
    headings : str
        Columns there are, for errors.
    recognised : list of str
        What was recognised, as `recognise.Found.told` gives it.
    """

    weather: xr.Dataset
    choices: dict[str, Choice]
    notes: list[str]
    headings: str
    recognised: list[str]


def open_station_table(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None,
    table: Mapping[str, Any] | None = None, radiation_from_temperature: Mapping[str, float] | None = None,
) -> xr.Dataset:
    """Open tables of station weather, daily or in shorter steps.

    Parameters
    ----------
    files : sequence of str
        Tables: comma, semicolon, tab or blanks between the cells.
    variables : mapping, optional
        As for `stillfield.sources.grids.netcdf.open_netcdf`; ``name`` is the heading of the column. Columns left out
        are recognised by their heading; units stand in the heading, ``Tmin (degC)``, or here.
    table : mapping, optional
        `TableOptions`: ``columns`` of site, position and time; ``date_format`` where dates are not ISO;
        ``utc_offset_hours`` of the clock; ``stations``, a second table with their positions, or ``site``, the
        position of a single one; ``missing``, ``comment``, ``header``, ``skip_lines``.
    radiation_from_temperature : mapping, optional
        ``k_rs``: estimate sunshine from minimum and maximum temperature.

    Returns
    -------
    xarray.Dataset
        Dims time and site, in memory, held against its bounds and counted; daily tables with ``clock`` 'own-days',
        finer ones 'local-standard' or 'UTC'.

    Raises
    ------
    WeatherError
        If a column, position or clock is missing, or cells are no numbers or dates: all at once, by line. If a value
        cannot be true: the first, by station and time.
    UnitsError
        If a unit is missing, unknown or of the wrong kind.
    """
    paths = locate(files)
    options = TableOptions(**(table or {}))
    stations = read_stations(paths, read_mapping(variables), options)
    labels = [path.name for path in paths]
    weather, notes = _with_clock(stations.weather, options, where=", ".join(labels[:3]))
    pieces = take_pieces(weather, where_of(paths), stations.choices)
    made = weather_from_pieces(pieces, stations.choices, labels=labels, available=lambda: stations.headings,
                               radiation_from_temperature=radiation_from_temperature, day_clock="local")
    said = [line for line in made.attrs["conventions"] if " is read as " not in line]
    made = gate(made.compute(), where=made.attrs["files"])[0]  # tables are in memory as it is
    return made.assign_attrs(conventions=[*stations.notes, *notes, *said], recognised=stations.recognised)


def where_of(paths: Sequence[Path]) -> str:
    """Name of the tables, for errors."""
    return str(paths[0]) if len(paths) == 1 else f"{paths[0]} and {len(paths) - 1} more"


def read_stations(
    paths: Sequence[Path], choices: Mapping[str, Choice], options: TableOptions, *, monthly: bool = False
) -> Stations:
    """Read tables into the form of a station file.

    Parameters
    ----------
    paths : sequence of Path
        The tables.
    choices : mapping of str to Choice
        What the run file says of the quantities.
    options : TableOptions
        How the tables are written.
    monthly : bool
        Whether each row is a month.

    Returns
    -------
    Stations

    Raises
    ------
    WeatherError
        As `open_station_table`.
    """
    frames, sites, notes = [], dict[str, Site](), dict[str, None]()
    known: dict[str, Column] = {}
    headings: dict[str, None] = {}
    for path in paths:
        rows = read_rows(path, comment=options.comment, header=options.header, skip_lines=options.skip_lines)
        headings |= dict.fromkeys(rows.headings)
        frame, found, said, here = _one_table(rows, choices, options, monthly=monthly)
        _same_units(known, found, path)
        known |= found
        notes |= dict.fromkeys(said)
        sites |= {name: site for name, site in here.items() if name not in sites}
        frames.append(frame)
    _check_names(choices, known, headings, paths)
    listed = ", ".join(headings)
    if not known:
        raise WeatherError("no column is a quantity of weather", where=str(paths[0]), got=listed,
                           cure="Name the columns under `variables` in the run file.")
    rows_of_all = _each_once(pd.concat(frames, ignore_index=True))
    placed = positions(list(dict.fromkeys(rows_of_all["site"])), sites, options.stations, options.site, paths=paths)
    weather, said_choices = _laid_out(rows_of_all, known, placed, choices)
    told = [f"Column '{column.heading}' is read as {_NAMES.get(role, role)} by {column.how} (units "
            f"'{said_choices[role].units}')." for role, column in known.items()]
    recognised = [
        Found(role, column.heading, said_choices[role].units, None, None, None, "", column.how).told(daily=True)
        for role, column in known.items()
    ]
    return Stations(weather, said_choices, [*told, *notes], listed, recognised)


def _one_table(
    rows: Rows, choices: Mapping[str, Choice], options: TableOptions, *, monthly: bool
) -> tuple[pd.DataFrame, dict[str, Column], tuple[str, ...], dict[str, Site]]:
    faults: list[Fault] = []
    places = find_places(rows, options.columns)
    found = {role: column for role, column in find_quantities(rows, choices).items()
             if column.heading not in places.values() or column.how == "the run file"}
    times = read_times(rows, places, date_format=options.date_format, monthly=monthly, nominal_year=2001,
                       faults=faults)
    if times.utc and options.utc_offset_hours not in (None, 0.0):
        raise WeatherError("the times carry their offset from UTC and the run file states another",
                           where=str(rows.path), got=f"table.utc_offset_hours: {options.utc_offset_hours:g}",
                           cure="Leave it out.")
    site, here = site_of_rows(rows, places, faults)
    data = {role: numbers(rows, column.heading, options.missing, faults) for role, column in found.items()}
    refuse_faults(rows.path, faults)
    frame = pd.DataFrame({"site": site, "time": times.stamps, "line": rows.cells.index, "file": rows.path.name, **data})
    marks = frame["site"].isin(_NO_SITE)
    told = [f"{int(marks.sum())} rows of {rows.path.name} whose site is a number for missing were left out."]
    return frame[~marks].assign(utc=times.utc), found, (*times.notes, *(told if marks.any() else [])), here


def _same_units(known: Mapping[str, Column], found: Mapping[str, Column], path: Path) -> None:
    for role, column in found.items():
        before = known.get(role)
        if before is not None and (before.units, before.height_m) != (column.units, column.height_m):
            raise WeatherError(f"tables disagree about {_NAMES.get(role, role)}", where=str(path),
                               got=f"'{column.heading}', elsewhere '{before.heading}'",
                               wanted="one unit and height in all tables", cure="Run them apart.")


def _check_names(
    choices: Mapping[str, Choice], known: Mapping[str, Column], headings: Mapping[str, None], paths: Sequence[Path]
) -> None:
    for role, choice in choices.items():
        if choice.name and not choice.optional and role not in known:
            raise WeatherError("no table has this column", where=f"variables.{_NAMES.get(role, role)}.name",
                               got=choice.name, wanted=f"one of {', '.join(headings)} in {paths[0].name}",
                               cure="Correct the run file.")


def _each_once(rows: pd.DataFrame) -> pd.DataFrame:
    """Rows sorted by time, each site and time once; copies that contradict each other are refused."""
    quantities = [name for name in rows.columns if name not in ("line", "file", "utc")]
    unlike = rows.drop_duplicates(quantities)
    twice = unlike[unlike.duplicated(["site", "time"], keep=False)].sort_values(["site", "time"], kind="stable")
    if len(twice):
        first, second = twice.iloc[0], twice.iloc[1]
        raise WeatherError(
            "a time comes twice with different values", where=f"{second['file']}, line {second['line']}",
            got=f"site {first['site']} at {str(first['time'])[:16]}, also in {first['file']}, line {first['line']}; "
                f"{len(twice)} such rows",
            cure="Leave out one of them; name the column of the site under `table.columns` if these are two sites.",
        )
    return unlike.sort_values("time", kind="stable")


def _laid_out(
    rows: pd.DataFrame, known: Mapping[str, Column], sites: Mapping[str, Site], choices: Mapping[str, Choice]
) -> tuple[xr.Dataset, dict[str, Choice]]:
    """Times by sites, each quantity under its vocabulary name with its unit."""
    names = list(sites)
    table = rows.set_index(["time", "site"])
    data, said = {}, {}
    for role, column in known.items():
        grid = table[role].unstack("site").reindex(columns=names)
        name, choice = _NAMES.get(role, role), choices.get(role, Choice(""))
        said[role] = replace(
            choice, name="", units=choice.units or column.units,
            height_m=choice.height_m if choice.height_m is not None else column.height_m,
        )
        units = said[role].units
        data[name] = (("time", "site"), grid.to_numpy(dtype=float), {} if units is None else {"units": units})
    times = np.unique(rows["time"].to_numpy())
    coords: dict[str, Any] = {
        "time": times,
        "latitude": ("site", [site.latitude for site in sites.values()], {"units": "degrees_north"}),
        "longitude": ("site", [site.longitude for site in sites.values()], {"units": "degrees_east"}),
        "name": ("site", np.array([site.name or key for key, site in sites.items()], dtype=object)),
        "station": ("site", np.array(names, dtype=object), {"cf_role": "timeseries_id"}),
    }
    if all(site.elevation is not None for site in sites.values()):
        coords["elevation"] = ("site", [site.elevation for site in sites.values()], {"units": "m"})
    if all(site.utc_offset_hours is not None for site in sites.values()):
        coords["utc_offset_hours"] = ("site", [site.utc_offset_hours for site in sites.values()], {"units": "h"})
    elif rows["utc"].all():
        coords["utc_offset_hours"] = ("site", np.zeros(len(names)), {"units": "h"})
    return xr.Dataset(data, coords=coords), said


def _with_clock(weather: xr.Dataset, options: TableOptions, *, where: str) -> tuple[xr.Dataset, list[str]]:
    """Settle the clock of steps shorter than a day; the days of daily tables are their own."""
    index = weather.indexes["time"]
    if len(index) > 1 and (index[1:] - index[:-1]).min() >= pd.Timedelta(hours=24):
        return weather.drop_vars("utc_offset_hours", errors="ignore"), []
    if options.utc_offset_hours is not None:
        weather = weather.assign_coords(
            utc_offset_hours=("site", np.full(weather.sizes["site"], float(options.utc_offset_hours)), {"units": "h"}))
    if "utc_offset_hours" not in weather.coords:
        raise WeatherError("the clock of the times is unknown", where=where, wanted="hours ahead of UTC",
                           cure="State it: weather.table.utc_offset_hours, 0 for UTC.")
    offsets = weather["utc_offset_hours"].values
    off = np.abs((weather["longitude"].values / 15.0 - offsets + 12.0) % 24.0 - 12.0)
    if (off <= _FARTHEST_CLOCK_HOURS).all():
        return weather, [f"The clock of the stations is UTC{offsets.min():+g} h." if np.ptp(offsets) == 0.0
                         else "Each station has its own clock."]
    if np.ptp(offsets) > 0.0 or offsets[0] % 1.0:
        raise WeatherError("the clocks of the stations do not fit their longitudes", where=where,
                           got=f"{off.max():.1f} h from the sun",
                           cure="Correct utc_offset_hours, or give times in UTC.")
    moved = weather.assign_coords(time=index.to_numpy() - np.timedelta64(round(offsets[0] * 3600), "s"))
    return moved.drop_vars("utc_offset_hours"), [
        f"Times are UTC{offsets[0]:+g} h, which is not the stations' own clock; days are cut by the sun."]
