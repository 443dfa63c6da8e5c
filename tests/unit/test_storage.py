"""Storage: the tank on the daily series, the sequent peak, rain on the covers."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.decisions.storage import day_series, rain_caught, run_tank, sequent_peak, tank_of_days
from stillfield.errors import DecisionError


def by_hand(yields, need, area, tank, start=None):
    """The rule of the day in plain Python: days met, litres supplied, litres left."""
    stored, met, supplied = tank if start is None else start, 0, 0.0
    for y, d in zip(yields, need, strict=True):
        if np.isnan(y) or np.isnan(d):
            continue
        there = stored + area * y
        met += there >= d - 1e-9
        supplied += min(there, d)
        stored = min(tank, max(0.0, there - d))
    return met, supplied, stored


def weather(days=400, places=3, seed=3):
    rng = np.random.default_rng(seed)
    yields = rng.gamma(3.0, 1.0, (days, places))
    yields[rng.random(yields.shape) < 0.05] = 0.0
    yields[rng.random(yields.shape) < 0.05] = np.nan
    return yields, rng.uniform(10.0, 30.0, (days, places))


@pytest.mark.parametrize("carried_over", [False, True])
def test_every_tank_runs_as_by_hand(carried_over):
    yields, need = weather()
    areas, tanks = np.array([[3.0, 8.0], [6.0, 6.0], [20.0, 0.5]]), np.array([0.0, 55.0])
    run = run_tank(day_series(yields, need), area_m2=areas, tank_l=tanks, carried_over=carried_over)
    for place in range(3):
        known = np.isfinite(yields[:, place])
        for column, tank in enumerate(tanks):
            one = yields[:, place], need[:, place], areas[place, column], tank
            start = by_hand(*(values[-365:] for values in one[:2]), *one[2:])[2] if carried_over else None
            met, supplied, left = by_hand(*one, start=start)
            assert run.share_of_days[place, column] == pytest.approx(met / known.sum(), rel=1e-12)
            assert run.share_of_volume[place, column] == pytest.approx(supplied / need[known, place].sum(), rel=1e-9)
            assert run.end_l[place, column] == pytest.approx(left, abs=1e-9)


def test_carried_over_means_one_year_from_a_full_tank():
    """A tank of 500 L that loses 1 L a day starts with 500 - 365 L and lasts 135 of the 800 days."""
    series = day_series(np.full((800, 1), 9.0), 10.0)
    assert run_tank(series, area_m2=1.0, tank_l=500.0).share_of_days == pytest.approx(500 / 800)
    assert run_tank(series, area_m2=1.0, tank_l=500.0, carried_over=True).share_of_days == pytest.approx(135 / 800)


def test_missing_days_stand_still_and_are_not_counted():
    gappy = day_series([[3.0], [np.nan], [np.nan], [1.0]], 10.0)
    dense = day_series([[3.0], [1.0]], 10.0)
    assert gappy.days.tolist() == [2]
    for tank in (0.0, 5.0, 20.0):
        assert run_tank(gappy, area_m2=4.0, tank_l=tank).share_of_days == run_tank(
            dense, area_m2=4.0, tank_l=tank
        ).share_of_days
    assert sequent_peak(gappy, area_m2=4.0) == sequent_peak(dense, area_m2=4.0)


def test_a_record_without_days_says_nothing():
    series = day_series(np.full((40, 1), np.nan), 10.0)
    run = run_tank(series, area_m2=4.0, tank_l=5.0)
    assert np.isnan(run.share_of_days).all()
    assert np.isnan(run.share_of_volume).all()
    assert np.isnan(sequent_peak(series, area_m2=4.0)).all()
    assert tank_of_days(series, [3.0]) == 0.0


def test_days_without_need_are_met():
    run = run_tank(day_series([[0.0], [0.0]], 0.0), area_m2=1.0, tank_l=0.0)
    assert (run.share_of_days, run.share_of_volume) == (1.0, 1.0)


def test_published_table_of_the_sequent_peak():
    """Flows 1 3 3 5 8 6 7 2 1 and a release of 3.5 need 7.5, run twice over.

    Loucks & van Beek, Water Resource Systems Planning and Management, sequent peak table; quoted from memory.
    The deficits by hand: 2.5 3 3.5 2 0 0 0 1.5 4 | 6.5 7 7.5 6 1.5 0 0 1.5 4.
    """
    series = day_series(np.array([[1.0], [3.0], [3.0], [5.0], [8.0], [6.0], [7.0], [2.0], [1.0]]), 3.5)
    assert sequent_peak(series, area_m2=1.0, cyclic=True) == pytest.approx(7.5)
    assert sequent_peak(series, area_m2=1.0) == pytest.approx(4.0)


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.integers(0, 8), min_size=3, max_size=25),
    st.lists(st.integers(1, 6), min_size=25, max_size=25),
)
def test_sequent_peak_is_the_smallest_tank_that_a_search_finds(yields, need):
    """Whole litres, so that the search over all tanks is exact."""
    y, d = [float(value) for value in yields], [float(value) for value in need[: len(yields)]]
    found = float(sequent_peak(day_series(np.array([y]).T, np.array([d]).T), area_m2=1.0)[0, 0])
    searched = next(tank for tank in range(1000) if by_hand(y, d, 1.0, float(tank))[0] == len(y))
    assert found == searched


@settings(max_examples=30, deadline=None)
@given(st.lists(st.integers(0, 8), min_size=3, max_size=15), st.integers(1, 5))
def test_cyclic_peak_is_the_smallest_tank_that_lasts_for_ever(yields, need):
    y, d = [float(value) for value in yields], [float(need)] * len(yields)
    found = float(sequent_peak(day_series(np.array([y]).T, float(need)), area_m2=1.0, cyclic=True)[0, 0])
    if sum(y) < sum(d):
        assert np.isnan(found)
        return
    rounds = 8
    lasting = [tank for tank in range(200) if by_hand(y * rounds, d * rounds, 1.0, float(tank))[0] == rounds * len(y)]
    assert found == lasting[0]


def test_sequent_peak_of_many_places_and_areas_is_that_of_each():
    yields, need = weather()
    areas = np.array([[4.0, 9.0], [5.0, 7.0], [10.0, 30.0]])
    together = sequent_peak(day_series(yields, need), area_m2=areas)
    for place in range(3):
        alone = day_series(yields[:, [place]], need[:, [place]])
        for column in range(2):
            assert together[place, column] == sequent_peak(alone, area_m2=areas[place, column])
            full = run_tank(alone, area_m2=areas[place, column], tank_l=together[place, column])
            assert full.share_of_days == 1.0
            if together[place, column] > 0.1:
                less = run_tank(alone, area_m2=areas[place, column], tank_l=together[place, column] - 0.01)
                assert less.share_of_days < 1.0


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.floats(0.0, 8.0), min_size=2, max_size=30), st.floats(0.5, 20.0), st.floats(0.0, 60.0),
    st.floats(1.0, 2.0), st.floats(0.0, 30.0), st.booleans(),
)
def test_more_area_or_tank_never_serves_less(yields, area, tank, times, more, carried_over):
    series = day_series(np.array([yields]).T, 15.0)
    base = run_tank(series, area_m2=area, tank_l=tank, carried_over=carried_over)
    for larger in ({"area_m2": area * times, "tank_l": tank}, {"area_m2": area, "tank_l": tank + more}):
        run = run_tank(series, **larger, carried_over=carried_over)
        assert run.share_of_days >= base.share_of_days
        assert run.share_of_volume >= base.share_of_volume - 1e-9
        assert run.end_l >= base.end_l - 1e-9


def test_tank_of_days_takes_the_mean_of_a_seasonal_need():
    need = np.repeat([[10.0], [30.0]], [100, 300], axis=0)
    assert tank_of_days(day_series(np.ones((400, 2)), np.hstack([need, 2 * need])), [0.0, 2.0]).tolist() == [
        [0.0, 50.0], [0.0, 100.0],
    ]


def test_rain_is_litres_per_square_metre_of_basin_after_the_first_flush():
    """20 mm on 1.2 m2 of cover per m2 of basin, 1 mm to waste, 0.8 of the rest: 18.24 L."""
    caught = rain_caught([0.0, 1.0, 20.0, np.nan], cover_m2_per_basin_m2=1.2)
    assert caught[:3].tolist() == pytest.approx([0.0, 0.0, 18.24])
    assert np.isnan(caught[3])
    dry = day_series([[0.0], [0.0]], 9.0)
    wet = day_series(np.array([[0.0], [0.0]]) + rain_caught([[20.0], [0.0]], cover_m2_per_basin_m2=1.2), 9.0)
    assert run_tank(dry, area_m2=1.0, tank_l=9.0).share_of_days == 0.5
    assert run_tank(wet, area_m2=1.0, tank_l=9.0).share_of_days == 1.0


@pytest.mark.parametrize(
    "arguments", [{"runoff_coefficient": 1.1}, {"first_flush_mm": -1.0}, {"cover_m2_per_basin_m2": -1.0}]
)
def test_rain_that_cannot_be_is_refused(arguments):
    with pytest.raises(DecisionError, match="rain on the covers"):
        rain_caught([1.0], **{"cover_m2_per_basin_m2": 1.0, **arguments})


@pytest.mark.parametrize(
    ("yields", "need"),
    [([[-1.0]], 1.0), ([[1.0]], -1.0), ([1.0, 2.0], 1.0), ([[1.0]], [1.0]), (np.ones((0, 2)), 1.0)],
)
def test_series_that_cannot_be_are_refused(yields, need):
    with pytest.raises(DecisionError, match="daily yield or need"):
        day_series(yields, need)


@pytest.mark.parametrize(("area", "tank"), [(-1.0, 1.0), (np.nan, 1.0), (1.0, -1.0), (1.0, np.inf)])
def test_areas_and_tanks_that_cannot_be_are_refused(area, tank):
    with pytest.raises(DecisionError, match="area or tank"):
        run_tank(day_series([[1.0]], 1.0), area_m2=area, tank_l=tank)
