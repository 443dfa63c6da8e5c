"""Ranking of places: scores by hand, screens, ties, reasons in words, no trace of the order of the input."""

from __future__ import annotations

from dataclasses import replace
from itertools import permutations

import numpy as np
import pytest

from stillfield.decisions.ranking import PlaceTable, Ranking, rank_places
from stillfield.decisions.ranking_cells import cells_along_rank, rank_cells
from stillfield.decisions.ranking_score import Criterion, Screen, scale_values, scales_used, shared_ranks
from stillfield.decisions.ranking_uncertainty import (
    MonthlyYields,
    Uncertainty,
    yield_draws,
)
from stillfield.errors import PlacesError
from stillfield.vocabulary import WATER_CAUTION

DAYS = np.array([31.0, 28.25, 31.0, 30.0, 31.0, 30.0, 31.0, 31.0, 30.0, 31.0, 30.0, 31.0])


def table(**columns: list[float]) -> PlaceTable:
    count = len(next(iter(columns.values())))
    ids = tuple(f"v{number}" for number in range(count))
    return PlaceTable(ids, tuple(f"Village {number}" for number in range(count)),
                      {name: np.array(values, dtype=float) for name, values in columns.items()})


def ranks(ranking: Ranking) -> list[int | None]:
    return [place.rank for place in ranking.places]


def scores(ranking: Ranking) -> list[float | None]:
    return [place.score for place in ranking.places]


def monthly(per_day: np.ndarray) -> np.ndarray:
    """Litres of each month from litres per day (year, place), the same all year."""
    return per_day[:, np.newaxis, :] * DAYS[:, np.newaxis]


# Scores and ranks without chance


def test_score_is_the_weighted_mean_worked_by_hand() -> None:
    places = table(litres=[2.0, 3.0, 4.0], people=[10.0, 1000.0, 100.0], km=[1.0, 5.0, 3.0])
    criteria = [
        Criterion("yield", "litres", weight=3.0), Criterion("people", "people", weight=2.0, scale="log"),
        Criterion("distance", "km", more_is_first=False, weight=1.0, limits=(0.0, 10.0)),
    ]
    ranking = rank_places(places, criteria)
    # (3 x 0 + 2 x 0 + 0.9) / 6, (3 x 0.5 + 2 x 1 + 0.5) / 6, (3 x 1 + 2 x 0.5 + 0.7) / 6
    assert scores(ranking) == pytest.approx([0.9 / 6, 4.0 / 6, 4.7 / 6])
    assert ranks(ranking) == [3, 2, 1]
    assert ranking.order == (2, 1, 0)
    assert "linear from 0 to 10 (as stated)" in ranking.scales[2].words
    assert "logarithmic from 10 to 1000 (the least and the greatest found)" in ranking.scales[1].words


def test_values_beyond_stated_limits_count_as_the_ends() -> None:
    scaled = scale_values(np.array([-5.0, 0.0, 5.0, 20.0]), Criterion("a", "a", limits=(0.0, 10.0)))
    assert scaled.score.tolist() == [0.0, 0.0, 0.5, 1.0]


def test_nobody_and_infinite_cost_stand_at_the_end_of_the_scale() -> None:
    people = scale_values(np.array([0.0, 10.0, 1000.0]), Criterion("people", "n", scale="log"))
    assert people.score.tolist() == [0.0, 0.0, 1.0]
    assert scale_values(np.array([0.0, 100.0]), Criterion("people", "n", scale="log")).score.tolist() == [0.0, 1.0]
    cost = scale_values(np.array([np.inf, 1.0, 2.0]), Criterion("cost", "c", more_is_first=False))
    assert cost.score.tolist() == [0.0, 1.0, 0.0]


