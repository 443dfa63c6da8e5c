"""The heat balance compiled with numba; imported only when it is asked for."""

from __future__ import annotations

from typing import Any

from numba import njit
from numba.extending import overload, register_jitable

from stillfield.physics import balance_kernel as kernel


@overload(kernel.choose)
def _choose(condition: Any, yes: Any, no: Any) -> Any:
    return lambda condition, yes, no: yes if condition else no


@overload(kernel.larger)
def _larger(value: Any, floor: Any) -> Any:
    return lambda value, floor: floor if value < floor else value


@overload(kernel.smaller)
def _smaller(value: Any, ceiling: Any) -> Any:
    return lambda value, ceiling: ceiling if value > ceiling else value


for _function in (
    kernel.vapour, kernel.cube_root, kernel.transfer, kernel.flow, kernel.newton, kernel.full_newton,
    kernel.dry_newton, kernel.move, kernel.after, kernel.distilled, kernel.around, kernel.refreshed,
    kernel.ledger, kernel.clear, kernel.enter_step, kernel.advance,
):
    register_jitable(inline="always")(_function)

#: `balance_kernel.march_cells`, compiled at its first call and kept in numba's cache. Divisions are not
#: checked, because a check per division would keep the processor from working on several cells at once.
march = njit(error_model="numpy", nogil=True, cache=True)(kernel.march_cells)
