"""Need: litres per person and day, through the year, for households and villages."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError

Array = NDArray[np.float64]

MONTHS = 12
#: Days of the months of a mean year; every fourth year is taken as a leap year. [d]
DAYS_OF_MONTHS = (31.0, 28.25, 31.0, 30.0, 31.0, 30.0, 31.0, 31.0, 30.0, 31.0, 30.0, 31.0)
#: People of a household where the run file says nothing: common practice, no source.
PEOPLE_PER_HOUSEHOLD = 5.0

_SPHERE = "Sphere Handbook 2018, water supply standard on access and quantity, table of basic survival needs"


@dataclass(frozen=True)
class NeedFigure:
    """A published amount of water for a person and day.

    Attributes
    ----------
    name : str
        Name in a run file.
    low, high : float
        Ends of the published range. [L]
    covers : str
        What the water is for.
    source : str
        Where it is printed, and how it was taken from there.
    """

    name: str
    low: float
    high: float
    covers: str
    source: str

    @property
    def litres_per_person_day(self) -> float:
        """What the name stands for: the upper end, since the lower leaves out whoever works or falls ill, [L]."""
        return self.high


def _figures(*figures: NeedFigure) -> dict[str, NeedFigure]:
    return {figure.name: figure for figure in figures}


#: Published figures by name. The parts of the Sphere table add up to its total.
FIGURES = _figures(
    NeedFigure("drinking", 2.5, 3.0, "survival: drinking and the water in food", f"{_SPHERE}; quoted from memory"),
    NeedFigure("cooking", 3.0, 6.0, "basic cooking", f"{_SPHERE}; quoted from memory"),
    NeedFigure("hygiene", 2.0, 6.0, "basic hygiene", f"{_SPHERE}; quoted from memory"),
    NeedFigure("drinking-and-cooking", 5.5, 9.0, "survival and basic cooking",
               f"sum of two lines of: {_SPHERE}; quoted from memory"),
    NeedFigure("basic", 7.5, 15.0, "survival, basic cooking and basic hygiene", f"{_SPHERE}; quoted from memory"),
    NeedFigure("hot-labour", 4.5, 4.5, "drinking of an adult at manual labour in high temperatures",
               "Howard & Bartram 2003, WHO/SDE/WSH/03.02, volumes required for hydration; quoted from memory"),
)
DEFAULT_FIGURE = "drinking"


@dataclass(frozen=True)
class Need:
    """What a person needs through the year, and how much of it the stills are to meet.

    Attributes
    ----------
    litres_per_person_day : float
        Before factors and share. [L]
    figure : str
        Name of the published figure, or ``stated`` for a number of the user's own.
    month_factors : tuple of 12 floats
        Need of each month as a multiple of `litres_per_person_day`, January first. [1]
    people_per_household : float
        [person]
    share : float
        Share of the need that the stills are to meet, in (0, 1]. [1]
    """

    litres_per_person_day: float
    figure: str
    month_factors: tuple[float, ...]
    people_per_household: float
    share: float

    @property
    def mean_factor(self) -> float:
        """Mean of the factors over the days of the year; 1.08 means 8 % more than the figure through the year."""
        return float(np.average(self.month_factors, weights=DAYS_OF_MONTHS))


def need_of(
    figure: str | float = DEFAULT_FIGURE,
    *,
    month_factors: Sequence[float] | None = None,
    people_per_household: float = PEOPLE_PER_HOUSEHOLD,
    share: float = 1.0,
) -> Need:
    """Need from a published figure or a number.

    The factors are taken as they stand, not scaled to a mean of 1: 1.3 in July means 30 % more in July than the
    figure says, and a published minimum stays a minimum in the other months. `Need.mean_factor` tells what they
    do to the year; `factors_of_mean_one` scales them where the figure is meant as a mean of the year.

    Parameters
    ----------
    figure : str or float
        A name of `FIGURES`, or litres per person and day. [L]
    month_factors : sequence of 12 floats, optional
        January first, not negative, not all 0; left out means 1 in every month. [1]
    people_per_household : float
        [person]
    share : float
        Share of the need to be met, in (0, 1]. [1]

    Returns
    -------
    Need

    Raises
    ------
    DecisionError
        For an unknown name or a number that cannot be.

    Examples
    --------
    >>> need_of().litres_per_person_day
    3.0
    >>> need_of(4, share=0.5).figure
    'stated'
    """
    if isinstance(figure, str):
        if figure not in FIGURES:
            raise DecisionError(
                "no such figure of need", where="need", got=figure, wanted=", ".join(FIGURES),
                cure="Give one of these names, or litres per person and day.",
            )
        litres, name = FIGURES[figure].litres_per_person_day, figure
    else:
        litres, name = float(figure), "stated"
    _positive("litres per person and day", litres)
    _positive("people per household", people_per_household)
    if not 0.0 < share <= 1.0:
        raise DecisionError("share of the need to be met is no share", where="need", got=share, wanted="above 0, to 1")
    return Need(litres, name, _factors(month_factors), float(people_per_household), float(share))


def _positive(what: str, value: float) -> None:
    if not (isfinite(value) and value > 0.0):
        raise DecisionError(f"{what} cannot be", where="need", got=value, wanted="a number above 0")


def _factors(month_factors: Sequence[float] | None) -> tuple[float, ...]:
    factors = (1.0,) * MONTHS if month_factors is None else tuple(float(factor) for factor in month_factors)
    usable = all(isfinite(factor) and factor >= 0.0 for factor in factors) and any(factors)
    if len(factors) != MONTHS or not usable:
        raise DecisionError(
            "seasonal profile of the need is unusable", where="need", got=list(factors),
            wanted="12 factors, January first, none negative, not all 0",
        )
    return factors


def factors_of_mean_one(month_factors: Sequence[float]) -> tuple[float, ...]:
    """Scale a seasonal profile so that its mean over the days of a year is 1.

    Parameters
    ----------
    month_factors : sequence of 12 floats
        January first. [1]

    Returns
    -------
    tuple of 12 floats
        [1]

    Raises
    ------
    DecisionError
        If the profile is unusable.

    Examples
    --------
    >>> factors_of_mean_one([2.0] * 12) == (1.0,) * 12
    True
    """
    factors = _factors(month_factors)
    mean = float(np.average(factors, weights=DAYS_OF_MONTHS))
    return tuple(factor / mean for factor in factors)


def daily_need(need: Need, people: ArrayLike) -> Array:
    """Litres to be supplied on a day of each month.

    Parameters
    ----------
    need : Need
        From `need_of`.
    people : float or array_like, shape (...)
        NaN where unknown. `need.people_per_household` gives the need of a household. [person]

    Returns
    -------
    ndarray, shape (12, ...)
        NaN where `people` is. [L d-1]

    Raises
    ------
    DecisionError
        If a number of people is negative or infinite.

    Examples
    --------
    Drinking water of 120 people:

    >>> float(daily_need(need_of("drinking"), 120)[0])
    360.0
    """
    heads = np.asarray(people, dtype=np.float64)
    if (heads < 0.0).any() or np.isinf(heads).any():
        raise DecisionError("number of people cannot be", where="need", got=float(np.nanmin(heads)), wanted="0 or more")
    months = np.asarray(need.month_factors).reshape(MONTHS, *(1,) * heads.ndim)
    return np.asarray(need.litres_per_person_day * need.share * months * heads)


def monthly_need(need: Need, people: ArrayLike) -> Array:
    """Litres to be supplied in each month of a mean year.

    Parameters
    ----------
    need, people
        As for `daily_need`.

    Returns
    -------
    ndarray, shape (12, ...)
        Their sum over the months is the need of a mean year of 365.25 days. [L month-1]

    Examples
    --------
    >>> float(monthly_need(need_of(1.0), 1.0).sum())
    365.25
    """
    daily = daily_need(need, people)
    return np.asarray(daily * np.asarray(DAYS_OF_MONTHS).reshape(MONTHS, *(1,) * (daily.ndim - 1)))


def need_of_days(need: Need, people: ArrayLike, month_of_day: ArrayLike) -> Array:
    """Litres to be supplied on every day of a record.

    Parameters
    ----------
    need, people
        As for `daily_need`.
    month_of_day : array_like of int, shape (day,)
        Calendar month of every day, 1 to 12.

    Returns
    -------
    ndarray, shape (day, ...)
        [L d-1]

    Examples
    --------
    >>> summer = need_of(3.0, month_factors=[1, 1, 1, 1, 1, 2, 2, 2, 1, 1, 1, 1])
    >>> need_of_days(summer, 1.0, [5, 6]).tolist()
    [3.0, 6.0]
    """
    month = np.asarray(month_of_day, dtype=np.int64)
    if ((month < 1) | (month > MONTHS)).any():
        raise DecisionError("a month of the record cannot be", where="need", wanted="1 to 12")
    return np.asarray(daily_need(need, people)[month - 1])


def households(need: Need, people: ArrayLike) -> Array:
    """Whole households of a place, the last one counted though it be smaller.

    Parameters
    ----------
    need : Need
        Gives the people per household.
    people : float or array_like
        NaN where unknown. [person]

    Returns
    -------
    ndarray, shape of `people`
        [household]

    Examples
    --------
    >>> float(households(need_of(people_per_household=5), 121))
    25.0
    """
    # A billionth of a household is rounding of the division, not one household more.
    return np.asarray(np.ceil(np.asarray(people, dtype=np.float64) / need.people_per_household - 1e-9))
