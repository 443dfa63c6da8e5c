"""Estimate: daily litres of every cell, with the condition band, the rule beside it, and flags."""

from __future__ import annotations

from collections.abc import Mapping
from functools import partial
from typing import Any

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import MethodError
from stillfield.methods import Block, Method
from stillfield.methods.baselines import ConstantEfficiency
from stillfield.physics.rule import yield_from_efficiency
from stillfield.physics.still import Still
from stillfield.sources.calendars import solar_day_of_year
from stillfield.sources.tally import COUNT, COUNTS
from stillfield.vocabulary import YIELD

#: Cells worked on at a time: big enough for long inner loops, small enough that a block stays near the cache.
BLOCK_BYTES = 64e6

_OUTPUTS = (
    ("daily_yield", "central"),
    ("daily_yield_low", "weathered end of the band"),
    ("daily_yield_high", "new end of the band"),
    ("daily_yield_rule", "constant-efficiency rule"),
)
_FLAGS = {"frost": "Brine frozen at some time of the day", "outside_fit": "Day outside the range of the method"}


def estimate(
    daily: xr.Dataset,
    still: Still,
    method: Method,
    *,
    rule: ConstantEfficiency,
    steps: xr.Dataset | None = None,
) -> xr.Dataset:
    """Daily yield of every cell and day.

    Parameters
    ----------
    daily : xarray.Dataset
        Weather of local days: `vocabulary.DAY_WEATHER`, dimensions ``time`` and space.
    still : Still
        The design with its central condition and band.
    method : Method
        Yield method.
    rule : ConstantEfficiency
        Baseline printed beside the result.
    steps : xarray.Dataset, optional
        The same days in steps, for hourly methods: `vocabulary.STEP_WEATHER`, dimensions ``time``, ``step``
        and space.

    Returns
    -------
    xarray.Dataset
        Lazy; dimensions ``time`` and space. ``daily_yield``, ``daily_yield_low``, ``daily_yield_high``,
        ``daily_yield_rule`` [L m-2], ``frost`` and ``outside_fit`` (1 where flagged); the counts of the weather.

    Raises
    ------
    MethodError
        If the weather lacks what the method needs.
    """
    weather = weather_for(method, daily, steps)
    space = [dim for dim in daily["irradiation"].dims if dim != "time"]
    cells = _cell_numbers(weather, space)
    inputs = {name: weather[name] for name in (*method.needs, *method.uses) if name in weather}
    arrays, axes = _chunked({**inputs, "_rule": daily["irradiation"], **cells}, space)
    kernel = partial(
        _block_yield,
        names=tuple(inputs),
        day_of_year=_day_of_year(daily),
        cyclic=daily.attrs.get("record") == "typical-year",
        still=still,
        method=method,
        rule=rule,
    )
    stacked = da.blockwise(
        kernel,
        "ot" + _letters(space),
        *[item for pair in zip(arrays, axes, strict=True) for item in pair],
        new_axes={"o": len(_OUTPUTS) + len(_FLAGS)},
        concatenate=True,
        dtype=np.float32,
        meta=np.empty((0,) * (2 + len(space)), dtype=np.float32),
    )
    return _labelled(stacked, daily, space, still, method)


def weather_for(method: Method, daily: xr.Dataset, steps: xr.Dataset | None = None) -> xr.Dataset:
    """Choose the weather a method works on, days or steps, and check that it holds what the method needs.

    Parameters
    ----------
    method : Method
        Yield method.
    daily, steps : xarray.Dataset
        As for `estimate`.

    Returns
    -------
    xarray.Dataset
        One of the two, untouched.

    Raises
    ------
    MethodError
        If the weather lacks what the method needs.
    """
    if method.resolution == "hourly" and steps is None:
        raise MethodError(
            f"method '{method.name}' works on steps of at most 6 h, and the weather is daily",
            cure="Give hourly weather, or choose method 'fitted'.",
        )
    weather = daily if method.resolution == "daily" or steps is None else steps
    missing = [name for name in method.needs if name not in weather]
    if missing:
        raise MethodError(
            f"the weather lacks what method '{method.name}' needs",
            where=str(weather.attrs.get("origin", "weather")),
            got=", ".join(str(name) for name in weather.data_vars) or "no variable",
            wanted=", ".join(missing),
            cure="Map the variable in the run file (weather.variables) or choose another method.",
        )
    return weather


def _cell_numbers(weather: xr.Dataset, space: list[Any]) -> dict[str, xr.DataArray]:
    """Latitude and clock residual of every cell, shape of the space dimensions."""
    template = xr.DataArray(
        np.zeros([weather.sizes[dim] for dim in space]), dims=space, coords={d: weather[d] for d in space}
    )
    latitude = (weather["latitude"].reset_coords(drop=True) + template).transpose(*space)
    if "clock_to_solar_hours" in weather.coords:
        residual = weather["clock_to_solar_hours"].transpose(*space)
    else:
        residual = template
    return {"_latitude": latitude, "_clock": residual}


