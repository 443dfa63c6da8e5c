"""The order in which the heat balance walks through the weather, and to which day litres belong."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MethodError

Rows = NDArray[np.int64]


class Walk(NamedTuple):
    """Steps of a window: start-up, all its days, and at the end the night that completes the last yield day.

    Attributes
    ----------
    order : ndarray of int
        Row of the weather in every step.
    ends : ndarray of bool
        Whether a yield day ends with the step.
    rows : ndarray of int
        Row of the result that is filled where a yield day ends; -1 for none.
    notes : ndarray of int
        Row of the record in every step; -1 for none.
    substeps : int
        Sub-steps in a step.
    """

    order: Rows
    ends: NDArray[np.bool_]
    rows: Rows
    notes: Rows
    substeps: int


def steps_before(day_start_hour: float, steps_per_day: int) -> int:
    """Steps of a calendar day before its yield day starts, rounded to whole steps.

    Parameters
    ----------
    day_start_hour : float
        Hour at which the yield day starts, from 0 to less than 24. [h]
    steps_per_day : int
        Steps of a day.

    Returns
    -------
    int

    Raises
    ------
    MethodError
        Where the hour is not within 0 to 24.
    """
    if not 0.0 <= day_start_hour < 24.0:
        raise MethodError(
            "the yield day starts at an hour that does not exist", got=day_start_hour, wanted="0 to 24"
        )
    return round(day_start_hour * steps_per_day / 24.0)


def walk_through(
    steps: int, steps_per_day: int, *, skipped: int, started: bool, lead: Rows, night: Rows, substeps: int
) -> Walk:
    """Plan the walk through a window of whole days.

    Parameters
    ----------
    steps : int
        Steps of weather.
    steps_per_day : int
        Steps in a day.
    skipped : int
        Steps of a day before its yield day starts.
    started : bool
        Whether the window begins within a yield day that is to be given.
    lead, night : ndarray of int
        Rows of the weather to walk through before and after the window.
    substeps : int
        Sub-steps in a step.

    Returns
    -------
    Walk

    Examples
    --------
    >>> plan = walk_through(4, 2, skipped=1, started=False, lead=np.array([2, 3]), night=np.array([0]), substeps=2)
    >>> plan.order.tolist(), plan.rows[plan.ends].tolist()
    ([2, 3, 0, 1, 2, 3, 0], [-1, -1, 0, 1])
    """
    step = np.arange(-lead.size, steps + night.size)
    return Walk(
        order=np.concatenate([lead, np.arange(steps), night]).astype(np.int64),
        ends=(step + 1 - skipped) % steps_per_day == 0,
        rows=np.maximum((step - skipped) // steps_per_day, -1) + int(started),
        notes=np.where(step < steps, np.maximum(step, -1), -1),
        substeps=substeps,
    )


def blank_gaps(
    daily: NDArray[Any], frozen: NDArray[np.bool_], before: NDArray[np.bool_]
) -> NDArray[np.bool_]:
    """Make days NaN in place that still feel the restart after a gap, and clear the frost of NaN days.

    Parameters
    ----------
    daily : ndarray, shape (day, cell)
        NaN on days with missing weather. [kg m-2]
    frozen : ndarray of bool, shape (day, cell)
        Frost flags.
    before : ndarray of bool, shape (memory day, cell)
        Whether weather was missing on the days before, as many as are not to be trusted after a gap.

    Returns
    -------
    ndarray of bool, shape (memory day, cell)
        The same for the days that follow.

    Examples
    --------
    >>> daily = np.array([[1.0], [np.nan], [1.0], [1.0]])
    >>> blank_gaps(daily, np.zeros((4, 1), dtype=bool), np.zeros((1, 1), dtype=bool)).tolist()
    [[False]]
    >>> daily.ravel().tolist()
    [1.0, nan, nan, 1.0]
    """
    days, memory = daily.shape[0], before.shape[0]
    missing = np.concatenate([before, np.isnan(daily)])
    if missing.any():
        for back in range(1, memory + 1):
            daily[missing[memory - back : memory - back + days]] = np.nan
        frozen &= ~np.isnan(daily)
    return missing[days:]
