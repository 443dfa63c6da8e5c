"""The heat balance in numpy, block of cells by block of cells."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics import balance_kernel as kernel
from stillfield.physics.balance_kernel import Cell, Numbers, State
from stillfield.physics.balance_schedule import Walk

#: Cells worked on together: enough to hide the cost of a call, few enough to stay in the cache.
BLOCK_CELLS = 8192

Results = tuple[NDArray[Any], NDArray[np.bool_], NDArray[Any] | None]


def march(
    forcing: tuple[NDArray[Any], ...],
    fixed: tuple[NDArray[Any], Numbers],
    walk: Walk,
    carried: NDArray[Any],
    results: Results,
) -> None:
    """Carry all cells through a window of time.

    Parameters
    ----------
    forcing : tuple of 5 ndarray, shape (time, cell)
        absorbed, cover_absorbed [W m-2], temp_air [degC], wind_speed [m s-1], temp_sky [degC].
    fixed : tuple of (ndarray of shape (8, cell), Numbers)
        Fields of `balance_kernel.Cell`, and constants.
    walk : Walk
        Steps to take.
    carried : ndarray, shape (6, cell)
        Fields of `balance_kernel.State`, then distillate of the yield day that has begun [kg m-2] and the most
        ice on it; left as they are at the end of the window.
    results : tuple of (ndarray of shape (day, cell), same of bool, ndarray of shape (10, step, cell) or None)
        Filled with the distillate of every yield day [kg m-2], whether there was ice, and the sums over
        sub-steps of `balance_kernel.ledger`, then water and ice at the end of the step.
    """
    daily, frozen, record = results
    cells, k = fixed
    for start in range(0, cells.shape[1], BLOCK_CELLS):
        part = slice(start, start + BLOCK_CELLS)
        _march_block(
            tuple(field[:, part] for field in forcing), (Cell(*cells[:, part]), k), walk, carried[:, part],
            (daily[:, part], frozen[:, part], None if record is None else record[:, :, part]),
        )


def _march_block(
    forcing: tuple[NDArray[Any], ...], fixed: tuple[Cell, Numbers], walk: Walk, carried: NDArray[Any], results: Results
) -> None:
    cell, k = fixed
    daily, frozen, record = results
    state, litres, most_ice = State(*carried[:4]), carried[4], carried[5]
    for step, ends, row, note in zip(walk.order, walk.ends, walk.rows, walk.notes, strict=True):
        absorbed, cover_absorbed, temp_air, wind, temp_sky = (field[step] for field in forcing)
        weather = kernel.around(absorbed, cover_absorbed, temp_air, wind, temp_sky, k)
        state = kernel.refreshed(state, temp_air, k)
        for _ in range(walk.substeps):
            moved = kernel.move(kernel.aim(state, weather, cell, k), state, weather, cell, k)
            new = kernel.after(moved, state, cell, k)
            litres = litres + kernel.distilled(moved, k)
            most_ice = kernel.larger(most_ice, new.ice)
            if record is not None and note >= 0:
                for channel, entry in enumerate(kernel.ledger(moved, state, new, cell, k)):
                    record[channel, note] += entry
            state = new
        if record is not None and note >= 0:
            record[8, note], record[9, note] = state.water, state.ice
        if ends:
            if row >= 0:
                daily[row], frozen[row] = litres, most_ice > k.zero
            litres = most_ice = np.zeros_like(litres)
    for kept, values in zip(carried, (*state, litres, most_ice), strict=True):
        kept[:] = values
