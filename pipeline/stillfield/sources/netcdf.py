"""Gridded or station weather in CF NetCDF files, daily or sub-daily, opened lazily.

Only headers, coordinates and a few days of a few cells are read here; the weather itself is read, and held
against the physical gates, when the dataset is computed.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.physics.wind import wind_speed_at_2m
from stillfield.sources.alignment import TOLERANCE_MINUTES, measure_sun_offset
from stillfield.sources.file_proof import prove_whole
from stillfield.sources.gates import gate
from stillfield.sources.grid_axes import snapped
from stillfield.sources.locate import locate
from stillfield.sources.netcdf_pieces import Piece, join_pieces, read_pieces
from stillfield.sources.recognise import Choice, Found, read_mapping
from stillfield.sources.sunshine import Meaning, differences, grows_from_midnight, settle_meaning
from stillfield.sources.units import conversion, irradiation_kind
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER

_LONGEST_COMPONENT_STEP_HOURS = 6.0
#: The clock is checked on this many days, at steps up to this long.
_CLOCK_DAYS = 12
_LONGEST_CHECKED_STEP_HOURS = 3.0


@dataclass(frozen=True)
class _Joined:
    """One role over all files, stamps as in the files."""

    found: Found
    placed: str | None
    values: xr.DataArray
    where: str


def open_netcdf(
    files: Sequence[str], *, variables: Mapping[str, str | Mapping[str, Any]] | None = None
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
    pieces: list[Piece] = []
    for path in paths:
        prove_whole(path)
        pieces += read_pieces(path, choices)
    _check_choices(choices, pieces, paths)
    joined, step_hours, notes = _join_roles(pieces, paths)
    daily = step_hours >= 24.0
    sun, said = _sunshine(joined.pop("sun"), step_hours)
    weather = {"irradiation" if daily else "ghi": sun}
    notes += said
    for build in (_plain, _wind, _mean_temperature):
        built, said = build(joined, step_hours)
        weather |= {name: values for name, values in built.items() if name not in weather}
        notes += said
    return _assemble(weather, step_hours=step_hours, notes=notes, paths=paths)


def _join_roles(pieces: Sequence[Piece], paths: Sequence[Path]) -> tuple[dict[str, _Joined], float, list[str]]:
    notes = list(dict.fromkeys(note for piece in pieces for note in piece.notes))
    roles: dict[str, list[Piece]] = {}
    for piece in pieces:
        roles.setdefault(piece.found.role, []).append(piece)
    if "sun" not in roles:
        raise WeatherError("no sunshine was recognised", where=", ".join(path.name for path in paths[:3]),
                           got=_variable_names(paths), wanted="a variable for irradiation",
                           cure="Name it under `variables.irradiation.name` in the run file.")
    joined = {}
    for role, parts in roles.items():
        values = join_pieces(parts)
        joined[role] = _Joined(parts[0].found, parts[0].placed, values, _names(parts))
        found = parts[0].found
        notes.append(f"{found.name} is read as {'sunshine' if role == 'sun' else role} by {found.how} "
                     f"(units '{found.units}').")
    step_hours = _step_hours(joined["sun"])
    for role, one in joined.items():
        if one.values.sizes["time"] > 1 and not np.isclose(_step_hours(one), step_hours):
            raise WeatherError("variables have different time steps", where=one.where,
                               got=f"{role} every {_step_hours(one):g} h, sunshine every {step_hours:g} h",
                               cure="Bring them to one step first.")
    return joined, step_hours, notes


def _check_choices(choices: Mapping[str, Choice], pieces: Sequence[Piece], paths: Sequence[Path]) -> None:
    seen = {(piece.found.role, piece.found.name) for piece in pieces}
    for role, choice in choices.items():
        if choice.name and (role, choice.name) not in seen:
            raise WeatherError("no file has this variable",
                               where=f"variables.{'irradiation' if role == 'sun' else role}.name", got=choice.name,
                               wanted=f"one of {_variable_names(paths)}", cure="Correct the run file.")


def _variable_names(paths: Sequence[Path]) -> str:
    """Names in the first files, for an error."""
    names: dict[str, None] = {}
    for path in paths[:3]:
        with xr.open_dataset(path, engine="netcdf4", decode_cf=False) as raw:
            names |= dict.fromkeys(str(name) for name in raw.data_vars)
    return ", ".join(names)


def _names(parts: Sequence[Piece]) -> str:
    first = parts[0].path
    return first if len(parts) == 1 else f"{first} and {len(parts) - 1} more"


def _step_hours(joined: _Joined) -> float:
    """Step of a time axis in hours; gaps are allowed, uneven steps and months are not."""
    index = joined.values.indexes["time"]
    if len(index) < 2:
        if joined.placed == "bounds":
            return float(joined.values.attrs["bounds_hours"])
        raise WeatherError("one time alone does not tell the time step", where=joined.where,
                           wanted="two times, or time bounds", cure="Give all files of the series together.")
    steps = np.asarray((index[1:] - index[:-1]).total_seconds()) / 3600.0
    least = float(steps.min())
    where = joined.where
    if least > 24.0 * 27:
        raise WeatherError("this is monthly weather", where=where, got=f"steps of {least / 24:g} days",
                           wanted="daily or hourly steps",
                           cure="The yield of a mean day is not the mean yield: get daily or hourly weather.")
    whole = steps / least
    if least <= 0.0 or not np.allclose(whole, np.round(whole), atol=1e-3) or not _divides_day(least):
        odd = int(np.argmax(np.abs(whole - np.round(whole))))
        raise WeatherError("the time steps are uneven", where=where,
                           got=f"{steps[odd]:g} h after {str(index[odd])[:16]}, elsewhere {least:g} h",
                           wanted="steps of 24 h or a whole part of it")
    return least


def _divides_day(hours: float) -> bool:
    return hours <= 24.0 and bool(np.isclose(24.0 / hours, round(24.0 / hours)))


def _shifted(values: xr.DataArray, hours: float) -> xr.DataArray:
    import pandas as pd

    return values if not hours else values.assign_coords(
        time=values.indexes["time"] + pd.Timedelta(seconds=round(hours * 3600)))


def _placed(joined: _Joined, step_hours: float) -> _Joined:
    """Bring daily stamps to the start of their day and mid-step stamps to the start of the step."""
    import pandas as pd

    index = joined.values.indexes["time"]
    if joined.placed == "bounds":
        return joined
    if step_hours >= 24.0:
        late = pd.Timedelta(seconds=1 if joined.found.stamp == "end" else 0)
        return _Joined(joined.found, None, joined.values.assign_coords(time=(index - late).floor("D")), joined.where)
    seconds = (index - index.floor("D")).total_seconds()
    phase = float(seconds[0]) / 3600.0 % step_hours
    middle = joined.found.stamp == "middle" or (joined.found.stamp is None and np.isclose(phase, step_hours / 2.0))
    if not middle:
        return joined
    return _Joined(joined.found, "middle", _shifted(joined.values, -step_hours / 2.0), joined.where)


def _sunshine(joined: _Joined, step_hours: float) -> tuple[xr.DataArray, list[str]]:
    placed = _placed(joined, step_hours)
    grows = None
    if step_hours < 24.0 and irradiation_kind(joined.found.units, where=joined.where) == "energy":
        grows = grows_from_midnight(_sample(joined.values, step_hours), step_hours)
    meaning = settle_meaning(joined.found, step_hours=step_hours, placed=placed.placed, grows=grows,
                             where=joined.where)
    values = differences(placed.values, step_hours) if meaning.accumulates else placed.values
    sun = _shifted(_scaled(values, meaning), meaning.shift_steps * step_hours)
    return sun, [meaning.sentence, *_check_clock(sun, step_hours)]


def _check_clock(sun: xr.DataArray, step_hours: float) -> list[str]:
    """Hold a few days of a few cells against the sun, so that a stamp read at the wrong end is noticed."""
    if step_hours > _LONGEST_CHECKED_STEP_HOURS:
        return []
    index = sun.indexes["time"]
    midnights = np.flatnonzero(index == index.floor("D"))
    first = int(midnights[0]) if midnights.size else len(index)
    steps = round(24.0 / step_hours)
    days = min((len(index) - first) // steps, _CLOCK_DAYS)
    part = sun.isel(time=slice(first, first + days * steps))
    stamps = part.indexes["time"]
    if days == 0 or not np.isclose((stamps[-1] - stamps[0]).total_seconds() / 3600.0, 24.0 * days - step_hours):
        return []
    sample = _sample(part, step_hours, days=days)
    day_of_year = np.asarray(sample["time"].dt.dayofyear.values[::steps], dtype=float)
    fits = [
        measure_sun_offset(values, latitude=float(cell["latitude"]), longitude=float(cell["longitude"]),
                           clock_offset_hours=0.0, day_of_year=day_of_year)
        for cell, values in ((sample.isel(cell=i), sample.values[:, i]) for i in range(sample.sizes["cell"]))
    ]
    offsets = [fit.offset_minutes for fit in fits if fit is not None]
    if not offsets:
        return []
    found, ideal = float(np.median(offsets)), 30.0 * step_hours
    told = f"Sunshine follows the sun {found:.0f} minutes after the start of the step ({ideal:.0f} is ideal)."
    if abs(found - ideal) < TOLERANCE_MINUTES:
        return [told]
    return [f"WARNING: {told} The stamps may mark another end of the step; check `means` and `stamp`."]


def _scaled(values: xr.DataArray, meaning: Meaning) -> xr.DataArray:
    return values if meaning.factor == 1.0 else values * meaning.factor


def _sample(values: xr.DataArray, step_hours: float, *, days: int = 3) -> xr.DataArray:
    """First days of up to nine cells, computed, as (time, cell)."""
    part = values.isel(time=slice(0, round(24.0 * days / step_hours) + 1))
    space = [dim for dim in values.dims if dim != "time"]
    picks = {dim: np.unique(np.linspace(0, values.sizes[dim] - 1, 5).astype(int)[1:4]) for dim in space}
    return part.isel(picks).stack(cell=space).transpose("time", "cell").compute()


def _plain(joined: Mapping[str, _Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Roles that need one conversion: temperatures, humidity, beam and diffuse."""
    table = DAY_WEATHER if step_hours >= 24.0 else STEP_WEATHER
    built, notes = {}, []
    for role, one in joined.items():
        if role in {"wind_u", "wind_v", "wind_speed"}:
            continue
        if role not in table:
            notes.append(f"{one.found.name} ({role}) is not used at this time step.")
            continue
        built[role] = _converted(_placed(one, step_hours), table[role].unit)
    return built, notes