def test_a_narrow_criterion_counts_in_proportion_and_a_constant_one_not_at_all() -> None:
    # 3.8 to 4.0 is a span of 5 % of 4, a quarter of the 20 % at which a criterion counts in full.
    places = table(litres=[4.0, 3.8], people=[100.0, 200.0], salt=[7.0, 7.0])
    criteria = [Criterion("yield", "litres"), Criterion("people", "people"), Criterion("salt", "salt", weight=9.0)]
    ranking = rank_places(places, criteria)
    assert scores(ranking) == pytest.approx([0.25 / 1.25, 1.0 / 1.25])
    assert scores(ranking) == pytest.approx(scores(rank_places(places, criteria[:2])))
    assert "counts 0.25 of its weight" in ranking.scales[0].words
    assert ranking.scales[2].words == "salt: 7 everywhere, decides nothing"
    stretched = rank_places(places, [replace(criteria[0], full_weight_span=0.0), criteria[1]])
    assert scores(stretched) == pytest.approx([0.5, 0.5])


def test_zero_weight_leaves_a_criterion_out() -> None:
    places = table(litres=[4.0, 2.0, 3.0], people=[100.0, 900.0, 500.0])
    with_zero = rank_places(places, [Criterion("yield", "litres"), Criterion("people", "people", weight=0.0)])
    assert scores(with_zero) == scores(rank_places(places, [Criterion("yield", "litres")]))
    assert with_zero.scales[1].words == "people: left out (weight 0)"
    assert {driver.criterion for place in with_zero.places for driver in place.drivers} == {"yield"}


def test_weight_of_a_missing_value_goes_to_the_others_and_is_told() -> None:
    places = table(litres=[4.0, 2.0, 3.0], people=[np.nan, 900.0, 100.0], km=[1.0, 0.0, 2.0])
    criteria = [Criterion(*each) for each in (("yield", "litres"), ("people", "people"), ("distance", "km"))]
    ranking = rank_places(places, criteria)
    assert scores(ranking) == pytest.approx([(1.0 + 0.5) / 2, (0.0 + 1.0 + 0.0) / 3, (0.5 + 0.0 + 1.0) / 3])
    assert ranking.places[0].missing == ("people",)
    assert "People is not known; the weight went to the other criteria." in ranking.places[0].words


def test_a_place_of_which_nothing_is_known_is_left_out_with_the_reason() -> None:
    ranking = rank_places(table(litres=[4.0, np.nan, 3.0]), [Criterion("yield", "litres")])
    assert ranks(ranking) == [1, None, 2]
    assert ranking.places[1].reasons == ("nothing is known of it that tells the places apart",)


def test_screens_leave_out_with_reasons_and_take_no_part_in_the_scale() -> None:
    places = table(litres=[4.0, 2.0, 3.0, 9.0, 2.5], people=[100.0, 200.0, 300.0, 20.0, np.nan])
    screens = [Screen("people", "at least", 50.0, "too few people"), Screen("litres", "below", 8.0, "not believable")]
    ranking = rank_places(places, [Criterion("yield", "litres")], screens=screens)
    assert ranks(ranking) == [1, 4, 2, None, 3]
    assert scores(ranking)[0] == 1.0
    assert ranking.places[3].reasons == (
        "too few people (people 20, at least 50 wanted)", "not believable (litres 9, below 8 wanted)",
    )
    assert ranking.order[-1] == 3
    strict = rank_places(places, [Criterion("yield", "litres")], screens=[replace(screens[0], missing_passes=False)])
    assert strict.places[4].reasons == ("too few people cannot be ruled out (people is not known)",)
    assert strict.summary == "3 places are ranked, 2 left out (too few people: 2)."


def test_all_screened_out_is_a_readable_result() -> None:
    ranking = rank_places(
        table(people=[10.0, 20.0]), [Criterion("people", "people")], uncertainty=Uncertainty(draws=20),
        screens=[Screen("people", "at least", 50.0, "too few people")],
    )
    assert ranks(ranking) == [None, None]
    assert ranking.summary == "No place is left to rank: all 2 are left out (too few people: 2)."
    assert ranking.text().endswith(WATER_CAUTION)
    assert "Village 1: Left out: too few people (people 20, at least 50 wanted)." in ranking.text()
    nowhere = rank_places(PlaceTable((), (), {"people": np.empty(0)}), [Criterion("people", "people")])
    assert nowhere.summary == "There is no place to rank."


