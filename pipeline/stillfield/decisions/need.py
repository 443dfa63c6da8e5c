"""Need: litres per person and day, through the year, for households and villages; and what blending would stretch."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError
from stillfield.physics.brine import density

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


@dataclass(frozen=True)
class TasteLimit:
    """A concentration from which water begins to taste.

    Attributes
    ----------
    name : str
        Name in a run file.
    limit_mg_l : float
        [mg L-1]
    meaning, source : str
        What it says of the water, and where it is printed.
    """

    name: str
    limit_mg_l: float
    meaning: str
    source: str


_WHO = "WHO, Guidelines for Drinking-water Quality, acceptability aspects; quoted from memory"

#: Taste, not health: no health-based value is set for either.
TASTE_LIMITS = {
    limit.name: limit
    for limit in (
        TasteLimit("dissolved-solids-good", 600.0, "taste generally considered good below", _WHO),
        TasteLimit("dissolved-solids-poor", 1000.0, "increasingly unpalatable above", _WHO),
        TasteLimit("chloride", 250.0, "chloride increasingly likely to be tasted above", _WHO),
    )
}

#: Chloride in sea salt, by mass: 19.35 of 35.17 g in a kilogram of reference seawater.
#: (Millero et al. 2008, Deep-Sea Res. I 55:50, reference composition; quoted from memory)
CHLORIDE_SHARE_OF_SEA_SALT = 0.550

BLEND_CAUTION = (
    "For information only: blending holds only if the raw water is otherwise safe to drink. What a still removes "
    "besides salt (germs, arsenic, fluoride, nitrate, metals) comes back with every litre of raw water; have the "
    "raw water and the blend tested."
)


@dataclass(frozen=True)
class Blend:
    """How far distillate would reach if raw water were mixed in up to a taste limit.

    Attributes
    ----------
    limit_mg_l : float
        [mg L-1]
    raw_share : ndarray
        Largest share of raw water in the blend by volume; 1 where raw water alone keeps the limit. [1]
    litres_per_litre : ndarray
        Litres of blend from a litre of distillate; infinite where raw water alone keeps the limit. [L L-1]
    caution : str
        To be shown with the figures.
    """

    limit_mg_l: float
    raw_share: Array
    litres_per_litre: Array
    caution: str = BLEND_CAUTION


def salinity_mg_l(salinity_g_kg: ArrayLike, temperature_c: float = 25.0) -> Array:
    """Dissolved salt of a litre from that of a kilogram.

    Parameters
    ----------
    salinity_g_kg : float or array_like
        Sea salt or sodium chloride. [g kg-1]
    temperature_c : float
        [degC]

    Returns
    -------
    ndarray
        [mg L-1]

    Examples
    --------
    Seawater of 35 g/kg weighs 1.023 kg a litre at 25 °C:

    >>> round(float(salinity_mg_l(35.0)), -2)
    35800.0
    """
    salinity = np.asarray(salinity_g_kg, dtype=np.float64)
    known = np.where(np.isnan(salinity), 0.0, salinity)
    return np.asarray(salinity * np.asarray(density(temperature_c, known)))


def blend_under(limit: str | float, raw_mg_l: ArrayLike, *, distillate_mg_l: float = 0.0) -> Blend:
    """Raw water that could be mixed with distillate before the blend passes a taste limit.

    With volumes that add up, a share x of raw water gives x s + (1 - x) d, hence x = (L - d) / (s - d) and
    1 / (1 - x) litres of blend from a litre of distillate. Nothing but the mass balance of the salt; whether the
    raw water may be drunk at all is another matter, see `BLEND_CAUTION`.

    Parameters
    ----------
    limit : str or float
        A name of `TASTE_LIMITS`, or a concentration L. [mg L-1]
    raw_mg_l : float or array_like
        Concentration s of the same substance in the raw water; NaN where unknown. [mg L-1]
    distillate_mg_l : float
        Concentration d in the distillate. [mg L-1]

    Returns
    -------
    Blend
        Arrays of the shape of `raw_mg_l`, NaN where it is.

    Raises
    ------
    DecisionError
        For an unknown limit, a negative concentration, or distillate that passes the limit itself.

    Examples
    --------
    Well water of 3 g/L and distillate of 20 mg/L, to 600 mg/L:

    >>> round(float(blend_under("dissolved-solids-good", 3000.0, distillate_mg_l=20.0).litres_per_litre), 3)
    1.242
    """
    if isinstance(limit, str):
        if limit not in TASTE_LIMITS:
            raise DecisionError("no such taste limit", where="blend", got=limit, wanted=", ".join(TASTE_LIMITS))
        limit = TASTE_LIMITS[limit].limit_mg_l
    raw = np.asarray(raw_mg_l, dtype=np.float64)
    if (raw < 0.0).any() or not 0.0 <= distillate_mg_l < limit:
        raise DecisionError(
            "concentrations cannot be blended", where="blend", got=f"distillate {distillate_mg_l:g}, limit {limit:g}",
            wanted="raw water of 0 mg/L or more, and distillate below the limit",
        )
    within = raw <= limit
    share = np.where(within, 1.0, (limit - distillate_mg_l) / np.where(within, np.inf, raw - distillate_mg_l))
    litres = np.where(within, np.inf, 1.0 / np.where(within, 1.0, 1.0 - share))
    return Blend(float(limit), np.asarray(share), np.asarray(litres))
