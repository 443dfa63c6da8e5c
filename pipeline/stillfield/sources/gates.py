"""Physical gates: weather that cannot be true is refused, and the first breach is named.

A gate works on weather in memory, a whole small dataset or one block of a large one as it is read, so that
nothing is read twice; counts of several blocks add up. On lazy weather it becomes part of the computation.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.sources.calendars import solar_day_of_year
from stillfield.sources.settle import NOISE_FLOOR, Breach, lowest_of, refuse_breach
from stillfield.sources.tally import cell_counts, sentences, with_counts
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER, Quantity

Array = NDArray[np.floating[Any]]

#: Irradiation of a day may exceed the extraterrestrial by this factor and this much [MJ m-2]: rounding,
#: days cut at another hour than the sun's, and the last degrees before polar night.
_MARGIN_FACTOR = 1.05
_MARGIN_MJ = 0.6


@dataclass(frozen=True)
class GateCounts:
    """What the gates changed or found, by variable; add the counts of blocks with ``+``.

    Attributes
    ----------
    clipped : dict of str to int
        Small negative values set to 0.
    missing : dict of str to int
        Missing values.
    values : dict of str to int
        Values seen.
    """

    clipped: dict[str, int] = field(default_factory=dict)
    missing: dict[str, int] = field(default_factory=dict)
    values: dict[str, int] = field(default_factory=dict)

    def __add__(self, other: GateCounts) -> GateCounts:
        """Counts of both."""
        return GateCounts(*(_added(getattr(self, name), getattr(other, name)) for name in
                            ("clipped", "missing", "values")))

    def sentences(self) -> list[str]:
        """One sentence for each variable that was clipped or has missing values.

        Returns
        -------
        list of str

        Examples
        --------
        >>> GateCounts({"ghi": 3}, {"ghi": 0}, {"ghi": 100}).sentences()
        ['3 of 100 values of ghi were slightly negative and set to 0.']
        """
        return sentences({
            name: {"clipped": self.clipped[name], "missing": self.missing[name], "values": self.values[name]}
            for name in self.values
        })


def _added(first: dict[str, int], second: dict[str, int]) -> dict[str, int]:
    return {name: first.get(name, 0) + second.get(name, 0) for name in {**first, **second}}


def gate(weather: xr.Dataset, *, where: str = "weather") -> tuple[xr.Dataset, GateCounts]:
    """Check weather against physical bounds and clip noise below zero.

    Every variable of the vocabulary is held against its bounds, and the irradiation of each day against
    the extraterrestrial one at its latitude (with a margin of 5 % and 0.6 MJ m-2).

    Parameters
    ----------
    weather : xarray.Dataset
        Vocabulary names and units, coordinates ``time`` and ``latitude``.
    where : str
        File or block, for errors.

    Returns
    -------
    weather : xarray.Dataset
        The same, small negative irradiance set to 0, numbers that were taken out missing, and variable ``counts``
        (`tally`) with what happened in each cell. Of lazy weather each block is checked when it is computed,
        nothing is counted, and days that lie across two blocks are held against the bounds of a step only.
    counts : GateCounts
        Of all cells together. Empty for lazy weather.

    Raises
    ------
    WeatherError
        On the first value outside its bounds, with its cell and time.
    """
    daily = float(weather.attrs.get("step_hours", 24.0)) >= 24.0
    table = DAY_WEATHER if daily else STEP_WEATHER
    if any(weather[name].chunks is not None for name in table if name in weather.data_vars):
        changed = {}
        for name in (name for name in table if name in weather.data_vars):
            one = weather[[name]]
            changed[name] = xr.map_blocks(_checked_block, one, kwargs={"where": where}, template=one)[name]
        return weather.assign(changed), GateCounts()
    checked, counts = _checked(weather, where=where)
    return _counted(weather, table).assign(checked.data_vars), counts


def _checked_block(block: xr.Dataset, *, where: str) -> xr.Dataset:
    return _checked(block, where=where)[0]


def _checked(weather: xr.Dataset, *, where: str) -> tuple[xr.Dataset, GateCounts]:
    """Variables of the vocabulary in `weather`, in memory, held against their bounds."""
    daily = float(weather.attrs.get("step_hours", 24.0)) >= 24.0
    table = DAY_WEATHER if daily else STEP_WEATHER
    counts = GateCounts()
    result = weather[[name for name in table if name in weather.data_vars]]
    for name in result.data_vars:
        values, clipped = _check_bounds(weather[name], table[str(name)], where=where)
        counts += GateCounts(
            {str(name): clipped}, {str(name): int(np.isnan(values.values).sum())}, {str(name): int(values.size)}
        )
        result = result.assign({name: values})
    if "latitude" in weather.coords:
        _check_sunshine(result, daily=daily, where=where)
    return result, counts


def _counted(weather: xr.Dataset, table: Mapping[str, Quantity]) -> xr.Dataset:
    """Weather with what is small and negative, and what is missing, counted in each cell."""
    counted = weather
    for name in (name for name in table if name in weather.data_vars and "time" in weather[name].dims):
        values = weather[name].transpose("time", ...)
        kinds = ("missing", "sentinel", "clipped") if name in NOISE_FLOOR else ("missing", "sentinel")
        rows = cell_counts(values, partial(_count_block, kinds=kinds), kinds)
        counted = with_counts(counted, name, {**rows, "values": values.sizes["time"]})
    return counted


def _count_block(block: NDArray[Any], *, kinds: tuple[str, ...]) -> NDArray[np.int64]:
    tests: dict[str, Callable[[NDArray[Any]], NDArray[np.bool_]]] = {
        "missing": lambda values: ~np.isfinite(values), "sentinel": np.isinf, "clipped": lambda values: values < 0.0,
    }
    with np.errstate(invalid="ignore"):
        found = [tests[kind](block) for kind in kinds]
    return np.stack([np.count_nonzero(one, axis=0) for one in found]).astype(np.int64)


def _check_bounds(values: xr.DataArray, quantity: Quantity, *, where: str) -> tuple[xr.DataArray, int]:
    data = values.values
    if np.isinf(data).any():
        data = np.where(np.isinf(data), data.dtype.type(np.nan), data)
        values = values.copy(data=data)
    with np.errstate(invalid="ignore"):
        outside = (data < lowest_of(quantity)) | (data > quantity.high)
        negative = (data < 0.0) if quantity.name in NOISE_FLOOR else np.zeros(1, dtype=bool)
    if outside.any():
        spot = int(np.argmax(outside))
        first = np.unravel_index(spot, outside.shape)
        record, cell = divmod(spot, outside[0].size)
        refuse_breach(Breach(record, cell, float(data[first]), int(outside.sum())), quantity,
                      where=f"{where}, {_label(values, first)}")
    clipped = int(negative.sum())
    return (values.clip(min=0.0, keep_attrs=True) if clipped else values), clipped


def _label(values: xr.DataArray, index: tuple[Any, ...]) -> str:
    parts = []
    for dim, at in zip(values.dims, index, strict=True):
        if dim in values.coords:
            mark = values[dim].values[at]
            text = str(mark)[:16] if dim == "time" else (f"{mark:g}" if isinstance(mark, np.floating) else str(mark))
            parts.append(f"{dim} {text}")
    return ", ".join(parts) or f"index {tuple(int(i) for i in index)}"


def most_irradiation(outside: Array) -> Array:
    """Most irradiation [MJ m-2] that a day can have by that outside the atmosphere, with a margin."""
    return outside * _MARGIN_FACTOR + _MARGIN_MJ


def refuse_sunshine(found: float, allowed: float, number: int, *, where: str) -> None:
    """Refuse more sunshine than reaches the top of the atmosphere.

    Raises
    ------
    WeatherError
        Always.
    """
    raise WeatherError(
        "more sunshine than reaches the top of the atmosphere",
        where=where,
        got=f"{found:.2f} MJ m-2 in the day; {number} such days",
        wanted=f"at most {allowed:.2f} MJ m-2",
        cure="Check the units and what the sunshine `means` (mean or total, of which period).",
    )


def _check_sunshine(weather: xr.Dataset, *, daily: bool, where: str) -> None:
    sun = _daily_irradiation(weather, daily=daily)
    if sun is None:
        return
    latitude = np.atleast_1d(weather["latitude"].values).astype(float)
    day_of_year = np.atleast_1d(solar_day_of_year(sun["time"]))
    outside = xr.DataArray(
        most_irradiation(extraterrestrial_irradiation(latitude, day_of_year)),
        dims=("time", weather["latitude"].dims[0]),
    )
    limit = outside.transpose(*[d for d in sun.dims if d in outside.dims])
    with np.errstate(invalid="ignore"):
        breach = (sun.drop_vars(list(sun.coords)) > limit).transpose(*sun.dims).values
    if not breach.any():
        return
    first = np.unravel_index(int(np.argmax(breach)), breach.shape)
    marks = dict(zip(sun.dims, first, strict=True))
    allowed = limit.isel({d: marks[d] for d in limit.dims})
    refuse_sunshine(float(sun.values[first]), float(allowed), int(breach.sum()), where=f"{where}, {_label(sun, first)}")


def _daily_irradiation(weather: xr.Dataset, *, daily: bool) -> xr.DataArray | None:
    """Irradiation of each whole day [MJ m-2]; None where there is none to check."""
    if daily:
        return weather.get("irradiation")
    if "ghi" not in weather:
        return None
    hours = float(weather.attrs["step_hours"])
    steps = round(24.0 / hours)
    first = int((-_hour_of(weather["time"].values[:1])[0] / hours) % steps)
    days = (weather.sizes["time"] - first) // steps
    if days < 1:
        return None
    block = weather["ghi"].isel(time=slice(first, first + days * steps))
    sums = block.coarsen(time=steps, coord_func="min").sum()
    return sums * (hours * 0.0036)


def _hour_of(time: NDArray[Any]) -> Array:
    return np.asarray(xr.DataArray(time, dims="time").dt.hour.values, dtype=float)
