"""The heat balance walked through time, window after window, with its state carried exactly."""

from __future__ import annotations

from collections.abc import Callable
from math import ceil
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MethodError
from stillfield.physics import balance_numpy
from stillfield.physics.balance_kernel import CARRIED
from stillfield.physics.balance_numbers import (
    SUBSTEPS_PER_DAY,
    cell_rows,
    in_precision,
    memory_days,
    numbers,
    start_up_days,
)
from stillfield.physics.balance_records import CHANNELS, BalanceResult, Forcing, record_from
from stillfield.physics.balance_schedule import blank_gaps, steps_before, walk_through
from stillfield.physics.compiling import Engine, is_compiled
from stillfield.physics.moist_air import STANDARD_PRESSURE_PA
from stillfield.physics.still import Still
from stillfield.physics.vapour import Field

Array = NDArray[np.floating[Any]]
Fields = tuple[Array, ...]


class BalanceMarch:
    """The heat balance of one still in its central condition on some cells, given its days in order.

    The litres between `day_start_hour` of a day and of the next belong to the day: night output belongs to
    the day that heated the water. What runs before `day_start_hour` of the first day is not counted. So the
    newest day is kept back until the next is there; the night after the last day repeats that day's own early
    hours. Start-up repeats the first day.

    A yield day with missing weather is NaN. After a gap the water starts at air temperature, and so many
    further days are NaN as a deep basin remembers (none up to some 5 cm, 2 for 20 cm).

    How the days are cut into windows changes no digit. The run is computed in the precision of the first
    window's `Forcing.absorbed`.

    Parameters
    ----------
    still : Still
        Design and condition.
    cells : int
        Number of cells.
    steps_per_day : int
        Steps in a day.
    absorbed_share : float
        Sunshine absorbed over that given as `Forcing.absorbed`, so that several conditions share a forcing. [1]
    salinity : float or ndarray of shape (cell,), optional
        Salinity of the brine in the basin; that of the design if not given. [g kg-1]
    pressure : float or ndarray of shape (cell,)
        Air pressure. [Pa]
    spinup_days : int, optional
        Days of start-up; from the time constant if not given.
    day_start_hour : float
        Clock hour at which the yield day starts. [h]
    substeps : int, optional
        Sub-steps in a step; two an hour if not given.
    engine : {'auto', 'compiled', 'numpy'}
        'auto' compiles where numba is installed. Both give the same litres.
    record : bool
        Whether to keep what went on in every step.

    Raises
    ------
    MethodError
        For a salinity out of range, an hour that does not exist, or an engine that is not there.

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> hour = np.arange(24)[:, None] + 0.5
    >>> sun = 800.0 * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0)
    >>> day = Forcing(0.7 * sun, 0.05 * sun, *(np.full_like(sun, x) for x in (25.0, 2.0, 12.0)))
    >>> march = BalanceMarch(Still("plain", (Panel(1.0, 15.0),)), 1, engine="numpy")
    >>> [march.advance(day, last=last).daily_yield.round(1).tolist() for last in (False, False, True)]
    [[], [[3.5]], [[3.5], [3.5]]]
    """

    def __init__(  # noqa: PLR0913
        self,
        still: Still,
        cells: int,
        *,
        steps_per_day: int = 24,
        absorbed_share: float = 1.0,
        salinity: Field | None = None,
        pressure: Field = STANDARD_PRESSURE_PA,
        spinup_days: int | None = None,
        day_start_hour: float = 6.0,
        substeps: int | None = None,
        engine: Engine = "auto",
        record: bool = False,
    ) -> None:
        self._count, self._steps_per_day, self._recording = cells, steps_per_day, record
        self._substeps = substeps or max(1, ceil(SUBSTEPS_PER_DAY / steps_per_day))
        seconds = 86400.0 / steps_per_day / self._substeps
        air_pressure = np.asarray(pressure, dtype=np.float64)
        self._cells: Array = cell_rows(still, seconds, cells, salinity=salinity, pressure=air_pressure)
        self._numbers = numbers(still, float(air_pressure.mean()), seconds, absorbed_share)
        self._capacity = 0.5 * seconds * self._cells[2]
        self._spinup_days = start_up_days(still) if spinup_days is None else spinup_days
        self._skipped = steps_before(day_start_hour, steps_per_day)
        self._march = _march(engine)
        self._missing = np.zeros((memory_days(still), cells), np.bool_)
        self._carried: Array | None = None

    def advance(self, forcing: Forcing, *, last: bool) -> BalanceResult:
        """Take the next days, and give all days complete and not yet given.

        Parameters
        ----------
        forcing : Forcing
            Weather and sunshine of whole days, at least one.
        last : bool
            Whether these are the last.

        Returns
        -------
        BalanceResult
            Of the days given; its record, if asked for, of the steps taken.

        Raises
        ------
        MethodError
            For steps that are not whole days, or other cells than the march began with.
        """
        fields = self._checked(forcing)
        day = self._steps_per_day
        lead = night = np.arange(0)
        if self._carried is None:
            lead = np.tile(np.arange(day), self._spinup_days)
            if self._missing.size:
                self._missing[-1] = self._missing_at_first(fields)
        if last:
            night = np.arange(self._skipped) + fields[0].shape[0] - day
        found = self._walk(fields, lead, night)
        self._missing = blank_gaps(found.daily_yield, found.frost, self._missing)
        return found

    def around(self, forcing: Forcing) -> BalanceResult:
        """Take a cyclic year at once: its last days before the first, its first hours after the last.

        Parameters
        ----------
        forcing : Forcing
            Weather and sunshine of the whole year.

        Returns
        -------
        BalanceResult

        Raises
        ------
        MethodError
            As in `advance`.
        """
        fields = self._checked(forcing)
        lead = np.arange(-self._spinup_days * self._steps_per_day, 0) % fields[0].shape[0]
        found = self._walk(fields, lead, np.arange(self._skipped))
        if self._missing.size:
            at_end = np.isnan(found.daily_yield[-len(self._missing) :])
            self._missing[-len(at_end) :] = at_end
            self._missing[-1] |= self._missing_at_first(fields)
        blank_gaps(found.daily_yield, found.frost, self._missing)
        return found

    def _missing_at_first(self, fields: Fields) -> NDArray[np.bool_]:
        """Whether weather is missing before the first yield day starts."""
        sums = [field[: self._skipped].sum(axis=0) for field in fields]
        return np.asarray(np.isnan(np.sum(sums, axis=0)))

    def _walk(self, fields: Fields, lead: NDArray[Any], night: NDArray[Any]) -> BalanceResult:
        """Take the steps of a window and give its days, gaps still to be blanked."""
        steps, dtype = fields[0].shape[0], fields[0].dtype
        started = self._carried is not None and self._skipped > 0
        walk = walk_through(
            steps, self._steps_per_day, skipped=self._skipped, started=started, lead=lead, night=night,
            substeps=self._substeps,
        )
        if self._carried is None:
            self._carried = np.full((CARRIED, self._count), np.nan, dtype)
            self._carried[4:] = 0.0
            self._cells, self._numbers = self._cells.astype(dtype), in_precision(self._numbers, dtype)
        days = int((walk.rows[walk.ends] >= 0).sum())
        daily, frozen = np.zeros((days, self._count), dtype), np.zeros((days, self._count), np.bool_)
        kept = np.zeros((len(CHANNELS), steps, self._count), dtype) if self._recording else None
        self._march(fields, (self._cells, self._numbers), walk, self._carried, (daily, frozen, kept))
        if kept is None:
            return BalanceResult(daily, frozen)
        kept[:7] /= dtype.type(self._substeps)
        return BalanceResult(daily, frozen, record_from(kept, fields, self._numbers, self._capacity))

    def _checked(self, forcing: Forcing) -> Fields:
        """Fields of the forcing as contiguous arrays of one shape and precision."""
        given = [np.asarray(values) for values in vars(forcing).values()]
        if self._carried is not None:
            dtype = self._carried.dtype
        else:
            dtype = np.dtype(np.float32 if given[0].dtype == np.float32 else np.float64)
        shape = shape_of(forcing)
        if len(shape) != 2 or shape[0] < self._steps_per_day or shape[0] % self._steps_per_day:
            raise MethodError(
                "weather for the heat balance is not made of whole days",
                got=f"shape {shape} with {self._steps_per_day} steps a day",
                wanted="(days * steps_per_day, cell)",
                cure="Cut the series into whole local days first.",
            )
        if shape[1] not in (1, self._count):
            raise MethodError(
                "weather for the heat balance is of other cells than it began with", got=shape[1], wanted=self._count
            )
        fields = []
        for values in given:
            view = np.ascontiguousarray(np.broadcast_to(values, (shape[0], self._count)), dtype=dtype).view()
            view.flags.writeable = False  # of one kind, so that there is one compiled form
            fields.append(view)
        return tuple(fields)


def shape_of(forcing: Forcing) -> tuple[int, ...]:
    """Shape of all fields together.

    Parameters
    ----------
    forcing : Forcing
        What drives the still.

    Returns
    -------
    tuple of int
        As numpy broadcasts them.

    Raises
    ------
    ValueError
        Where the fields do not fit together.
    """
    return np.broadcast_shapes(*(np.shape(values) for values in vars(forcing).values()))


def _march(engine: Engine) -> Callable[..., None]:
    """Return the march of an engine; numba is imported here and nowhere else."""
    if not is_compiled(engine, "the heat balance"):
        return balance_numpy.march
    from stillfield.physics import balance_compiled

    march: Callable[..., None] = balance_compiled.march
    return march
