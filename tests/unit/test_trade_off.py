"""Trade-off: smallest areas against closed forms and searches, and the point to build."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.decisions.storage import day_series, run_tank, sequent_peak
from stillfield.decisions.trade_off import (
    DRY_SPELL,
    NO_DAYS,
    NO_YIELD,
    cheapest_point,
    curve_of,
    knee_point,
    smallest_areas,
)
from stillfield.errors import DecisionError

TOLERANCE = 1e-3


def weather(days=400, places=4, seed=3):
    rng = np.random.default_rng(seed)
    season = 1.0 + 0.5 * np.sin(2.0 * np.pi * np.arange(days) / 365.0)
    yields = rng.gamma(3.0, 1.0, (days, places)) * season[:, None]
    yields[rng.random(yields.shape) < 0.04] = np.nan
    return yields, np.broadcast_to(rng.uniform(10.0, 30.0, places), (days, places))


def test_constant_days_have_a_closed_form():
    """All n days met from a full tank: n d = A n y + K, so A = (d - K / n) / y; without a tank A = d / y."""
    n, y, d = 200, 3.2, 24.0
    found = smallest_areas(day_series(np.full((n, 1), y), d), tank_l=[0.0, 48.0, 480.0], share_of_days=1.0)
    assert found.area_m2[0] == pytest.approx([(d - tank / n) / y for tank in (0.0, 48.0, 480.0)], rel=TOLERANCE)
    assert found.share_of_days[0].tolist() == [1.0, 1.0, 1.0]
    # In the long run no tank makes constant days any larger: the first filling is told apart.
    assert (found.share_of_days_carried_over[0, 1:] < 1.0).all()
    lasting = smallest_areas(
        day_series(np.full((n, 1), y), d), tank_l=[0.0, 48.0], share_of_days=1.0, carried_over=True
    )
    assert lasting.area_m2[0, 0] == pytest.approx(d / y, rel=TOLERANCE)


def test_without_a_tank_the_area_is_a_percentile_of_need_by_yield():
    """95 % of days met without storage: the 95th percentile of d / y, taken upward on the ranks (numpy)."""
    yields, need = weather()
    found = smallest_areas(day_series(yields, need), tank_l=[0.0])
    for place in range(4):
        ratio = (need / yields)[:, place]
        ratio = ratio[np.isfinite(ratio)]
        expected = np.quantile(ratio, 0.95, method="inverted_cdf")
        assert found.area_m2[place, 0] == pytest.approx(expected, rel=TOLERANCE)


@pytest.mark.parametrize("carried_over", [False, True])
@pytest.mark.parametrize("share", [0.8, 0.95, 1.0])
def test_the_area_meets_the_share_and_a_smaller_one_does_not(share, carried_over):
    series = day_series(*weather())
    tanks = np.array([0.0, 15.0, 60.0, 200.0])
    found = smallest_areas(series, tank_l=tanks, share_of_days=share, carried_over=carried_over)
    assert (found.share_of_days >= share - 1e-12).all()
    smaller = run_tank(series, area_m2=found.area_m2 * (1.0 - 1.01 * TOLERANCE), tank_l=tanks,
                       carried_over=carried_over)  # fmt: skip
    assert (smaller.share_of_days < share).all()
    assert (np.diff(found.area_m2, axis=1) <= 0.0).all()
    assert (found.reason == "").all()


def test_full_reliability_agrees_with_the_sequent_peak():
    """At the area found for a tank, the largest cumulative deficit is that tank."""
    series = day_series(*weather())
    tanks = np.array([20.0, 80.0, 300.0])
    found = smallest_areas(series, tank_l=tanks, share_of_days=1.0, tolerance=1e-8)
    assert sequent_peak(series, area_m2=found.area_m2) == pytest.approx(np.broadcast_to(tanks, (4, 3)), rel=1e-4)


def test_a_search_over_a_fine_grid_of_areas_finds_the_same():
    series = day_series(*weather(days=150, places=1))
    grid = np.arange(1.0, 20.0, 0.001)
    for tank in (0.0, 40.0, 120.0):
        share = run_tank(series, area_m2=grid[None, :], tank_l=tank).share_of_days[0]
        found = smallest_areas(series, tank_l=[tank], share_of_days=0.9)
        assert found.area_m2[0, 0] == pytest.approx(grid[np.argmax(share >= 0.9)], rel=2 * TOLERANCE)


def test_no_yield_no_days_and_dry_spells_have_no_area_but_a_reason():
    yields = np.full((100, 4), 3.0)
    yields[:, 0] = np.nan
    yields[:, 1] = 0.0
    yields[40:60, 2] = 0.0
    found = smallest_areas(day_series(yields, 10.0), tank_l=[0.0, 100.0, 200.0], share_of_days=0.95)
    assert found.reason.tolist() == [[NO_DAYS] * 3, [NO_YIELD] * 3, [DRY_SPELL, DRY_SPELL, ""], [""] * 3]
    assert np.array_equal(np.isfinite(found.area_m2), found.reason == "")
    assert np.array_equal(np.isfinite(found.share_of_days), found.reason == "")
    assert found.days.tolist() == [0, 100, 100, 100]
    assert found.days_missing.tolist() == [100, 0, 0, 0]
    # 20 dry days: a tank of 100 L serves 10 of them, so 10 of 100 days fail at any area; 200 L serves all.
    assert found.share_of_days[2, 2] >= 0.95


def test_a_tank_for_the_whole_record_needs_no_area():
    found = smallest_areas(day_series(np.full((10, 1), 2.0), 5.0), tank_l=[49.0, 50.0], share_of_days=1.0)
    assert found.area_m2[0].tolist() == pytest.approx([1.0 / 20.0, 0.0], rel=TOLERANCE)
    assert found.share_of_days_carried_over[0, 1] < 1.0
    assert smallest_areas(day_series(np.ones((10, 1)), 0.0), tank_l=[0.0]).area_m2 == 0.0


def test_faint_days_do_not_blur_the_area():
    """One day of a billionth of a litre opens the search wide; the answer stays within the tolerance."""
    yields = np.full((50, 1), 4.0)
    yields[10:14] = 0.0
    yields[20] = 1e-9
    found = smallest_areas(day_series(yields, 8.0), tank_l=[32.0], share_of_days=1.0)
    # From a full tank, 10 days to the dry spell: it must stay full until then, and fill again in the 6 days after.
    grid = np.arange(0.5, 20.0, 0.001)
    served = run_tank(day_series(yields, 8.0), area_m2=grid[None, :], tank_l=32.0).share_of_days[0] >= 1.0
    assert found.area_m2[0, 0] == pytest.approx(grid[np.argmax(served)], rel=2 * TOLERANCE)


@settings(max_examples=25, deadline=None)
@given(
    st.lists(st.floats(0.1, 8.0), min_size=5, max_size=30), st.floats(0.5, 0.9), st.floats(0.01, 0.1),
    st.booleans(),
)
def test_asking_for_more_days_never_takes_less_area(yields, share, more, carried_over):
    series = day_series(np.array([yields]).T, 12.0)
    areas = [
        smallest_areas(series, tank_l=[0.0, 20.0, 50.0], share_of_days=s, carried_over=carried_over).area_m2
        for s in (share, share + more)
    ]
    assert (areas[1] >= areas[0] * (1.0 - TOLERANCE)).all()
    assert (np.diff(areas[0], axis=1) <= 0.0).all()


def test_places_keep_their_digits_in_any_order_and_company():
    yields, need = weather()
    order = [2, 0, 3, 1]
    tanks = np.array([0.0, 50.0])
    straight = smallest_areas(day_series(yields, need), tank_l=tanks)
    permuted = smallest_areas(day_series(yields[:, order], need[:, order]), tank_l=tanks)
    assert np.array_equal(permuted.area_m2, straight.area_m2[order])
    assert np.array_equal(permuted.share_of_volume, straight.share_of_volume[order])
    alone = smallest_areas(day_series(yields[:, [2]], need[:, [2]]), tank_l=tanks)
    assert np.array_equal(alone.area_m2, straight.area_m2[[2]])


def test_the_cheapest_point_is_that_of_a_search():
    series = day_series(*weather())
    found = smallest_areas(series, tank_l=[0.0, 20.0, 40.0, 80.0, 160.0])
    for per_m2, per_litre in ((60.0, 0.5), (60.0, 5.0), (1.0, 10.0), (60.0, 0.0)):
        chosen = cheapest_point(found, cost_per_m2=per_m2, cost_per_litre=per_litre)
        cost = per_m2 * found.area_m2 + per_litre * found.tank_l
        assert chosen.index.tolist() == cost.argmin(axis=1).tolist()
        assert chosen.cost.tolist() == cost.min(axis=1).tolist()
    assert cheapest_point(found, cost_per_m2=1.0, cost_per_litre=1e6).index.tolist() == [0] * 4


def test_of_equal_costs_the_smaller_tank_is_chosen():
    """Without need every tank goes with no area, and a tank that costs nothing makes them equal."""
    same = smallest_areas(day_series(np.ones((5, 1)), 0.0), tank_l=[0.0, 10.0])
    assert cheapest_point(same, cost_per_m2=60.0, cost_per_litre=0.0).index == 0


def test_the_knee_follows_its_stated_rule():
    series = day_series(*weather())
    found = smallest_areas(series, tank_l=[0.0, 20.0, 40.0, 80.0, 160.0])
    knee = knee_point(found, within=0.2)
    for place in range(4):
        areas = found.area_m2[place]
        expected = next(i for i, area in enumerate(areas) if area <= 1.2 * areas.min())
        assert (knee.index[place], knee.area_m2[place]) == (expected, areas[expected])
    assert "within 20 %" in knee.rule
    assert np.isnan(knee.cost).all()


def test_places_without_an_area_have_no_point():
    yields = np.full((100, 2), 3.0)
    yields[:, 0] = 0.0
    found = smallest_areas(day_series(yields, 10.0), tank_l=[0.0, 10.0])
    for chosen in (knee_point(found), cheapest_point(found, cost_per_m2=1.0, cost_per_litre=1.0)):
        assert chosen.index.tolist() == [-1, 0]
        assert np.isnan(chosen.area_m2).tolist() == [True, False]
        assert np.isnan(chosen.tank_l).tolist() == [True, False]


def test_the_curve_lists_its_points():
    found = smallest_areas(day_series(*weather()), tank_l=[0.0, 50.0])
    curve = curve_of(found, 2)
    assert [point.tank_l for point in curve] == [0.0, 50.0]
    assert [point.area_m2 for point in curve] == found.area_m2[2].tolist()
    assert [point.reason for point in curve] == ["", ""]


@pytest.mark.parametrize(
    "arguments",
    [{"share_of_days": 0.0}, {"share_of_days": 1.1}, {"tolerance": 0.0}, {"tank_l": [5.0, 0.0]},
     {"tank_l": [1.0, 1.0]}],
)
def test_questions_that_cannot_be_are_refused(arguments):
    with pytest.raises(DecisionError):
        smallest_areas(day_series([[1.0]], 1.0), **{"tank_l": [0.0], **arguments})


def test_costs_and_shares_that_cannot_be_are_refused():
    found = smallest_areas(day_series([[1.0]], 1.0), tank_l=[0.0])
    for costs in ((0.0, 1.0), (1.0, -1.0), (np.nan, 1.0)):
        with pytest.raises(DecisionError, match="costs of area and tank"):
            cheapest_point(found, cost_per_m2=costs[0], cost_per_litre=costs[1])
    with pytest.raises(DecisionError, match="share of the knee"):
        knee_point(found, within=-0.1)
