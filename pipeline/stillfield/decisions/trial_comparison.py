"""Two stills, or one still before and after a modification, set against each other with the weather taken out.

Each still is held against the litres the model gives it in its own weather; the ratio of the two factors is what
remains when the weather is gone. It is brought back to litres by the model of both stills in one and the same
weather. Where the stills stood side by side on the same days, the days are taken in pairs, and what was common to
both, a wrong sunshine above all, drops out.

Taking the weather out is as good as the model is. Where the two had different weather, the correction itself may be
wrong by a share of its size; this allowance is added to what chance among the days can do.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from stillfield.decisions.trial import LEVEL, Estimator, RatioOfDays, error_of_mean, ratio_of_days
from stillfield.errors import DecisionError

Array = NDArray[np.float64]
Verdict = Literal["better", "worse", "cannot tell"]

#: Share by which the logarithm of a weather correction may be wrong, with probability `LEVEL`: a choice of this
#: project. Months whose litres stand 1.6 to 1 are compared to 12 % (published comparisons: 10 to 15 %). [1]
WEATHER_ERROR = 0.25
#: Probability with which a difference that can be seen is seen; common practice, no source. [1]
POWER = 0.80
#: Differences for which the days still needed are told. [1]
DIFFERENCES = (0.05, 0.10, 0.20)
#: Days in common that make a comparison by pairs, and their least share of the shorter record.
LEAST_PAIRED_DAYS = 10
LEAST_PAIRED_SHARE = 0.5
#: More days than these are not asked for. [1]
MOST_MORE_DAYS = 3650
_LONGER = np.geomspace(1.0, 1e4, 601)


@dataclass(frozen=True)
class StillDays:
    """Days of one still that passed the rules.

    Attributes
    ----------
    name : str
        Name of the still or its modification.
    day : ndarray of int, shape (day,)
        Number of each day on a calendar common to both stills, rising.
    measured, modelled : ndarray, shape (day,)
        [L m-2]
    basin_memory : float
        Share of the basin's heat that is left a day later. [1]
    """

    name: str
    day: NDArray[np.int64]
    measured: Array
    modelled: Array
    basin_memory: float = 0.0

    def on(self, days: NDArray[np.int64]) -> StillDays:
        """Only the days that are among `days`."""
        among = np.isin(self.day, days)
        return StillDays(self.name, self.day[among], self.measured[among], self.modelled[among], self.basin_memory)


@dataclass(frozen=True)
class Settling:
    """Days that would settle a difference.

    Attributes
    ----------
    difference : float
        Stated difference, 0.10 for a tenth. [1]
    more_days : int or None
        Further days of each still like those there are; 0 when they suffice, None when no number of days would.
    """

    difference: float
    more_days: int | None


@dataclass(frozen=True)
class Comparison:
    """The first still against the second.

    Attributes
    ----------
    first, second : str
        Names.
    paired : bool
        Whether the same days were taken in pairs.
    days_first, days_second : int
        Days behind it.
    raw_first, raw_second : float
        Mean measured litres of a day, each in its own weather. [L m-2 d-1]
    adjusted_first, adjusted_second : float
        Mean litres of a day, both in the same weather. [L m-2 d-1]
    raw_ratio : float
        Measured means, first over second. [1]
    factor_ratio, factor_low, factor_high : float
        Field factors, first over second: who does better by his own model. Equal to `ratio` for one design. [1]
    ratio, low, high : float
        Litres in the same weather, first over second, with the interval. [1]
    level : float
        Probability with which the intervals are meant to hold. [1]
    log_error, freedom : float
        Standard error of the logarithm, chance and allowance together, and its degrees of freedom. [1]
    allowance : float
        Standard error put on the logarithm for the correction of the weather. [1]
    verdict : {'better', 'worse', 'cannot tell'}
        Of the first.
    visible_difference : float
        Difference that would be seen with probability `POWER`. [1]
    settling : tuple of Settling
        Days still needed for stated differences.
    """

    first: str
    second: str
    paired: bool
    days_first: int
    days_second: int
    raw_first: float
    raw_second: float
    adjusted_first: float
    adjusted_second: float
    raw_ratio: float
    factor_ratio: float
    factor_low: float
    factor_high: float
    ratio: float
    low: float
    high: float
    level: float
    log_error: float
    freedom: float
    allowance: float
    verdict: Verdict
    visible_difference: float
    settling: tuple[Settling, ...]

    def sentence(self) -> str:
        """The verdict in words."""
        interval = f"{100 * self.level:.0f} % interval {_percent(self.low)} to {_percent(self.high)}"
        same = "on the same days" if self.paired else "in the same weather"
        if self.verdict == "cannot tell":
            seen = f"{100 * self.visible_difference:.0f} %"
            return (f"Cannot tell {self.first} from {self.second}: {_percent(self.ratio)} {same} ({interval}). "
                    f"A difference of {seen} would probably have been seen.")
        word = "more" if self.verdict == "better" else "less"
        share = 100 * abs(self.ratio - 1.0)
        return f"{self.first} is {self.verdict}: it gives {share:.0f} % {word} than {self.second} {same} ({interval})."


def compare_stills(
    first: StillDays, second: StillDays, *, same_weather: tuple[float, float] | None = None,
    estimator: Estimator = "ratio-of-sums", level: float = LEVEL, weather_error: float = WEATHER_ERROR,
    differences: tuple[float, ...] = DIFFERENCES,
) -> Comparison:
    """Compare two stills by what each did against its own weather.

    Parameters
    ----------
    first, second : StillDays
        Days that passed the rules, each with its own model.
    same_weather : tuple of float, optional
        Mean modelled litres of a day of both in one and the same weather; without it the mean of all days of both,
        which is right where both have the same design. [L m-2 d-1]
    estimator : {'ratio-of-sums', 'robust'}
        As in `stillfield.decisions.trial.ratio_of_days`.
    level : float
        Probability with which the interval is to hold; two equal stills are called different with the rest. [1]
    weather_error : float
        See `WEATHER_ERROR`; 0 trusts the model. [1]
    differences : tuple of float
        Differences for which the days still needed are told. [1]

    Returns
    -------
    Comparison

    Raises
    ------
    DecisionError
        If a still has fewer than three days.

    Examples
    --------
    >>> day = np.arange(40)
    >>> sun = 4.0 + np.sin(day)
    >>> wick = StillDays("wick", day, 0.9 * sun + 0.1 * np.cos(3.0 * day), sun)
    >>> plain = StillDays("plain", day + 50, 0.7 * sun + 0.1 * np.sin(3.0 * day), sun)
    >>> compare_stills(wick, plain).verdict
    'better'
    """
    from scipy.stats import t as student  # a second to load, and a run needs only the records

    common = np.intersect1d(first.day, second.day)
    paired = common.size >= max(LEAST_PAIRED_DAYS, LEAST_PAIRED_SHARE * min(first.day.size, second.day.size))
    if paired:
        first, second = first.on(common), second.on(common)
        same_weather = float(first.modelled.mean()), float(second.modelled.mean())
    ratios = [ratio_of_days(one.measured, one.modelled, one.day, basin_memory=one.basin_memory, estimator=estimator)
              for one in (first, second)]
    chance, freedom = _paired_error(first, second, ratios) if paired else _error_apart(*ratios)
    if same_weather is None:
        same_weather = (float(np.concatenate([first.modelled, second.modelled]).mean()),) * 2
    correction = np.log(same_weather[0] / first.modelled.mean()) - np.log(same_weather[1] / second.modelled.mean())
    allowance = weather_error * abs(float(correction)) / float(student.ppf(0.5 + level / 2.0, np.inf))
    error = float(np.hypot(chance, allowance))
    # Welch's formula again; the allowance is no estimate from days and has no degrees of freedom to lose.
    freedom_of_all = freedom * (error / chance) ** 4
    stretch = float(np.exp(student.ppf(0.5 + level / 2.0, freedom_of_all) * error))
    factor_ratio = float(ratios[0].factor / ratios[1].factor)
    ratio = factor_ratio * same_weather[0] / same_weather[1]
    longer = _visible(_LONGER, (chance, allowance, freedom), level)
    days = max(first.day.size, second.day.size)
    return Comparison(
        first=first.name, second=second.name, paired=bool(paired), days_first=first.day.size,
        days_second=second.day.size, raw_first=float(first.measured.mean()), raw_second=float(second.measured.mean()),
        adjusted_first=float(ratios[0].factor) * same_weather[0],
        adjusted_second=float(ratios[1].factor) * same_weather[1],
        raw_ratio=float(first.measured.mean() / second.measured.mean()), factor_ratio=factor_ratio,
        factor_low=factor_ratio / stretch, factor_high=factor_ratio * stretch, ratio=ratio, low=ratio / stretch,
        high=ratio * stretch, level=level, log_error=error, freedom=freedom_of_all, allowance=allowance,
        verdict=_verdict(ratio / stretch, ratio * stretch), visible_difference=float(longer[0]),
        settling=tuple(Settling(one, _more_days(one, longer, days)) for one in differences),
    )


def _error_apart(first: RatioOfDays, second: RatioOfDays) -> tuple[float, float]:
    """Error of a difference of two independent means, with the degrees of freedom of Welch (1947)."""
    one, two = float(first.log_error) ** 2, float(second.log_error) ** 2
    freedom = (one + two) ** 2 / (one**2 / float(first.freedom) + two**2 / float(second.freedom))
    return float(np.sqrt(one + two)), float(freedom)


def _paired_error(first: StillDays, second: StillDays, ratios: list[RatioOfDays]) -> tuple[float, float]:
    error, freedom, _ = error_of_mean(
        ratios[0].influence - ratios[1].influence, first.day, basin_memory=max(first.basin_memory, second.basin_memory)
    )
    return float(error), float(freedom)


def _verdict(low: float, high: float) -> Verdict:
    if low > 1.0:
        return "better"
    return "worse" if high < 1.0 else "cannot tell"


def _visible(longer: Array, errors: tuple[float, float, float], level: float) -> Array:
    """Difference seen with probability `POWER`, were the records so many times as long."""
    from scipy.stats import t as student  # a second to load, and a run needs only the records

    chance, allowance, freedom = errors
    apart = chance / np.sqrt(longer)
    error = np.hypot(apart, allowance)
    free = (freedom + 1.0) * longer - 1.0
    free = free * (error / np.maximum(apart, 1e-12)) ** 4
    return np.asarray(np.expm1((student.ppf(0.5 + level / 2.0, free) + student.ppf(POWER, free)) * error))


def _more_days(difference: float, visible: Array, days: int) -> int | None:
    if difference <= 0.0:
        raise DecisionError("a difference to be settled must be above 0", got=f"{difference:g}")
    enough = np.flatnonzero(visible <= difference)
    if enough.size == 0:
        return None
    more = int(np.ceil((_LONGER[enough[0]] - 1.0) * days - 1e-9))
    return more if more <= MOST_MORE_DAYS else None


def _percent(ratio: float) -> str:
    return f"{100 * (ratio - 1.0):+.0f} %"
