"""Sunshine of days from tables, and dryness of the air, compiled with numba; imported only when asked for."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numba import njit
from numba.extending import register_jitable
from numpy.typing import NDArray

from stillfield.physics.gain_table import CLEARNESS_STEP, GainRows

Array = NDArray[np.floating[Any]]

#: Runs of cells in one row of the table are worked on together where they are this long on average.
LONG_RUN = 16
_f = np.float32
_ZERO, _ONE = _f(0.0), _f(1.0)
_COLUMNS_PER_CLEARNESS = _f(1.0 / CLEARNESS_STEP)


def _compiled(function: Callable[..., None]) -> Any:
    try:
        return njit(error_model="numpy", nogil=True, cache=True)(function)
    except RuntimeError:  # no folder to keep the cache in: compile anew in every process
        return njit(error_model="numpy", nogil=True)(function)


@register_jitable
def _held(clearness: Any) -> Any:
    clearness = _ZERO if clearness < _ZERO else clearness
    return _ONE if clearness > _ONE else clearness


@register_jitable
def _gain(table: Any, first: Any, last: Any, clearness: Any) -> Any:
    """Gain between the columns of a row that begins at `first`; `last` is the last column with one after it."""
    position = clearness * _COLUMNS_PER_CLEARNESS
    column = np.int32(_ZERO if np.isnan(position) else position)
    column = last if column > last else column
    low, high = table[first + column], table[first + column + 1]
    return low + (position - _f(column)) * (high - low)


@register_jitable
def _of_run(table: Any, outside: Any, hours: Any, irradiation: Any, s: Any, k: Any, n: Any) -> None:
    """Cells of one row of the table."""
    last = np.int32(len(table) - 2)
    for i in range(len(irradiation)):
        k[i] = _held(irradiation[i] * outside)
        n[i] = hours
    for i in range(len(irradiation)):
        s[i] = _gain(table, np.int32(0), last, k[i]) * irradiation[i]


@register_jitable
def _of_cells(table: Any, rows: Any, outside: Any, hours: Any, irradiation: Any, s: Any, k: Any, n: Any) -> None:
    """Cells of any rows; `table` holds all rows of the day, one after the other."""
    columns = np.int32(len(table) // len(outside))
    for i in range(len(irradiation)):
        clearness = _held(irradiation[i] * outside[rows[i]])
        s[i] = _gain(table, rows[i] * columns, columns - np.int32(2), clearness) * irradiation[i]
        k[i] = clearness
        n[i] = hours[rows[i]]


def _look_up(tables: Any, runs: Any, rows: Any, days: Any, irradiation: Any, out: Any) -> None:
    """Fill `out` from the tables of all days of the year, run by run or, where there are none, cell by cell."""
    table, outside, hours = tables
    for d in range(len(days)):
        day = days[d]
        s, k, n = out[0, d], out[1, d], out[2, d]
        for run in range(len(runs)):
            start, stop, row = runs[run]
            _of_run(table[day, row], outside[day, row], hours[day, row], irradiation[d, start:stop],
                    s[start:stop], k[start:stop], n[start:stop])
        if len(runs) == 0:
            _of_cells(table[day].reshape(-1), rows, outside[day], hours[day], irradiation[d], s, k, n)


_looked_up = _compiled(_look_up)


def sunshine(gains: GainRows, irradiation: Array, day_of_year: NDArray[np.integer[Any]]) -> Array:
    """S, clearness and day length of days; the twin of `GainRows.sunshine` in single precision.

    Parameters
    ----------
    gains : GainRows
        Of the cells.
    irradiation : ndarray, shape (day, cell)
        [MJ m-2]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray of float32, shape (3, day, cell)
    """
    light = np.broadcast_to(np.ascontiguousarray(irradiation, dtype=np.float32), irradiation.shape)  # read-only
    out = np.empty((3, *irradiation.shape), np.float32)
    tables = (
        gains.table, (1.0 / np.maximum(gains.outside, 1e-6)).astype(np.float32), gains.day_length.astype(np.float32),
    )
    starts = np.flatnonzero(np.diff(gains.row, prepend=-1))
    runs = np.stack([starts, np.append(starts[1:], len(gains.row)), gains.row[starts]], axis=1)
    if len(runs) * LONG_RUN > len(gains.row):
        runs = runs[:0]
    days = np.asarray(day_of_year, dtype=np.int64) - 1
    _looked_up(tables, runs, gains.row.astype(np.int32), days, light, out)
    return out
