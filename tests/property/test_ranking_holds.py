"""What holds of every ranking: better is never worse, order of the input is nothing, seats add up."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.decisions.ranking import PlaceTable, Ranking, rank_places
from stillfield.decisions.ranking_score import Criterion, Screen, shared_ranks
from stillfield.decisions.ranking_uncertainty import Uncertainty

VALUES = st.one_of(st.floats(0.01, 1000.0), st.sampled_from([1.0, 5.0, 5.004, 10.0]), st.just(float("nan")))

#: None, or one that stays above nothing when it is scaled.
WEIGHTS = st.just(0.0) | st.floats(1e-3, 5.0)


@st.composite
def tables(draw: st.DrawFn) -> tuple[PlaceTable, list[Criterion]]:
    count = draw(st.integers(2, 7))
    columns = {name: np.array(draw(st.lists(VALUES, min_size=count, max_size=count))) for name in "abc"}
    limits = draw(st.sampled_from([None, (0.5, 20.0)]))
    criteria = [
        Criterion("a", "a", draw(st.booleans()), draw(st.floats(0.1, 5.0)), limits=limits),
        Criterion("b", "b", draw(st.booleans()), draw(WEIGHTS), "log"),
        Criterion("c", "c", draw(st.booleans()), draw(WEIGHTS)),
    ]
    ids = tuple(f"p{number}" for number in range(count))
    return PlaceTable(ids, tuple(draw(st.sampled_from(["Ulu", "Ambo"])) for _ in ids), columns), criteria


@settings(max_examples=150, deadline=None)
@given(tables(), st.data())
def test_improving_a_criterion_never_lowers_score_or_rank(case, data):
    table, criteria = case
    place = data.draw(st.integers(0, len(table.ids) - 1))
    criterion = data.draw(st.sampled_from(criteria))
    before = rank_places(table, criteria).places[place]
    values = table.columns[criterion.column].copy()
    factor = data.draw(st.floats(1.0, 20.0))
    values[place] = values[place] * factor if criterion.more_is_first else values[place] / factor
    better = PlaceTable(table.ids, table.names, {**table.columns, criterion.column: values})
    after = rank_places(better, criteria).places[place]
    if before.rank is None or after.rank is None:
        return
    assert after.score >= before.score - 1e-9
    assert after.rank <= before.rank


@settings(max_examples=60, deadline=None)
@given(tables(), st.randoms(use_true_random=False))
def test_order_of_the_input_is_nothing(case, chance):
    table, criteria = case
    order = list(range(len(table.ids)))
    chance.shuffle(order)
    varied = Uncertainty(draws=15)
    screens = [Screen("c", "at most", 500.0, "too much")]
    one = rank_places(table, criteria, screens=screens, uncertainty=varied, top=2)
    two = rank_places(table.taken(np.array(order)), criteria, screens=screens, uncertainty=varied, top=2)
    assert two.places == tuple(one.places[number] for number in order)
    assert [used.words for used in two.scales] == [used.words for used in one.scales]
    assert two.summary == one.summary


def check_sound(ranking: Ranking) -> None:
    ranked = [place for place in ranking.places if place.rank is not None]
    if not ranked:
        return
    assert sum(place.top_probability for place in ranked) == pytest.approx(min(ranking.top, len(ranked)))
    assert min(place.rank for place in ranked) == 1
    for place in ranked:
        assert 0.0 <= place.score <= 1.0
        assert 1 <= place.rank_low <= place.rank <= place.rank_high <= len(ranked)
        for other in ranked:
            if other.id in place.equals:
                assert place.id in other.equals
                assert place.rank_low <= other.rank_high
                assert other.rank_low <= place.rank_high
            if place.score > other.score + 1e-3:
                assert place.rank < other.rank


@settings(max_examples=100, deadline=None)
@given(tables(), st.integers(1, 4), st.integers(0, 3))
def test_seats_add_up_and_equals_overlap(case, top, seed):
    table, criteria = case
    drawn = table.columns["a"] * np.random.default_rng(seed).uniform(0.5, 1.5, (40, len(table.ids)))
    check_sound(rank_places(table, criteria, top=top))
    check_sound(rank_places(table, criteria, draws={"a": drawn}, uncertainty=Uncertainty(draws=40), top=top))


@settings(max_examples=60, deadline=None)
@given(tables(), st.floats(1e-3, 1e3))
def test_only_the_proportions_of_the_weights_matter(case, factor):
    table, criteria = case
    scaled = [Criterion(c.name, c.column, c.more_is_first, c.weight * factor, c.scale, c.limits) for c in criteria]
    for one, two in zip(rank_places(table, criteria).places, rank_places(table, scaled).places, strict=True):
        assert two.rank == one.rank
        assert (one.score is None and two.score is None) or two.score == pytest.approx(one.score)


@settings(max_examples=150, deadline=None)
@given(st.lists(st.integers(0, 30), min_size=1, max_size=12), st.integers(0, 3))
def test_shared_ranks_are_those_of_chains_found_by_search(scores, tolerance):
    # Whole numbers, and a half more than the tolerance, keep rounding out of the comparison.
    found = shared_ranks(np.array(scores, dtype=float), tolerance + 0.5)
    for at, score in enumerate(scores):
        chain = {score}
        while True:
            wider = chain | {each for each in scores if any(abs(each - member) <= tolerance for member in chain)}
            if wider == chain:
                break
            chain = wider
        assert found.rank[at] == 1 + sum(each > max(chain) for each in scores)
        assert found.shared_by[at] == sum(each in chain for each in scores)
