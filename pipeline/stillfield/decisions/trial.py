"""The field factor of a trial: measured over modelled litres, and how far chance among the days could move it.

The factor is a ratio of sums over days, so that it answers for litres over a month and not for single days. Days
hang together: a dirty cover, a wrong sunshine or a warm basin lasts. An interval that takes them for independent
is too narrow, and so is a plain percentile interval of a bootstrap by blocks of few days. So the interval is that
of Student on the logarithm of the ratio, with

- the variance of the ratio from its linear part z = y - F m (Cochran 1977, Sampling Techniques, section 6.3),
- the memory from day to day r of an autoregressive process of first order, estimated from days that follow each
  other and corrected for its bias in short series (Marriott & Pope 1954, Biometrika 41:390: E r = rho - (1 + 4 rho)
  / n, quoted from memory), never below the memory of the basin itself,
- degrees of freedom from the number of independent days that carry as much (n / inflation - 1).

A moving-block bootstrap (Künsch 1989) stands beside it as a check that knows nothing of that process.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError

Array = NDArray[np.float64]
Estimator = Literal["ratio-of-sums", "robust"]

#: Probability with which intervals are meant to hold. [1]
LEVEL = 0.90
#: Greatest memory from day to day that is told from a trend. [1]
MOST_MEMORY = 0.95
#: Days with a following day that the memory needs to be estimated.
LEAST_PAIRS = 6
#: Least degrees of freedom; below, an interval tells nothing.
LEAST_FREEDOM = 1.5
#: Huber's bend: residuals beyond so many standard deviations count less; 95 % efficient for normal errors
#: (Huber 1964, Ann. Math. Statist. 35:73). [1]
HUBER_BEND = 1.345
#: Standard deviation of a normal variable over its median absolute deviation. [1]
MAD_TO_SD = 1.4826
#: By how much the factor of one season may differ in others, with probability `LEVEL`: ratios between months are known
#: to 10 to 15 %. A choice of this project. [1]
SEASON_ERROR = 0.15
_HUBER_ROUNDS = 30
#: Residuals are taken as this far from the factor at least, lest exact data divide by nothing. [1]
_LEAST_SPREAD = 1e-9


@dataclass(frozen=True)
class RatioOfDays:
    """Measured over modelled litres, one or many trials at once.

    Attributes
    ----------
    factor : ndarray, shape (...)
        Measured over modelled. [1]
    log_error : ndarray, shape (...)
        Standard error of its logarithm. [1]
    freedom : ndarray, shape (...)
        Degrees of freedom of that error. [1]
    memory : ndarray, shape (...)
        Correlation of the residuals from day to day. [1]
    influence : ndarray, shape (..., day)
        What each day adds to the logarithm of the factor, times the number of days. [1]
    """

    factor: Array
    log_error: Array
    freedom: Array
    memory: Array
    influence: Array

    def interval(self, level: float = LEVEL) -> tuple[Array, Array]:
        """Bounds between which the factor lies with probability `level`."""
        from scipy.stats import t as student  # a second to load, and a run needs only the records

        half = student.ppf(0.5 + level / 2.0, self.freedom) * self.log_error
        return np.asarray(self.factor * np.exp(-half)), np.asarray(self.factor * np.exp(half))


@dataclass(frozen=True)
class FactorEstimate:
    """The field factor of one still in one trial.

    Attributes
    ----------
    factor, low, high : float
        Measured over modelled, with its interval. [1]
    level : float
        Probability with which the interval is meant to hold. [1]
    days : int
        Days behind it.
    log_error, freedom : float
        Standard error of the logarithm, and its degrees of freedom. [1]
    memory : float
        Correlation of the residuals from day to day that the interval reckons with. [1]
    independent_days : float
        Independent days that would tell as much.
    block_days : int
        Length of the blocks of the bootstrap.
    bootstrap_low, bootstrap_high : float
        Percentile interval of the bootstrap over moving blocks of days; narrower in short trials. [1]
    estimator : str
        'ratio-of-sums' or 'robust'.
    """

    factor: float
    low: float
    high: float
    level: float
    days: int
    log_error: float
    freedom: float
    memory: float
    independent_days: float
    block_days: int
    bootstrap_low: float
    bootstrap_high: float
    estimator: Estimator


@dataclass(frozen=True)
class FieldFactor:
    """What a trial found, as a run takes it: litres of this very still are the modelled ones times `value`.

    Attributes
    ----------
    value, low, high : float
        Factor and its bounds. [1]
    source : str
        Trial it comes from.

    Raises
    ------
    DecisionError
        If the numbers are out of order or the source is not told.
    """

    value: float
    low: float
    high: float
    source: str

    def __post_init__(self) -> None:
        if not 0.0 < self.low <= self.value <= self.high < np.inf:
            raise DecisionError(
                "a field factor is out of order", where="still_field_factor",
                got=f"low {self.low:g}, value {self.value:g}, high {self.high:g}", wanted="0 < low <= value <= high",
            )
        if not self.source.strip():
            raise DecisionError("a field factor does not tell its source", where="still_field_factor.source",
                                  cure="Name the trial it comes from.")


def factor_for_runs(estimate: FactorEstimate, source: str, *, one_season: bool) -> FieldFactor:
    """Field factor as a run file takes it, rounded to three decimals.

    Parameters
    ----------
    estimate : FactorEstimate
        What the trial found.
    source : str
        The trial in a few words.
    one_season : bool
        Whether the trial tells of one season only; the interval is then widened by `SEASON_ERROR`.

    Returns
    -------
    FieldFactor

    Examples
    --------
    >>> day = np.arange(30)
    >>> found = field_factor(0.8 * (4.0 + 0.3 * np.sin(day)), 4.0 + 0.3 * np.cos(day), day)
    >>> wide, plain = (factor_for_runs(found, "a month in one yard", one_season=one) for one in (True, False))
    >>> wide.low < plain.low < plain.value < plain.high < wide.high
    True
    """
    allowance = np.log1p(SEASON_ERROR) if one_season else 0.0
    down, up = (float(np.exp(np.hypot(abs(np.log(bound / estimate.factor)), allowance)))
                for bound in (estimate.low, estimate.high))
    low, value, high = (round(estimate.factor * stretch, 3) for stretch in (1.0 / down, 1.0, up))
    return FieldFactor(value, low, high, source)


def apply_field_factor(litres: ArrayLike, factor: FieldFactor) -> tuple[Array, Array, Array]:
    """Litres of a still that a trial has pinned down.

    The band of conditions has no place here any more: the still is known, and what is left open is the factor.

    Parameters
    ----------
    litres : array_like
        Modelled litres of the central condition, any shape and period.
    factor : FieldFactor
        From a trial with the same still file.

    Returns
    -------
    central, low, high : ndarray, shape of `litres`

    Examples
    --------
    >>> trial = FieldFactor(0.8, 0.7, 0.9, "yard trial, 60 days")
    >>> [part.round(2).tolist() for part in apply_field_factor([100.0], trial)]
    [[80.0], [70.0], [90.0]]
    """
    modelled = np.asarray(litres, dtype=np.float64)
    return modelled * factor.value, modelled * factor.low, modelled * factor.high


def ratio_of_days(
    measured: ArrayLike, modelled: ArrayLike, day: ArrayLike, *, basin_memory: float = 0.0,
    estimator: Estimator = "ratio-of-sums",
) -> RatioOfDays:
    """Ratio of measured to modelled litres and its error; many trials at once where they share their days.

    Parameters
    ----------
    measured, modelled : array_like, shape (..., day)
        Litres per basin area; all finite, modelled above 0 in sum. [L m-2]
    day : array_like of int, shape (day,)
        Number of each day on one calendar, rising; gaps are allowed.
    basin_memory : float
        Share of the basin's heat that is left a day later; the residuals hang together at least so much. [1]
    estimator : {'ratio-of-sums', 'robust'}
        'robust' lets days far from the rest count less (Huber); it answers for the usual day rather than for the sum.

    Returns
    -------
    RatioOfDays

    Raises
    ------
    DecisionError
        If there are fewer than three days, or sums that are not above 0.

    Examples
    --------
    >>> found = ratio_of_days([3.0, 2.0, 4.2, 1.1], [4.0, 2.5, 5.0, 1.5], [1, 2, 3, 4])
    >>> round(float(found.factor), 3)
    0.792
    """
    y, m = (np.asarray(values, dtype=np.float64) for values in np.broadcast_arrays(measured, modelled))
    days = np.asarray(day, dtype=np.int64)
    if y.shape[-1] < 3:
        raise DecisionError("too few days for a ratio with an error", got=f"{y.shape[-1]}", wanted="3 or more")
    if not ((y.sum(axis=-1) > 0.0) & (m.sum(axis=-1) > 0.0)).all():
        raise DecisionError("measured and modelled litres must both be above 0 in sum", where="trial")
    factor, influence = _ratio(y, m) if estimator == "ratio-of-sums" else _robust_ratio(y, m)
    return RatioOfDays(factor, *error_of_mean(influence, days, basin_memory=basin_memory), influence)


def error_of_mean(
    influence: Array, day: NDArray[np.int64], *, basin_memory: float = 0.0
) -> tuple[Array, Array, Array]:
    """Standard error of a mean over days that hang together.

    Parameters
    ----------
    influence : ndarray, shape (..., day)
        Residuals, of mean 0.
    day : ndarray of int, shape (day,)
        Number of each day, rising.
    basin_memory : float
        Least memory from day to day. [1]

    Returns
    -------
    error, freedom, memory : ndarray, shape (...)
        Standard error in the unit of `influence`, degrees of freedom and correlation from day to day.

    Examples
    --------
    >>> error, freedom, memory = error_of_mean(np.array([1.0, -1.0] * 8), np.arange(16))
    >>> round(float(error), 3), float(freedom), float(memory)
    (0.258, 15.0, 0.0)
    """
    memory = np.maximum(_memory(influence, day), min(basin_memory, MOST_MEMORY))
    inflation = _inflation(memory, day)
    count = day.size
    spread = (influence**2).sum(axis=-1) / np.maximum(count - inflation, 0.5)
    error = np.sqrt(np.maximum(spread, _LEAST_SPREAD**2) * inflation / count)
    return error, np.maximum(count / inflation - 1.0, LEAST_FREEDOM), memory


def field_factor(
    measured: ArrayLike, modelled: ArrayLike, day: ArrayLike, *, basin_memory: float = 0.0,
    estimator: Estimator = "ratio-of-sums", level: float = LEVEL, seed: int = 1,
) -> FactorEstimate:
    """Field factor of one still with its interval.

    Parameters
    ----------
    measured, modelled : array_like, shape (day,)
        Litres per basin area; all finite. [L m-2]
    day : array_like of int, shape (day,)
        Number of each day on one calendar, rising.
    basin_memory : float
        As in `ratio_of_days`. [1]
    estimator : {'ratio-of-sums', 'robust'}
        As in `ratio_of_days`.
    level : float
        Probability with which the interval is to hold. [1]
    seed : int
        Of the bootstrap.

    Returns
    -------
    FactorEstimate

    Examples
    --------
    >>> days = np.arange(40)
    >>> modelled = 4.0 + np.sin(days)
    >>> found = field_factor(0.8 * modelled * (1.0 + 0.1 * np.cos(2.0 * days)), modelled, days)
    >>> round(found.factor, 2), found.low < 0.8 < found.high
    (0.8, True)
    """
    ratio = ratio_of_days(measured, modelled, day, basin_memory=basin_memory, estimator=estimator)
    low, high = ratio.interval(level)
    count = int(np.size(day))
    block = block_length(float(ratio.memory), count, basin_memory=basin_memory)
    drawn = _bootstrap(ratio, block, level, seed)
    return FactorEstimate(
        float(ratio.factor), float(low), float(high), level, count, float(ratio.log_error), float(ratio.freedom),
        float(ratio.memory), float(count / _inflation(ratio.memory, np.asarray(day, dtype=np.int64))), block, *drawn,
        estimator,
    )


def block_length(memory: float, days: int, *, basin_memory: float = 0.0) -> int:
    """Length of the blocks in which days are drawn.

    Best for the variance of a mean of an autoregressive process of first order: (sqrt(6) r / (1 - r²))^(2/3) n^(1/3)
    (Carlstein 1986, Ann. Statist. 14:1171, quoted from memory); no shorter than the basin needs to forget nine tenths
    of its heat, no longer than a quarter of the trial.

    Parameters
    ----------
    memory : float
        Correlation from day to day. [1]
    days : int
        Days of the trial.
    basin_memory : float
        Share of the basin's heat that is left a day later. [1]

    Returns
    -------
    int

    Examples
    --------
    >>> block_length(0.0, 60), block_length(0.5, 60), block_length(0.0, 60, basin_memory=0.44)
    (1, 5, 3)
    """
    best = (np.sqrt(6.0) * memory / (1.0 - memory**2)) ** (2.0 / 3.0) * days ** (1.0 / 3.0)
    forgets = np.log(0.1) / np.log(basin_memory) if basin_memory > 0.0 else 1.0
    return int(np.clip(np.round(max(best, np.ceil(forgets), 1.0)), 1, max(days // 4, 1)))


def _ratio(y: Array, m: Array) -> tuple[Array, Array]:
    factor = y.sum(axis=-1) / m.sum(axis=-1)
    residual = y - factor[..., None] * m
    return factor, residual / (factor * m.mean(axis=-1))[..., None]


def _robust_ratio(y: Array, m: Array) -> tuple[Array, Array]:
    """Huber's estimate of the ratio, with residuals by `expected_spread`."""
    width = expected_spread(m)
    factor = np.median(y, axis=-1) / np.median(m, axis=-1)
    for _ in range(_HUBER_ROUNDS):
        u = (y - factor[..., None] * m) / width
        scale = np.maximum(MAD_TO_SD * np.median(np.abs(u), axis=-1), _LEAST_SPREAD)[..., None]
        bend = HUBER_BEND * scale
        weight = np.minimum(1.0, bend / np.maximum(np.abs(u), _LEAST_SPREAD))
        factor = (weight * y).sum(axis=-1) / (weight * m).sum(axis=-1)
    within = np.abs(u) <= bend
    slope = np.maximum((within * m).mean(axis=-1), 0.5 * m.mean(axis=-1))
    residual = weight * (y - factor[..., None] * m)
    return factor, residual / (factor * slope)[..., None]


