"""Daily sunshine looked up in compiled code, in single precision; imported only when it is asked for.

The twin in numpy is `stillfield.physics.gain_table.GainRows`. These are parts of compiled functions, not functions
to call.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba.extending import register_jitable
from numpy.typing import NDArray

from stillfield.physics.correlation import SCALES
from stillfield.physics.gain_table import CLEARNESS_STEP, GainRows

Array = NDArray[np.floating[Any]]

#: Runs of cells in one row of the table are worked on together where they are this long on average.
LONG_RUN = 16
_f = np.float32
_ZERO, _ONE = _f(0.0), _f(1.0)
_COLUMNS_PER_CLEARNESS = _f(1.0 / CLEARNESS_STEP)


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


@register_jitable
def look_up(gain: Any, day: Any, irradiation: Any, s: Any, k: Any, n: Any) -> None:
    """Fill S, clearness and scaled day length of the cells of a day.

    Parameters
    ----------
    gain : tuple of ndarray
        From `gain_tables`.
    day : int
        Day of the year, counted from 0.
    irradiation : ndarray of float32, shape (cell,)
        [MJ m-2]
    s : ndarray of float32, shape (cell,)
        Filled with the sunshine absorbed in the basin. [MJ m-2]
    k : ndarray of float32, shape (cell,)
        Filled with the clearness. [1]
    n : ndarray of float32, shape (cell,)
        Filled with the day length on the scale of the predictor N. [1]
    """
    table, outside, hours, runs, rows = gain
    for run in range(len(runs)):
        start, stop, row = runs[run]
        _of_run(table[day, row], outside[day, row], hours[day, row], irradiation[start:stop],
                s[start:stop], k[start:stop], n[start:stop])
    if len(runs) == 0:
        _of_cells(table[day].reshape(-1), rows, outside[day], hours[day], irradiation, s, k, n)


def gain_tables(gains: GainRows) -> tuple[Array, Array, Array, NDArray[np.int64], NDArray[np.int32]]:
    """Tables in the form that `look_up` takes.

    Parameters
    ----------
    gains : GainRows
        Of some cells.

    Returns
    -------
    table, outside, hours : ndarray of float32, shape (DAYS, row, ...)
        Gain; one over the irradiation outside [m2 MJ-1]; day length on the scale of the predictor N.
    runs : ndarray, shape (run, 3)
        First cell, end and row of cells that share a row; none where they are short.
    row : ndarray of int32, shape (cell,)
        Row of each cell.
    """
    _, hours, summand = SCALES["N"]
    starts = np.flatnonzero(np.diff(gains.row, prepend=-1))
    runs = np.stack([starts, np.append(starts[1:], len(gains.row)), gains.row[starts]], axis=1).astype(np.int64)
    if len(runs) * LONG_RUN > len(gains.row):
        runs = runs[:0]
    return (
        gains.table, (1.0 / np.maximum(gains.outside, 1e-6)).astype(np.float32),
        (gains.day_length / hours + summand).astype(np.float32), runs, gains.row.astype(np.int32),
    )