def test_one_place_is_first_of_one() -> None:
    ranking = rank_places(table(people=[10.0]), [Criterion("people", "people")], uncertainty=Uncertainty(draws=20))
    place = ranking.places[0]
    assert (place.rank, place.rank_low, place.rank_high, place.top_probability) == (1, 1, 1, 1.0)
    assert place.words == "Rank 1 of 1. As the average place in every criterion."


def test_ties_share_a_rank_and_stand_by_name_and_id() -> None:
    places = PlaceTable(
        ("c", "b", "a", "d"), ("Ulu", "Ambo", "Ulu", "Belu"), {"people": np.array([50.0, 50.0, 50.0, 90.0])}
    )
    ranking = rank_places(places, [Criterion("people", "people")], top=2)
    assert ranks(ranking) == [2, 2, 2, 1]
    assert [places.ids[at] for at in ranking.order] == ["d", "b", "a", "c"]
    # One seat is left for three.
    assert [place.top_probability for place in ranking.places] == pytest.approx([1 / 3, 1 / 3, 1 / 3, 1.0])
    assert (ranking.places[0].rank_low, ranking.places[0].rank_high) == (2, 4)
    assert "Cannot be told apart from Ulu (a) and Ambo." in ranking.places[0].words


def test_equal_weights_are_the_plain_mean_whatever_their_size() -> None:
    places = table(a=[1.0, 2.0, 3.0], b=[5.0, 1.0, 3.0])
    for weight in (1e-3, 1.0, 700.0):
        ranking = rank_places(places, [Criterion("a", "a", weight=weight), Criterion("b", "b", weight=weight)])
        assert scores(ranking) == pytest.approx([0.5, 0.25, 0.75])


def test_ties_are_transitive_along_a_chain() -> None:
    found = shared_ranks(np.array([0.500, 0.508, 0.516, 0.9]), tolerance=0.01)
    assert found.rank.tolist() == [2, 2, 2, 1]
    assert found.shared_by.tolist() == [3, 3, 3, 1]


def test_drivers_add_up_to_the_distance_from_the_mean_score() -> None:
    places = table(litres=[4.0, 2.0, 3.0, 2.2], people=[100.0, 900.0, 500.0, 120.0])
    ranking = rank_places(places, [Criterion("yield", "litres", weight=2.0), Criterion("people", "people")])
    mean = np.mean([place.score for place in ranking.places])
    for place in ranking.places:
        assert sum(driver.difference for driver in place.drivers) == pytest.approx(place.score - mean)
    assert ranking.places[0].drivers[0].criterion == "yield"
    assert "Lifted by yield" in ranking.places[0].words
    assert "held back by people" in ranking.places[0].words


def test_sensitivity_names_the_weight_that_moves_the_rank() -> None:
    # With weights 3 and 2 the first leads by 3/5 to 2/5; doubled, the other weight makes it 3/7 to 4/7.
    places = table(a=[1.0, 0.0], b=[0.0, 1.0])
    ranking = rank_places(places, [Criterion("a", "a", weight=3.0), Criterion("b", "b", weight=2.0)])
    assert ranking.places[0].move.words == "Doubling the weight of b moves it to rank 2."
    firm = rank_places(places, [Criterion("a", "a", weight=9.0), Criterion("b", "b", weight=2.0)])
    assert firm.places[0].move.words == "Leaving out a moves it to rank 2."
    assert rank_places(places, [Criterion("a", "a")]).places[0].move is None


# Practically a tie, and independence of the order


