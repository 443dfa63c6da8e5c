"""Days to months: totals from valid days only, missing stays missing, years in their place."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from month_samples import months_of_days
from stillfield.stages.aggregate import Months, MonthSums, month_sums


def daily(values: np.ndarray, start: str = "2001-01-01", calendar: str = "standard", **attrs: str) -> xr.Dataset:
    time = xr.date_range(start, periods=len(values), freq="D", calendar=calendar, use_cftime=calendar != "standard")
    return xr.Dataset(
        {"daily_yield": (("time", "site"), values)},
        coords={"time": time, "site": [f"s{i}" for i in range(values.shape[1])]},
        attrs={"record": "series", **attrs},
    )


def test_months_agree_with_pandas_on_whole_years() -> None:
    random = np.random.default_rng(3)
    values = random.uniform(0.5, 6.0, (3 * 365 + 1, 4))  # 2001 to 2004 less one year: 2004 is a leap year
    monthly = months_of_days(daily(values, start="2002-01-01"))
    frame = pd.DataFrame(values, index=pd.date_range("2002-01-01", periods=len(values), freq="D"))
    by_year = frame.groupby([frame.index.year, frame.index.month]).sum()
    expected = by_year.to_numpy().reshape(3, 12, 4)
    np.testing.assert_allclose(monthly["monthly_yield_by_year"], expected, rtol=2e-7)
    np.testing.assert_allclose(monthly["monthly_yield"], expected.mean(axis=0), rtol=2e-7)
    np.testing.assert_allclose(monthly["annual_yield"], expected.mean(axis=0).sum(axis=0), rtol=2e-7)
    np.testing.assert_allclose(monthly["monthly_yield_poor_year"], np.percentile(expected, 10, axis=0), rtol=2e-7)
    np.testing.assert_allclose(monthly["monthly_yield_low"], 0.8 * expected.mean(axis=0), rtol=2e-7)


def test_poor_year_is_numpys_quantile_over_the_years_there_are() -> None:
    random = np.random.default_rng(5)
    values = random.uniform(0.5, 6.0, (7 * 365, 3))
    values[400:470, 1] = np.nan  # some months of one year
    values[:, 2] = np.nan
    monthly = months_of_days(daily(values, calendar="noleap"))
    by_year = monthly["monthly_yield_by_year"].to_numpy()
    for month in range(12):
        for site in range(2):
            years = by_year[:, month, site]
            expected = np.quantile(years[np.isfinite(years)], 0.1)
            assert float(monthly["monthly_yield_poor_year"][month, site]) == pytest.approx(expected)
    assert np.isnan(monthly["monthly_yield_poor_year"][:, 2]).all()


def test_worst_month_counts_litres_per_day_not_per_month() -> None:
    values = np.full((365, 1), 3.0)
    values[59:90] = 2.9  # March, 31 days: 89.9 L in the month, more than February's 84 L
    monthly = months_of_days(daily(values))
    assert float(monthly["worst_month"][0]) == 3
    assert float(monthly["worst_month_yield"][0]) == pytest.approx(2.9)


def test_some_missing_days_do_not_shrink_the_month() -> None:
    values = np.full((365, 1), 4.0)
    values[2:6] = np.nan
    monthly = months_of_days(daily(values))
    assert float(monthly["monthly_yield"][0, 0]) == pytest.approx(4.0 * 31)
    assert float(monthly["days_used"][0, 0]) == 27
    assert float(monthly["days_expected"][0, 0]) == 31


def test_too_few_days_make_the_month_missing_and_never_zero() -> None:
    values = np.full((365, 2), 4.0)
    values[31:45, 0] = np.nan  # 14 of February's 28 days
    values[:, 1] = np.nan
    monthly = months_of_days(daily(values))
    assert np.isnan(monthly["monthly_yield"][1, 0])
    assert np.isfinite(monthly["monthly_yield"][2, 0])
    assert np.isnan(monthly["annual_yield"][0])
    assert np.isnan(monthly["worst_month"][0])
    assert np.isnan(monthly["monthly_yield"].sel(site="s1")).all()
    assert int(monthly["days_used"].sel(site="s1").sum()) == 0


def test_a_part_month_at_the_edge_is_missing() -> None:
    monthly = months_of_days(daily(np.full((60, 1), 2.0), start="2001-01-20"))
    by_year = monthly["monthly_yield_by_year"].isel(year=0, site=0).to_numpy()
    assert np.isnan(by_year[0])
    assert by_year[1] == pytest.approx(56.0)


@pytest.mark.parametrize(
    ("calendar", "days", "february"), [("noleap", 365, 28), ("all_leap", 366, 29), ("360_day", 360, 30)]
)
def test_calendars_keep_their_own_months(calendar: str, days: int, february: int) -> None:
    monthly = months_of_days(daily(np.ones((days, 1)), start="2004-01-01", calendar=calendar))
    assert float(monthly["monthly_yield"].sel(month=2)[0]) == february
    assert float(monthly["annual_yield"][0]) == days


def test_typical_year_has_no_poor_year() -> None:
    monthly = months_of_days(daily(np.ones((365, 1)), record="typical-year"))
    assert "monthly_yield_poor_year" not in monthly
    assert monthly["year"].to_numpy().tolist() == [0]


def test_windows_and_parts_of_the_record_change_no_digit() -> None:
    random = np.random.default_rng(11)
    values = random.uniform(0.5, 6.0, (3 * 365, 5)).astype(np.float32)
    values[random.random(values.shape) < 0.02] = np.nan
    data = daily(values, calendar="noleap")
    whole = months_of_days(data, window=len(values))
    for window in (1, 7, 31, 100):
        xr.testing.assert_identical(months_of_days(data, window=window), whole)
    months = Months.of(data["time"])
    no_flags = np.zeros(values.shape, dtype=bool)
    joined = MonthSums.begin(months, 5, min_valid_days_share=0.8)
    alone = MonthSums.begin(months, 5, min_valid_days_share=0.8)
    alone.add(0, [values] * 4, [no_flags, no_flags])
    for first, end in ((0, 365), (365, 3 * 365)):
        part = MonthSums.begin(months, 5, min_valid_days_share=0.8, first_day=first, part=True)
        part.add(first, [values[first:end]] * 4, [no_flags[first:end], None])
        joined.join([(slice(None), part)], first)
    np.testing.assert_array_equal(joined.by_year, alone.by_year)
    np.testing.assert_array_equal(joined.totals, alone.totals)


def test_compiled_month_sums_are_those_of_numpy() -> None:
    compiled = pytest.importorskip("stillfield.engine.month_sums_compiled").month_sums
    random = np.random.default_rng(2)
    days = [random.random((70, 131)).astype(np.float32) for _ in range(4)]
    days[0][random.random((70, 131)) < 0.1] = np.nan
    flags = [random.random((70, 131)) < 0.2, None]
    slot = np.repeat([0, 1, 2], [20, 30, 20])
    plain, quick = np.zeros((3, 7, 131)), np.zeros((3, 7, 131))
    month_sums(days, flags, slot, plain)
    compiled(days, flags, slot, quick)
    np.testing.assert_array_equal(quick, plain)
    valid = np.isfinite(days[0][:20])
    assert plain[0, 6].sum() == valid.sum()
    assert plain[0, 4].sum() == (flags[0][:20] & valid).sum()
