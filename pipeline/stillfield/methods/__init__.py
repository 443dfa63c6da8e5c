"""The yield methods behind one interface: weather of some cells in, daily litres out.

A method is walked through time: it begins with some cells and is then given their days in order, as many at a
time as fit in memory. It works on plain arrays with time first and cells last, so that the same function serves
a grid, a list of stations and a distant worker.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.still import Still

Array = NDArray[np.floating[Any]]
Flags = NDArray[np.bool_]

#: Days at the end of a typical year that are run through before its first, so that the basin is warm.
WARM_UP_DAYS = 30


@dataclass(frozen=True)
class Cells:
    """Where some cells are and by which clock their days are cut.

    Attributes
    ----------
    latitude : ndarray, shape (cell,)
        [deg north]
    clock_to_solar_hours : ndarray, shape (cell,)
        Hours to add to the clock by which the days are cut to get local mean solar time. [h]
    steps_per_day : int
        Steps in a day; 1 for daily weather.
    """

    latitude: Array
    clock_to_solar_hours: Array
    steps_per_day: int = 1


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
        As in `Cells`. [h]
    cyclic : bool
        True for a typical year: the day before the first is the last. Marches know nothing of it;
        `whole_record` unrolls it.
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

    def of_days(self, some: slice) -> DailyYield:
        """The same of some of its days."""
        frost, outside = (None if flag is None else flag[some] for flag in (self.frost, self.outside))
        return DailyYield(self.litres[some], frost, outside)


class March(Protocol):
    """A still on some cells, walked through time."""

    def advance(self, block: Block, *, last: bool) -> list[DailyYield]:
        """Take the next days and give the yields, one per condition, of all days complete and not yet given.

        A method that looks a day ahead keeps its newest day back until the next call, or gives it where `last`.
        How the days are cut into calls changes no digit of the result.
        """
        ...


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

    def begin(self, cells: Cells, still: Still, conditions: Sequence[str]) -> March:
        """Set out with `still` in each of `conditions` on some cells, before their first day."""
        ...


def whole_record(method: Method, block: Block, still: Still, conditions: Iterable[str]) -> list[DailyYield]:
    """Yield of every day of a whole record, in each of `conditions`.

    Parameters
    ----------
    method : Method
        Any method.
    block : Block
        All days of the record.
    still : Still
        The design.
    conditions : iterable of str
        Conditions of the still.

    Returns
    -------
    list of DailyYield
        One per condition, of all days of `block`.

    Examples
    --------
    >>> from stillfield.methods.baselines import ConstantEfficiency
    >>> from stillfield.physics.still import Panel
    >>> days = Block({"irradiation": np.array([[23.0], [11.5]])}, np.zeros(1), np.array([1, 2]))
    >>> rule = ConstantEfficiency(0.30)
    >>> whole_record(rule, days, Still("plain", (Panel(1.0, 15.0),)), ["maintained"])[0].litres.ravel().tolist()
    [3.0, 1.5]
    """
    days = len(block.day_of_year)
    before, whole = (min(WARM_UP_DAYS, days), unrolled(block)) if block.cyclic else (0, block)
    cells = Cells(whole.latitude, whole.clock_to_solar_hours, whole.steps_per_day)
    found = method.begin(cells, still, list(conditions)).advance(whole, last=True)
    return [one.of_days(slice(before, before + days)) for one in found]


def unrolled(block: Block) -> Block:
    """A typical year with its last days before the first and its first day after the last.

    Parameters
    ----------
    block : Block
        A whole typical year.

    Returns
    -------
    Block
        `WARM_UP_DAYS` days longer at the start (no more than it has), and a day at the end.
    """
    days, steps = len(block.day_of_year), block.steps_per_day
    order = np.concatenate([np.arange(days - min(WARM_UP_DAYS, days), days), np.arange(days), [0]])
    rows = (order[:, None] * steps + np.arange(steps)).ravel()
    weather = {name: values[rows] for name, values in block.weather.items()}
    return Block(weather, block.latitude, block.day_of_year[order], steps, block.clock_to_solar_hours)
