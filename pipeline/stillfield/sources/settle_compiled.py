"""Settling compiled with numba; imported only when it is used.

One vectorised pass over some records converts and asks whether anything is irregular; only where something is,
a second pass counts cell by cell. Both give what `settle` gives with numpy, to the last bit.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from numba.extending import register_jitable

from stillfield.sources.settle import CLIPPED_BIT, TAKEN_BIT

#: Values worked at once: their results stay in the nearest cache.
GROUP = 4096


@register_jitable
def _odd_values(source: Any, target: Any, absent: Any, numbers: Any) -> bool:
    """Convert values as if all were regular; whether one was not."""
    gone, also = absent
    scale, offset, lowest, highest, sentinel, other, factor, shift, _, dip, high, _ = numbers
    odd = False
    for j in range(source.size):
        value = scale * source[j] + offset
        result = factor * value + shift
        odd |= (
            (source[j] == gone) | (source[j] == also) | (value == sentinel) | (value == other)
            | (value < lowest) | (value > highest) | (not (result >= dip)) | (result > high)
        )
        target[j] = np.float32(result)
    return odd


@register_jitable
def _counted(source: Any, target: Any, kept: Any, absent: Any, numbers: Any, counts: Any) -> bool:
    """Convert values and count what is irregular in each cell; whether one cannot be true."""
    gone, also = absent
    scale, offset, lowest, highest, sentinel, other, factor, shift, floor, dip, high, instead = numbers
    wrong = False
    for j in range(source.size):
        value = scale * source[j] + offset
        result = factor * value + shift
        lacking = (source[j] == gone) | (source[j] == also) | (value != value)  # noqa: PLR0124 (NaN)
        mark = (value == sentinel) | (value == other) | (value < lowest) | (value > highest)
        lost = lacking | mark | (not kept[j])
        noise = (not lost) & (result < dip) & (result >= floor)
        wrong |= (not lost) & ((result < floor) | (result > high))
        gap = np.float32(instead) if mark & (not lacking) & kept[j] else np.float32(np.nan)
        target[j] = gap if lost else (np.float32(0.0) if noise else np.float32(result))
        counts[j] += (np.int64(lost & kept[j]) + (np.int64(noise) << CLIPPED_BIT)
                      + (np.int64(mark & (not lacking) & kept[j]) << TAKEN_BIT))
    return wrong


@register_jitable
def _note(source: Any, kept: Any, absent: Any, numbers: Any, breach: Any, worst: Any, record: int, place: Any) -> None:
    """Number the breaches of a plane, and keep the first of all."""
    first, width, n_columns = place
    scale, offset, lowest, highest, sentinel, other, factor, shift, floor, _, high, _ = numbers
    for j in range(source.size):
        value = scale * source[j] + offset
        result = factor * value + shift
        fine = (
            (source[j] == absent[0]) | (source[j] == absent[1]) | (value == sentinel) | (value == other)
            | (not (value >= lowest)) | (value > highest) | (not kept[j])
        )
        if fine or not ((result < floor) | (result > high)):
            continue
        if breach[0] == 0:
            breach[1], breach[2], worst[0] = record, first + j // width * n_columns + j % width, result
        breach[0] += 1


@register_jitable
def _gathered(data: Any, start: int, steps: Any, shape: Any, line: Any) -> None:
    """Values of one record side by side."""
    for r in range(shape[1]):
        for c in range(shape[2]):
            line[r * shape[2] + c] = data[start + r * steps[1] + c * steps[2]]


@register_jitable
def _delivered(plane: Any, out: Any, top: int, runs: Any, place: Any) -> None:
    """Put the values of one record where they belong."""
    first, width, n_columns = place
    for k in range(len(runs)):
        column, count, shift = runs[k]
        row = top + shift
        if 0 <= row < out.shape[0]:
            line = out[row]
            for r in range(plane.size // width):
                start, cell = r * width + column, first + r * n_columns + column
                if count < 16:  # a slice costs more than these
                    for j in range(count):
                        line[cell + j] = plane[start + j]
                else:
                    line[cell:cell + count] = plane[start:start + count]


@register_jitable
def _all_kept(kept: Any, place: Any, n_rows: int) -> bool:
    """Whether every cell of the block is kept."""
    first, width, n_columns = place
    for r in range(n_rows if kept.size else 0):
        cell = first + r * n_columns
        if not kept[cell:cell + width].all():
            return False
    return True


@register_jitable
def _stays(stays: Any, kept: Any, runs: Any, place: Any, top: int, height: int) -> None:
    """Which cells of a record are kept and have a place."""
    first, width, n_columns = place
    for r in range(stays.size // width):
        for k in range(len(runs)):
            column, count, shift = runs[k]
            here = stays[r * width + column:r * width + column + count]
            here[:] = 0 <= top + shift < height
            if kept.size and here[0]:
                cell = first + r * n_columns + column
                here[:] = kept[cell:cell + count]


def _place(data: Any, view: Any, spot: Any, absent: Any, numbers: Any, found: Any) -> bool:
    """See `settle.place_with_numpy`; `view` tells where in the flat `data` the block is."""
    base, steps, shape = view
    out, top, record, runs, first, n_columns = spot
    kept, counts, breach, worst = found
    n_records, n_rows, width = shape
    size, where, height = n_rows * width, (first, width, n_columns), out.shape[0]
    lying = steps[2] == 1 and (steps[1] == width or n_rows == 1)
    group = min(max(1, GROUP // size), n_records) if lying and steps[0] == size else 1
    line, ready = np.empty(0 if lying else size, data.dtype), np.empty(group * size, np.float32)
    stays, tally = np.empty(size, np.bool_), np.zeros(size, np.int64)
    lowest, highest = top + runs[:, 2].min(), top + runs[:, 2].max()
    inside = _all_kept(kept, where, n_rows)
    irregular = False
    for begin in range(0, n_records, group):
        some = min(group, n_records - begin)
        start = base + begin * steps[0]
        if not lying:
            _gathered(data, start, steps, shape, line)
        source = data[start:start + some * size] if lying else line
        if _odd_values(source, ready[:some * size], absent, numbers) or not inside:
            for i in range(some):
                plane, target = source[i * size:(i + 1) * size], ready[i * size:(i + 1) * size]
                if inside and not _odd_values(plane, target, absent, numbers):
                    continue
                irregular = True
                _stays(stays, kept, runs, where, top + begin + i, height)
                if _counted(plane, target, stays, absent, numbers, tally):
                    _note(plane, stays, absent, numbers, breach, worst, record + begin + i, where)
        if highest + begin + some > 0 and lowest + begin < height:
            for i in range(some):
                _delivered(ready[i * size:(i + 1) * size], out, top + begin + i, runs, where)
    if irregular:
        for r in range(n_rows):
            cell = first + r * n_columns
            counts[cell:cell + width] += tally[r * width:(r + 1) * width]
    return irregular


def _join_bytes(shuffled: Any, joined: Any) -> None:
    """Undo the shuffle of numbers of 2 or 4 bytes: `joined` are unsigned numbers of that size, little-endian."""
    n = joined.size
    if joined.itemsize == 2:
        low, high = shuffled[:n], shuffled[n:2 * n]
        for i in range(n):
            joined[i] = np.uint16(low[i]) | (np.uint16(high[i]) << np.uint16(8))
    else:
        one, two, three, four = shuffled[:n], shuffled[n:2 * n], shuffled[2 * n:3 * n], shuffled[3 * n:4 * n]
        for i in range(n):
            joined[i] = (np.uint32(one[i]) | (np.uint32(two[i]) << np.uint32(8))
                         | (np.uint32(three[i]) << np.uint32(16)) | (np.uint32(four[i]) << np.uint32(24)))


try:
    place = njit(error_model="numpy", nogil=True, cache=True)(_place)
    join_bytes = njit(error_model="numpy", nogil=True, cache=True)(_join_bytes)
except RuntimeError:  # no folder to keep the cache in: compile anew in every process
    place = njit(error_model="numpy", nogil=True)(_place)
    join_bytes = njit(error_model="numpy", nogil=True)(_join_bytes)