def test_two_villages_a_tenth_of_a_percent_apart_are_practically_a_tie() -> None:
    varied = Uncertainty(draws=400)
    places = table(litres=[4.0, 4.004, 2.0], people=[100.0, 100.0, 90.0])
    drawn = yield_draws(places.ids, MonthlyYields(monthly(np.array([[4.0, 4.004, 2.0]]))), varied)
    ranking = rank_places(places, [Criterion("yield", "litres"), Criterion("people", "people")],
                          draws={"litres": drawn.drawn}, uncertainty=varied, top=1)
    first, second, third = ranking.places
    assert (second.rank, second.rank_low, second.rank_high) == (1, 1, 2)
    assert (first.rank, first.rank_low, first.rank_high) == (2, 1, 2)
    assert 0.4 < first.top_probability < 0.6
    assert "Cannot be told apart from Village 1." in first.words
    assert "Cannot be told apart from Village 0." in second.words
    assert (third.rank_low, third.rank_high, third.equals) == (3, 3, ())


@pytest.mark.parametrize("uncertainty", [None, Uncertainty(draws=50)])
def test_a_tenth_of_a_percent_in_a_sure_figure_is_practically_a_tie_too(uncertainty: Uncertainty | None) -> None:
    ranking = rank_places(table(people=[1000.0, 1001.0]), [Criterion("people", "people")], uncertainty=uncertainty)
    assert ranks(ranking) == [2, 1]
    assert [(place.rank_low, place.rank_high) for place in ranking.places] == [(1, 2), (1, 2)]
    assert "Cannot be told apart from Village 1." in ranking.places[0].words


def five_places() -> tuple[PlaceTable, MonthlyYields]:
    source = np.random.default_rng(5)
    months = source.uniform(60.0, 150.0, (9, 12, 5))
    months[2, 4, 3] = np.nan
    mean = np.nanmean(months, axis=0)
    places = table(people=[5.0, 80.0, 80.0, 300.0, np.nan], litres=[1.0] * 5)
    return replace(places, names=("Ulu", "Belu", "Ulu", "Ambo", "Dasu")), MonthlyYields(months, mean * 0.8, mean * 1.2)


def ranked(places: PlaceTable, months: MonthlyYields, uncertainty: Uncertainty) -> Ranking:
    drawn = yield_draws(places.ids, months, uncertainty)
    columns = {**places.columns, "litres": drawn.central}
    criteria = [Criterion("yield", "litres", weight=2.0), Criterion("people", "people", scale="log")]
    screens = [Screen("people", "at least", 10.0, "too few people")]
    return rank_places(replace(places, columns=columns), criteria, screens=screens, top=2,
                       draws={"litres": drawn.drawn}, uncertainty=uncertainty)


def test_permuted_input_permutes_the_result_exactly() -> None:
    places, months = five_places()
    varied = Uncertainty(draws=60, condition_shared=False)
    whole = ranked(places, months, varied)
    assert sum(place.rank is not None for place in whole.places) == 4
    for order in list(permutations(range(5)))[::7]:
        at = np.array(order)
        shuffled = MonthlyYields(months.by_year[:, :, at], months.low[:, at], months.high[:, at])
        found = ranked(places.taken(at), shuffled, varied)
        assert found.places == tuple(whole.places[number] for number in order)
        assert [found.places[number].id for number in found.order] == [whole.places[n].id for n in whole.order]


def test_draws_of_a_place_do_not_depend_on_the_others() -> None:
    places, months = five_places()
    varied = Uncertainty(draws=40, condition_shared=False)
    whole = yield_draws(places.ids, months, varied).drawn
    alone = yield_draws(
        places.ids[3:4], MonthlyYields(months.by_year[:, :, 3:4], months.low[:, 3:4], months.high[:, 3:4]), varied
    ).drawn
    np.testing.assert_allclose(alone[:, 0], whole[:, 3], rtol=1e-12)
    longer = yield_draws(places.ids, months, replace(varied, draws=90)).drawn
    np.testing.assert_allclose(longer[:40], whole, rtol=1e-12)


