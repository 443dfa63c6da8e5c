"""The order in which the heat balance walks through the weather, and to which day litres belong."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MethodError

Rows = tuple[NDArray[np.int64], int]


@dataclass(frozen=True)
class Schedule:
    """Order of the steps: start-up, all days, and the night that completes the last yield day.

    Attributes
    ----------
    order : ndarray of int
        Row of the weather in every step of the run.
    day_rows, step_rows : tuple of (ndarray of int, int)
        Row of the result in every step (-1: not counted) and number of rows, by yield day or by step.
    steps_per_day : int
        Steps in a day.
    skipped : int
        Steps before the first yield day starts.
    """

    order: NDArray[np.int64]
    day_rows: Rows
    step_rows: Rows
    steps_per_day: int
    skipped: int

    def by_day(self, steps: NDArray[Any]) -> NDArray[Any]:
        """Regroup rows of steps, shape (row, cell), to yield days, shape (day, step of day, cell)."""
        days, cells = self.day_rows[1], steps.shape[1]
        counted = steps[self.skipped : self.skipped + days * self.steps_per_day]
        return counted.reshape(days, self.steps_per_day, cells)


def schedule(
    steps: int, steps_per_day: int, spinup_days: int, *, cyclic: bool, day_start_hour: float
) -> Schedule:
    """Plan a run over `steps` steps of whole days.

    Parameters
    ----------
    steps : int
        Steps of weather.
    steps_per_day : int
        Steps in a day.
    spinup_days : int
        Days of start-up: the first day again and again, or of a cyclic year its last days.
    cyclic : bool
        Whether the last day comes before the first.
    day_start_hour : float
        Clock hour at which the yield day starts, rounded to a whole step. [h]

    Returns
    -------
    Schedule

    Raises
    ------
    MethodError
        Where the hour is not within 0 to 24.

    Examples
    --------
    >>> plan = schedule(4, 2, 1, cyclic=True, day_start_hour=12.0)
    >>> plan.order.tolist()
    [2, 3, 0, 1, 2, 3, 0]
    >>> plan.day_rows[0].tolist()
    [-1, -1, -1, 0, 0, 1, 1]
    """
    if not 0.0 <= day_start_hour < 24.0:
        raise MethodError(
            "the yield day starts at an hour that does not exist", got=day_start_hour, wanted="0 to 24"
        )
    days = steps // steps_per_day
    skipped = round(day_start_hour * steps_per_day / 24.0)
    first_day, last_day = np.arange(steps_per_day), np.arange(steps - steps_per_day, steps)
    if cyclic:
        before = np.arange(-spinup_days * steps_per_day, 0) % steps
        night = first_day[:skipped]
    else:
        before = np.tile(first_day, spinup_days)
        night = last_day[:skipped]
    walk = np.arange(steps + skipped)
    unseen = np.full(before.size, -1)
    day = np.where(walk < skipped, -1, (walk - skipped) // steps_per_day)
    return Schedule(
        order=np.concatenate([before, np.arange(steps), night]).astype(np.int64),
        day_rows=(np.concatenate([unseen, day]).astype(np.int64), days),
        step_rows=(np.concatenate([unseen, walk]).astype(np.int64), steps + skipped),
        steps_per_day=steps_per_day,
        skipped=skipped,
    )


def blank_gaps(
    daily: NDArray[Any],
    frozen: NDArray[np.bool_],
    gap_before: NDArray[np.bool_],
    *,
    memory_days: int,
    cyclic: bool,
) -> None:
    """Make days NaN in place that still feel the restart after a gap, and clear the frost of NaN days.

    Parameters
    ----------
    daily : ndarray, shape (day, cell)
        NaN on days with missing weather. [kg m-2]
    frozen : ndarray of bool, shape (day, cell)
        Frost flags.
    gap_before : ndarray of bool, shape (cell,)
        Whether weather is missing before the first yield day.
    memory_days : int
        Days after a gap that are not to be trusted.
    cyclic : bool
        Whether the last day comes before the first.

    Examples
    --------
    >>> daily = np.array([[1.0], [np.nan], [1.0], [1.0]])
    >>> frozen = np.zeros((4, 1), dtype=bool)
    >>> blank_gaps(daily, frozen, np.array([False]), memory_days=1, cyclic=False)
    >>> daily.ravel().tolist()
    [1.0, nan, nan, 1.0]
    """
    missing = np.isnan(daily)
    if missing.any() or gap_before.any():
        before = missing[-memory_days:] if cyclic else np.zeros((memory_days, daily.shape[1]), np.bool_)
        if memory_days:
            before = before[-memory_days:].copy()
            before[-1] |= gap_before
        padded = np.concatenate([before[:memory_days], missing])
        lead = padded.shape[0] - missing.shape[0]
        for back in range(1, lead + 1):
            daily[padded[lead - back : padded.shape[0] - back]] = np.nan
    frozen &= ~np.isnan(daily)
