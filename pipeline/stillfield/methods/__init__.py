"""The yield methods behind one interface: weather of a block of cells in, daily litres out.

A method works on plain arrays with time first and cells last, so that the same function serves a grid
block, a list of stations and a distributed worker.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Block:
    """Weather of some cells over whole local days.

    Attributes
    ----------
    weather : mapping of str to ndarray
        Vocabulary name to values. Daily methods get shape (day, cell) in `vocabulary.DAY_WEATHER` units,
        hourly methods (day * steps_per_day, cell) in `vocabulary.STEP_WEATHER` units, time running on
        without gaps.
    latitude : ndarray, shape (cell,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 366, of the local day.
    steps_per_day : int
        Steps in a day; 1 for daily weather.
    clock_to_solar_hours : ndarray, shape (cell,)
        Hours to add to the clock by which the days are cut to get local mean solar time. [h]
    cyclic : bool
        True for a typical year: the day before the first is the last.
    """

    weather: Mapping[str, Array]
    latitude: Array
    day_of_year: NDArray[np.integer[Any]]
    steps_per_day: int = 1
    clock_to_solar_hours: Array = field(default_factory=lambda: np.zeros(1))
    cyclic: bool = False


@dataclass(frozen=True)
class DailyYield:
    """Daily litres of a block for one still in one condition.

    Attributes
    ----------
    litres : ndarray, shape (day, cell)
        Distillate per basin area; NaN where the weather is missing. [L m-2]
    frost : ndarray of bool, shape (day, cell), or None
        Days on which the brine was frozen at some time.
    outside : ndarray of bool, shape (day, cell), or None
        Days outside the range the method was fitted to.
    """

    litres: Array
    frost: Flags | None = None
    outside: Flags | None = None


class Method(Protocol):
    """What every yield method offers."""

    @property
    def name(self) -> str:
        """Name in run files and metadata."""
        ...

    @property
    def resolution(self) -> Literal["daily", "hourly"]:
        """Weather it takes: 'daily' or 'hourly' (steps of at most 6 h)."""
        ...

    @property
    def needs(self) -> tuple[str, ...]:
        """Vocabulary names it cannot do without."""
        ...

    @property
    def uses(self) -> tuple[str, ...]:
        """Vocabulary names it uses when they are there."""
        ...

    @property
    def knows_condition(self) -> bool:
        """False where the result is the same in every condition of the still, so there is no band."""
        ...

    def daily_yield(self, block: Block, still: Still) -> DailyYield:
        """Yield of every day and cell of `block` for `still` in its central condition."""
        ...

    def daily_yields(self, block: Block, still: Still, conditions: Sequence[str]) -> list[DailyYield]:
        """The same in each of `conditions`, sharing what they have in common."""
        ...