# Faults


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"criteria": [Criterion("a", "people", weight=0.0)]}, "weights are unusable"),
        ({"criteria": [Criterion("a", "beauty")]}, "reads a column that is not there"),
        ({"criteria": [Criterion("a", "people"), Criterion("a", "litres")]}, "share a name"),
        ({"criteria": [Criterion("a", "below", scale="log")]}, "value below 0"),
        ({"screens": [Screen("beauty", "above", 1.0, "ugly")]}, "screen reads a column"),
        ({"draws": {"people": np.ones((5, 3))}}, "wrong shape"),
        ({"draws": {"litres": np.ones((5, 2))}}, "no criterion reads"),
        ({"draws": {"people": np.ones((5, 2))}, "uncertainty": Uncertainty(draws=6)}, "different numbers of draws"),
    ],
)
def test_what_cannot_be_ranked_is_refused(change: dict[str, object], said: str) -> None:
    places = table(people=[1.0, 2.0], litres=[1.0, 2.0], below=[-1.0, 1.0])
    given = {"criteria": [Criterion("a", "people")], **change}
    with pytest.raises(PlacesError, match=said):
        rank_places(places, given.pop("criteria"), **given)


def test_unusable_records_are_refused() -> None:
    for make in (
        lambda: Criterion("a", "a", weight=-1.0), lambda: Criterion("a", "a", limits=(2.0, 2.0)),
        lambda: Criterion("a", "a", scale="log", limits=(0.0, 2.0)), lambda: Screen("a", "about", 1.0, "x"),
        lambda: PlaceTable(("a", "a"), ("x", "y"), {}), lambda: PlaceTable(("a",), ("x",), {"n": np.ones(2)}),
        lambda: Uncertainty(draws=0), lambda: Uncertainty(weight_concentration=0.0),
        lambda: MonthlyYields(np.ones((3, 11, 2))), lambda: MonthlyYields(np.ones((3, 12, 2)), low=np.ones((12, 2))),
    ):
        with pytest.raises(PlacesError):
            make()


# Cells


def test_cells_are_ranked_as_places_are() -> None:
    source = np.random.default_rng(3)
    litres, people = source.uniform(2.0, 5.0, 40), source.uniform(1.0, 900.0, 40)
    litres[7] = np.nan
    criteria = [Criterion("yield", "litres", weight=2.0), Criterion("people", "people", scale="log")]
    screens = [Screen("people", "at least", 200.0, "too few people")]
    cells = rank_cells({"litres": litres, "people": people}, criteria, screens=screens)
    ranking = rank_places(table(litres=litres.tolist(), people=people.tolist()), criteria, screens=screens)
    assert [rank or 0 for rank in ranks(ranking)] == cells.rank.tolist()
    np.testing.assert_array_equal(np.array(scores(ranking), dtype=float), cells.score)
    assert cells.left_out == (("too few people", int((people < 200).sum())),)
    assert np.nanmax(cells.first_share) == 1.0


def test_part_of_the_cells_keeps_the_scale_of_all() -> None:
    source = np.random.default_rng(4)
    columns = {"litres": source.uniform(2.0, 5.0, 300), "people": source.uniform(1.0, 900.0, 300)}
    criteria = [Criterion("yield", "litres", weight=2.0), Criterion("people", "people", scale="log")]
    cells = rank_cells(columns, criteria)
    picked = cells_along_rank(cells, [np.arange(300.0)], 20)
    assert len(set(picked.tolist())) == 20
    assert cells.rank[picked[[0, -1]]].tolist() == [1, 300]
    part = {name: values[picked] for name, values in columns.items()}
    np.testing.assert_allclose(rank_cells(part, cells.criteria).score, cells.score[picked], rtol=1e-12)


def test_scale_of_an_unknown_criterion_is_told() -> None:
    unknown = np.array([np.nan, np.nan])
    assert scales_used({"a": unknown}, [Criterion("salt", "a")])[0].words == (
        "salt: not known for any place, decides nothing"
    )