def _letters(space: list[Any]) -> str:
    return "yx"[-len(space):]


def _chunked(arrays: Mapping[str, xr.DataArray], space: list[Any]) -> tuple[list[Any], list[str]]:
    """Give every array dask chunks that are whole in time and the same in space."""
    largest = max(arrays.values(), key=lambda array: int(array.size))
    steps = int(np.prod([largest.sizes[dim] for dim in largest.dims if dim not in space]))
    per_cell = steps * 8.0 * len(arrays)
    cells = max(int(BLOCK_BYTES / per_cell), 1)
    columns = largest.sizes[space[-1]]
    chunks = {space[-1]: min(columns, cells)}
    if len(space) == 2:
        chunks[space[0]] = max(min(largest.sizes[space[0]], cells // columns), 1)
    out, axes = [], []
    for array in arrays.values():
        lead = [dim for dim in ("time", "step") if dim in array.dims]
        ordered = array.transpose(*lead, *space)
        sizes = tuple([-1] * len(lead) + [chunks[dim] for dim in space])
        data = ordered.data
        out.append(data.rechunk(sizes) if isinstance(data, da.Array) else da.from_array(data, chunks=sizes))
        axes.append("ts"[: len(lead)] + _letters(space))
    return out, axes


def _day_of_year(daily: xr.Dataset) -> NDArray[np.int64]:
    return solar_day_of_year(daily["time"])


def _block_yield(
    *arrays: NDArray[Any],
    names: tuple[str, ...],
    day_of_year: NDArray[np.int64],
    cyclic: bool,
    still: Still,
    method: Method,
    rule: ConstantEfficiency,
) -> NDArray[np.float32]:
    """Work one block of cells over all days; the last three arrays are irradiation, latitude and clock.

    Cells without any sunshine, the sea of most grids, cost nothing.
    """
    *weather, irradiation, latitude, clock = arrays
    shape = irradiation.shape
    sunshine = irradiation.reshape(shape[0], -1)
    cells = np.flatnonzero(np.isfinite(sunshine).any(axis=0))
    out = np.full((len(_OUTPUTS) + len(_FLAGS), shape[0], latitude.size), np.nan, dtype=np.float32)
    out[len(_OUTPUTS):] = 0.0
    if cells.size == 0:
        return out.reshape(out.shape[0], *shape)
    some = slice(None) if cells.size == latitude.size else cells
    steps = 1 if method.resolution == "daily" else weather[0].shape[1]
    block = Block(
        weather={
            name: values.reshape(shape[0] * steps, -1)[:, some]
            for name, values in zip(names, weather, strict=True)
        },
        latitude=latitude.reshape(-1)[some],
        day_of_year=day_of_year,
        steps_per_day=steps,
        clock_to_solar_hours=clock.reshape(-1)[some],
        cyclic=cyclic,
    )
    conditions = (still.condition, still.condition_low, still.condition_high)
    central, *_ = band = method.daily_yields(block, still, conditions)
    for row, one in enumerate(band):
        out[row][:, some] = one.litres
    out[3] = yield_from_efficiency(sunshine, rule.efficiency)
    for row, flags in ((4, central.frost), (5, central.outside)):
        if flags is not None:
            out[row][:, some] = flags
    return out.reshape(out.shape[0], *shape)


def _labelled(stacked: Any, daily: xr.Dataset, space: list[Any], still: Still, method: Method) -> xr.Dataset:
    dims = ("time", *space)
    coords = {name: coord for name, coord in daily.coords.items() if set(coord.dims) <= set(dims)}
    quantity = YIELD["daily_yield"]
    variables: dict[str, Any] = {}
    for row, (name, role) in enumerate(_OUTPUTS):
        variables[name] = (
            dims, stacked[row], {"units": quantity.unit, "long_name": f"{quantity.meaning}, {role}"}
        )
    for row, (name, meaning) in enumerate(_FLAGS.items(), start=len(_OUTPUTS)):
        variables[name] = (dims, stacked[row], {"units": "1", "long_name": meaning})
    attrs = {**daily.attrs, "still": still.name, "condition": still.condition, "method": method.name}
    result = xr.Dataset(variables, coords=coords, attrs=attrs)
    return result.assign({COUNTS: _counts_of_use(daily, method)}) if COUNTS in daily else result


def _counts_of_use(daily: xr.Dataset, method: Method) -> xr.DataArray:
    """Counts of the weather this method takes: what it does not take need not be read for them."""
    taken = {*method.needs, *method.uses, "irradiation", "ghi", "days", "clearness"}
    taken |= {"wind_u", "wind_v"} if "wind_speed" in taken else set()
    quantities = [str(label).partition(":")[0] for label in daily[COUNT].values]
    return daily[COUNTS].isel({COUNT: [row for row, name in enumerate(quantities) if name in taken]})
