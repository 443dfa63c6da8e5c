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
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.correlation_polynomials import POLYNOMIALS

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
#: Letters of the predictors, in the order in which the written-out polynomials take them.
LETTERS = "STwNEmnKDhPqkv"
#: Field of `Day`, divisor and summand of the predictors that are a scaled field.
SCALES: dict[str, tuple[str, float, float]] = {
    "S": ("transmitted", 20.0, 0.0),
    "T": ("temp_air", 20.0, -1.0),
    "N": ("day_length", 4.0, -3.0),
    "K": ("clearness", 0.25, -2.0),
    "D": ("temp_range", 10.0, -1.0),
    "h": ("dew_depression", 15.0, -0.7),
    "P": ("peakiness", 2.5, -1.0),
    "q": ("warm_hours", 5.0, -0.5),
    "k": ("sky_depression", 15.0, -0.9),
    "v": ("windy_hours", 1.0, 0.0),
}

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
            Predictors of a whole record.
        cyclic : bool
            True for a typical year: the day before the first is the last.

        Returns
        -------
        litres : ndarray, shape (day, cell)
            [L m-2]; NaN where a predictor is.
        frost, outside : ndarray of bool, same shape
        """
        from stillfield.physics.correlation_march import daily_litres  # it walks records of this class

        return daily_litres((self,), day, cyclic=cyclic)[0]

    def outside(self, day: Day) -> NDArray[np.bool_]:
        """Tell which days lie outside the range of the fit."""
        values = {"S": day.transmitted, "T": day.temp_air, "u": day.wind_speed}
        flags = np.zeros(np.shape(day.transmitted), dtype=bool)
        for name, (low, high) in self.ranges.items():
            flags |= (values[name] < low) | (values[name] > high)
        return flags


def scaled_predictors(
    day: Day, memory: float, *, state: Array | None = None, temp_next: Array | None = None
) -> dict[str, Array]:
    """Bring the predictors to the scales of the module's table.

    Parameters
    ----------
    day : Day
        Predictors of consecutive days as measured.
    memory : float
        Share of what the basin remembers that is left a day later. [1]
    state : ndarray, shape (2, cell), optional
        What the basin remembers of S and T before the first day, as `remembered` takes and changes it.
    temp_next : ndarray, shape (day, cell), optional
        Mean air temperature of the day after each. Without it that of the next row; the last day is its own
        tomorrow. [degC]

    Returns
    -------
    dict of str to ndarray, shape (day, cell)
        By the letter of the predictor; only those that are known.
    """
    shape = np.shape(day.transmitted)
    found = {}
    for letter, (field, scale, offset) in SCALES.items():
        values = getattr(day, field)
        if values is not None:
            found[letter] = np.broadcast_to(values / scale + offset, shape)
    found["w"] = np.broadcast_to(np.sqrt(np.maximum(day.wind_speed, 0.0) / 2.0) - 1.0, shape)
    S, T = found["S"], found["T"]
    past = np.full((2, *shape[1:]), np.nan) if state is None else state
    found["E"] = remembered(S, memory, past[0]) - S
    found["m"] = remembered(T, memory, past[1]) - T
    after = np.concatenate([T[1:], T[-1:]]) if temp_next is None else temp_next / 20.0 - 1.0
    found["n"] = np.where(np.isfinite(after), after, T) - T
    return found


def remembered(values: Array, memory: float, state: Array | None = None) -> Array:
    """What a basin remembers of the days before: their mean, each fading by `memory` a day.

    Before its first day the basin remembers that day, or where it is missing the first that is not.

    Parameters
    ----------
    values : ndarray, shape (day, cell)
        Any quantity of the day; a value that is not finite leaves the memory as it is.
    memory : float
        Share that is left a day later. [1]
    state : ndarray, shape (cell,), optional
        What it remembers on the first day, NaN for nothing yet; changed to what it remembers after the last.

    Returns
    -------
    ndarray, shape (day, cell)

    Examples
    --------
    >>> remembered(np.array([[1.0], [3.0], [3.0]]), 0.5).ravel()
    array([1., 1., 2.])
    """
    out = np.empty_like(values)
    now = np.full(values.shape[1:], np.nan) if state is None else state
    known = np.isfinite(values)
    for index, today in enumerate(values):
        if np.isnan(now).any():
            np.copyto(now, today, where=known[index] & np.isnan(now))
        out[index] = now
        if known[index].all():
            now *= memory
            now += (1.0 - memory) * today
        else:
            np.copyto(now, memory * now + (1.0 - memory) * today, where=known[index])
    return out


def evaluate(name: str, predictors: Mapping[str, Array], coefficients: Sequence[float]) -> Array:
    """Sum of coefficients times products of predictors.

    Every number comes from its own predictors by the same operations, whatever stands beside it.

    Parameters
    ----------
    name : str
        A key of `VARIANTS`, or 'frost' for `FROST_TERMS`.
    predictors : mapping of str to ndarray, all of one shape
        By letter.
    coefficients : sequence of float
        One per term. [any]

    Returns
    -------
    ndarray, shape of the predictors

    Examples
    --------
    >>> day = {letter: np.zeros((1, 2)) for letter in LETTERS} | {"S": np.array([[1.0, 2.0]])}
    >>> evaluate("frost", day, [0.5, 0.0, 10.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0])
    array([[10.5, 20.5]])
    """
    shape = np.shape(predictors["S"])
    rows = [np.reshape(predictors[letter], (1, -1)) if letter in predictors else None for letter in LETTERS]
    out = np.empty((1, int(np.prod(shape))))
    POLYNOMIALS[name](rows, coefficients, out, 1)
    return out.reshape(shape)


def design_matrix(predictors: Mapping[str, Array], terms: tuple[str, ...]) -> Array:
    """Terms as columns: what least squares takes.

    Parameters
    ----------
    predictors : mapping of str to ndarray, each of shape (sample,)
        By letter.
    terms : tuple of str
        Products of predictors, '1' for the constant.

    Returns
    -------
    ndarray, shape (sample, term)

    Examples
    --------
    >>> design_matrix({"S": np.array([2.0]), "T": np.array([3.0])}, ("1", "S", "SST"))
    array([[ 1.,  2., 12.]])
    """
    matrix = np.ones((len(predictors["S"]), len(terms)))
    for column, term in enumerate(terms):
        for letter in term.replace("1", ""):
            matrix[:, column] *= predictors[letter]
    return matrix


def frost_factor(temp_air: Array, predictors: Mapping[str, Array], coefficients: Sequence[float]) -> Array:
    """Share of the litres that is left when part of the brine may be frozen, 1 on warm days.

    Parameters
    ----------
    temp_air : ndarray, shape (day, cell)
        Mean of the day. [degC]
    predictors : mapping of str to ndarray, shape (day, cell)
        By letter.
    coefficients : sequence of float
        Per term of `FROST_TERMS`.

    Returns
    -------
    ndarray, shape (day, cell)
        0 to 1. [1]
    """
    factor = np.ones(np.shape(temp_air))
    cold = temp_air < FROST_BELOW_DEGC
    if np.any(cold):
        some = {letter: values[cold] for letter, values in predictors.items()}
        factor[cold] = thaw(evaluate("frost", some, coefficients))
    return factor


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
