"""Reliability: percentiles over years, the sizing month, the longest poor spell."""

from __future__ import annotations

from itertools import groupby

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.decisions.reliability import (
    MONTH_MISSING,
    NO_YIELD,
    longest_spell,
    reached_words,
    reached_yields,
    sizing_month,
    spell_below_month_mean,
    spell_below_need,
    year_totals,
    years_warning,
)
from stillfield.errors import DecisionError

LEVELS = (("p50", 0.5), ("p75", 0.25), ("p90", 0.1))


def test_percentiles_are_numpys_on_the_raw_years():
    """Every series by itself against numpy.quantile of its valid years."""
    rng = np.random.default_rng(20)
    by_year = rng.gamma(20.0, 5.0, (23, 12, 5))
    by_year[rng.random(by_year.shape) < 0.3] = np.nan
    found = reached_yields(by_year)
    for month in range(12):
        for cell in range(5):
            raw = by_year[:, month, cell]
            raw = raw[np.isfinite(raw)]
            assert found.years[month, cell] == raw.size
            for name, share in LEVELS:
                assert getattr(found, name)[month, cell] == pytest.approx(np.quantile(raw, share), rel=1e-12)


def test_p90_is_the_poor_end_and_reached_in_nine_of_ten_years():
    years = np.arange(1.0, 41.0)
    found = reached_yields(years)
    assert found.p90 < found.p75 < found.p50
    assert (years >= found.p90).mean() == 0.9
    assert (years >= found.p75).mean() == 0.75
    assert (years >= found.p50).mean() == 0.5


def test_p90_of_the_year_is_not_the_sum_of_the_months():
    """Two months that are poor in turn: every year is alike, no month is."""
    monthly = np.full((10, 12), 100.0)
    monthly[:5, 0], monthly[5:, 1] = 20.0, 20.0
    assert reached_yields(year_totals(monthly)).p90 == 1120.0
    assert reached_yields(monthly).p90.sum() == pytest.approx(1040.0)


def test_a_year_without_a_month_is_no_year():
    monthly = np.full((3, 12, 2), 10.0)
    monthly[1, 4, 0] = np.nan
    totals = year_totals(monthly)
    assert np.isnan(totals[1, 0])
    assert totals[1, 1] == 120.0
    assert reached_yields(totals).years.tolist() == [2, 3]
    with pytest.raises(DecisionError, match="not months of years"):
        year_totals(np.ones((3, 11)))


def test_one_year_and_no_year_say_nothing():
    by_year = np.array([[5.0, np.nan, 5.0], [np.nan, np.nan, 7.0]])
    found = reached_yields(by_year)
    assert found.years.tolist() == [1, 0, 2]
    assert np.isnan(found.p90).tolist() == [True, True, False]
    assert np.isnan(found.p50[1])
    without_years = reached_yields(np.ones((0, 12)))
    assert np.isnan(without_years.p50).all()
    assert without_years.years.tolist() == [0] * 12


def test_a_typical_year_is_refused():
    with pytest.raises(DecisionError, match="typical year holds no poor and good years"):
        reached_yields(np.ones((1, 12)), typical=True)


def test_words_carry_the_years():
    assert reached_words("P90", 8) == "reached in 9 of 10 years; 8 years of record"
    assert reached_words("P75", 30) == "reached in 3 of 4 years; 30 years of record"
    assert reached_words("P50", 1).startswith("not known: 1 year of record")
    with pytest.raises(DecisionError, match="no such share"):
        reached_words("P95", 30)


def test_short_records_are_warned_of():
    """The chance by simulation: n independent years, none of them in the poorest tenth."""
    rng = np.random.default_rng(5)
    none_poor = (rng.random((200_000, 6)) > 0.1).all(axis=1).mean()
    told = years_warning(6)
    assert told is not None
    assert f"{round(100 * none_poor)} %" in told
    assert years_warning(10) is None
    assert "cannot tell" in str(years_warning(1))
    assert "no year" in str(years_warning(0))


def test_seasonal_need_moves_the_sizing_month_off_the_least_yield():
    yields = np.array([2.0, 2.5, 3.2, 4.0, 4.6, 5.0, 5.1, 4.9, 4.2, 3.3, 2.4, 1.9])
    need = np.full(12, 30.0)
    flat = sizing_month(need, yields)
    assert (flat.month, flat.least_yield_month) == (12, 12)
    assert flat.area_m2 == pytest.approx(30.0 / 1.9)
    need[5:8] *= 3.0
    hot = sizing_month(need, yields)
    assert (hot.month, hot.least_yield_month) == (8, 12)
    assert hot.area_m2 == pytest.approx(90.0 / 4.9)


