"""The heat balance compiled with numba; imported only when it is asked for."""

from __future__ import annotations

from typing import Any

from numba import njit, types
from numba.extending import overload, register_jitable

from stillfield.physics import balance_kernel as kernel

#: A multiplication and the addition after it may be one instruction, which rounds once; nothing else moves.
FUSED = {"contract"}
INLINE: Any = {"forceinline": True, "fastmath": FUSED}


@overload(kernel.choose, strict=False, jit_options=INLINE)
def _choose(condition: Any, yes: Any, no: Any) -> Any:
    return lambda condition, yes, no: yes if condition else no


@overload(kernel.larger, strict=False, jit_options=INLINE)
def _larger(value: Any, floor: Any) -> Any:
    return lambda value, floor: floor if value < floor else value


@overload(kernel.smaller, strict=False, jit_options=INLINE)
def _smaller(value: Any, ceiling: Any) -> Any:
    return lambda value, ceiling: ceiling if value > ceiling else value


@overload(kernel.transfer, strict=False, jit_options=INLINE)
def _transfer(mean: Any, over_water: Any, over_cover: Any, cell: Any, k: Any) -> Any:
    flag = k.types[k.fields.index("stefan")]
    return kernel.plain_transfer if isinstance(flag, types.NoneType) else kernel.moist_transfer


@overload(kernel.note, strict=False, jit_options=INLINE)
def _note(record: Any, row: Any, i: Any, sub_step: Any, cell: Any, k: Any) -> Any:
    if isinstance(record, types.NoneType):
        return lambda record, row, i, sub_step, cell, k: None
    return kernel.note


@overload(kernel.note_end, strict=False, jit_options=INLINE)
def _note_end(record: Any, row: Any, work: Any, start: Any, count: Any) -> Any:
    if isinstance(record, types.NoneType):
        return lambda record, row, work, start, count: None
    return kernel.note_end


for _function in (
    kernel.vapour, kernel.cubic, kernel.cube_root, kernel.plain_transfer, kernel.moist_transfer, kernel.flow,
    kernel.system, kernel.passing, kernel.dry, kernel.aim, kernel.move, kernel.after, kernel.distilled,
    kernel.around, kernel.refreshed, kernel.ledger, kernel.enter_step, kernel.end_day,
    kernel.advance,
):
    register_jitable(**INLINE)(_function)

try:
    #: `balance_kernel.march_cells`, compiled at its first call. Divisions are not checked, because a check per
    #: division would keep the processor from working on several cells at once. The cache follows changes of
    #: `balance_kernel`, not of this module: after a change here, delete the ``*.nbi`` files in ``__pycache__``.
    march = njit(error_model="numpy", nogil=True, fastmath=FUSED, cache=True)(kernel.march_cells)
except RuntimeError:  # no folder to keep the cache in: compile anew in every process
    march = njit(error_model="numpy", nogil=True, fastmath=FUSED)(kernel.march_cells)
