"""Days to months: totals from valid days only, missing stays missing, years in their place."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.stages.aggregate import aggregate

NAMES = ("daily_yield", "daily_yield_low", "daily_yield_high", "daily_yield_rule", "frost", "outside_fit")


def daily(values: np.ndarray, start: str = "2001-01-01", calendar: str = "standard", **attrs: str) -> xr.Dataset:
    time = xr.date_range(start, periods=len(values), freq="D", calendar=calendar, use_cftime=calendar != "standard")
    scale = dict(zip(NAMES, (1.0, 0.8, 1.2, 0.9, 0.0, 0.0), strict=True))
    return xr.Dataset(
        {name: (("time", "site"), values * factor) for name, factor in scale.items()},
        coords={"time": time, "site": [f"s{i}" for i in range(values.shape[1])]},
        attrs={"record": "series", **attrs},
    )


def test_months_agree_with_pandas_on_whole_years() -> None:
    random = np.random.default_rng(3)
    values = random.uniform(0.5, 6.0, (3 * 365 + 1, 4))  # 2001 to 2004 less one year: 2004 is a leap year
    monthly = aggregate(daily(values, start="2002-01-01"))
    frame = pd.DataFrame(values, index=pd.date_range("2002-01-01", periods=len(values), freq="D"))
    by_year = frame.groupby([frame.index.year, frame.index.month]).sum()
    expected = by_year.to_numpy().reshape(3, 12, 4)
    np.testing.assert_allclose(monthly["monthly_yield_by_year"], expected, rtol=1e-12)
    np.testing.assert_allclose(monthly["monthly_yield"], expected.mean(axis=0), rtol=1e-12)
    np.testing.assert_allclose(monthly["annual_yield"], expected.mean(axis=0).sum(axis=0), rtol=1e-12)
    np.testing.assert_allclose(monthly["monthly_yield_poor_year"], np.percentile(expected, 10, axis=0), rtol=1e-12)
    np.testing.assert_allclose(monthly["monthly_yield_low"], 0.8 * expected.mean(axis=0), rtol=1e-12)


def test_poor_year_is_numpys_quantile_over_the_years_there_are() -> None:
    random = np.random.default_rng(5)
    values = random.uniform(0.5, 6.0, (7 * 365, 3))
    values[400:470, 1] = np.nan  # some months of one year
    values[:, 2] = np.nan
    monthly = aggregate(daily(values, calendar="noleap"))
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
    monthly = aggregate(daily(values))
    assert float(monthly["worst_month"][0]) == 3
    assert float(monthly["worst_month_yield"][0]) == pytest.approx(2.9)


def test_some_missing_days_do_not_shrink_the_month() -> None:
    values = np.full((365, 1), 4.0)
    values[2:6] = np.nan
    monthly = aggregate(daily(values))
    assert float(monthly["monthly_yield"][0, 0]) == pytest.approx(4.0 * 31)
    assert float(monthly["days_used"][0, 0]) == 27
    assert float(monthly["days_expected"][0, 0]) == 31


def test_too_few_days_make_the_month_missing_and_never_zero() -> None:
    values = np.full((365, 2), 4.0)
    values[31:45, 0] = np.nan  # 14 of February's 28 days
    values[:, 1] = np.nan
    monthly = aggregate(daily(values))
    assert np.isnan(monthly["monthly_yield"][1, 0])
    assert np.isfinite(monthly["monthly_yield"][2, 0])
    assert np.isnan(monthly["annual_yield"][0])
    assert np.isnan(monthly["worst_month"][0])
    assert np.isnan(monthly["monthly_yield"].sel(site="s1")).all()
    assert int(monthly["days_used"].sel(site="s1").sum()) == 0


def test_a_part_month_at_the_edge_is_missing() -> None:
    monthly = aggregate(daily(np.full((60, 1), 2.0), start="2001-01-20"))
    by_year = monthly["monthly_yield_by_year"].isel(year=0, site=0).to_numpy()
    assert np.isnan(by_year[0])
    assert by_year[1] == pytest.approx(56.0)


@pytest.mark.parametrize(
    ("calendar", "days", "february"), [("noleap", 365, 28), ("all_leap", 366, 29), ("360_day", 360, 30)]
)
def test_calendars_keep_their_own_months(calendar: str, days: int, february: int) -> None:
    monthly = aggregate(daily(np.ones((days, 1)), start="2004-01-01", calendar=calendar))
    assert float(monthly["monthly_yield"].sel(month=2)[0]) == february
    assert float(monthly["annual_yield"][0]) == days


def test_typical_year_has_no_poor_year() -> None:
    monthly = aggregate(daily(np.ones((365, 1)), record="typical-year"))
    assert "monthly_yield_poor_year" not in monthly
    assert monthly["year"].to_numpy().tolist() == [0]
