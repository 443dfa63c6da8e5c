"""Gridded or station weather in CF NetCDF files, daily or sub-daily, opened lazily.

Only headers, coordinates and a few days of a few cells are read here. The weather is read when it is computed;
numbers that stood for missing travel as `settle.TAKEN_OUT` until they are counted.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.grids.grid_axes import snapped
from stillfield.sources.grids.joining import join_pieces
from stillfield.sources.grids.netcdf_pieces import Piece
from stillfield.sources.grids.netcdf_series import read_files
from stillfield.sources.grids.stored_fields import stored_weather
from stillfield.sources.locate import locate
from stillfield.sources.quantities import (
    Joined,
    dew_point,
    estimated_sun,
    mean_temperature,
    plain,
    step_hours_of,
    sun_meaning,
    sunshine,
    wind,
)
from stillfield.sources.recognise import Choice, read_mapping
from stillfield.sources.region import run_on
from stillfield.sources.tally import with_counts
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER


def open_netcdf(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None,
    radiation_from_temperature: Mapping[str, float] | None = None, day_clock: str | None = None,
) -> xr.Dataset:
    """Open CF NetCDF files as one lazy dataset in vocabulary names and units.

    Files may split the time axis, the variables, or both. Variables are recognised by `variables`, then by
    their usual short name, then by standard_name; units come from the units attribute or from `variables`.

    Parameters
    ----------
    files : sequence of str
        Paths or patterns.
    variables : mapping, optional
        Vocabulary name (``irradiation`` or ``ghi``, ``temp_air``, ..., ``wind_u``, ``wind_v``) to the variable's
        name, or to a mapping with ``name``, ``units``, ``means`` (`recognise.MEANINGS`), ``stamp`` ('start',
        'middle', 'end') and ``height_m`` of the wind.
    radiation_from_temperature : mapping, optional
        ``k_rs``: estimate the irradiation of daily files without sunshine from the temperature range
        (`stillfield.physics.temperature_range`).
    day_clock : str, optional
        Clock by which the days of daily files were cut: 'UTC', 'local', or an offset such as 'UTC+8'.

    Returns
    -------
    xarray.Dataset
        Daily files give ``irradiation`` [MJ m-2] and attribute ``clock`` 'own-days'; finer steps give ``ghi``
        [W m-2] and 'UTC'. Latitude and longitude ascend, longitude within -180..180.

    Raises
    ------
    WeatherError
        If a file is broken or foreign, the grid is not regular, or the sunshine can be read in two ways.
    UnitsError
        If a unit is missing, unknown or of the wrong kind.
    """
    paths = locate(files)
    choices = read_mapping(variables)
    pieces = read_files(paths, choices)
    return weather_from_pieces(
        pieces, choices, labels=[path.name for path in paths], available=lambda: _variable_names(paths),
        radiation_from_temperature=radiation_from_temperature, day_clock=day_clock,
    )


def weather_from_pieces(
    pieces: Sequence[Piece], choices: Mapping[str, Choice], *, labels: Sequence[str], available: Callable[[], str],
    radiation_from_temperature: Mapping[str, float] | None = None, day_clock: str | None = None,
) -> xr.Dataset:
    """Make one dataset in vocabulary names and units of recognised pieces, whatever they were opened from.

    Parameters
    ----------
    pieces : sequence of Piece
        From `netcdf_pieces.take_pieces`.
    choices : mapping of str to Choice
        What the run file says.
    labels : sequence of str
        Names of the files.
    available : callable
        Tells which variables there are, for errors.
    radiation_from_temperature : mapping, optional
        ``k_rs``, see `open_netcdf`.
    day_clock : str, optional
        See `open_netcdf`.

    Returns
    -------
    xarray.Dataset
        As `open_netcdf` gives it. Stations with a coordinate ``utc_offset_hours`` keep their own clock.

    Raises
    ------
    WeatherError, UnitsError
        As `open_netcdf`.
    """
    check_choices(choices, pieces, available, labels)
    joined, notes = join_roles(pieces)
    notes += estimated_sun(joined, radiation_from_temperature)
    require_sunshine(joined, labels, available)
    step_hours = _common_step(joined)
    counts = {role: one.counts for role, one in joined.items()}
    daily = step_hours >= 24.0
    recognised = [one.found.told(daily=daily) for one in joined.values()]
    meaning = sun_meaning(joined["sun"], step_hours)
    sun, said = sunshine(joined["sun"], meaning, step_hours, day_clock)
    weather = {"irradiation" if daily else "ghi": sun}
    notes += said
    for build in (plain, wind, mean_temperature, dew_point):
        built, said = build({role: one for role, one in joined.items() if role != "sun"}, step_hours)
        weather |= {name: values for name, values in built.items() if name not in weather}
        notes += said
    made = _assemble(weather, step_hours=step_hours, notes=notes, labels=labels, counts=counts)
    made = made.assign_attrs(recognised=recognised)
    stored = stored_weather(made, pieces, joined, meaning, {name: one.indexes["time"] for name, one in weather.items()})
    if stored is not None:
        # Beside the attributes, which a notebook may write into a file.
        made.encoding = {**made.encoding, "stored": stored}
    return made


def join_roles(pieces: Sequence[Piece]) -> tuple[dict[str, Joined], list[str]]:
    """Join the pieces of every role along time; with sentences about what was recognised."""
    notes = list(dict.fromkeys(note for piece in pieces for note in piece.notes))
    roles: dict[str, list[Piece]] = {}
    for piece in pieces:
        roles.setdefault(piece.found.role, []).append(piece)
    joined = {}
    for role, parts in roles.items():
        series = join_pieces(parts)
        found = parts[0].found
        joined[role] = Joined(found, parts[0].placed, series.values, _names(parts), series.counts)
        notes.append(f"{found.name} is read as {'sunshine' if role == 'sun' else role} by {found.how} "
                     f"(units '{found.units}').")
        notes += series.notes
    return joined, notes


def require_sunshine(joined: Mapping[str, Joined], labels: Sequence[str], available: Callable[[], str]) -> None:
    """Refuse weather without sunshine.

    Raises
    ------
    WeatherError
        With what is there in its place.
    """
    if "sun" not in joined:
        cure = "Name it under `variables.irradiation.name` in the run file."
        if {"temp_air_min", "temp_air_max"} <= set(joined):
            cure = ("There is none, but minimum and maximum temperature: `radiation_from_temperature: {k_rs: 0.16}` "
                    "(0.19 on coasts) estimates it roughly.")
        raise WeatherError("no sunshine was recognised", where=", ".join(labels[:3]), got=available(),
                           wanted="a variable for irradiation", cure=cure)


def _common_step(joined: Mapping[str, Joined]) -> float:
    step_hours = step_hours_of(joined["sun"])
    for role, one in joined.items():
        if one.values.sizes["time"] > 1 and not np.isclose(step_hours_of(one), step_hours):
            raise WeatherError("variables have different time steps", where=one.where,
                               got=f"{role} every {step_hours_of(one):g} h, sunshine every {step_hours:g} h",
                               cure="Bring them to one step first.")
    return step_hours


def check_choices(
    choices: Mapping[str, Choice], pieces: Sequence[Piece], available: Callable[[], str], labels: Sequence[str]
) -> None:
    """Refuse a run file that names a variable no file has.

    Raises
    ------
    WeatherError
        With the variables there are.
    """
    seen = {(piece.found.role, piece.found.name) for piece in pieces}
    for role, choice in choices.items():
        if choice.name and not choice.optional and (role, choice.name) not in seen:
            files = labels[0] if len(labels) == 1 else f"any of the {len(labels)} files from {labels[0]}"
            raise WeatherError(f"no such variable in {files}",
                               where=f"weather.variables.{'irradiation' if role == 'sun' else role}.name",
                               got=choice.name, wanted=f"one of {available()}", cure="Correct the run file.")


def _variable_names(paths: Sequence[Path]) -> str:
    """Names in the first files, for an error."""
    names: dict[str, None] = {}
    for path in paths[:3]:
        with xr.open_dataset(path, engine="netcdf4", decode_cf=False) as raw:
            names |= dict.fromkeys(str(name) for name in raw.data_vars)
    return ", ".join(names)


def _names(parts: Sequence[Piece]) -> str:
    first, more = parts[0].path, sum(len(part.files) or 1 for part in parts) - 1
    return f"{first} and {more} more" if more else first


def _same_cells(weather: Mapping[str, xr.DataArray], *, where: str) -> tuple[dict[str, xr.DataArray], list[str]]:
    """All variables on the cells they share; grids of different spacing are refused."""
    sun = next(iter(weather.values()))
    weather = {name: snapped(values, sun) for name, values in weather.items()}
    aligned = dict(zip(weather, xr.align(*weather.values(), join="inner", exclude=["time"]), strict=True))
    notes = []
    for name, after in aligned.items():
        for dim in (dim for dim in after.dims if dim != "time"):
            before = weather[name].indexes[dim]
            taken = before.get_indexer(after.indexes[dim])
            if taken.size == 0 or (dim != "site" and np.any(np.diff(taken) != 1)):
                raise WeatherError("variables lie on different grids", where=where,
                                   got=f"{name} on {len(before)} values of {dim}, {taken.size} of them shared",
                                   cure="Regrid them to one grid first.")
            if taken.size < len(before):
                notes.append(f"{name} was cut from {len(before)} to the {taken.size} shared values of {dim}.")
    return aligned, notes


def _same_times(weather: Mapping[str, xr.DataArray], *, where: str) -> tuple[dict[str, xr.DataArray], list[str]]:
    """All variables on the times of the sunshine, which comes first; missing where they have none."""
    index = next(iter(weather.values())).indexes["time"]
    same, notes = {}, []
    for name, values in weather.items():
        own = values.indexes["time"]
        lacking = len(index) - len(index.intersection(own))
        if lacking == len(index):
            raise WeatherError(f"{name} and the sunshine share no time", where=where,
                               got=f"{str(own[0])[:16]} to {str(own[-1])[:16]}",
                               wanted=f"{str(index[0])[:16]} to {str(index[-1])[:16]}",
                               cure="Give files of the same period.")
        if lacking:
            notes.append(f"{name} is missing at {lacking} of {len(index)} times of the sunshine.")
        same[name] = values if own.equals(index) else values.reindex(time=index)
    return same, notes


def _assemble(
    weather: Mapping[str, xr.DataArray], *, step_hours: float, notes: list[str], labels: Sequence[str],
    counts: Mapping[str, Mapping[str, xr.DataArray | int]],
) -> xr.Dataset:
    daily = step_hours >= 24.0
    table = DAY_WEATHER if daily else STEP_WEATHER
    names = ", ".join(labels[:3]) + (f" and {len(labels) - 3} more" if len(labels) > 3 else "")
    weather, said = _same_cells(weather, where=names)
    weather, also = _same_times(weather, where=names)
    arrays = {}
    for name, values in weather.items():
        arrays[name] = values.copy(deep=False)
        arrays[name].attrs = {"units": table[name].unit, "long_name": table[name].meaning}
        if table[name].standard_name:
            arrays[name].attrs["standard_name"] = table[name].standard_name
    result = xr.Dataset(arrays)
    for role, rows in counts.items():
        name = next(iter(weather)) if role == "sun" else role
        result = with_counts(result, name, {kind: _on_cells_of(result, row) for kind, row in rows.items()})
    result, across = run_on(result)
    for axis, unit in (("latitude", "degrees_north"), ("longitude", "degrees_east")):
        result[axis].attrs = {"units": unit, "standard_name": axis}
    gaps = _gaps(result, step_hours)
    result.attrs = {
        "record": "series",
        "step_hours": step_hours,
        "clock": "own-days" if daily else "local-standard" if "utc_offset_hours" in result.coords else "UTC",
        "files": names,
        "origin": f"{'Daily' if daily else f'{step_hours:g}-hourly'} weather read from {names}.",
        "conventions": [*notes, *said, *also, *across, *gaps],
    }
    return result


def _on_cells_of(weather: xr.Dataset, row: xr.DataArray | int) -> xr.DataArray | int:
    if isinstance(row, int):
        return row
    return snapped(row, next(iter(weather.data_vars.values()))).sel({dim: weather[dim].values for dim in row.dims})


def _gaps(weather: xr.Dataset, step_hours: float) -> list[str]:
    index = weather.indexes["time"]
    spanned = (index[-1] - index[0]).total_seconds() / 3600.0 / step_hours + 1.0
    missing = round(spanned) - len(index)
    return [f"{missing} steps between the first and the last are absent from the files."] if missing else []
