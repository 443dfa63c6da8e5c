"""How far the fitted correlation is from the hourly balance, on real typical years its coefficients never saw.

Truth is the hourly balance, itself tested against independent solvers (test_balance_references.py). The sites are
11 typical years within 45 degrees of the equator that ship with public libraries. Figures are in percent.
"""

from __future__ import annotations

import pytest

from data.fetch import FILES, fetched
from stillfield.api import load_still
from stillfield.evidence.accuracy import accuracy
from stillfield.evidence.sites import DEFAULT_WEATHER, open_sites
from whole_runs import CONFIG

DESIGNS = ("single-slope-glass", "double-slope-glass", "low-cost-film", "deep-basin")
KEPT = ("new", "maintained", "weathered")
DAILY, HOURLY = "daily H, T, u", "hourly"


@pytest.fixture(scope="module")
def found():
    years = [name for name, (package, *_) in FILES.items() if package in ("uwg", "openbes")]
    names = ["tmy_45.000_8.000_2005_2023.csv", *years]
    sites = open_sites([*DEFAULT_WEATHER, *(str(fetched(name)) for name in names)])
    stills = [load_still(CONFIG / "stills" / f"{name}.yaml") for name in DESIGNS]
    return {(one.still, one.condition, one.predictors): one for one in accuracy(sites, stills)}


def test_eleven_sites_are_compared(found):
    assert {one.sites for one in found.values()} == {11}
    assert all(80 <= one.frost_free_months <= 132 for one in found.values())


# What the project claims: measured at most 1.7, 4.1 (deep basin 5.2) and 1.3.
@pytest.mark.parametrize("condition", KEPT)
@pytest.mark.parametrize("still", DESIGNS)
def test_from_daily_sun_warmth_and_wind(found, still, condition):
    one = found[still, condition, DAILY]
    assert one.month_mean <= 2.0
    assert one.month_p95 <= (5.3 if still == "deep-basin" else 4.2)
    assert one.annual_mean <= 1.5


# Measured at most 1.1 (deep basin 1.6) and 1.0: a deep basin remembers several days, the correlation one mean of them.
@pytest.mark.parametrize("condition", KEPT)
@pytest.mark.parametrize("still", DESIGNS)
def test_from_hours(found, still, condition):
    one = found[still, condition, HOURLY]
    assert one.month_mean <= (1.7 if still == "deep-basin" else 1.1)
    assert one.annual_mean <= 1.5


# A neglected still yields little, and what it yields hangs on the hours around noon of clear days, which daily
# values do not show: measured 2.3 to 2.6 on average and 5.9 to 6.5 at the 95th percentile from daily values, but 0.8
# to 1.7 and 1.7 to 4.0 from hours.
@pytest.mark.parametrize("still", DESIGNS)
def test_a_neglected_still_is_known_half_as_well(found, still):
    by_days, by_hours = found[still, "neglected", DAILY], found[still, "neglected", HOURLY]
    assert by_days.month_mean <= 4.0
    assert by_days.month_p95 <= 9.0
    assert by_days.annual_mean <= 3.0
    assert by_hours.month_mean <= 2.0
    assert by_hours.month_p95 <= 4.5


#: Where the aim of 2 % on average and 4 % at the 95th percentile from daily values is missed; measured figures.
MISSED = {
    ("single-slope-glass", "weathered"): "1.6 and 4.1 %",
    ("deep-basin", "maintained"): "1.5 and 4.1 %",
    ("deep-basin", "weathered"): "1.6 and 5.2 %",
    ("single-slope-glass", "neglected"): "2.4 and 6.4 %",
    ("double-slope-glass", "neglected"): "2.4 and 6.3 %",
    ("low-cost-film", "neglected"): "2.3 and 6.4 %",
    ("deep-basin", "neglected"): "2.6 and 5.9 %",
}


def _aim(still, condition):
    missed = MISSED.get((still, condition))
    marks = pytest.mark.xfail(reason=f"measured {missed}", strict=True) if missed else ()
    return pytest.param(still, condition, marks=marks)


@pytest.mark.parametrize(
    ("still", "condition"), [_aim(still, condition) for still in DESIGNS for condition in (*KEPT, "neglected")]
)
def test_the_aim_for_months_from_daily_values(found, still, condition):
    one = found[still, condition, DAILY]
    assert one.month_mean <= 2.0
    assert one.month_p95 <= 4.0


@pytest.mark.xfail(reason="the worst of 11 sites is 3.3 % off in its year; mean 1.2 %", strict=True)
def test_the_aim_for_years_from_daily_values(found):
    assert found["single-slope-glass", "maintained", DAILY].annual_max <= 1.0


@pytest.mark.xfail(reason="the worst of 11 sites is 1.4 % off in its year; mean 0.8 %", strict=True)
def test_the_aim_for_years_from_hours(found):
    assert found["single-slope-glass", "maintained", HOURLY].annual_max <= 0.5
