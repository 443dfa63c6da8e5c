"""Aggregate: days to months, months to years and a climatology, with day counts beside every figure.

A month is the mean of its valid days times the days it has in its calendar, never the sum of the days that
happen to be there; with too few valid days it is missing, not small. Days come window by window; of them only
sums are kept, and of the months of every year the one figure that the poor year is taken from.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.reliability import quantile_of_ranked
from stillfield.vocabulary import YIELD

Array = NDArray[np.floating[Any]]
SumDays = Callable[[Sequence[Array], Sequence[NDArray[np.bool_] | None], NDArray[np.int64], Array], None]

MONTHS = 12
#: Share of years whose month is better than the poor-year month. [1]
POOR_YEAR_REACHED = 0.9

#: What is summed over the valid days of a month, in this order; the count of these days comes last.
CENTRAL, LOW, HIGH, SUNSHINE, FROST, OUTSIDE, COUNT = range(7)
_ROWS = 7
_MEANT = {
    "monthly_yield": CENTRAL, "monthly_yield_low": LOW, "monthly_yield_high": HIGH, "monthly_yield_rule": SUNSHINE,
}


@dataclass(frozen=True)
class Months:
    """Calendar months that the days of a record lie in.

    Attributes
    ----------
    year, month : ndarray of int, shape (calendar month,)
        Of every month that has a day, in order of time; 1 to 12.
    length : ndarray, shape (calendar month,)
        Days it has in its calendar. [d]
    of_day : ndarray of int, shape (day,)
        Number of the month every day lies in.
    typical : bool
        Whether the record is a typical year.
    """

    year: NDArray[np.int64]
    month: NDArray[np.int64]
    length: Array
    of_day: NDArray[np.int64]
    typical: bool = False

    @classmethod
    def of(cls, time: xr.DataArray, *, typical: bool = False) -> Months:
        """Months of the dates `time`, of any CF calendar."""
        year, month = time.dt.year.to_numpy().astype(np.int64), time.dt.month.to_numpy().astype(np.int64)
        starts = np.concatenate([[0], np.flatnonzero(np.diff(year * MONTHS + month)) + 1])
        of_day = np.repeat(np.arange(starts.size), np.diff([*starts, time.size]))
        length = time.dt.days_in_month.to_numpy()[starts].astype(np.float64)
        return cls(year[starts], month[starts], length, of_day, typical)

    @property
    def years(self) -> NDArray[np.int64]:
        """Calendar years from the first to the last."""
        return np.arange(self.year[0], self.year[-1] + 1)

    @property
    def mean_length(self) -> Array:
        """Days of each month of the year, mean of the record; NaN for a month it does not have, shape (12,) [d]."""
        total = np.bincount(self.month - 1, weights=self.length, minlength=MONTHS)
        seen = np.bincount(self.month - 1, minlength=MONTHS)
        return np.where(seen > 0, total / np.maximum(seen, 1), np.nan)

    @property
    def lengths(self) -> Array:
        """Days of the months of each year, the mean for those before and after the record, (year, 12) [d]."""
        days = np.tile(self.mean_length, (self.years.size, 1))
        days[self.year - self.year[0], self.month - 1] = self.length
        return days


@dataclass
class MonthSums:
    """Months of some cells, filled while their days go by.

    Attributes
    ----------
    months : Months
        Calendar of the record.
    min_valid_days_share : float
        A month with a smaller share of valid days is missing. [1]
    by_year : ndarray of float32, shape (calendar month, cell)
        Central litres of every month; NaN where missing. [L m-2 month-1]
    totals : ndarray, shape (CENTRAL .. OUTSIDE, 12, cell)
        Sums over the years that have the month: of litres (sunshine: of irradiation), and of flagged days.
    used, valid : ndarray, shape (12, cell)
        Days used, and years that have the month.
    """

    months: Months
    min_valid_days_share: float
    by_year: Array
    totals: Array
    used: Array
    valid: Array
    _open: tuple[int, Array] = field(repr=False)
    closed: list[Array] | None = None

    @classmethod
    def begin(
        cls, months: Months, cells: int, *, min_valid_days_share: float, first_day: int = 0, part: bool = False
    ) -> MonthSums:
        """Set out with no day counted.

        Parameters
        ----------
        months : Months
            Calendar of the record.
        cells : int
            Number of cells.
        min_valid_days_share : float
            A month with a smaller share of valid days is missing. [1]
        first_day : int
            First day that will come, the first of a month.
        part : bool
            Whether only part of the record will come. Its months are then kept as sums in `closed`, for `join`.
        """
        return cls(
            months, min_valid_days_share, np.full((0 if part else months.month.size, cells), np.nan, np.float32),
            np.zeros((COUNT, MONTHS, cells)), np.zeros((MONTHS, cells)), np.zeros((MONTHS, cells)),
            (int(months.of_day[first_day]), np.zeros((_ROWS, cells))), [] if part else None,
        )

    def join(self, parts: Sequence[tuple[NDArray[np.intp] | slice, MonthSums]], first_day: int) -> None:
        """Take in the months of one part of the record; parts come in the order of time.

        Parameters
        ----------
        parts : sequence of (cells, MonthSums)
            Groups of cells and what they gathered.
        first_day : int
            First day of the part.
        """
        first = int(self.months.of_day[first_day])
        for number in range(max((len(part.closed or ()) for _, part in parts), default=0)):
            sums = np.zeros((_ROWS, self.by_year.shape[1]))
            for cells, part in parts:
                if part.closed is not None and number < len(part.closed):
                    sums[:, cells] = part.closed[number]
            self._close(first + number, sums)

    def add(
        self, first_day: int, days: Sequence[Array], flags: Sequence[NDArray[np.bool_] | None],
        *, sum_days: SumDays | None = None,
    ) -> None:
        """Take in the next days.

        Parameters
        ----------
        first_day : int
            Number of the first of them in the record; days come in order, without a gap.
        days : sequence of ndarray, each of shape (day, cell)
            Central, low and high litres and irradiation. [L m-2], [MJ m-2]
        flags : sequence of ndarray of bool or None
            Frost, and outside the range of the method.
        sum_days : callable, optional
            `month_sums` or its compiled twin.
        """
        count = days[0].shape[0]
        if count == 0:
            return
        slot = self.months.of_day[first_day:first_day + count]
        after = first_day + count
        started, carried = self._open
        sums = np.zeros((int(slot[-1]) - started + 1, *carried.shape))
        sums[0] = carried
        (sum_days or month_sums)(days, flags, slot - started, sums)
        ended = slot[-1] + (after == self.months.of_day.size or self.months.of_day[after] != slot[-1])
        for month in range(started, int(ended)):
            self._close(month, sums[month - started])
        self._open = (int(ended), sums[-1] if ended == slot[-1] else np.zeros_like(carried))

    def _close(self, number: int, sums: Array) -> None:
        if self.closed is not None:
            self.closed.append(sums)
            return
        count, length = sums[COUNT], float(self.months.length[number])
        row = self.months.month[number] - 1
        enough = count >= self.min_valid_days_share * length
        stretch = np.where(enough, length / np.maximum(count, 1.0), 0.0)
        self.by_year[number] = np.where(enough, sums[CENTRAL] * stretch, np.nan)
        self.totals[:FROST, row] += sums[:FROST] * stretch
        self.totals[FROST:, row] += sums[FROST:COUNT] * enough
        self.used[row] += count * enough
        self.valid[row] += enough


def month_sums(
    days: Sequence[Array], flags: Sequence[NDArray[np.bool_] | None], slot: NDArray[np.int64], out: Array
) -> None:
    """Add days with central litres to the sums of their months, strictly one after the other.

    Parameters
    ----------
    days, flags
        As for `MonthSums.add`.
    slot : ndarray of int, shape (day,)
        Row of `out` of every day.
    out : ndarray, shape (month, row, cell)
        Changed in place.
    """
    for day, month in enumerate(slot):
        valid = np.isfinite(days[0][day])
        for row, values in enumerate(days):
            out[month, row] += np.where(valid, values[day], 0.0)
        for row, flag in enumerate(flags, start=FROST):
            if flag is not None:
                out[month, row] += flag[day] & valid
        out[month, COUNT] += valid


def _quantile(values: Array, q: float) -> Array:
    """Quantile over the valid years; NaN where there is none."""
    return quantile_of_ranked(np.sort(values, axis=0), np.isfinite(values).sum(axis=0), q)


def climatology(sums: MonthSums, *, rule_litres_per_mj: float) -> dict[str, Array]:
    """Monthly litres of every cell: by year, climatology, band, rule, annual and worst month.

    Parameters
    ----------
    sums : MonthSums
        All days taken in.
    rule_litres_per_mj : float
        What the constant-efficiency rule makes of a MJ m-2. [L MJ-1]

    Returns
    -------
    dict of str to ndarray
        Name in the result to values of shape (year, 12, cell), (12, cell) or (cell,); see `aggregate`.
    """
    months = sums.months
    count = np.where(sums.valid > 0, sums.valid, np.nan)
    result = {name: sums.totals[row] / count for name, row in _MEANT.items()}
    result["monthly_yield_rule"] *= rule_litres_per_mj
    there = months.month - 1
    expected = np.bincount(there, weights=months.length, minlength=MONTHS)
    per_day = result["monthly_yield"] / months.mean_length[:, None]
    # A cell with any month missing has no worst month: the missing one might be it.
    known = np.isfinite(per_day).all(axis=0)
    worst = np.argmin(np.where(known, per_day, np.inf), axis=0)
    for name, end in (("annual_yield", ""), ("annual_yield_low", "_low"), ("annual_yield_high", "_high")):
        result[name] = result[f"monthly_yield{end}"].sum(axis=0)
    result["worst_month"] = np.where(known, worst + 1, np.nan)
    result["worst_month_yield"] = np.where(known, np.take_along_axis(per_day, worst[None], axis=0)[0], np.nan)
    result["days_used"] = sums.used
    result["days_expected"] = np.broadcast_to(expected[:, None], sums.used.shape).copy()
    used = np.where(sums.used > 0, sums.used, np.nan)
    result["frost_share"], result["outside_fit_share"] = sums.totals[FROST] / used, sums.totals[OUTSIDE] / used
    box = np.full((months.years.size * MONTHS, sums.by_year.shape[1]), np.nan, np.float32)
    box[(months.year - months.year[0]) * MONTHS + there] = sums.by_year
    result["monthly_yield_by_year"] = box.reshape(months.years.size, MONTHS, -1)
    if not months.typical and months.years.size > 1:
        result["monthly_yield_poor_year"] = _quantile(result["monthly_yield_by_year"], 1.0 - POOR_YEAR_REACHED)
    return result


def aggregate(values: dict[str, Array], months: Months, weather: xr.Dataset, space: Sequence[str]) -> xr.Dataset:
    """Label the months of all cells.

    Parameters
    ----------
    values : dict of str to ndarray
        From `climatology`, of all cells in their order.
    months : Months
        Calendar of the record.
    weather : xarray.Dataset
        Gives coordinates and attributes.
    space : sequence of str
        Dimensions of space.

    Returns
    -------
    xarray.Dataset
        Dimension ``month`` (1 to 12), ``year`` for the yearly values, and space.
        ``monthly_yield``, ``monthly_yield_low``, ``monthly_yield_high``, ``monthly_yield_rule``
        [L m-2 month-1], means over the years; ``monthly_yield_by_year``; ``monthly_yield_poor_year``,
        reached or passed in 9 of 10 years (absent for typical years); ``annual_yield`` [L m-2 year-1];
        ``worst_month`` (1 to 12, fewest litres per day) and ``worst_month_yield`` [L m-2 d-1];
        ``days_used`` and ``days_expected`` (all years together), ``frost_share``, ``outside_fit_share`` of the
        days used; coordinate ``days_in_month`` of the record's calendar on year and month [d].
    """
    sizes = [weather.sizes[dim] for dim in space]
    variables: dict[str, Any] = {}
    for name, array in values.items():
        lead = {1: (), 2: ("month",), 3: ("year", "month")}[array.ndim]
        unit, meaning = _MEANINGS[name]
        shaped = array.reshape(*array.shape[:-1], *sizes)
        variables[name] = ((*lead, *space), shaped, {"units": unit, "long_name": meaning})
    weather = weather.drop_vars("inside", errors="ignore")
    coords = {name: coord for name, coord in weather.coords.items() if set(coord.dims) <= set(space)}
    year, meaning = (np.zeros(1, dtype=int), "Typical year") if months.typical else (months.years, "Calendar year")
    coords["month"] = ("month", np.arange(1, MONTHS + 1), {"long_name": "Month of the year", "units": "1"})
    coords["year"] = ("year", year, {"long_name": meaning, "units": "1"})
    coords["days_in_month"] = (("year", "month"), months.lengths, {"long_name": "Days of the month", "units": "d"})
    return xr.Dataset(variables, coords=coords, attrs=weather.attrs)


_MEANINGS = {
    "monthly_yield": ("L m-2 month-1", "Distillate of the month per basin area, mean of the years"),
    "monthly_yield_low": ("L m-2 month-1", "Monthly distillate, low end of the condition band"),
    "monthly_yield_high": ("L m-2 month-1", "Monthly distillate, high end of the condition band"),
    "monthly_yield_rule": ("L m-2 month-1", "Monthly distillate by the constant-efficiency rule"),
    "monthly_yield_by_year": ("L m-2 month-1", "Distillate of the month in each year"),
    "monthly_yield_poor_year": ("L m-2 month-1", "Monthly distillate reached or passed in 9 of 10 years"),
    "annual_yield": ("L m-2 year-1", YIELD["annual_yield"].meaning),
    "annual_yield_low": ("L m-2 year-1", "Annual distillate, low end of the condition band"),
    "annual_yield_high": ("L m-2 year-1", "Annual distillate, high end of the condition band"),
    "worst_month": ("1", "Month of the year with the fewest litres per day, 1 to 12"),
    "worst_month_yield": ("L m-2 d-1", "Mean daily distillate in the worst month"),
    "days_used": ("d", "Valid days behind the monthly figure, all years together"),
    "days_expected": ("d", "Days the record should have for the month, all years together"),
    "frost_share": ("1", "Share of the days used on which the brine froze"),
    "outside_fit_share": ("1", "Share of the days used outside the range of the method"),
}
