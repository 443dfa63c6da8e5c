"""The daily correlation walked through time: cells that remember the days before and look a day ahead.

Per cell it keeps what the basin remembers and the newest day, whose yield waits for tomorrow's temperature. Each
number comes from its own cell's days by the same operations in the same order, so neither the cuts in time nor
the cells beside it change a digit. Compiled it works in single precision, in numpy in double.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.compiling import Engine, is_compiled
from stillfield.physics.correlation import (
    FROST_FLAG,
    FROST_TERMS,
    SCALES,
    VARIANTS,
    DailyCorrelation,
    Day,
    evaluate,
    frost_factor,
    scaled_predictors,
)
from stillfield.physics.day_shape import DayWeather, day_from_days
from stillfield.physics.gain_table import GainRows

Array = NDArray[np.floating[Any]]
Flags = NDArray[np.bool_]
#: Predictors of days, or the weather they follow from.
Days = Day | DayWeather
T = TypeVar("T", bound=Days)
#: Litres, frost and whether the day is outside the range of the fit, each of shape (day, cell).
Yields = tuple[Array, Flags, Flags]

#: Days at the end of a typical year that are run through before its first.
WARM_UP_DAYS = 30
#: Cell-days worked on together in numpy: enough to hide the cost of a call, few enough to stay in the cache.
TILE = 8192


@dataclass(frozen=True)
class Results:
    """Where yields are written to.

    Attributes
    ----------
    litres : ndarray, shape (correlation, day, cell)
        [L m-2]
    frost : ndarray of bool, shape (correlation, day, cell)
        False to begin with.
    outside : ndarray of bool, shape (day, cell)
    """

    litres: Array
    frost: Flags
    outside: Flags


#: Takes days, the air temperature of the day after each, the state, results and the row of the first of them.
Walk = Callable[[Days, Array, Array, Results, int], None]


class CorrelationMarch:
    """Several correlations of one variant, memory and range, as the conditions of a still are, on some cells.

    Parameters
    ----------
    correlations : sequence of DailyCorrelation
        Same variant, memory and ranges.
    cells : int
        Number of cells.
    gains : GainRows, optional
        Daily gain of the design at the cells' latitudes: with it the march takes `DayWeather`, without `Day`.
    engine : {'auto', 'compiled', 'numpy'}
        'auto' is compiled where numba is installed.

    Raises
    ------
    ValueError
        If variants, memories or ranges differ, or coefficients do not match the terms.
    MethodError
        If the engine is not there.

    Examples
    --------
    >>> plain = DailyCorrelation("daily", (2.0, 1.0, *[0.0] * 34), (1.0,) * 9, 0.0, 0.3, {}, 0.0, 0.0)
    >>> march = CorrelationMarch([plain], cells=1, engine="numpy")
    >>> day = Day(*np.array([[[20.0]], [[25.0]], [[2.0]], [[12.0]], [[0.5]]]))
    >>> [litres.tolist() for litres, frost, outside in march.advance(day, last=False)]
    [[]]
    >>> [litres.tolist() for litres, frost, outside in march.advance(day, last=True)]
    [[[3.0], [3.0]]]
    """

    def __init__(
        self, correlations: Sequence[DailyCorrelation], cells: int, *, gains: GainRows | None = None,
        engine: Engine = "auto",
    ) -> None:
        first = correlations[0]
        if any((one.variant, one.memory, one.ranges) != (first.variant, first.memory, first.ranges)
               for one in correlations):
            raise ValueError("correlations of different variants, memories or ranges")
        terms = len(VARIANTS[first.variant])
        if any((len(one.coefficients), len(one.frost)) != (terms, len(FROST_TERMS)) for one in correlations):
            raise ValueError(f"coefficients do not match the {terms} terms of {first.variant!r}")
        compiled = is_compiled(engine, "the daily correlation")
        self._dtype = np.dtype(np.float32 if compiled else np.float64)
        self._walk = _compiled_walk(correlations, gains) if compiled else _numpy_walk(correlations, gains)
        self._sets, self._variant = len(correlations), first.variant
        self._state = np.full((2, cells), np.nan, self._dtype)
        self._pending: Days | None = None

    def advance(self, day: Days, *, last: bool) -> list[Yields]:
        """Take the next days and give the yields of all days complete and not yet given.

        Parameters
        ----------
        day : Day or DayWeather
            Those that follow the days of the call before; there may be none.
        last : bool
            Whether no day follows; the last is then its own tomorrow.

        Returns
        -------
        list of (litres, frost, outside)
            One per correlation, arrays of shape (day, cell). Litres are NaN where a predictor is. [L m-2]
        """
        day = filled(day, self._variant, self._state.shape[1], self._dtype)
        temp, days = day.temp_air, len(day.temp_air)
        newest = rows(day, slice(days - 1, days)) if days else self._pending
        parts = []
        if days and self._pending is not None:
            parts.append((self._pending, temp[:1]))
        if days > 1:
            parts.append((rows(day, slice(0, days - 1)), temp[1:]))
        if last and newest is not None:
            parts.append((newest, newest.temp_air))
        if newest is not None and days and not last:
            self._pending = filled(_copied(newest), self._variant, self._state.shape[1], self._dtype)
        results = self._results(sum(len(after) for _, after in parts))
        at = 0
        for part, after in parts:
            self._walk(part, after, self._state, results, at)
            at += len(after)
        return [(litres, frost, results.outside)
                for litres, frost in zip(results.litres, results.frost, strict=True)]

    def _results(self, days: int) -> Results:
        shape = (self._sets, days, self._state.shape[1])
        return Results(np.empty(shape, self._dtype), np.zeros(shape, dtype=bool), np.empty(shape[1:], dtype=bool))


def daily_litres(
    correlations: Sequence[DailyCorrelation], day: Day, *, cyclic: bool = False, engine: Engine = "numpy"
) -> list[Yields]:
    """Daily yields of a whole record by several correlations, as the conditions of a still are.

    Parameters
    ----------
    correlations : sequence of DailyCorrelation
        Same variant, memory and ranges.
    day : Day
        Predictors of all days.
    cyclic : bool
        True for a typical year: the days before the first are the last, the day after the last is the first.
    engine : {'auto', 'compiled', 'numpy'}
        As in `CorrelationMarch`.

    Returns
    -------
    list of (litres, frost, outside)
        One per correlation.

    Raises
    ------
    ValueError
        As `CorrelationMarch` does.
    """
    days, cells = np.shape(day.transmitted)
    before = min(WARM_UP_DAYS, days) if cyclic else 0
    if cyclic:
        whole = filled(day, correlations[0].variant, cells, np.dtype(float))
        day = rows(whole, np.r_[days - before : days, :days, 0])
    some = slice(before, before + days)
    found = CorrelationMarch(correlations, cells, engine=engine).advance(day, last=True)
    return [(litres[some], frost[some], outside[some]) for litres, frost, outside in found]


def fields_of(variant: str) -> tuple[str, ...]:
    """Name the fields of `Day` that a variant takes.

    Parameters
    ----------
    variant : str
        A key of `VARIANTS`.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> fields_of("daily")
    ('transmitted', 'temp_air', 'day_length', 'clearness', 'wind_speed')
    """
    letters = set("".join(VARIANTS[variant])) | set("STN")
    return (*(field for letter, (field, _, _) in SCALES.items() if letter in letters), "wind_speed")


def filled(day: T, variant: str, cells: int, dtype: np.dtype[Any]) -> T:
    """The same days with the arrays of a variant, of shape (day, cell), contiguous, read-only and of one type.

    They are copied only where they must be. Read-only, because a compiled function is another for each type.

    Parameters
    ----------
    day : Day or DayWeather
        Some days.
    variant : str
        A key of `VARIANTS`; what it takes must be there.
    cells : int
        Number of cells.
    dtype : numpy dtype
        Wanted.

    Returns
    -------
    Day or DayWeather
        With what the variant takes alone.
    """
    names = fields_of(variant) if isinstance(day, Day) else day.names(variant)
    found = {}
    for name in names:
        values = np.asarray(getattr(day, name), dtype=np.int64 if name == "day_of_year" else dtype)
        shape = values.shape if name == "day_of_year" else (len(day.temp_air), cells)
        spread = values if values.shape == shape else np.broadcast_to(values, shape)
        found[name] = np.broadcast_to(np.ascontiguousarray(spread), shape)
    return type(day)(**found)


def rows(day: T, which: slice | NDArray[np.integer[Any]]) -> T:
    """Some of the days.

    Parameters
    ----------
    day : Day or DayWeather
        With every array of shape (day, ...).
    which : slice or ndarray of int
        Rows.

    Returns
    -------
    Day or DayWeather
    """
    return type(day)(**{name: values[which] for name, values in _there(day)})


def _copied(day: T) -> T:
    return type(day)(**{name: values.copy() for name, values in _there(day)})


def _there(day: Days) -> list[tuple[str, Any]]:
    return [(name, values) for name, values in vars(day).items() if values is not None]


def _compiled_walk(correlations: Sequence[DailyCorrelation], gains: GainRows | None) -> Walk:
    from stillfield.physics import correlation_compiled

    walk: Walk = correlation_compiled.CompiledWalk(correlations, gains)
    return walk


def _numpy_walk(correlations: Sequence[DailyCorrelation], gains: GainRows | None) -> Walk:
    first = correlations[0]

    def walk(days: Days, after: Array, state: Array, results: Results, at: int) -> None:
        length = max(1, TILE // max(1, after.shape[1]))
        for start in range(0, len(after), length):
            tile = slice(start, start + length)
            part = _predictors(rows(days, tile), gains)
            predictors = scaled_predictors(part, first.memory, state=state, temp_next=after[tile])
            given = slice(at + start, at + start + len(part.temp_air))
            results.outside[given] = first.outside(part)
            for index, one in enumerate(correlations):
                factor = frost_factor(part.temp_air, predictors, one.frost)
                results.litres[index, given] = _held(one, part, predictors, factor)
                results.frost[index, given] = factor < FROST_FLAG

    return walk


def _predictors(days: Days, gains: GainRows | None) -> Day:
    if isinstance(days, Day):
        return days
    if gains is None:
        raise TypeError("daily weather needs the gain of the design")
    return day_from_days(days, gains)


def _held(one: DailyCorrelation, day: Day, predictors: dict[str, Array], factor: Array) -> Array:
    """The polynomial, less what stays frozen, between 0 and the energy ceiling."""
    litres = np.maximum(evaluate(one.variant, predictors, one.coefficients), 0.0) * factor
    sunshine = day.transmitted + 2.0 * one.memory * 20.0 * (predictors["E"] + predictors["S"])
    return np.minimum(litres, np.maximum(one.ceiling * sunshine, 0.0))