def _converted(one: _Joined, unit: str) -> xr.DataArray:
    factor, offset = conversion(one.found.units, unit, where=f"{one.found.name} in {one.where}")
    values = one.values if factor == 1.0 else one.values * factor
    return values if offset == 0.0 else values + offset


def _wind(joined: Mapping[str, _Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    if "wind_speed" in joined:
        one = joined["wind_speed"]
        speed = _converted(_placed(one, step_hours), "m s-1")
    elif {"wind_u", "wind_v"} <= set(joined):
        one = joined["wind_u"]
        if step_hours > _LONGEST_COMPONENT_STEP_HOURS:
            raise WeatherError(
                "wind components averaged over a day do not give the wind speed", where=one.where,
                got=f"a step of {step_hours:g} h", wanted="components at steps of at most 6 h, or a wind speed",
                cure="Get the daily mean of the speed, or hourly components.",
            )
        u, v = (_converted(_placed(joined[role], step_hours), "m s-1") for role in ("wind_u", "wind_v"))
        u, v = xr.align(u, v, join="inner")
        speed = (u**2 + v**2) ** 0.5
    else:
        return {}, []
    height = one.found.height_m
    if height is None:
        raise WeatherError("the height of the wind is unknown", where=f"{one.found.name} in {one.where}",
                           wanted="metres above ground",
                           cure=f"Set variables.{one.found.role}.height_m in the run file.")
    # The conversion is one factor, so it is taken at unit speed and stays lazy.
    factor = float(wind_speed_at_2m(1.0, height))
    notes = [f"Wind was brought from {height:g} m to 2 m (FAO-56 equation 47)."] if height != 2.0 else []
    return {"wind_speed": speed if factor == 1.0 else speed * factor}, notes


def _mean_temperature(joined: Mapping[str, _Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    extremes = ("temp_air_min", "temp_air_max")
    if "temp_air" in joined or step_hours < 24.0 or not set(extremes) <= set(joined):
        return {}, []
    low, high = (_converted(_placed(joined[role], step_hours), "degC") for role in extremes)
    low, high = xr.align(low, high, join="inner")
    return {"temp_air": 0.5 * (low + high)}, ["Mean air temperature is taken as the middle of minimum and maximum."]


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
    weather: Mapping[str, xr.DataArray], *, step_hours: float, notes: list[str], paths: Sequence[Path]
) -> xr.Dataset:
    daily = step_hours >= 24.0
    table = DAY_WEATHER if daily else STEP_WEATHER
    names = ", ".join(path.name for path in paths[:3]) + (f" and {len(paths) - 3} more" if len(paths) > 3 else "")
    weather, said = _same_cells(weather, where=names)
    weather, also = _same_times(weather, where=names)
    arrays = {}
    for name, values in weather.items():
        arrays[name] = values.copy(deep=False)
        arrays[name].attrs = {"units": table[name].unit, "long_name": table[name].meaning}
        if table[name].standard_name:
            arrays[name].attrs["standard_name"] = table[name].standard_name
    result = xr.Dataset(arrays)
    for axis, unit in (("latitude", "degrees_north"), ("longitude", "degrees_east")):
        result[axis].attrs = {"units": unit, "standard_name": axis}
    gaps = _gaps(result, step_hours)
    result.attrs = {
        "record": "series",
        "step_hours": step_hours,
        "clock": "own-days" if daily else "UTC",
        "origin": f"{'Daily' if daily else f'{step_hours:g}-hourly'} weather read from {names}.",
        "conventions": [*notes, *said, *also, *gaps],
    }
    return gate(result, where=names)[0]


def _gaps(weather: xr.Dataset, step_hours: float) -> list[str]:
    index = weather.indexes["time"]
    spanned = (index[-1] - index[0]).total_seconds() / 3600.0 / step_hours + 1.0
    missing = round(spanned) - len(index)
    return [f"{missing} steps between the first and the last are absent from the files."] if missing else []
