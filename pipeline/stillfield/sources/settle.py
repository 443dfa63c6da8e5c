"""Weather settled as it is read: unpacked, put into vocabulary units, held against its bounds, counted by cell.

Values go straight to where they are needed, a buffer of (time, cell) whose time may be moved from column to column.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.physics.compiling import Engine, is_compiled
from stillfield.vocabulary import Quantity

#: Numbers that stand for "missing" in files that do not declare them, and what is too large to be any quantity.
SENTINELS = (-999.0, -9999.0)
IMPOSSIBLY_LARGE = 1e14
#: Mark of a number that stood for missing and was taken out: it travels as infinity, which no unit conversion
#: touches, until it is counted and made missing.
TAKEN_OUT = np.inf
#: Negative sunshine up to this is instrument or packing noise and becomes 0.
NOISE_FLOOR = {"ghi": -20.0, "dni": -20.0, "dhi": -20.0, "irradiation": -0.5}
#: Kinds of count (`stillfield.sources.tally`).
KINDS = ("missing", "clipped", "sentinel")
#: One number per cell holds the three counts, so that a loop over cells writes one array: missing values from bit
#: 0 on, and the others from these. A reading has less than 2 million records.
CLIPPED_BIT, TAKEN_BIT = 21, 42


@dataclass(frozen=True)
class Breach:
    """The first value that cannot be true.

    Attributes
    ----------
    record : int
        Counted from the first record that was read.
    cell : int
        Counted row by row from the first cell that was read.
    value : float
        In the unit of its quantity.
    number : int
        How many such values there are.
    """

    record: int
    cell: int
    value: float
    number: int


@dataclass(frozen=True)
class Settled:
    """What settling changed or found.

    Attributes
    ----------
    counts : mapping of str to ndarray of int, shape (cell,)
        How often each kind of `KINDS` happened in each cell; kinds that never did are left out.
    breach : Breach or None
        The first value outside its physical bounds.
    """

    counts: Mapping[str, NDArray[np.integer[Any]]] = field(default_factory=dict)
    breach: Breach | None = None


class Numbers(NamedTuple):
    """The numbers of one conversion: value = scale stored + offset; result = factor value + shift.

    Values that are a sentinel or outside `lowest`..`highest` are taken out and become `instead`. Results from
    `floor` to `dip` become 0; others outside `dip`..`high` are breaches.
    """

    scale: float = 1.0
    offset: float = 0.0
    lowest: float = -np.inf
    highest: float = np.inf
    sentinel: float = np.nan
    other: float = np.nan
    factor: float = 1.0
    shift: float = 0.0
    floor: float = -np.inf
    dip: float = -np.inf
    high: float = np.inf
    instead: float = np.nan


def lowest_of(quantity: Quantity) -> float:
    """The lowest value that is let pass: noise below zero is, where it is put right."""
    return NOISE_FLOOR.get(quantity.name, quantity.low)


def bounded(numbers: Numbers, quantity: Quantity) -> Numbers:
    """Numbers with the bounds of a quantity."""
    dip = 0.0 if quantity.name in NOISE_FLOOR else quantity.low
    return numbers._replace(floor=lowest_of(quantity), dip=dip, high=quantity.high)


def settle(
    values: NDArray[np.floating[Any]], quantity: Quantity, out: NDArray[np.float32], at: NDArray[Any],
    kept: NDArray[np.bool_] | None = None, *, engine: Engine = "auto",
) -> Settled:
    """Settle values that are in vocabulary units already.

    Parameters
    ----------
    values : ndarray of float, shape (records, n_rows, n_columns)
        NaN where missing, infinite where taken out (`TAKEN_OUT`).
    quantity : Quantity
        Of `vocabulary.DAY_WEATHER` or `vocabulary.STEP_WEATHER`.
    out : ndarray of float32, shape (buffer_rows, n_rows * n_columns)
        C-contiguous; the value of record i and column c goes to ``out[at[c] + i, r * n_columns + c]``. Rows outside
        the buffer are dropped and count nothing.
    at : ndarray of int, shape (n_columns,)
        See `out`.
    kept : ndarray of bool, shape (n_rows, n_columns), optional
        Cells outside are missing and count nothing.
    engine : {'auto', 'compiled', 'numpy'}
        See `physics.compiling`.

    Returns
    -------
    Settled

    Examples
    --------
    >>> from stillfield.vocabulary import STEP_WEATHER
    >>> out = np.zeros((3, 2), dtype=np.float32)
    >>> found = settle(np.array([[[1.0, -2.0]], [[np.nan, 5.0]]]), STEP_WEATHER["ghi"], out, np.array([0, 1]))
    >>> out.tolist(), {kind: row.tolist() for kind, row in found.counts.items()}
    ([[1.0, 0.0], [nan, 0.0], [0.0, 5.0]], {'missing': [1, 0], 'clipped': [0, 1]})
    """
    sink = Sink(out, at, values.shape[1], kept, engine=engine)
    if values.size:
        finite = float(np.finfo(values.dtype).max)
        sink.take(values, 0, (0, 0), bounded(Numbers(lowest=-finite, highest=finite), quantity))
    return sink.settled()


def refuse_breach(breach: Breach, quantity: Quantity, *, where: str) -> None:
    """Refuse a value that cannot be true.

    Raises
    ------
    WeatherError
        Always.
    """
    raise WeatherError(
        f"{quantity.name} cannot be true",
        where=where,
        got=f"{breach.value:g} {quantity.unit}; {breach.number} such values",
        wanted=f"{lowest_of(quantity):g} to {quantity.high:g} {quantity.unit}",
        cure="Check the units and the number that marks missing values.",
    )


class Sink:
    """Where the values of one quantity go, what happened to them, and the first that cannot be true.

    Parameters
    ----------
    out, at, kept, engine
        As for `settle`.
    n_rows : int
        Rows of the grid.
    """

    def __init__(self, out: NDArray[np.float32], at: NDArray[Any], n_rows: int,
                 kept: NDArray[np.bool_] | None = None, *, engine: Engine = "auto") -> None:
        if out.dtype != np.float32 or not out.flags.c_contiguous or out.shape[1:] != (n_rows * len(at),):
            raise ValueError(f"out must be contiguous float32 of shape (time, {n_rows * len(at)}), not {out.shape}")
        self.out = out
        self.at = np.ascontiguousarray(at, dtype=np.int64)
        self.n_rows, self.n_columns = n_rows, self.at.size
        self.kept = np.empty(0, np.bool_) if kept is None else np.ascontiguousarray(kept, np.bool_).reshape(-1)
        self.counts = np.zeros(out.shape[1], dtype=np.int64)
        self.breach = np.zeros(3, dtype=np.int64)
        self.worst = np.zeros(1)
        self.irregular = False
        self.compiled = is_compiled(engine, "reading")

    def take(self, block: NDArray[Any], record: int, corner: tuple[int, int], numbers: Numbers, *,
             absent: tuple[float, ...] = (), kind: type[np.floating[Any]] | None = None) -> None:
        """Settle a block of values.

        Parameters
        ----------
        block : ndarray, shape (records, rows, columns)
            In native byte order; a view with any strides.
        record : int
            Record of its first.
        corner : tuple of int
            Row and column of its first cell.
        numbers : Numbers
            What to do.
        absent : tuple of float
            Stored numbers that stand for missing; at most two.
        kind : type, optional
            Precision of the conversion; that of the block by default.
        """
        if not block.size:
            return
        precise = kind or block.dtype.type
        runs = _runs(self.at[corner[1]:corner[1] + block.shape[2]].tobytes())
        spot = (self.out, record, record, runs, corner[0] * self.n_columns + corner[1], self.n_columns)
        told = _as_stored(absent, block.dtype), tuple(precise(number) for number in numbers)
        found = (self.kept, self.counts, self.breach, self.worst)
        if self.compiled:
            from stillfield.sources.settle_compiled import place

            self.irregular |= bool(place(*_flattened(block), spot, *told, found))
        else:
            self.irregular |= place_with_numpy(block, spot, *told, found)

    def lack(self, record: int, number: int) -> None:
        """Take records that no file holds: missing in every cell."""
        nothing = np.full((1, 1, 1), np.nan, np.float32)
        self.take(np.broadcast_to(nothing, (number, self.n_rows, self.n_columns)), record, (0, 0), Numbers())

    def settled(self) -> Settled:
        """What was found."""
        if not self.irregular:
            return Settled()
        most = (1 << CLIPPED_BIT) - 1
        rows = (self.counts >> bit & most for bit in (0, CLIPPED_BIT, TAKEN_BIT))
        counts = {kind: row for kind, row in zip(KINDS, rows, strict=True) if row.any()}
        number, record, cell = (int(one) for one in self.breach)
        return Settled(counts, Breach(record, cell, float(self.worst[0]), number) if number else None)


def place_with_numpy(block: NDArray[Any], spot: Any, absent: Any, numbers: Any, found: Any) -> bool:
    """Settle a block with numpy; tell whether anything was irregular.

    Parameters
    ----------
    block : ndarray, shape (records, rows, columns)
        As stored.
    spot : tuple
        Where it goes: the buffer; the row of its first record there, before the shift of its column; that record;
        the columns that are moved alike, as rows of first, how many, shift; its first cell; the width of the grid.
    absent : tuple
        Two stored numbers that stand for missing.
    numbers : tuple
        `Numbers`, in the precision to work in.
    found : tuple of ndarray
        ``kept``, ``counts``, ``breach`` and ``worst`` of the `Sink`.
    """
    out, top, record, moved, first, n_columns = spot
    kept, counts, breach, worst = found
    irregular = False
    for column, count, shift in moved.tolist():
        low, high = max(0, -(top + shift)), min(len(block), len(out) - top - shift)
        for r in range(block.shape[1] if high > low else 0):
            cells = slice(first + r * n_columns + column, first + r * n_columns + column + count)
            stays = kept[cells] if kept.size else np.ones(count, np.bool_)
            result, kinds, wrong, single = _converted(block[low:high, r, column:column + count], absent,
                                                      Numbers(*numbers), stays)
            out[top + shift + low:top + shift + high, cells] = single
            for kind, bit in zip(kinds, (0, CLIPPED_BIT, TAKEN_BIT), strict=True):
                counts[cells] += kind.sum(axis=0, dtype=np.int64) << bit
            irregular = irregular or bool(wrong.any() or any(kind.any() for kind in kinds) or not stays.all())
            if wrong.any():
                i, j = np.unravel_index(int(np.argmax(wrong)), wrong.shape)
                if breach[0] == 0:
                    breach[1:], worst[0] = (record + low + i, cells.start + j), result[i, j]
                breach[0] += int(wrong.sum())
    return irregular


def _converted(
    raw: NDArray[Any], absent: Any, numbers: Numbers, kept: NDArray[np.bool_]
) -> tuple[NDArray[Any], tuple[NDArray[np.bool_], ...], NDArray[np.bool_], NDArray[np.float32]]:
    """Results, what is missing, clipped and taken out, what cannot be true, and what is kept of the results."""
    with np.errstate(invalid="ignore", over="ignore"):
        value = raw.astype(np.asarray(numbers.scale).dtype) * numbers.scale + numbers.offset
        result = value * numbers.factor + numbers.shift
        lacking = (raw == absent[0]) | (raw == absent[1]) | np.isnan(value)
        mark = (value == numbers.sentinel) | (value == numbers.other)
        mark |= (value < numbers.lowest) | (value > numbers.highest)
        mark &= ~lacking & kept
        lost = lacking | mark | ~kept
        noise = ~lost & (result < numbers.dip) & (result >= numbers.floor)
        wrong = ~lost & ((result < numbers.floor) | (result > numbers.high))
        gap = np.where(mark, numbers.instead, np.nan)
        single = np.where(lost, gap, np.where(noise, 0.0, result)).astype(np.float32)
    return result, (lost & kept, noise, mark), wrong, single


def _as_stored(absent: tuple[float, ...], dtype: np.dtype[Any]) -> tuple[Any, Any]:
    """Two stored numbers that stand for missing, in the type they are stored in; what it cannot hold never comes."""
    if dtype.kind == "f":
        held = [dtype.type(one) for one in absent if float(dtype.type(one)) == one]
        held = held or [dtype.type(np.nan)]
    else:
        limits = np.iinfo(dtype)
        held = [dtype.type(one) for one in absent if limits.min <= one <= limits.max and one == int(one)]
        held = held or [np.float32(np.nan)]
    return held[0], held[-1]


@lru_cache(maxsize=512)
def _runs(shifts: bytes) -> NDArray[np.int64]:
    """Columns that are moved alike: first, how many, shift."""
    at = np.frombuffer(shifts, dtype=np.int64)
    starts = np.concatenate([[0], np.flatnonzero(np.diff(at)) + 1])
    return np.stack([starts, np.diff(np.append(starts, at.size)), at[starts]], axis=1).astype(np.int64)


def _flattened(block: NDArray[Any]) -> tuple[NDArray[Any], tuple[int, tuple[int, ...], tuple[int, ...]]]:
    """The memory of a view as one flat array; where the view begins in it, its steps and its shape."""
    size = block.dtype.itemsize
    steps = tuple(stride // size for stride in block.strides)
    reach = [(count - 1) * step for count, step in zip(block.shape, steps, strict=True)]
    lowest = block[tuple(slice(-1, None) if step < 0 else slice(0, 1) for step in steps)]
    length = sum(abs(one) for one in reach) + 1
    flat = np.lib.stride_tricks.as_strided(lowest.reshape(-1), (length,), (size,), writeable=False)
    return flat, (-sum(one for one in reach if one < 0), steps, block.shape)
