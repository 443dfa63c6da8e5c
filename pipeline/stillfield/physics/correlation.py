"""The daily correlation: litres of a day from the sunshine transmitted to the basin and the day's weather.

The hourly balance of a still, seen once a day, is nearly a smooth function of a few numbers of the day. The
correlation is a polynomial in them whose terms are fixed for all stills (chosen once, by forward selection over
the shipped designs in their conditions) and whose coefficients belong to one still in one condition:

===  ==================================================================================  ==================
 S   sunshine transmitted through the cover, per basin area                              / 20 MJ m-2
 T   mean air temperature                                                                (T - 20) / 20 K
 w   root of the mean wind speed                                                         sqrt(u / 2) - 1
 N   day length                                                                          (N - 12) / 4 h
 K   clearness: irradiation over that outside the atmosphere                             K / 0.25 - 2
 E   sunshine the basin remembers from the days before, less today's                     / 20 MJ m-2
 m   air temperature the basin remembers, less today's                                   / 20 K
 n   tomorrow's air temperature less today's                                             / 20 K
 D   daily range of air temperature                                                      D / 10 K - 1
 h   air temperature less dew point                                                      / 15 K - 0.7
 P   peakiness: mean square over squared mean of the sunshine, smoothed by the basin     P / 2.5 - 1
 q   air temperature while the sun shines, less the daily mean                           / 5 K - 0.5
 k   air less sky temperature while the sun shines                                       / 15 K - 0.9
 v   root of the wind while the sun shines, less that of the daily mean                  sqrt(u / 2)
===  ==================================================================================  ==================

S, T, w, N, K and their memory are known from daily irradiation, temperature and wind alone; D and h where the
weather has them; P, q, k and v from steps within the day. What the basin remembers fades by the factor
`memory` from day to day, which follows from its heat capacity.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

Array = NDArray[np.floating[Any]]

_DAILY = (
    "1 S ST SS E SN SSw Sm K n SSS STw SST STT SE m TK TE Sw Tn SwE Tm Sww SK SwK TTT SKK T SEK SEE NN SSE TTw w "
    "STE SNK"
)
_RANGE = "D SD STD SwD TD wKD TwD ED"
_HUMIDITY = "h Sh STh Swh Th Twh Kh wh"
_HOURLY = (
    "1 S ST SS SSP E SSw q Sm SSS SST STk STw n Sk Sw Sww T SSv Swk Tn STT Pk m SE STP D wE Tm TTT Tq SSN Twk "
    "Tww TP STv Swq SP Sq k TE Tk SEq TTk STq w wk Tw SSk Swv Sv SSD N wwN SPq NNk"
)

#: Terms of every variant: each word is a product of predictors.
VARIANTS: dict[str, tuple[str, ...]] = {
    "daily": tuple(_DAILY.split()),
    "daily-range": tuple(f"{_DAILY} {_RANGE}".split()),
    "daily-humidity": tuple(f"{_DAILY} {_HUMIDITY}".split()),
    "daily-range-humidity": tuple(f"{_DAILY} {_RANGE} {_HUMIDITY}".split()),
    "hourly": tuple(_HOURLY.split()),
}

#: Terms of the frost factor, whatever the variant.
FROST_TERMS = ("1", "T", "S", "E", "m", "n", "ST", "N", "w")
#: Above this mean air temperature the frost factor is 1. [degC]
FROST_BELOW_DEGC = 12.0
#: A day whose frost factor is below this is flagged. [1]
FROST_FLAG = 0.9


@dataclass(frozen=True)
class Day:
    """What the correlation needs of some days and cells, arrays of shape (day, cell) or broadcast to it.

    Attributes
    ----------
    transmitted : ndarray
        S. [MJ m-2 of basin]
    temp_air : ndarray
        Mean of the day. [degC]
    wind_speed : ndarray
        Mean of the day at 2 m. [m s-1]
    day_length : ndarray
        [h]
    clearness : ndarray, optional
        Irradiation over that outside the atmosphere; the variants from days need it. [1]
    temp_range : ndarray, optional
        Highest less lowest air temperature. [K]
    dew_depression : ndarray, optional
        Mean air temperature less mean dew point. [K]
    peakiness, warm_hours, sky_depression, windy_hours : ndarray, optional
        P, q, k and v before scaling, from steps: see `stillfield.physics.day_shape`. [1], [K], [K],
        [(m s-1)^0.5]
    """

    transmitted: Array
    temp_air: Array
    wind_speed: Array
    day_length: Array
    clearness: Array | None = None
    temp_range: Array | None = None
    dew_depression: Array | None = None
    peakiness: Array | None = None
    warm_hours: Array | None = None
    sky_depression: Array | None = None
    windy_hours: Array | None = None

    @property
    def variant(self) -> str:
        """The richest variant these predictors allow."""
        if self.peakiness is not None:
            return "hourly"
        name = "daily"
        name += "-range" if self.temp_range is not None else ""
        return name + ("-humidity" if self.dew_depression is not None else "")


@dataclass(frozen=True)
class DailyCorrelation:
    """Coefficients of one still in one condition for one variant.

    Attributes
    ----------
    variant : str
        A key of `VARIANTS`.
    coefficients : tuple of float
        Per term of the variant. [L m-2]
    frost : tuple of float
        Per term of `FROST_TERMS`. [1]
    memory : float
        Share of what the basin remembers that is left a day later. [1]
    ceiling : float
        Litres that a MJ of transmitted sunshine could give if every absorbed joule evaporated. [L MJ-1]
    ranges : mapping of str to (float, float)
        Range of S [MJ m-2], T [degC] and u [m s-1] the coefficients were fitted on.
    daily_rms : float
        Error of a day's litres on the climates of the fit. [L m-2]
    monthly_error : float
        Mean error of a month's litres there, frost-free months, relative. [1]
    """

    variant: str
    coefficients: tuple[float, ...]
    frost: tuple[float, ...]
    memory: float
    ceiling: float
    ranges: Mapping[str, tuple[float, float]]
    daily_rms: float
    monthly_error: float

    def litres(self, day: Day, *, cyclic: bool = False) -> tuple[Array, NDArray[np.bool_], NDArray[np.bool_]]:
        """Daily yield, days with frost, and days outside the range of the fit.

        The polynomial is held between 0 and the energy ceiling: no more than what today's sunshine and what
        the basin remembers could evaporate.

        Parameters
        ----------
        day : Day
            Predictors of consecutive days.
        cyclic : bool
            True for a typical year: the day before the first is the last.

        Returns
        -------
        litres : ndarray, shape (day, cell)
            [L m-2]; NaN where a predictor is.
        frost, outside : ndarray of bool, same shape
        """
        return daily_litres((self,), day, cyclic=cyclic)[0]

    def outside(self, day: Day) -> NDArray[np.bool_]:
        """Tell which days lie outside the range of the fit."""
        values = {"S": day.transmitted, "T": day.temp_air, "u": day.wind_speed}
        flags = np.zeros(np.shape(day.transmitted), dtype=bool)
        for name, (low, high) in self.ranges.items():
            flags |= (values[name] < low) | (values[name] > high)
        return flags


def daily_litres(
    correlations: Sequence[DailyCorrelation], day: Day, *, cyclic: bool = False
) -> list[tuple[Array, NDArray[np.bool_], NDArray[np.bool_]]]:
    """Daily yields by several correlations of one variant and memory, as the conditions of a still are.

    The products of predictors are made once for all of them.

    Parameters
    ----------
    correlations : sequence of DailyCorrelation
        Same variant, same memory.
    day : Day
        Predictors of consecutive days.
    cyclic : bool
        True for a typical year.

    Returns
    -------
    list of (litres, frost, outside)
        As `DailyCorrelation.litres` gives them.

    Raises
    ------
    ValueError
        If variants or memories differ, or coefficients do not match the terms.
    """
    first = correlations[0]
    if any((one.variant, one.memory) != (first.variant, first.memory) for one in correlations):
        raise ValueError("correlations of different variants or memories")
    predictors = scaled_predictors(day, first.memory, cyclic=cyclic)
    raw = polynomials(predictors, VARIANTS[first.variant], np.array([one.coefficients for one in correlations]))
    sunshine = day.transmitted + 2.0 * first.memory * 20.0 * (predictors["E"] + predictors["S"])
    factors = frost_factors(day.temp_air, predictors, np.array([one.frost for one in correlations]))
    found = []
    for one, litres, factor in zip(correlations, raw, factors, strict=True):
        np.maximum(litres, 0.0, out=litres)
        np.multiply(litres, factor, out=litres)
        np.minimum(litres, np.maximum(one.ceiling * sunshine, 0.0), out=litres)
        found.append((litres, factor < FROST_FLAG, one.outside(day)))
    return found


def scaled_predictors(day: Day, memory: float, *, cyclic: bool) -> dict[str, Array]:
    """Bring the predictors to the scales of the module's table.

    Parameters
    ----------
    day : Day
        Predictors as measured.
    memory : float
        Share of what the basin remembers that is left a day later. [1]
    cyclic : bool
        Whether the day before the first is the last.

    Returns
    -------
    dict of str to ndarray
        By the letter of the predictor; only those that are known.
    """
    S = day.transmitted / 20.0
    T = (day.temp_air - 20.0) / 20.0
    found = {
        "S": S,
        "T": T,
        "w": np.sqrt(np.maximum(day.wind_speed, 0.0) / 2.0) - 1.0,
        "N": np.broadcast_to((day.day_length - 12.0) / 4.0, np.shape(S)),
        "E": remembered(S, memory, cyclic=cyclic) - S,
        "m": remembered(T, memory, cyclic=cyclic) - T,
        "n": _tomorrow(T, cyclic=cyclic) - T,
    }
    optional = {
        "K": (day.clearness, 0.25, -2.0),
        "D": (day.temp_range, 10.0, -1.0),
        "h": (day.dew_depression, 15.0, -0.7),
        "P": (day.peakiness, 2.5, -1.0),
        "q": (day.warm_hours, 5.0, -0.5),
        "k": (day.sky_depression, 15.0, -0.9),
        "v": (day.windy_hours, 1.0, 0.0),
    }
    for letter, (values, scale, offset) in optional.items():
        if values is not None:
            found[letter] = values / scale + offset
    return found


def remembered(values: Array, memory: float, *, cyclic: bool) -> Array:
    """What a basin remembers of the days before: their mean, each fading by `memory` a day.

    Parameters
    ----------
    values : ndarray, shape (day, cell)
        Any quantity of the day; NaN leaves the memory as it is.
    memory : float
        Share that is left a day later. [1]
    cyclic : bool
        Whether the days before the first are the last.

    Returns
    -------
    ndarray, shape (day, cell)

    Examples
    --------
    >>> remembered(np.array([[1.0], [3.0], [3.0]]), 0.5, cyclic=False).ravel()
    array([1., 1., 2.])
    """
    # Before the first day the basin remembers that day, or where it is missing the first that is not.
    first = np.argmax(np.isfinite(values), axis=0)
    state = np.nan_to_num(np.take_along_axis(values, first[None], axis=0)[0])
    run = np.concatenate([values[-_WARM_UP_DAYS:], values]) if cyclic else values
    if np.isfinite(run).all():
        faded, _ = lfilter([1.0 - memory], [1.0, -memory], run, axis=0, zi=memory * state[None])
        before = np.concatenate([state[None], faded[:-1]])
        return np.asarray(before[len(run) - len(values):])
    out = np.empty_like(run)
    for index, today in enumerate(run):
        out[index] = state
        state = np.where(np.isfinite(today), memory * state + (1.0 - memory) * today, state)
    return out[len(run) - len(values):]


#: Days at the end of a typical year that are run through before its first.
_WARM_UP_DAYS = 30


def _tomorrow(values: Array, *, cyclic: bool) -> Array:
    """Values of the next day; the last day, and one before a gap, is its own tomorrow."""
    after = np.concatenate([values[1:], values[:1] if cyclic else values[-1:]])
    return np.where(np.isfinite(after), after, values)


def polynomials(predictors: Mapping[str, Array], terms: tuple[str, ...], coefficients: Array) -> Array:
    """Sums of coefficient times product of predictors, for several sets of coefficients at once.

    Worked through in pieces that stay in the cache: each product is made once, from a shorter one, and one
    matrix product serves all sets.

    Parameters
    ----------
    predictors : mapping of str to ndarray, shape (day, cell)
        By letter.
    terms : tuple of str
        Products of predictors, '1' for the constant.
    coefficients : ndarray, shape (set, term)
        [any]

    Returns
    -------
    ndarray, shape (set, day, cell)

    Raises
    ------
    ValueError
        If there is not one coefficient per term.

    Examples
    --------
    >>> day = {"S": np.array([[2.0]]), "T": np.array([[3.0]])}
    >>> polynomials(day, ("1", "S", "SST"), np.array([[1.0, 10.0, 100.0], [0.0, 0.0, 1.0]])).ravel()
    array([1221.,   12.])
    """
    plan, rows = _plan(terms)
    if coefficients.shape[1] != len(terms):
        raise ValueError(f"{coefficients.shape[1]} coefficients for {len(terms)} terms")
    spread = np.zeros((len(coefficients), len(plan)))
    spread[:, rows] = coefficients
    days, cells = predictors["S"].shape
    out = np.empty((len(coefficients), days, cells))
    length = max(1, _PIECE // max(cells, 1))
    work = np.empty((len(plan), length * cells))
    for start in range(0, days, length):
        piece = slice(start, min(start + length, days))
        some = {letter: np.ravel(values[piece]) for letter, values in predictors.items()}
        products = work[:, : some["S"].size]
        for row, (parent, letter) in enumerate(plan):
            if not letter:
                products[row] = 1.0
            elif parent < 0:
                products[row] = some[letter]
            else:
                np.multiply(products[parent], some[letter], out=products[row])
        out[:, piece] = (spread @ products).reshape(len(coefficients), -1, cells)
    return out


#: Values of a predictor worked on at a time: with the products of all terms about a megabyte.
_PIECE = 4096


@lru_cache(maxsize=16)
def _plan(terms: tuple[str, ...]) -> tuple[tuple[tuple[int, str], ...], tuple[int, ...]]:
    """How to make the products: (row of the shorter product or -1, letter) per row; and the row of each term."""
    rows: dict[str, int] = {}
    plan: list[tuple[int, str]] = []

    def row_of(term: str) -> int:
        if term not in rows:
            parent = -1 if len(term) <= 1 else row_of(term[:-1])
            plan.append((parent, term[-1:]))
            rows[term] = len(plan) - 1
        return rows[term]

    order = tuple(row_of(term.replace("1", "")) for term in terms)
    return tuple(plan), order


def design_matrix(predictors: Mapping[str, Array], terms: tuple[str, ...]) -> Array:
    """Terms as columns: what least squares takes.

    Parameters
    ----------
    predictors : mapping of str to ndarray, each of shape (sample,)
        By letter.
    terms : tuple of str
        Products of predictors.

    Returns
    -------
    ndarray, shape (sample, term)
    """
    rows = {letter: values[None] for letter, values in predictors.items()}
    return polynomials(rows, terms, np.eye(len(terms)))[:, 0].T


def frost_factors(temp_air: Array, predictors: Mapping[str, Array], coefficients: Array) -> Array:
    """Share of the litres that is left when part of the brine may be frozen, 1 on warm days.

    Parameters
    ----------
    temp_air : ndarray, shape (day, cell)
        Mean of the day. [degC]
    predictors : mapping of str to ndarray, shape (day, cell)
        By letter.
    coefficients : ndarray, shape (set, term)
        Per term of `FROST_TERMS`.

    Returns
    -------
    ndarray, shape (set, day, cell)
        0 to 1. [1]
    """
    factors = np.ones((len(coefficients), *temp_air.shape))
    cold = temp_air < FROST_BELOW_DEGC
    if np.any(cold):
        some = {letter: values[cold][None] for letter, values in predictors.items()}
        factors[:, cold] = thaw(polynomials(some, FROST_TERMS, coefficients)[:, 0])
    return factors


def thaw(score: Array) -> Array:
    """Logistic step from 0 (frozen) to 1 (liquid) around a score of one half.

    Parameters
    ----------
    score : ndarray
        What the frost terms add up to. [1]

    Returns
    -------
    ndarray, shape of `score`
        Share of the unfrozen litres, in (0, 1). [1]

    Examples
    --------
    >>> float(thaw(np.array(0.5)))
    0.5
    """
    return np.asarray(1.0 / (1.0 + np.exp(-4.0 * (np.clip(score, -20.0, 20.0) - 0.5))))
