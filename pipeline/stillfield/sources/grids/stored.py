"""Weather that lies plainly in NetCDF files, read past xarray: which numbers of which file make which quantity.

The records here are small, can be sent to another process, and are made by `stored_fields` when the files are
opened. What they cannot tell has no such record, and is read the general way.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.sources.settle import Settled
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER, Quantity

#: An axis in more runs than this is not plain.
_MOST_SPANS = 8
Combination = Literal["plain", "speed", "mean", "difference"]


@dataclass(frozen=True)
class Coding:
    """How numbers of one variable of one file are stored.

    Attributes
    ----------
    dtype : str
        As stored, in native byte order.
    computed : {'float32', 'float64'}
        Precision they are unpacked in.
    scale, offset : float
        value = scale stored + offset.
    absent : tuple of float
        Stored numbers that stand for missing, at most two.
    valid : tuple of float
        Stated range, in the unit of the file.
    """

    dtype: str
    computed: str
    scale: float = 1.0
    offset: float = 0.0
    absent: tuple[float, ...] = ()
    valid: tuple[float, float] = (-np.inf, np.inf)


@dataclass(frozen=True)
class Span:
    """Places side by side on an axis of the weather, and on that of a file.

    Attributes
    ----------
    at, count : int
        First place on the axis of the weather, and how many.
    start, step : int
        First place on the axis of the file; 1, or -1 where it runs the other way.
    """

    at: int
    count: int
    start: int
    step: int = 1

    def within(self, low: int, high: int) -> Span | None:
        """The part between two places on the axis of the weather."""
        first, end = max(low, self.at), min(high, self.at + self.count)
        return Span(first, end - first, self.start + (first - self.at) * self.step, self.step) if end > first else None

    @property
    def extent(self) -> tuple[int, int]:
        """First and end on the axis of the file."""
        last = self.start + (self.count - 1) * self.step
        return min(self.start, last), max(self.start, last) + 1


def spans_of(places: NDArray[Any]) -> tuple[Span, ...] | None:
    """Places on a file's axis as runs; None where they are too many.

    Examples
    --------
    >>> spans_of(np.array([3, 2, 1, 7, 8]))
    (Span(at=0, count=3, start=3, step=-1), Span(at=3, count=2, start=7, step=1))
    """
    spans: list[Span] = []
    at = 0
    steps = np.diff(places)
    while at < places.size and len(spans) <= _MOST_SPANS:
        step = int(steps[at]) if at < steps.size and abs(int(steps[at])) == 1 else 1
        other = np.flatnonzero(steps[at:] != step)
        count = (int(other[0]) if other.size else steps.size - at) + 1
        spans.append(Span(at, count, int(places[at]), step))
        at += count
    return tuple(spans) if len(spans) <= _MOST_SPANS else None


@dataclass(frozen=True)
class StoredFile:
    """Records of one variable in one file: `records` on the time axis of the weather."""

    path: str
    records: Span
    coding: Coding


@dataclass(frozen=True)
class StoredVariable:
    """One variable of the files.

    Attributes
    ----------
    name : str
        In the files.
    axes : tuple of str
        What its axes are, in order: 'time', 'latitude', 'longitude', or '' for one of length 1.
    files : tuple of StoredFile
        In the order of time.
    rows, columns : tuple of Span
        Latitudes and longitudes.
    chunk : tuple of int or None
        Of the first file; None where it is not chunked.
    """

    name: str
    axes: tuple[str, ...]
    files: tuple[StoredFile, ...]
    rows: tuple[Span, ...]
    columns: tuple[Span, ...]
    chunk: tuple[int, ...] | None

    @cached_property
    def _firsts(self) -> NDArray[np.int64]:
        return np.array([file.records.at for file in self.files], dtype=np.int64)

    def holding(self, low: int, high: int) -> Iterator[tuple[StoredFile, Span]]:
        """Files with records between two of the weather, and which these are."""
        begin = max(int(np.searchsorted(self._firsts, low, side="right")) - 1, 0)
        for file in self.files[begin:int(np.searchsorted(self._firsts, high))]:
            part = file.records.within(low, high)
            if part is not None:
                yield file, part

    def chunk_of(self, axis: str) -> int | None:
        """Length along an axis of what is best read at once; None for all of it."""
        if self.chunk is not None:
            return self.chunk[self.axes.index(axis)]
        return None if axis == [one for one in self.axes if one][-1] else 1


@dataclass(frozen=True)
class StoredField:
    """One quantity of the vocabulary.

    Attributes
    ----------
    variables : tuple of StoredVariable
        One, or two to be combined.
    units : tuple of (float, float)
        Factor and shift that bring each variable to the unit it is combined in.
    combination : {'plain', 'speed', 'mean', 'difference'}
        The variable itself, the root of the sum of both squares, the middle of both, or the energy of each step
        from the energy since 00 UTC.
    factor : float
        Multiplies what was combined.
    opens : bytes
        Of a 'difference', 1 for records that are the first of their UTC day, which count from nothing.
    follows : bytes
        Of a 'difference', 1 for records whose record before is a step earlier.
    """

    variables: tuple[StoredVariable, ...]
    units: tuple[tuple[float, float], ...]
    combination: Combination = "plain"
    factor: float = 1.0
    opens: bytes = b""
    follows: bytes = b""


@dataclass(frozen=True, eq=False)
class StoredWeather:
    """Weather that lies plainly in files.

    Attributes
    ----------
    fields : mapping of str to StoredField
        By vocabulary name.
    time : pandas.Index
        Starts of the steps.
    latitude, longitude : ndarray
        As in the dataset that was opened. [deg]
    step_hours : float
        [h]
    where : str
        Names of the files, for messages.
    """

    fields: Mapping[str, StoredField]
    time: pd.Index[Any]
    latitude: NDArray[np.float64]
    longitude: NDArray[np.float64]
    step_hours: float
    where: str

    def __eq__(self, other: object) -> bool:
        """Whether both read the same from the same files."""
        return (isinstance(other, StoredWeather) and self.fields == other.fields and self.time.equals(other.time)
                and np.array_equal(self.latitude, other.latitude) and np.array_equal(self.longitude, other.longitude)
                and (self.step_hours, self.where) == (other.step_hours, other.where))

    __hash__ = None  # type: ignore[assignment]

    def quantity(self, name: str) -> Quantity:
        """The quantity of a field."""
        return (DAY_WEATHER if self.step_hours >= 24.0 else STEP_WEATHER)[name]

    def read(
        self, name: str, records: slice, rows: slice, columns: slice, out: NDArray[np.float32], at: NDArray[Any],
        kept: NDArray[np.bool_] | None = None, *, fast: bool = True,
    ) -> Settled:
        """Read part of a field into a buffer, settled; may be called from several threads at once.

        Parameters
        ----------
        name : str
            Vocabulary name.
        records, rows, columns : slice
            Places on the axes of this weather.
        out : ndarray of float32, shape (buffer_rows, n_rows * n_columns)
            C-contiguous; the value of record i and column c, counted from those asked for, goes to
            ``out[at[c] + i, r * n_columns + c]``. Rows outside the buffer are dropped and count nothing.
        at : ndarray of int, shape (n_columns,)
            See `out`.
        kept : ndarray of bool, shape (n_rows, n_columns), optional
            Cells outside are missing and count nothing.
        fast : bool
            Read chunks past the NetCDF library where that is possible; the values are the same.

        Returns
        -------
        Settled

        Raises
        ------
        WeatherError
            If a file is damaged.
        """
        from stillfield.sources.grids.stored_reading import Window, read_field

        window = Window(*(range(*asked.indices(size)) for asked, size in
                          zip((records, rows, columns), self.shape, strict=True)))
        return read_field(self.fields[name], self.quantity(name), window, out, at, kept, fast=fast)

    @property
    def shape(self) -> tuple[int, int, int]:
        """Numbers of records, rows and columns."""
        return len(self.time), self.latitude.size, self.longitude.size

    def with_columns(self, places: NDArray[Any], longitude: NDArray[np.float64]) -> StoredWeather | None:
        """The same weather on other columns, such as those of a box across the antimeridian side by side.

        Parameters
        ----------
        places : ndarray of int
            Which of the columns, in their new order.
        longitude : ndarray
            Their longitudes, of the same length. [deg east]

        Returns
        -------
        StoredWeather or None
            None where the columns are too scattered.
        """
        runs = spans_of(places)
        if runs is None or any(run.step != 1 for run in runs):
            return None
        fields = {name: replace(field, variables=tuple(replace(one, columns=_chosen(one.columns, runs))
                                                       for one in field.variables))
                  for name, field in self.fields.items()}
        return replace(self, fields=fields, longitude=np.asarray(longitude, dtype=np.float64))

    def chunk_edges(self, name: str) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
        """Where chunks meet, on the axes of this weather, ends included.

        Parameters
        ----------
        name : str
            Vocabulary name.

        Returns
        -------
        records, rows, columns : ndarray of int
            Ascending, from 0 to the length of the axis. Without chunks, values may be cut anywhere but along the last
            axis of the file, on which they lie end to end.
        """
        edges: list[set[int]] = [{0, size} for size in self.shape]
        for variable in self.fields[name].variables:
            spans = (tuple(file.records for file in variable.files), variable.rows, variable.columns)
            for axis, found, size, parts in zip(("time", "latitude", "longitude"), edges, self.shape, spans,
                                                strict=True):
                chunk = variable.chunk_of(axis)
                for span in parts:
                    found.update(edge for edge in _meeting(span, chunk) if 0 < edge < size)
        records, rows, columns = (np.array(sorted(found), dtype=np.int64) for found in edges)
        return records, rows, columns


def _chosen(spans: tuple[Span, ...], runs: tuple[Span, ...]) -> tuple[Span, ...]:
    """Spans on the axis that is made of these runs of the axis they lie on."""
    parts = [(run, span.within(run.start, run.start + run.count)) for run in runs for span in spans]
    return tuple(replace(part, at=part.at - run.start + run.at) for run, part in parts if part is not None)


def _meeting(span: Span, chunk: int | None) -> list[int]:
    """Where the chunks of a span meet on the axis of the weather, with its ends."""
    ends = [span.at, span.at + span.count]
    if chunk is None:
        return ends
    low, high = span.extent
    inner = np.arange(-(-(low + 1) // chunk) * chunk, high, chunk)
    places = inner - span.start if span.step == 1 else span.start + 1 - inner
    return ends + (span.at + places).tolist()