def expected_spread(modelled: Array) -> Array:
    """How far from the model a day may be expected, up to a factor: half with its litres, half whatever they are.

    Spilled and left-over water does not shrink on a dull day, errors of sunshine and cover do.

    Parameters
    ----------
    modelled : ndarray, shape (..., day)
        [L m-2]

    Returns
    -------
    ndarray, shape (..., day)
        [L m-2]
    """
    return np.asarray(0.5 * (modelled + modelled.mean(axis=-1, keepdims=True)))


def _memory(influence: Array, day: NDArray[np.int64]) -> Array:
    """Correlation of residuals of days that follow each other, its bias in short series taken out."""
    following = np.flatnonzero(np.diff(day) == 1)
    pairs = following.size
    if pairs < LEAST_PAIRS:
        return np.zeros(influence.shape[:-1])
    z = influence
    total = (z**2).sum(axis=-1) * (pairs + 1) / day.size
    found = (z[..., following] * z[..., following + 1]).sum(axis=-1) / np.maximum(total, _LEAST_SPREAD**2)
    count = pairs + 1
    return np.asarray(np.clip((count * found + 1.0) / (count - 4.0), 0.0, MOST_MEMORY))


def _inflation(memory: Array, day: NDArray[np.int64]) -> Array:
    """Variance of a mean over these days against that of as many independent ones: sum of r^|i - j| / n."""
    there = np.zeros(int(day[-1] - day[0]) + 1)
    there[day - day[0]] = 1.0
    apart = np.correlate(there, there, mode="full")[there.size - 1:]
    apart[1:] *= 2.0
    return np.asarray(np.polynomial.polynomial.polyval(memory, apart / day.size))


def _bootstrap(ratio: RatioOfDays, block: int, level: float, seed: int, draws: int = 999) -> tuple[float, float]:
    """Percentile interval from moving blocks of days, of the linear part of the logarithm."""
    z: Any = ratio.influence
    count = z.size
    random = np.random.default_rng(seed)
    starts = random.integers(0, count - block + 1, size=(draws, -(-count // block)))
    days = (starts[..., None] + np.arange(block)).reshape(draws, -1)[:, :count]
    moved = z[days].mean(axis=1) - z.mean()
    low, high = np.quantile(moved, [0.5 - level / 2.0, 0.5 + level / 2.0])
    return float(ratio.factor * np.exp(low)), float(ratio.factor * np.exp(high))
