"""Month sums compiled with numba; the twin of `stillfield.stages.aggregate.month_sums`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

#: Cells whose sums stay in the first cache while their days go by.
_STRIP = 64


def _add_days(
    central: Any, low: Any, high: Any, sunshine: Any, frost: Any, outside: Any, slot: Any, out: Any
) -> None:
    """Loops over one row of sums each, so that the compiler works on several cells at once."""
    days, cells = central.shape
    for start in range(0, cells, _STRIP):
        strip = slice(start, min(start + _STRIP, cells))
        for day in range(days):
            litres = central[day, strip]
            for row, values in ((0, central), (1, low), (2, high), (3, sunshine)):
                some, total = values[day, strip], out[slot[day], row, strip]
                for j in range(some.size):
                    total[j] += some[j] if np.isfinite(litres[j]) else 0.0
            for row, flags in ((4, frost), (5, outside)):
                if flags.shape[0]:
                    set_, total = flags[day, strip], out[slot[day], row, strip]
                    for j in range(set_.size):
                        total[j] += 1.0 if set_[j] and np.isfinite(litres[j]) else 0.0
            total = out[slot[day], 6, strip]
            for j in range(total.size):
                total[j] += 1.0 if np.isfinite(litres[j]) else 0.0


try:
    _compiled = njit(error_model="numpy", nogil=True, cache=True)(_add_days)
except RuntimeError:  # no folder to keep the cache in: compile anew in every process
    _compiled = njit(error_model="numpy", nogil=True)(_add_days)

_NO_FLAGS = np.zeros((0, 0), dtype=np.bool_)


def month_sums(
    days: Sequence[NDArray[Any]], flags: Sequence[NDArray[np.bool_] | None], slot: NDArray[np.int64],
    out: NDArray[np.floating[Any]],
) -> None:
    """Add days to the sums of their months; see `stillfield.stages.aggregate.month_sums`."""
    kind = np.result_type(*days)
    central, low, high, sunshine = (np.ascontiguousarray(values, dtype=kind) for values in days)
    frost, outside = (_NO_FLAGS if flag is None else np.ascontiguousarray(flag) for flag in flags)
    _compiled(central, low, high, sunshine, frost, outside, slot, out)
