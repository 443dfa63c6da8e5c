"""Trade-off: smallest basin area for each tank, and the point of the curve to build."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.decisions.storage import DaySeries, by_place_and_tank, run_tank, walk
from stillfield.errors import DecisionError

Array = NDArray[np.float64]
Whole = NDArray[np.int64]
Flags = NDArray[np.bool_]
Words = NDArray[np.str_]

#: With a tank that holds nearly all that is needed, areas below this share of the need per yield are not told apart.
LEAST_AREA_SHARE = 1e-6
#: A knee lies where more tank saves less than this share of the area. [1]
KNEE_WITHIN = 0.05

NO_DAYS = "no day with yield and need"
NO_YIELD = "no yield on any day"
DRY_SPELL = "days without yield outlast the tank, whatever the area"


@dataclass(frozen=True)
class TradeOff:
    """Smallest basin area for each tank size that meets the asked share of days.

    Attributes
    ----------
    share_asked, tolerance : float
        Share of days to be met in full; an area is at most this share above the smallest. [1]
    tank_l, area_m2 : ndarray, shape (place, tank)
        Tanks from small to large; area NaN where none is enough. [L], [m2]
    share_of_days, share_of_volume : ndarray, shape (place, tank)
        What that area gives, with the start asked for. [1]
    share_of_days_carried_over : ndarray, shape (place, tank)
        The same with what the last year leaves in the tank at the start. Where it falls below `share_asked`, the
        area lives on the first filling. [1]
    days, days_missing : ndarray of int, shape (place,)
        Days counted and days skipped. [d]
    reason : ndarray of str, shape (place, tank)
        Why there is no area; empty otherwise.
    """

    share_asked: float
    tolerance: float
    tank_l: Array
    area_m2: Array
    share_of_days: Array
    share_of_volume: Array
    share_of_days_carried_over: Array
    days: Whole
    days_missing: Whole
    reason: Words


def smallest_areas(
    series: DaySeries, *, tank_l: ArrayLike, share_of_days: float = 0.95, tolerance: float = 1e-3,
    carried_over: bool = False,
) -> TradeOff:
    """Smallest basin area for each tank that meets the need on a share of the days.

    More area or a larger tank never serves fewer days, since each day's storage rises with both. So the area is
    found by bisection in its logarithm between a bound from the water balance and the area that needs no tank, an
    order statistic of need by yield.

    Parameters
    ----------
    series : DaySeries
        From `day_series`.
    tank_l : array_like, shape (tank,) or (place, tank)
        Tank sizes from small to large; `tank_of_days` gives them from days of need. [L]
    share_of_days : float
        In (0, 1]. [1]
    tolerance : float
        The area given meets the share; a smaller one by this share does not. [1]
    carried_over : bool
        As for `run_tank`.

    Returns
    -------
    TradeOff

    Raises
    ------
    DecisionError
        For a share, tolerance or tanks that cannot be.

    Examples
    --------
    >>> from stillfield.decisions.storage import day_series
    >>> series = day_series([[4.0], [1.0], [1.0], [4.0]], 20.0)
    >>> found = smallest_areas(series, tank_l=[0.0, 12.0, 24.0], share_of_days=1.0)
    >>> found.area_m2.round(1).tolist()
    [[20.0, 14.0, 8.0]]
    """
    if not 0.0 < share_of_days <= 1.0 or not 0.0 < tolerance < 1.0:
        raise DecisionError(
            "share of days or tolerance cannot be", where="storage", got=f"{share_of_days:g}, {tolerance:g}",
            wanted="a share above 0, to 1, and a tolerance between 0 and 1",
        )
    _, tank = by_place_and_tank(series, 0.0, tank_l)
    if (np.diff(tank, axis=1) <= 0.0).any():
        raise DecisionError("tanks do not stand from small to large", where="storage", cure="Sort them, each once.")
    # 0.95 of 100 days are 95 days, though 0.95 * 100 is a little more in the computer.
    allowed = series.days - np.ceil(share_of_days * series.days - 1e-9).astype(np.int64)

    def enough(area: Array) -> Flags:
        return np.asarray(walk(series, area, tank, carried_over=carried_over)[0] <= allowed[:, None])

    bounds = _bounds(series, tank, allowed)
    # What is enough with a tank is enough with a larger one, also within the tolerance of the bisection.
    area = np.fmin.accumulate(_bisect(enough, bounds, tolerance), axis=1)
    return _trade_off(series, tank, area, (share_of_days, tolerance), carried_over)


@dataclass(frozen=True)
class _Bounds:
    """By place and tank: area the water does not suffice below, area as good as any larger, no area perhaps enough."""

    low: Array
    high: Array
    perhaps_none: Flags


def _bounds(series: DaySeries, tank: Array, allowed: Whole) -> _Bounds:
    days, place = series.days, np.arange(series.need.shape[1])
    # The days that may fail are those that cost most: the dearest without a tank, the thirstiest by volume.
    needs = np.sort(np.where(series.known, series.need, np.inf), axis=0)
    served = np.arange(len(needs))[:, None] < days - allowed
    # Running sums add day by day for one place as for many: a place keeps its digits in any company.
    volume = np.cumsum(np.where(served, needs, 0.0), axis=0)[-1][:, None]
    total = np.cumsum(series.yields, axis=0)[-1][:, None]
    low = np.maximum(volume - tank, LEAST_AREA_SHARE * volume) / np.where(total > 0.0, total, np.inf)

    ratio = np.where(series.need > 0.0, np.inf, 0.0)
    np.divide(series.need, series.yields, out=ratio, where=(series.need > 0.0) & (series.yields > 0.0))
    ratio = np.sort(np.where(series.known, ratio, np.inf), axis=0)
    without_tank = ratio[np.maximum(days - allowed - 1, 0), place][:, None]
    faintest = np.where(series.yields > 0.0, series.yields, np.inf).min(axis=0)[:, None]
    brimming = (tank + series.need.max(axis=0)[:, None]) / faintest
    high = np.where(np.isfinite(without_tank), without_tank, brimming)
    high = np.where((days > 0)[:, None] & (total > 0.0), high, np.nan)
    return _Bounds(low, high, tank >= (1.0 - LEAST_AREA_SHARE) * volume)


def _bisect(enough: Callable[[Array], Flags], bounds: _Bounds, tolerance: float) -> Array:
    """Smallest area that is enough, within the tolerance above it; NaN where none is."""
    low = bounds.low
    high = np.where(enough(np.nan_to_num(bounds.high)), bounds.high, np.nan)
    if bounds.perhaps_none.any():
        high = np.where(bounds.perhaps_none & ~np.isnan(high) & enough(np.zeros_like(high)), 0.0, high)
    open_ends = high > low * (1.0 + tolerance)
    while open_ends.any():
        middle = np.where(open_ends, np.sqrt(low * high), 0.0)
        met = enough(middle)
        high, low = np.where(open_ends & met, middle, high), np.where(open_ends & ~met, middle, low)
        open_ends = high > low * (1.0 + tolerance)
    return high


def _trade_off(
    series: DaySeries, tank: Array, area: Array, asked: tuple[float, float], carried_over: bool
) -> TradeOff:
    found = np.isfinite(area)
    used = np.where(found, area, 0.0)
    runs = {start: run_tank(series, area_m2=used, tank_l=tank, carried_over=start) for start in (False, True)}
    reason = np.where(found, "", DRY_SPELL)
    reason = np.where(~found & (series.yields.sum(axis=0) <= 0.0)[:, None], NO_YIELD, reason)
    reason = np.where((series.days == 0)[:, None], NO_DAYS, reason)
    return TradeOff(
        *asked, tank, area,
        np.where(found, runs[carried_over].share_of_days, np.nan),
        np.where(found, runs[carried_over].share_of_volume, np.nan),
        np.where(found, runs[True].share_of_days, np.nan),
        series.days, len(series.need) - series.days, np.asarray(reason, dtype=np.str_),
    )


@dataclass(frozen=True)
class CurvePoint:
    """One point of the curve of a place; `share_of_days` and the like as in `TradeOff`."""

    tank_l: float
    area_m2: float
    share_of_days: float
    share_of_volume: float
    share_of_days_carried_over: float
    reason: str


def curve_of(trade_off: TradeOff, place: int) -> tuple[CurvePoint, ...]:
    """Curve of one place, from the smallest tank to the largest.

    Parameters
    ----------
    trade_off : TradeOff
        From `smallest_areas`.
    place : int
        Index of the place.

    Returns
    -------
    tuple of CurvePoint

    Examples
    --------
    >>> from stillfield.decisions.storage import day_series
    >>> found = smallest_areas(day_series([[4.0], [1.0]], 20.0), tank_l=[0.0, 20.0], share_of_days=1.0)
    >>> [(point.tank_l, round(point.area_m2, 1)) for point in curve_of(found, 0)]
    [(0.0, 20.0), (20.0, 4.0)]
    """
    columns = (
        trade_off.tank_l, trade_off.area_m2, trade_off.share_of_days, trade_off.share_of_volume,
        trade_off.share_of_days_carried_over, trade_off.reason,
    )
    return tuple(CurvePoint(*row) for row in zip(*(column[place].tolist() for column in columns), strict=True))


@dataclass(frozen=True)
class ChosenPoint:
    """The point of each place's curve to build.

    Attributes
    ----------
    index : ndarray of int, shape (place,)
        Which tank; -1 where no tank has an area.
    tank_l, area_m2 : ndarray, shape (place,)
        [L], [m2]
    cost : ndarray, shape (place,)
        Of area and tank together, in the currency of the costs given; NaN without costs.
    rule : str
        How it was chosen, in words.
    """

    index: Whole
    tank_l: Array
    area_m2: Array
    cost: Array
    rule: str


def cheapest_point(trade_off: TradeOff, *, cost_per_m2: float, cost_per_litre: float) -> ChosenPoint:
    """Tank and area that together cost least; of equal costs the smaller tank.

    Parameters
    ----------
    trade_off : TradeOff
        From `smallest_areas`.
    cost_per_m2 : float
        Of basin area, above 0. [currency m-2]
    cost_per_litre : float
        Of tank. [currency L-1]

    Returns
    -------
    ChosenPoint

    Raises
    ------
    DecisionError
        For costs that cannot be.

    Examples
    --------
    >>> from stillfield.decisions.storage import day_series
    >>> series = day_series([[4.0], [1.0], [1.0], [4.0]], 20.0)
    >>> found = smallest_areas(series, tank_l=[0.0, 12.0, 24.0], share_of_days=1.0)
    >>> cheapest_point(found, cost_per_m2=60.0, cost_per_litre=1.0).tank_l.tolist()
    [24.0]
    >>> cheapest_point(found, cost_per_m2=1.0, cost_per_litre=1.0).tank_l.tolist()
    [0.0]
    """
    if not (0.0 < cost_per_m2 < np.inf and 0.0 <= cost_per_litre < np.inf):
        raise DecisionError(
            "costs of area and tank cannot be", where="storage", got=f"{cost_per_m2:g} and {cost_per_litre:g}",
            wanted="a cost per m2 above 0 and a cost per litre of 0 or more",
        )
    cost = cost_per_m2 * trade_off.area_m2 + cost_per_litre * trade_off.tank_l
    least = np.where(np.isfinite(cost), cost, np.inf).min(axis=1, keepdims=True)
    rule = f"least cost at {cost_per_m2:g} per m2 of basin and {cost_per_litre:g} per litre of tank"
    return _chosen(trade_off, cost <= least * (1.0 + 1e-9), cost, rule)


def knee_point(trade_off: TradeOff, *, within: float = KNEE_WITHIN) -> ChosenPoint:
    """Smallest tank whose area comes near the smallest area of the curve, where costs are not known.

    Parameters
    ----------
    trade_off : TradeOff
        From `smallest_areas`. The choice hangs on the largest tank given, so let that be one people would build.
    within : float
        How near, as a share of that smallest area, 0 or more. [1]

    Returns
    -------
    ChosenPoint

    Raises
    ------
    DecisionError
        For a negative share.

    Examples
    --------
    >>> from stillfield.decisions.storage import day_series
    >>> series = day_series([[4.0], [1.0], [1.0], [4.0]], 20.0)
    >>> found = smallest_areas(series, tank_l=[0.0, 24.0, 25.0], share_of_days=1.0)
    >>> knee_point(found, within=0.1).tank_l.tolist()
    [24.0]
    """
    if not 0.0 <= within < np.inf:
        raise DecisionError("share of the knee cannot be", where="storage", got=within, wanted="0 or more")
    area = trade_off.area_m2
    least = np.where(np.isfinite(area), area, np.inf).min(axis=1, keepdims=True)
    rule = f"smallest tank whose area is within {100.0 * within:g} % of the smallest area of the curve"
    return _chosen(trade_off, area <= least * (1.0 + within), np.full(area.shape, np.nan), rule)


def _chosen(trade_off: TradeOff, fits: Flags, cost: Array, rule: str) -> ChosenPoint:
    """Take the first tank that fits."""
    any_fits = fits.any(axis=1)
    index = np.argmax(fits, axis=1)

    def taken(values: Array) -> Array:
        return np.where(any_fits, np.take_along_axis(values, index[:, None], axis=1)[:, 0], np.nan)

    return ChosenPoint(
        np.where(any_fits, index, -1), taken(trade_off.tank_l), taken(trade_off.area_m2), taken(cost), rule
    )
