"""Reliability: what is reached in how many years, the month that decides the size, and the longest poor spell."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError

Array = NDArray[np.float64]
Whole = NDArray[np.int64]
Flags = NDArray[np.bool_]
Words = NDArray[np.str_]

MONTHS = 12
#: Share of years that reach or pass the value, by the planner's name for it.
REACHED_IN = {"P50": "reached in 1 of 2 years", "P75": "reached in 3 of 4 years", "P90": "reached in 9 of 10 years"}
#: Below this many years a value reached in 9 of 10 years is read beyond the record.
FEW_YEARS = 10
#: One year tells nothing of how years differ.
LEAST_YEARS = 2
#: Ratios closer than this are one value computed in two ways.
TIE = 1e-9

NO_YIELD = "no yield in a month with need"
MONTH_MISSING = "yield or need of a month is missing"


@dataclass(frozen=True)
class Reached:
    """Yields reached or passed in 1 of 2, 3 of 4 and 9 of 10 years of the record.

    Attributes
    ----------
    p50, p75, p90 : ndarray
        Unit of the yields given; NaN under two valid years. P90 is the lowest of the three.
    years : ndarray of int
        Valid years behind each value.
    """

    p50: Array
    p75: Array
    p90: Array
    years: Whole


def reached_yields(by_year: ArrayLike, *, typical: bool = False) -> Reached:
    """Yields reached or passed in a share of the years, as planners count them.

    P90 is reached or passed in 9 of 10 years: the 10th percentile of the yearly values, linear between ranks
    (type 7 of Hyndman & Fan 1996, The American Statistician 50:361; numpy's default). Missing years are left out
    of each series by itself. P90 of a year is not the sum of the P90 of its months: poor months do not all fall
    in one year. So it is to be taken of `year_totals`.

    Parameters
    ----------
    by_year : array_like, shape (year, ...)
        Yields of one calendar month, or of the whole year, year by year; NaN where missing. [any unit]
    typical : bool
        True where the weather is a typical year.

    Returns
    -------
    Reached
        Arrays of shape (...).

    Raises
    ------
    DecisionError
        For a typical year: it is put together to be average, so it knows no good and poor years.

    Examples
    --------
    >>> years = reached_yields([100.0, 110.0, 90.0, 120.0, 80.0, 105.0, 95.0, 115.0, 85.0, 125.0, 75.0])
    >>> float(years.p50), float(years.p90), int(years.years)
    (100.0, 80.0, 11)
    """
    if typical:
        raise DecisionError(
            "a typical year holds no poor and good years, so nothing can be said of 9 of 10 years",
            where="reliability", got="typical-year weather", wanted="weather of real years, ten or more",
            cure="Use a record of years, or leave reliability out.",
        )
    values = np.asarray(by_year, dtype=np.float64)
    if values.shape[0] == 0:
        values = np.full((1, *values.shape[1:]), np.nan)
    years = np.asarray(np.isfinite(values).sum(axis=0), dtype=np.int64)
    ranked = np.sort(np.where(np.isfinite(values), values, np.nan), axis=0)
    enough = years >= LEAST_YEARS
    p50, p75, p90 = (np.where(enough, quantile_of_ranked(ranked, years, below), np.nan) for below in (0.5, 0.25, 0.1))
    return Reached(p50, p75, p90, years)


def quantile_of_ranked(ranked: Array, count: Whole, share: float) -> Array:
    """Linear quantile, as numpy's default, of values sorted with NaN last: nanquantile calls Python for every cell.

    Parameters
    ----------
    ranked : ndarray, shape (year, ...)
        Sorted along the first axis.
    count : ndarray of int, shape (...)
        How many are not NaN.
    share : float
        Of the years that lie below, 0 to 1. [1]

    Returns
    -------
    ndarray, shape (...)
        NaN where there is none.

    Examples
    --------
    >>> quantile_of_ranked(np.array([[1.0], [3.0], [np.nan]]), np.array([2]), 0.5)
    array([2.])
    """
    last = np.maximum(count - 1, 0)
    place = share * last
    below = np.floor(place).astype(np.int64)
    low = np.take_along_axis(ranked, below[None], axis=0)[0]
    high = np.take_along_axis(ranked, np.minimum(below + 1, last)[None], axis=0)[0]
    return np.asarray(low + (place - below) * (high - low))


def year_totals(monthly_by_year: ArrayLike) -> Array:
    """Yield of each year, missing where any of its months is.

    Parameters
    ----------
    monthly_by_year : array_like, shape (year, 12, ...)
        [L m-2 month-1]

    Returns
    -------
    ndarray, shape (year, ...)
        [L m-2 year-1]

    Examples
    --------
    >>> year_totals(np.full((2, 12), 10.0)).tolist()
    [120.0, 120.0]
    """
    months = np.asarray(monthly_by_year, dtype=np.float64)
    if months.ndim < 2 or months.shape[1] != MONTHS:
        raise DecisionError(
            "yields by year are not months of years", where="reliability", got=f"shape {months.shape}",
            wanted="(year, 12, ...)",
        )
    return np.asarray(months.sum(axis=1))


def reached_words(name: str, years: int) -> str:
    """Say in words what P50, P75 or P90 means, with the years behind it.

    Parameters
    ----------
    name : {'P50', 'P75', 'P90'}
        Which value.
    years : int
        Valid years.

    Returns
    -------
    str

    Examples
    --------
    >>> reached_words("P90", 8)
    'reached in 9 of 10 years; 8 years of record'
    """
    if name not in REACHED_IN:
        raise DecisionError("no such share of years", where="reliability", got=name, wanted=", ".join(REACHED_IN))
    if years < LEAST_YEARS:
        return f"not known: {_counted(years)} of record, at least {LEAST_YEARS} needed"
    return f"{REACHED_IN[name]}; {_counted(years)} of record"


def _counted(years: int) -> str:
    return f"{years} year{'' if years == 1 else 's'}"


def years_warning(years: int) -> str | None:
    """Warn where the record is too short to know a poor year from it.

    With independent years the chance that none of n is as poor as the poorest tenth of all years is 0.9 ** n.

    Parameters
    ----------
    years : int
        Valid years.

    Returns
    -------
    str or None
        None from ten years on.

    Examples
    --------
    >>> years_warning(8)
    'only 8 years of record: with a chance of 43 % it holds no year as poor as the poorest tenth of all years'
    """
    if years >= FEW_YEARS:
        return None
    if years < LEAST_YEARS:
        return f"{'only 1 year' if years == 1 else 'no year'} of record: it cannot tell how years differ"
    chance = round(100.0 * 0.9**years)
    return (
        f"only {years} years of record: with a chance of {chance} % it holds no year as poor as the poorest tenth "
        "of all years"
    )


@dataclass(frozen=True)
class SizingMonth:
    """The month that asks for the most basin area.

    Attributes
    ----------
    month : ndarray of int
        1 to 12, the earlier of ties; 0 where it cannot be told.
    area_m2 : ndarray
        Basin area that meets the need of that month from its yield; NaN where it cannot be told. [m2]
    least_yield_month : ndarray of int
        Month of the least yield, 0 where a month is missing; another one where the need has its own season.
    reason : ndarray of str
        Why it cannot be told; empty otherwise.
    """

    month: Whole
    area_m2: Array
    least_yield_month: Whole
    reason: Words


def sizing_month(need_l: ArrayLike, yield_l_m2: ArrayLike) -> SizingMonth:
    """Month of the largest need per yield.

    Parameters
    ----------
    need_l : array_like, shape (12, ...)
        Litres to be supplied on a day of each month. [L d-1]
    yield_l_m2 : array_like, shape (12, ...)
        Distillate of a day of each month, broadcast against `need_l`. Of a poor year (P90) it sizes for 9 of 10
        years, month by month. [L m-2 d-1]

    Returns
    -------
    SizingMonth
        Arrays of shape (...).

    Raises
    ------
    DecisionError
        For a negative need or yield, or without twelve months.

    Notes
    -----
    Both may be given per month instead of per day: the area is the same, but then `least_yield_month` leans to
    February. A month without need asks for no area, whatever its yield.

    Examples
    --------
    Least yield in January, but three times the need in July:

    >>> need = [10, 10, 10, 10, 10, 10, 30, 10, 10, 10, 10, 10]
    >>> yields = [2, 2.5, 3, 3.5, 4, 4.5, 4.5, 4.5, 4, 3, 2.5, 2.2]
    >>> found = sizing_month(need, yields)
    >>> int(found.month), int(found.least_yield_month), round(float(found.area_m2), 2)
    (7, 1, 6.67)
    """
    need, yields = np.broadcast_arrays(np.asarray(need_l, dtype=np.float64), np.asarray(yield_l_m2, dtype=np.float64))
    if need.ndim < 1 or need.shape[0] != MONTHS or (need < 0.0).any() or (yields < 0.0).any():
        raise DecisionError(
            "need or yield of the months cannot be", where="sizing month", got=f"shape {need.shape}",
            wanted="12 months, none negative",
        )
    known = np.asarray((np.isfinite(need) & np.isfinite(yields)).all(axis=0))
    barren = np.asarray(((need > 0.0) & (yields == 0.0)).any(axis=0))
    ratio = np.where(need > 0.0, need / np.where(yields > 0.0, yields, np.inf), 0.0)
    largest = ratio.max(axis=0)
    month = np.argmax(ratio >= largest * (1.0 - TIE), axis=0) + 1
    told = known & ~barren
    least = np.where(np.isfinite(yields).all(axis=0), np.argmin(np.where(yields >= 0.0, yields, np.inf), axis=0) + 1, 0)
    reason = np.where(known, np.where(barren, NO_YIELD, ""), MONTH_MISSING)
    return SizingMonth(
        np.where(told, month, 0), np.where(told, largest, np.nan), np.asarray(least, dtype=np.int64),
        np.asarray(reason, dtype=np.str_),
    )


@dataclass(frozen=True)
class Spell:
    """The longest run of poor days.

    Attributes
    ----------
    days : ndarray of int
        Length of the longest run of days known to be poor, one after the other. [d]
    start : ndarray of int
        Index of its first day, of the earlier of two equally long; -1 where no day is poor.
    days_at_most : ndarray of int
        Length of the longest run if every missing day had been poor as well. [d]
    days_missing : ndarray of int
        Days of the record without yield or need. [d]
    """

    days: Whole
    start: Whole
    days_at_most: Whole
    days_missing: Whole


def longest_spell(poor: NDArray[np.bool_], known: NDArray[np.bool_]) -> Spell:
    """Longest run of poor days, with what missing days may hide.

    A missing day breaks a run: no run is claimed across days that nobody knows. So the length is a lower bound,
    and `Spell.days_at_most` beside it an upper one; they are equal where no missing day touches the longest run.

    Parameters
    ----------
    poor, known : ndarray of bool, shape (day, ...)
        Days one after the other, none left out; `poor` counts only where `known`.

    Returns
    -------
    Spell
        Arrays of shape (...).

    Examples
    --------
    >>> poor = np.array([True, True, False, True, True, True, False])
    >>> found = longest_spell(poor, np.ones(7, dtype=bool))
    >>> int(found.days), int(found.start)
    (3, 3)
    """
    days, start = _longest_run(poor & known)
    at_most, _ = _longest_run(poor | ~known)
    return Spell(days, start, at_most, np.asarray((~known).sum(axis=0), dtype=np.int64))


def _longest_run(flags: Flags) -> tuple[Whole, Whole]:
    """Length and start of the longest run of True along the first axis; -1 where there is none."""
    shape = flags.shape[1:]
    if flags.shape[0] == 0:
        return np.zeros(shape, dtype=np.int64), np.full(shape, -1)
    day = np.arange(flags.shape[0], dtype=np.int32).reshape(-1, *(1,) * len(shape))
    run = day - np.maximum.accumulate(np.where(flags, np.int32(-1), day), axis=0)
    end = np.argmax(run, axis=0)
    length = np.asarray(np.take_along_axis(run, end[None], axis=0)[0], dtype=np.int64)
    return length, np.asarray(np.where(length > 0, end - length + 1, -1), dtype=np.int64)


def spell_below_need(
    daily_yield: ArrayLike, need_l: ArrayLike, *, area_m2: ArrayLike, share: float = 0.5
) -> Spell:
    """Longest run of days on which the stills give less than a share of the need.

    Parameters
    ----------
    daily_yield : array_like, shape (day, ...)
        NaN where missing. [L m-2]
    need_l : array_like
        Broadcast against `daily_yield`. [L d-1]
    area_m2 : array_like, shape (...)
        Basin area. [m2]
    share : float
        A day is poor below this share of its need. [1]

    Returns
    -------
    Spell

    Examples
    --------
    >>> found = spell_below_need([4.0, 1.0, 0.5, np.nan, 0.2, 4.0], 30.0, area_m2=10.0)
    >>> int(found.days), int(found.start), int(found.days_at_most), int(found.days_missing)
    (2, 1, 4, 1)
    """
    litres, need = np.broadcast_arrays(
        np.asarray(daily_yield, dtype=np.float64) * np.asarray(area_m2, dtype=np.float64),
        np.asarray(need_l, dtype=np.float64),
    )
    return longest_spell(litres < share * need * (1.0 - TIE), np.isfinite(litres) & np.isfinite(need))


def spell_below_month_mean(daily_yield: ArrayLike, month_of_day: ArrayLike, *, share: float = 1.0) -> Spell:
    """Longest run of days below (a share of) the long-term mean of their calendar month.

    Parameters
    ----------
    daily_yield : array_like, shape (day, ...)
        NaN where missing. [L m-2]
    month_of_day : array_like of int, shape (day,)
        1 to 12.
    share : float
        A day is poor below this share of the mean. [1]

    Returns
    -------
    Spell

    Examples
    --------
    >>> found = spell_below_month_mean([4.0, 3.0, 2.0, 3.0, 1.0, 0.0, 2.0], [1, 1, 1, 1, 2, 2, 2])
    >>> int(found.days), int(found.start)
    (1, 2)
    """
    values, month = np.asarray(daily_yield, dtype=np.float64), np.asarray(month_of_day, dtype=np.int64)
    known = np.isfinite(values)
    poor = np.zeros(values.shape, dtype=np.bool_)
    for number in range(1, MONTHS + 1):
        here = month == number
        count = known[here].sum(axis=0)
        mean = np.where(known[here], values[here], 0.0).sum(axis=0) / np.maximum(count, 1)
        poor[here] = values[here] < share * mean * (1.0 - TIE)
    return longest_spell(poor, known)
