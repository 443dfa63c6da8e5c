"""The heat balance in numpy, block of cells by block of cells."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics import balance_kernel as kernel
from stillfield.physics.balance_kernel import Cell, Numbers, State

#: Cells worked on together: enough to hide the cost of a call, few enough to stay in the cache.
BLOCK_CELLS = 8192

Schedule = tuple[NDArray[np.int64], NDArray[np.int64], int]


def march(
    forcing: tuple[NDArray[Any], ...],
    cells: NDArray[Any],
    k: Numbers,
    schedule: Schedule,
    daily: NDArray[Any],
    frozen: NDArray[np.bool_],
    record: NDArray[Any] | None,
) -> None:
    """Carry all cells through time.

    Parameters
    ----------
    forcing : tuple of 5 ndarray, shape (time, cell)
        absorbed, cover_absorbed [W m-2], temp_air [degC], wind_speed [m s-1], temp_sky [degC].
    cells : ndarray, shape (8, cell)
        Fields of `balance_kernel.Cell`.
    k : Numbers
        Constants.
    schedule : tuple of (ndarray, ndarray, int)
        Row of the forcing and row of the result (or -1) of every step, and sub-steps in a step.
    daily : ndarray, shape (row, cell)
        Filled with the distillate of every row. [kg m-2]
    frozen : ndarray of bool, shape (row, cell)
        Filled with whether there was ice.
    record : ndarray, shape (9, row, cell), or None
        Filled with the sums over sub-steps of `balance_kernel.ledger`, then water and ice at the end.
    """
    for start in range(0, cells.shape[1], BLOCK_CELLS):
        part = slice(start, start + BLOCK_CELLS)
        _march_block(
            tuple(field[:, part] for field in forcing),
            Cell(*cells[:, part]), k, schedule, (daily[:, part], frozen[:, part]),
            None if record is None else record[:, :, part],
        )


def _march_block(
    forcing: tuple[NDArray[Any], ...],
    cell: Cell,
    k: Numbers,
    schedule: Schedule,
    results: tuple[NDArray[Any], NDArray[np.bool_]],
    record: NDArray[Any] | None,
) -> None:
    order, rows, substeps = schedule
    daily, frozen = results
    blank = np.full(cell.activity.shape, np.nan, cell.activity.dtype)
    state = State(blank, blank, blank, blank)
    daily[:] = 0.0
    for step, row in zip(order, rows, strict=True):
        absorbed, cover_absorbed, temp_air, wind, temp_sky = (field[step] for field in forcing)
        weather = kernel.around(absorbed, cover_absorbed, temp_air, wind, temp_sky, k)
        state = kernel.refreshed(state, temp_air, k)
        for _ in range(substeps):
            moved = kernel.move(kernel.aim(state, weather, cell, k), state, weather, cell, k)
            new = kernel.after(moved, state, cell, k)
            if row >= 0:
                daily[row] += kernel.distilled(moved, k)
                frozen[row] |= new.ice > k.zero
                if record is not None:
                    for channel, entry in enumerate(kernel.ledger(moved, state, new, cell, k)):
                        record[channel, row] += entry
            state = new
        if record is not None and row >= 0:
            record[7, row], record[8, row] = state.water, state.ice
