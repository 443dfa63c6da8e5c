"""The order of places: what it may depend on, what it may not, and what is said of those that are left out."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from decision_samples import STILL, daily, monthly_of, places
from stillfield.decide import Preferences, decide
from stillfield.decisions.cost import Part, StillCost
from stillfield.decisions.need import need_of
from stillfield.decisions.ranking_score import Screen
from stillfield.decisions.ranking_uncertainty import Uncertainty
from stillfield.errors import PlacesError
from stillfield.stages.rank import refuse_blind
from stillfield.stages.size import Wishes

SPOTS = [(10.0, 40.0), (11.0, 40.0), (11.0, 42.0), (11.0, 42.0)]
FEW = Uncertainty(draws=200)


@pytest.fixture(scope="module")
def monthly() -> xr.Dataset:
    return monthly_of(daily((0.9, 1.1, 1.0)))


def decided(monthly, table, *, wishes=None, cost=None, **ways):
    ways.setdefault("uncertainty", None)
    return decide(monthly, table, still=STILL, cost=cost, wishes=wishes, preferences=Preferences(**ways))


def villages() -> pd.DataFrame:
    return places(SPOTS, population=[100.0, 300.0, 50.0, 50.0], feed_salinity_g_kg=[5.0, 9.0, 3.0, 3.0],
                  distance_to_feed_km=[1.0, 2.0, 0.5, 0.5])


def test_the_score_is_the_weighted_mean_of_what_is_known(monthly):
    table = decided(monthly, villages(), weights={"yield": 0.3, "people": 0.3, "salinity": 0.2, "distance": 0.2}).places
    # By hand: each criterion from least to greatest, people by their logarithm; yields 1.8, 3.0, 1.2, 1.2.
    expected = {
        "v1": 1.0,
        "v0": 0.3 * 0.6 / 1.8 + 0.3 * np.log(2) / np.log(6) + 0.2 * 2 / 6 + 0.2 * 0.5 / 1.5,
        "v2": 0.0, "v3": 0.0,
    }
    assert table["name"].tolist() == list(expected)
    np.testing.assert_allclose(table["score"], list(expected.values()), atol=1e-9)
    assert table["rank"].tolist() == [1, 2, 3, 3]


@pytest.mark.parametrize("order", [[3, 1, 0, 2], [2, 3, 0, 1], [3, 2, 1, 0]])
def test_the_order_of_the_input_changes_nothing(monthly, order):
    given = villages()
    shuffled = given.iloc[order].reset_index(drop=True)
    one, two = (decided(monthly, table, uncertainty=FEW, top=2) for table in (given, shuffled))
    pd.testing.assert_frame_equal(one.places, two.places)
    pd.testing.assert_frame_equal(one.months, two.months)
    assert one.notes == two.notes


def test_months_follow_the_order_of_the_places(monthly):
    found = decided(monthly, villages().iloc[[2, 0, 1, 3]].reset_index(drop=True))
    assert found.months["id"].tolist() == np.repeat(found.places["id"].to_numpy(), 12).tolist()


def test_ties_share_rank_interval_and_chance(monthly):
    table = decided(monthly, villages(), uncertainty=FEW, top=3).places.set_index("name")
    columns = ["rank", "rank_low", "rank_high", "score", "top_probability"]
    assert table.loc["v2", columns].tolist() == table.loc["v3", columns].tolist()
    assert table.loc["v2", "top_probability"] == pytest.approx(0.5)
    assert "Cannot be told apart from v3." in table.loc["v2", "remark"]


def test_another_seed_draws_otherwise_and_keeps_the_order(monthly):
    close = villages().assign(population=[290.0, 300.0, 280.0, 260.0], feed_salinity_g_kg=[8.0, 7.0, 9.0, 8.5])
    one, two = (decided(monthly, close, uncertainty=Uncertainty(draws=200, seed=seed), top=2).places
                for seed in (1, 2))
    assert one["id"].tolist() == two["id"].tolist()
    assert one["score"].tolist() == two["score"].tolist()
    assert one["top_probability"].tolist() != two["top_probability"].tolist()
    # 200 draws: a probability is good to four standard errors of sqrt(0.25 / 200), together for both seeds.
    assert np.abs(one["top_probability"] - two["top_probability"]).max() < 4 * np.sqrt(2 * 0.25 / 200)


def test_a_weight_of_zero_is_a_criterion_left_out(monthly):
    with_zero = decided(monthly, villages(), weights={"yield": 1.0, "people": 0.0}, uncertainty=FEW)
    without = decided(monthly, villages(), weights={"yield": 1.0}, uncertainty=FEW)
    pd.testing.assert_frame_equal(with_zero.places, without.places)


def test_only_the_proportions_of_weights_matter(monthly):
    one = decided(monthly, villages(), weights={"yield": 1.0, "people": 1.0}, uncertainty=FEW).places
    two = decided(monthly, villages(), weights={"yield": 400.0, "people": 400.0}, uncertainty=FEW).places
    np.testing.assert_allclose(one["score"], two["score"])
    assert one["rank_high"].tolist() == two["rank_high"].tolist()


def test_a_constant_criterion_decides_nothing_and_says_so(monthly):
    table = places(SPOTS[:2], population=[70.0, 70.0])
    with_people = decided(monthly, table, weights={"yield": 1.0, "people": 5.0})
    without = decided(monthly, table, weights={"yield": 1.0})
    np.testing.assert_allclose(with_people.places["score"], without.places["score"])
    assert any("people: 70 people everywhere, decides nothing" in note for note in with_people.notes)


def test_litres_need_not_be_weighed(monthly):
    found = decided(monthly, villages(), weights={"people": 1.0}, uncertainty=FEW).places
    assert found["name"].tolist() == ["v1", "v0", "v2", "v3"]
    assert found["sizing_yield_l_m2_day"].round(6).tolist() == [3.0, 1.8, 1.2, 1.2]


def test_a_weight_without_its_column_is_told(monthly):
    table = places(SPOTS[:2], population=[70.0, 80.0])
    notes = decided(monthly, table, weights={"yield": 1.0, "cost": 1.0, "salinity": 2.0}).notes
    assert "Weights that count nothing, since no column or price is there for them: cost, salinity." in notes
    cost = StillCost((Part("still", 100.0, 10.0),), 0.05)
    told = decided(monthly, table, weights={"yield": 1.0, "cost": 1.0}, cost=cost).notes
    assert not any("count nothing" in note for note in told)
    assert any("cost (weight 1): less is first" in note for note in told)


def test_two_villages_a_thousandth_apart_cannot_be_told_apart():
    nearly = monthly_of(daily((0.9, 1.1, 1.0), litres=[[4.0, 4.004], [2.0, 8.0]]))
    spots = [(10.0, 40.0), (10.0, 41.0), (11.0, 40.0), (11.0, 41.0)]
    table = decided(nearly, places(spots), weights={"yield": 1.0}, uncertainty=Uncertainty(draws=400)).places
    rows = table.set_index("name")
    for one, other in (("v0", "v1"), ("v1", "v0")):
        assert (rows.loc[one, "rank_low"], rows.loc[one, "rank_high"]) == (2, 3)
        assert f"Cannot be told apart from {other}." in rows.loc[one, "remark"]
    # Twice and half the litres are told apart from them: the model is good to 10 % from place to place.
    assert (rows.loc["v3", "rank_high"], rows.loc["v2", "rank_low"]) == (1, 4)


def test_places_with_other_sizing_months_are_compared_by_what_the_need_asks():
    """v0 gives 2.4 L in January, when 1 is needed; v1 gives 4 L in July, when 2 are: v0 needs the smaller basin."""
    days = daily(litres=[[4.0, 4.0]])
    month = days["time"].dt.month.to_numpy()
    days["daily_yield"][:, 0, 0] = np.where(month == 1, 2.4, 9.0)
    days["daily_yield"][:, 0, 1] = 4.0
    wishes = Wishes(need_of(1.0, month_factors=[1.0] * 6 + [2.0] + [1.0] * 5))
    only_years = Uncertainty(draws=100, model=False, condition=False, weights=False)
    table = decided(monthly_of(days), places([(10.0, 40.0), (10.0, 41.0)]), wishes=wishes, weights={"yield": 1.0},
                    uncertainty=only_years).places
    assert table["name"].tolist() == ["v0", "v1"]
    assert table["sizing_month"].tolist() == [1, 7]
    assert table["area_per_person_m2"].round(4).tolist() == [0.4167, 0.5]
    # Nothing varies but years that are alike, so the draws must tell the order of the figures.
    assert (table["rank_low"] == table["rank"]).all()
    assert (table["rank_high"] == table["rank"]).all()


def test_a_screen_leaves_out_with_the_reason_and_ranks_the_rest(monthly):
    screen = Screen("population", "at least", 60.0, "too few people")
    found = decided(monthly, villages(), screens=(screen,), uncertainty=FEW)
    assert found.places["name"].tolist() == ["v1", "v0", "v2", "v3"]
    assert found.places["rank"].tolist() == [1, 2, pd.NA, pd.NA]
    assert found.places["reason"].tolist() == ["", "", *["too few people (population 50, at least 60 wanted)"] * 2]
    assert found.places["remark"].iloc[2] == "Left out: too few people (population 50, at least 60 wanted)."
    assert found.places["area_per_person_m2"].notna().all()
    assert any(note == "2 places are ranked, 2 left out (too few people: 2)." for note in found.notes)


def test_all_places_screened_out_is_readable(monthly):
    screens = (Screen("population", "at least", 1000.0, "too few people"),
               Screen("distance_to_feed_km", "at most", 1.5, "too far from feed"))
    found = decided(monthly, villages(), screens=screens, uncertainty=FEW)
    assert found.places["rank"].isna().all()
    assert len(found.places) == 4
    assert ("No place is left to rank: all 4 are left out (too few people: 4, too far from feed: 1)." in found.notes)
    both = found.places.set_index("name").loc["v1", "reason"]
    assert both == ("too few people (population 300, at least 1000 wanted); "
                    "too far from feed (distance_to_feed_km 2, at most 1.5 wanted)")


def test_a_screen_on_a_column_that_is_not_there_is_refused(monthly):
    with pytest.raises(PlacesError, match="a screen reads a column that is not there"):
        decided(monthly, villages(), screens=(Screen("cost_per_litre", "at most", 0.1, "too dear"),))


@pytest.mark.parametrize("weights", [{"yield": 0.0}, {"yield": -1.0, "people": 2.0}, {"beauty": 1.0}])
def test_unusable_weights_are_refused(monthly, weights):
    with pytest.raises(PlacesError, match="ranking weights are unusable"):
        decided(monthly, places(SPOTS[:1]), weights=weights)


def test_weights_of_which_nothing_is_known_are_refused(monthly):
    with pytest.raises(PlacesError, match="nothing is known of the criteria that have a weight"):
        decided(monthly, places(SPOTS[:1]), weights={"salinity": 1.0})


@pytest.mark.parametrize(("weights", "screen", "words"), [
    ({"salinity": 1.0}, None, "nothing is known of the criteria that have a weight"),
    ({"cost": 1.0, "yield": 0.0}, None, "nothing is known of the criteria that have a weight"),
    ({"yield": 1.0}, Screen("cost_per_litre", "at most", 0.1, "dear"), "wanted prices in the still file"),
    ({"yield": 1.0}, Screen("elevation_m", "at most", 0.1, "high"), "got elevation_m; wanted a column of the places"),
])
def test_what_cannot_be_weighed_or_screened_is_refused_before_anything_is_computed(weights, screen, words):
    screens = () if screen is None else (screen,)
    with pytest.raises(PlacesError, match=words):
        refuse_blind(places(SPOTS, population=[1.0] * 4), weights, screens, priced=False)
    refuse_blind(villages().assign(elevation_m=3.0), weights, screens, priced=True)


def test_a_typical_year_is_ranked_without_years():
    found = decided(monthly_of(daily(record="typical-year")), villages(), uncertainty=FEW)
    assert found.places["name"].tolist()[0] == "v1"
    assert found.places["rank_low"].notna().all()
    assert "reliability" not in found.places


@pytest.mark.parametrize(("calendar", "january", "february"), [("360_day", 30, 30), ("noleap", 31, 28)])
def test_months_of_other_calendars_have_their_own_days(calendar, january, february):
    time = xr.date_range("2001-01-01", periods=2 * (360 if calendar == "360_day" else 365), calendar=calendar,
                         use_cftime=True)
    data = {"daily_yield": (("time", "latitude", "longitude"), np.full((time.size, 1, 1), 2.0))}
    days = xr.Dataset(data, {"time": time, "latitude": [10.0], "longitude": [40.0]}, {"record": "series"})
    found = decided(monthly_of(days), places(SPOTS[:1]), wishes=Wishes(need_of(3.0)))
    row = found.places.iloc[0]
    assert row["yield_jan_l_m2_month"] == pytest.approx(2.0 * january)
    assert row["yield_feb_l_m2_month"] == pytest.approx(2.0 * february)
    assert row["area_per_person_m2"] == pytest.approx(1.5)
    assert row["sizing_yield_p90_l_m2_day"] == pytest.approx(2.0)
    np.testing.assert_allclose(found.months["share_of_need_at_sized_area"], 1.0)