def test_the_size_of_the_sizing_month_meets_every_month_and_no_smaller_one_does():
    rng = np.random.default_rng(8)
    need, yields = rng.uniform(5.0, 50.0, (12, 200)), rng.uniform(0.5, 6.0, (12, 200))
    found = sizing_month(need, yields)
    assert (found.area_m2 * yields >= need * (1.0 - 1e-12)).all()
    assert ((found.area_m2 * (1.0 - 1e-6) * yields < need).any(axis=0)).all()
    by_hand = [max(range(12), key=lambda m, p=place: need[m, p] / yields[m, p]) + 1 for place in range(200)]
    assert found.month.tolist() == by_hand


def test_ties_go_to_the_earlier_month():
    """Need 0.3 = 0.1 * 3 differs in the last digit; it is a tie all the same."""
    need = np.array([1.0, 0.1 * 3, 0.3, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0])
    yields = np.full(12, 10.0)
    yields[1:3] = 0.5
    assert sizing_month(need, yields).month == 2
    assert sizing_month(need[[0, 2, 1, *range(3, 12)]], yields).month == 2
    assert sizing_month(np.ones(12), np.ones(12)).month == 1


def test_missing_months_and_barren_months_have_no_size_but_a_reason():
    yields = np.full((12, 4), 3.0)
    yields[2, 1] = np.nan
    yields[0, 2:] = 0.0
    need = np.full((12, 4), 6.0)
    need[0, 3] = 0.0
    found = sizing_month(need, yields)
    assert found.month.tolist() == [1, 0, 0, 2]
    assert found.area_m2[[0, 3]].tolist() == [2.0, 2.0]
    assert np.isnan(found.area_m2[1:3]).all()
    assert found.reason.tolist() == ["", MONTH_MISSING, NO_YIELD, ""]
    assert found.least_yield_month.tolist() == [1, 0, 1, 1]
    assert sizing_month(np.full((12, 1), 6.0), np.full((12, 2), np.nan)).reason.tolist() == [MONTH_MISSING] * 2


def test_places_share_a_need_or_have_their_own():
    yields = np.random.default_rng(1).uniform(1.0, 5.0, (12, 3))
    together = sizing_month(np.full((12, 1), 10.0), yields)
    assert together.area_m2 == pytest.approx(10.0 / yields.min(axis=0))


@pytest.mark.parametrize("need", [np.ones(11), -np.ones(12)])
def test_needs_that_cannot_be_are_refused(need):
    with pytest.raises(DecisionError, match="need or yield of the months"):
        sizing_month(need, np.ones(need.size))


def run_by_hand(flags: list[bool]) -> tuple[int, int]:
    longest, start, day = 0, -1, 0
    for value, run in groupby(flags):
        length = len(list(run))
        if value and length > longest:
            longest, start = length, day
        day += length
    return longest, start


@settings(max_examples=60, deadline=None)
@given(st.lists(st.sampled_from(["poor", "good", "missing"]), min_size=1, max_size=40))
def test_longest_spell_is_that_of_a_walk_by_hand(days):
    poor, known = np.array([day == "poor" for day in days]), np.array([day != "missing" for day in days])
    found = longest_spell(poor[:, None], known[:, None])
    assert (found.days[0], found.start[0]) == run_by_hand([day == "poor" for day in days])
    assert found.days_at_most[0] == run_by_hand([day != "good" for day in days])[0]
    assert found.days_missing[0] == days.count("missing")


def test_spell_below_need_knows_area_share_and_places():
    daily = np.array([[4.0, np.nan], [1.0, np.nan], [1.0, np.nan], [1.5, np.nan], [4.0, np.nan]])
    found = spell_below_need(daily, np.full((5, 1), 30.0), area_m2=np.array([10.0, 10.0]))
    assert (found.days.tolist(), found.start.tolist()) == ([2, 0], [1, -1])
    assert found.days_at_most.tolist() == [2, 5]
    assert spell_below_need(daily[:, 0], 30.0, area_m2=10.0, share=0.6).days == 3
    assert spell_below_need(daily[:, 0], 30.0, area_m2=100.0).days == 0


def test_spell_below_the_mean_takes_each_day_by_its_own_month():
    """A winter of steady sun is no poor spell, a week below its own month's mean is."""
    month = np.repeat([1, 7], 30)
    daily = np.where(month == 1, 2.0, 6.0)
    assert spell_below_month_mean(daily, month).days == 0
    daily[40:47] = 5.0
    daily[43] = np.nan
    found = spell_below_month_mean(daily, month)
    assert (int(found.days), int(found.start), int(found.days_at_most)) == (3, 40, 7)
    # Days all alike are not below their mean, though the mean of 0.1 taken in sums is a little off.
    alike = np.concatenate([np.full((60, 1), value) for value in (0.1, 0.7, 1.1, 2.3)], axis=1)
    assert spell_below_month_mean(alike, month).days.tolist() == [0, 0, 0, 0]
    empty = spell_below_month_mean(np.full((60, 2), np.nan), month)
    assert empty.days.tolist() == [0, 0]
    assert empty.days_at_most.tolist() == [60, 60]
