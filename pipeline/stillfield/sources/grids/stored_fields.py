"""Which stored variables make which quantity, and by what arithmetic: the counterpart of `quantities` on disk."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from stillfield.physics.wind import wind_speed_at_2m
from stillfield.sources.grids.netcdf_pieces import Piece
from stillfield.sources.grids.stored import Combination, StoredField, StoredVariable, StoredWeather
from stillfield.sources.grids.stored_building import Role, stored_variable
from stillfield.sources.grids.sunshine import Meaning
from stillfield.sources.quantities import Joined
from stillfield.sources.tally import COUNTS
from stillfield.sources.units import conversion
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER

_Recipe = tuple[tuple[str, ...], tuple[tuple[float, float], ...], Combination, float]


def stored_weather(
    weather: xr.Dataset, pieces: Sequence[Piece], joined: Mapping[str, Joined], meaning: Meaning,
    times: Mapping[str, pd.Index[Any]],
) -> StoredWeather | None:
    """Tell how opened weather lies in its files.

    Parameters
    ----------
    weather : xarray.Dataset
        As `netcdf.open_netcdf` gives it.
    pieces : sequence of Piece
        What it was made of.
    joined : mapping of str to Joined
        The same by role, with the sunshine.
    meaning : Meaning
        Of the sunshine.
    times : mapping of str to Index
        Times of each quantity before all were put on those of the sunshine.

    Returns
    -------
    StoredWeather or None
        None where a part of it does not lie plainly.
    """
    if any(piece.stored is None for piece in pieces) or "site" in weather.dims or \
            any("repeated" in one.counts for one in joined.values()):
        return None
    fields = {}
    for name in (str(name) for name in weather.data_vars if name != COUNTS):
        field = _field(name, weather, pieces, joined, meaning, times[name])
        if field is None:
            return None
        fields[name] = field
    return StoredWeather(
        fields, weather.indexes["time"], weather["latitude"].values, weather["longitude"].values,
        float(weather.attrs["step_hours"]), str(weather.attrs.get("files", "weather")),
    )


def _field(
    name: str, weather: xr.Dataset, pieces: Sequence[Piece], joined: Mapping[str, Joined], meaning: Meaning,
    index: pd.Index[Any],
) -> StoredField | None:
    recipe = _recipe(name, joined, meaning, float(weather.attrs["step_hours"]))
    if recipe is None:
        return None
    roles, units, combination, factor = recipe
    variables: list[StoredVariable] = []
    for role in roles:
        own = sorted((piece for piece in pieces if piece.found.role == role),
                     key=lambda piece: piece.values.indexes["time"].min())
        parts = tuple((piece.stored, piece.values.indexes["latitude"], piece.values.indexes["longitude"])
                      for piece in own)
        if not joined[role].values.indexes["time"].equals(joined[roles[0]].values.indexes["time"]):
            return None
        order = np.argsort(np.concatenate([piece.values.indexes["time"].to_numpy() for piece in own]), kind="stable")
        variable = stored_variable(Role(parts, order, index), weather.indexes["time"], weather["latitude"].values,
                                   weather["longitude"].values)
        if variable is None:
            return None
        variables.append(variable)
    field = StoredField(tuple(variables), units, combination, factor)
    return _of_differences(field, joined["sun"], weather) if combination == "difference" else field


def _recipe(name: str, joined: Mapping[str, Joined], meaning: Meaning, step_hours: float) -> _Recipe | None:
    """Roles, their units, how they are combined, and a last factor; None where it takes more than these."""
    table = DAY_WEATHER if step_hours >= 24.0 else STEP_WEATHER

    def units(*roles: str) -> tuple[tuple[float, float], ...]:
        return tuple(conversion(joined[role].found.units, table[name].unit, where=joined[role].where)
                     for role in roles)

    if name in {"irradiation", "ghi"}:
        return _of_sun(joined["sun"], meaning)
    if name == "wind_speed":
        roles = ("wind_speed",) if "wind_speed" in joined else ("wind_u", "wind_v")
        height = joined[roles[0]].found.height_m
        to_2m = 1.0 if height is None else float(wind_speed_at_2m(1.0, height))
        if len(roles) == 1:
            factor, shift = units(*roles)[0]
            return roles, ((factor * to_2m, shift * to_2m),), "plain", 1.0
        return roles, units(*roles), "speed", to_2m
    if name == "temp_air" and name not in joined:
        roles = ("temp_air_min", "temp_air_max")
        return roles, units(*roles), "mean", 1.0
    return ((name,), units(name), "plain", 1.0) if name in joined else None


def _of_sun(sun: Joined, meaning: Meaning) -> _Recipe | None:
    if meaning.of_daylight or sun.found.how == "estimate":
        return None
    if meaning.accumulates:
        return ("sun",), ((1.0, 0.0),), "difference", meaning.factor
    return ("sun",), ((meaning.factor, 0.0),), "plain", 1.0


def _of_differences(field: StoredField, sun: Joined, weather: xr.Dataset) -> StoredField | None:
    """The field with what `sunshine.differences` asks of each record."""
    index = sun.values.indexes["time"]
    if len(index) != weather.sizes["time"]:
        return None
    step_hours = float(weather.attrs["step_hours"])
    hour = sun.values["time"].dt.hour.values + sun.values["time"].dt.minute.values / 60.0
    gap = np.asarray((index[1:] - index[:-1]).total_seconds()) / 3600.0
    return StoredField(field.variables, field.units, field.combination, field.factor,
                       opens=np.isclose(hour, step_hours).tobytes(),
                       follows=b"\0" + np.isclose(gap, step_hours).tobytes())
