"""Storage: a tank on the daily series, the tank with which no day fails, and rain caught on the covers.

A day runs so: the distillate of the day joins what is stored, people take what they need or what there is, and
what is left stays in the tank up to its size; the rest is lost. So a tank of 0 L still serves a day from the
distillate of that day. A day without yield or need in the record is skipped: the tank stands still and the day
is not counted; fill it with 0 beforehand to take the dark view.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.errors import DecisionError

Array = NDArray[np.float64]
Whole = NDArray[np.int64]
Flags = NDArray[np.bool_]

#: Share of the largest need of a day below which a shortage is rounding. [1]
ROUNDING = 1e-9
#: Days worked at once: few enough to stay in the cache, many enough that numpy is not called for little.
CHUNK_DAYS = 64
#: Days before the record with which a carried-over start fills the tank. [d]
WARM_UP_DAYS = 365
#: Share of the rain on a smooth sloping cover that reaches the gutter: common practice, no source. [1]
RUNOFF_COEFFICIENT = 0.8
#: Rain of a day that runs to waste with the dirt: common practice, no source. [mm]
FIRST_FLUSH_MM = 1.0

RAIN_CAUTION = (
    "Rain from the covers is not distillate: it carries dust and bird droppings, must be kept apart or disinfected, "
    "and what the first rain washes off must run to waste."
)


@dataclass(frozen=True)
class DaySeries:
    """Yield and need day by day, with missing days standing still at 0.

    Attributes
    ----------
    yields : ndarray, shape (day, place)
        [L m-2]
    need : ndarray, shape (day, place)
        [L d-1]
    known : ndarray of bool, shape (day, place)
        Days with both.
    """

    yields: Array
    need: Array
    known: Flags

    @property
    def days(self) -> Whole:
        """Known days of each place."""
        return np.asarray(self.known.sum(axis=0), dtype=np.int64)

    def last(self, days: int) -> DaySeries:
        """The end of the record."""
        return DaySeries(self.yields[-days:], self.need[-days:], self.known[-days:])


def day_series(daily_yield: ArrayLike, need_l: ArrayLike) -> DaySeries:
    """Pair yield and need of every day.

    Parameters
    ----------
    daily_yield : array_like, shape (day, place)
        Distillate, and rain caught if it is to count (`rain_caught`); days one after the other, NaN where
        missing. [L m-2]
    need_l : array_like, shape (day, place), (day, 1) or scalar
        [L d-1]

    Returns
    -------
    DaySeries

    Raises
    ------
    DecisionError
        For a negative value or another shape.

    Examples
    --------
    >>> day_series([[4.0, 3.0], [np.nan, 2.0]], 20.0).days.tolist()
    [1, 2]
    """
    yields, need = np.asarray(daily_yield, dtype=np.float64), np.asarray(need_l, dtype=np.float64)
    fits = yields.ndim == 2 and need.ndim in {0, 2} and yields.shape[0] > 0
    if not fits or (yields < 0.0).any() or (need < 0.0).any():
        raise DecisionError(
            "daily yield or need cannot be", where="storage", got=f"shapes {yields.shape} and {need.shape}",
            wanted="(day, place) both, none negative",
        )
    known = np.isfinite(yields) & np.isfinite(need)
    # One layout in memory whatever came in: sums run in the same order, so places do not change each other's digits.
    yields, need = (np.ascontiguousarray(np.where(known, values, 0.0)) for values in (yields, need))
    return DaySeries(yields, need, np.ascontiguousarray(known))


@dataclass(frozen=True)
class TankRun:
    """What a tank did over the record.

    Attributes
    ----------
    share_of_days : ndarray, shape (place, tank)
        Days whose need was met in full, of the known days; NaN without any. [1]
    share_of_volume : ndarray, shape (place, tank)
        Litres supplied of litres needed. [1]
    end_l : ndarray, shape (place, tank)
        Stored after the last day. [L]
    """

    share_of_days: Array
    share_of_volume: Array
    end_l: Array


def run_tank(series: DaySeries, *, area_m2: ArrayLike, tank_l: ArrayLike, carried_over: bool = False) -> TankRun:
    """Walk through the record with basins and a tank.

    S(t) = min(K, max(0, S(t-1) + A y(t) - d(t))), the day being met in full where S(t-1) + A y(t) >= d(t).

    Parameters
    ----------
    series : DaySeries
        From `day_series`.
    area_m2, tank_l : array_like, broadcast to (place, tank)
        Basin area A and tank size K. [m2], [L]
    carried_over : bool
        False starts with a full tank. True first runs through the last year of the record from a full tank and
        starts with what that leaves, so a short record does not live on its first filling.

    Returns
    -------
    TankRun

    Examples
    --------
    Two dull days of four, served from the tank:

    >>> series = day_series([[4.0], [1.0], [1.0], [4.0]], 20.0)
    >>> run_tank(series, area_m2=8.0, tank_l=[[0.0, 12.0, 24.0]]).share_of_days.tolist()
    [[0.5, 0.75, 1.0]]
    """
    area, tank = by_place_and_tank(series, area_m2, tank_l)
    short_days, short_l, end = walk(series, area, tank, carried_over=carried_over)
    days = np.where(series.days > 0, series.days, np.nan)[:, None]
    needed = series.need.sum(axis=0)[:, None]
    supplied = np.where(needed > 0.0, 1.0 - short_l / np.where(needed > 0.0, needed, 1.0), 1.0)
    return TankRun(1.0 - short_days / days, np.where(np.isnan(days), np.nan, supplied), end)


def by_place_and_tank(series: DaySeries, area_m2: ArrayLike, tank_l: ArrayLike) -> tuple[Array, Array]:
    """Bring areas and tanks to the shape (place, tank), or refuse them.

    Parameters
    ----------
    series, area_m2, tank_l
        As for `run_tank`.

    Returns
    -------
    area, tank : ndarray, shape (place, tank)
        [m2], [L]

    Raises
    ------
    DecisionError
        If one is negative or not finite.

    Examples
    --------
    >>> area, tank = by_place_and_tank(day_series([[4.0, 3.0]], 20.0), 5.0, [0.0, 10.0])
    >>> tank.tolist()
    [[0.0, 10.0], [0.0, 10.0]]
    """
    area, tank = np.broadcast_arrays(np.asarray(area_m2, dtype=np.float64), np.asarray(tank_l, dtype=np.float64))
    if area.ndim > 2 or not (np.isfinite(area) & (area >= 0.0) & np.isfinite(tank) & (tank >= 0.0)).all():
        raise DecisionError(
            "area or tank cannot be", where="storage", got=f"shape {area.shape}",
            wanted="areas and tanks of 0 or more, by place and tank",
        )
    shape = (series.need.shape[1], area.shape[-1] if area.ndim else 1)
    return np.array(np.broadcast_to(area, shape)), np.array(np.broadcast_to(tank, shape))


def walk(series: DaySeries, area: Array, tank: Array, *, carried_over: bool = False) -> tuple[Whole, Array, Array]:
    """Count days and litres short of need.

    Parameters
    ----------
    series, carried_over
        As for `run_tank`.
    area, tank : ndarray, shape (place, tank)
        From `by_place_and_tank`. [m2], [L]

    Returns
    -------
    short_days, short_l, end_l : ndarray, shape (place, tank)
        Known days short of need, litres short, and litres stored at the end. [d], [L], [L]

    Examples
    --------
    >>> series = day_series([[4.0], [1.0]], 20.0)
    >>> [value.tolist() for value in walk(series, *by_place_and_tank(series, 5.0, 10.0))]
    [[[1]], [[5.0]], [[0.0]]]
    """
    start = _walk(series.last(WARM_UP_DAYS), area, tank, tank)[2] if carried_over else tank
    return _walk(series, area, tank, start)


def _walk(series: DaySeries, area: Array, tank: Array, start: Array) -> tuple[Whole, Array, Array]:
    """`walk` from a given start; only the recursion goes day by day, all else is done for a chunk of days at once."""
    stored, size = start.ravel().copy(), tank.ravel()
    rounding = -ROUNDING * np.repeat(series.need.max(axis=0), tank.shape[1])
    short_days, short_l = np.zeros(size.size, dtype=np.int64), np.zeros(size.size)
    for first in range(0, len(series.need), CHUNK_DAYS):
        days = slice(first, first + CHUNK_DAYS)
        surplus = series.yields[days, :, None] * area
        surplus -= series.need[days, :, None]
        surplus = surplus.reshape(len(surplus), -1)
        for day in surplus:
            np.add(day, stored, out=day)
            np.maximum(day, 0.0, out=stored)
            np.minimum(stored, size, out=stored)
        short_days += (surplus < rounding).sum(axis=0)
        np.minimum(surplus, 0.0, out=surplus)
        short_l -= surplus.sum(axis=0)
    return short_days.reshape(tank.shape), short_l.reshape(tank.shape), stored.reshape(tank.shape)


def tank_of_days(series: DaySeries, days: ArrayLike) -> Array:
    """Tank sizes from days of need, the mean need of the known days.

    Parameters
    ----------
    series : DaySeries
        From `day_series`.
    days : array_like, shape (tank,)
        [d]

    Returns
    -------
    ndarray, shape (place, tank)
        0 for a place without known days. [L]

    Examples
    --------
    >>> tank_of_days(day_series([[4.0], [1.0]], 20.0), [0.0, 3.0]).tolist()
    [[0.0, 60.0]]
    """
    mean = series.need.sum(axis=0) / np.maximum(series.days, 1)
    return np.asarray(mean[:, None] * np.asarray(days, dtype=np.float64))


def sequent_peak(series: DaySeries, *, area_m2: ArrayLike, cyclic: bool = False) -> Array:
    """Smallest tank with which no day fails: the largest deficit that builds up.

    K(t) = max(0, K(t-1) + d(t) - A y(t)), K(0) = 0; the tank is the largest K(t), that is the largest rise of the
    cumulative deficit above an earlier low. It starts full.

    Source: Thomas & Burden 1963, Operations Research in Water Quality Management, Harvard University.

    Parameters
    ----------
    series : DaySeries
        From `day_series`.
    area_m2 : array_like, broadcast to (place, area)
        [m2]
    cyclic : bool
        True runs the record twice over, as the method was published, so that the tank must also be full again
        for the next round; NaN where the yield of the whole record is less than its need.

    Returns
    -------
    ndarray, shape (place, area)
        NaN without known days. [L]

    Examples
    --------
    >>> sequent_peak(day_series([[4.0], [1.0], [1.0], [4.0]], 20.0), area_m2=8.0).tolist()
    [[24.0]]
    """
    area, _ = by_place_and_tank(series, area_m2, 0.0)
    result = np.empty(area.shape)
    for column in range(area.shape[1]):
        deficit = series.need - area[:, column] * series.yields
        run = np.cumsum(np.concatenate([np.zeros_like(deficit[:1]), deficit, *([deficit] if cyclic else [])]), axis=0)
        peak = (run - np.minimum.accumulate(run, axis=0)).max(axis=0)
        never_full = cyclic & (deficit.sum(axis=0) > ROUNDING * series.need.sum(axis=0))
        result[:, column] = np.where(never_full | (series.days == 0), np.nan, peak)
    return result


def rain_caught(
    rain_mm: ArrayLike, *, cover_m2_per_basin_m2: float, runoff_coefficient: float = RUNOFF_COEFFICIENT,
    first_flush_mm: float = FIRST_FLUSH_MM,
) -> Array:
    """Rain that the covers of the stills bring in, by basin area, to be added to the daily yield.

    c a max(0, P - f): a millimetre on a square metre is a litre. Nothing is added unless it is asked for, and
    `RAIN_CAUTION` belongs to it.

    Parameters
    ----------
    rain_mm : array_like, shape (day, ...)
        Rain P of each day. [mm]
    cover_m2_per_basin_m2 : float
        Horizontal projection a of the gutter-fed covers. [m2 m-2]
    runoff_coefficient : float
        Share c of the rain that reaches the gutter, 0 to 1. [1]
    first_flush_mm : float
        Rain f of every day that runs to waste. [mm]

    Returns
    -------
    ndarray, shape of `rain_mm`
        NaN where it is. [L m-2]

    Raises
    ------
    DecisionError
        For a negative value or a coefficient above 1.

    Examples
    --------
    >>> rain_caught([0.0, 0.5, 11.0], cover_m2_per_basin_m2=1.1, runoff_coefficient=0.8).round(2).tolist()
    [0.0, 0.0, 8.8]
    """
    rain = np.asarray(rain_mm, dtype=np.float64)
    usable = cover_m2_per_basin_m2 >= 0.0 and 0.0 <= runoff_coefficient <= 1.0 and first_flush_mm >= 0.0
    if not usable or (rain < 0.0).any():
        raise DecisionError(
            "rain on the covers cannot be", where="storage",
            got=f"cover {cover_m2_per_basin_m2:g}, coefficient {runoff_coefficient:g}, first flush {first_flush_mm:g}",
            wanted="none negative, the coefficient at most 1",
        )
    return np.asarray(cover_m2_per_basin_m2 * runoff_coefficient * np.maximum(rain - first_flush_mm, 0.0))
