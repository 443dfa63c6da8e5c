"""Uncertain rankings: against every case written out, against closed forms, each source by itself."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from scipy import stats

from stillfield.decisions.ranking import PlaceTable, rank_places
from stillfield.decisions.ranking_score import Criterion
from stillfield.decisions.ranking_uncertainty import (
    MonthlyYields,
    Uncertainty,
    inversely,
    model_factors,
    weight_draws,
    year_shares,
    yield_draws,
)

DAYS = np.array([31.0, 28.25, 31.0, 30.0, 31.0, 30.0, 31.0, 31.0, 30.0, 31.0, 30.0, 31.0])
NOTHING_VARIED = Uncertainty(years=False, model=False, condition=False, weights=False)


def table(**columns: list[float]) -> PlaceTable:
    count = len(next(iter(columns.values())))
    names = tuple(f"v{number}" for number in range(count))
    return PlaceTable(names, names, {name: np.array(values, dtype=float) for name, values in columns.items()})


def monthly(per_day: np.ndarray) -> np.ndarray:
    """Litres of each month from litres per day (year, place), the same all year."""
    return per_day[:, np.newaxis, :] * DAYS[:, np.newaxis]


# Chances against every case written out and against closed forms


def by_plain_counting(litres: np.ndarray, people: list[float], weights: tuple[float, float]) -> list[int]:
    """Ranks of one case, written without any of the code under test."""
    def shares(values: list[float]) -> list[float]:
        return [(value - min(values)) / (max(values) - min(values)) for value in values]

    each = zip(shares(list(litres)), shares(people), strict=True)
    total = [weights[0] * a + weights[1] * b for a, b in each]
    return [1 + sum(other > own + 1e-9 for other in total) for own in total]


YEARS = np.array([[3.0, 4.0, 3.4], [4.4, 3.1, 3.9], [2.7, 3.6, 3.6]])  # (year, place), L per m2 and day
PEOPLE = [300.0, 200.0, 420.0]
TWO_CRITERIA = [
    Criterion("yield", "litres", weight=2.0, full_weight_span=0.0),
    Criterion("people", "people", weight=1.0, full_weight_span=0.0),
]


def every_case() -> tuple[np.ndarray, np.ndarray]:
    """Mean yields and ranks (case, place) of the 27 ways to draw three years from three."""
    litres = np.array([YEARS[list(drawn)].mean(axis=0) for drawn in product(range(3), repeat=3)])
    return litres, np.array([by_plain_counting(case, PEOPLE, (2.0, 1.0)) for case in litres])


def test_given_draws_are_ranked_exactly() -> None:
    litres, expected = every_case()
    ranking = rank_places(
        table(litres=YEARS.mean(axis=0).tolist(), people=PEOPLE), TWO_CRITERIA, draws={"litres": litres}, top=1,
        level_within=0.0,
    )
    assert ranking.draws == 27
    assert [place.rank for place in ranking.places] == by_plain_counting(YEARS.mean(axis=0), PEOPLE, (2.0, 1.0))
    assert [place.top_probability for place in ranking.places] == pytest.approx((expected == 1).mean(axis=0))
    ends = np.quantile(expected, [0.05, 0.95], axis=0, method="inverted_cdf")
    for place, low, high in zip(ranking.places, *ends, strict=True):
        assert (place.rank_low, place.rank_high) == (min(low, place.rank), max(high, place.rank))


def test_resampled_years_reach_the_chances_of_every_case() -> None:
    _, expected = every_case()
    chance = (expected == 1).mean(axis=0)
    assert np.all((chance > 0.05) & (chance < 0.95))  # or the comparison would be idle
    varied = Uncertainty(draws=4000, model=False, condition=False, weights=False)
    places = table(litres=YEARS.mean(axis=0).tolist(), people=PEOPLE)
    drawn = yield_draws(places.ids, MonthlyYields(monthly(YEARS)), varied)
    np.testing.assert_allclose(drawn.central, YEARS.mean(axis=0))
    found = []
    for seed in (0, 1):
        drawn = yield_draws(places.ids, MonthlyYields(monthly(YEARS)), replace(varied, seed=seed))
        ranking = rank_places(places, TWO_CRITERIA, draws={"litres": drawn.drawn}, top=1, uncertainty=varied)
        found.append(np.array([place.top_probability for place in ranking.places]))
        assert np.all(np.abs(found[-1] - chance) < 4 * np.sqrt(chance * (1 - chance) / 4000))
    assert not np.array_equal(*found)


def test_site_error_gives_the_chance_of_the_normal_distribution() -> None:
    # ln of the ratio of two sites is normal with standard deviation sqrt(2) ln 1.1.
    varied = Uncertainty(draws=4000, years=False, condition=False, weights=False)
    places = table(litres=[4.0, 4.3])
    drawn = yield_draws(places.ids, MonthlyYields(monthly(np.array([[4.0, 4.3]]))), varied)
    ranking = rank_places(places, [Criterion("yield", "litres")], draws={"litres": drawn.drawn}, top=1)
    chance = stats.norm.cdf(np.log(4.3 / 4.0) / (np.sqrt(2) * np.log(1.1)))
    assert ranking.places[1].top_probability == pytest.approx(chance, abs=4 * np.sqrt(chance * (1 - chance) / 4000))
    together = model_factors(["one cell", "one cell", "another"], varied)
    assert np.array_equal(together[:, 0], together[:, 1])
    spread = np.log(together).std(axis=0)
    np.testing.assert_allclose(spread, np.hypot(np.log(1.3), np.log(1.1)), rtol=0.05)


def test_varied_weights_give_the_chance_of_the_beta_distribution() -> None:
    # One place leads in one criterion, the other in the other: it wins where its share of the weight is above 1/2.
    varied = Uncertainty(draws=4000, weight_concentration=10.0)
    places = table(a=[1.0, 0.0], b=[0.0, 1.0])
    criteria = [Criterion("a", "a", weight=3.0), Criterion("b", "b", weight=2.0)]
    ranking = rank_places(places, criteria, uncertainty=varied, top=1)
    chance = stats.beta.sf(0.5, 6.0, 4.0)
    assert ranking.places[0].top_probability == pytest.approx(chance, abs=4 * np.sqrt(chance * (1 - chance) / 4000))
    drawn = weight_draws([*criteria, Criterion("c", "c", weight=0.0)], varied)
    np.testing.assert_allclose(drawn.std(axis=0), [np.sqrt(0.24 / 11), np.sqrt(0.24 / 11), 0.0], rtol=0.05)


def test_condition_runs_evenly_over_both_halves_of_the_band() -> None:
    months = monthly(np.full((1, 2), 4.0))
    band = {"low": months[0] * 0.7, "high": months[0] * 1.1}
    varied = Uncertainty(draws=4000, years=False, model=False)
    shared = yield_draws(["a", "b"], MonthlyYields(months, **band), varied).drawn
    assert np.array_equal(shared[:, 0], shared[:, 1])
    # Half of the draws are even over 2.8 to 4.0, half over 4.0 to 4.4: quartiles 3.4, 4.0, 4.2.
    np.testing.assert_allclose(np.quantile(shared[:, 0], [0.0, 0.25, 0.5, 0.75, 1.0]), [2.8, 3.4, 4, 4.2, 4.4],
                               atol=0.05)
    each = yield_draws(["a", "b"], MonthlyYields(months, **band), replace(varied, condition_shared=False)).drawn
    assert abs(np.corrcoef(each.T)[0, 1]) < 4 / np.sqrt(4000)


def test_each_source_can_be_switched_off() -> None:
    months = monthly(YEARS)
    whole = MonthlyYields(months, low=months.mean(axis=0) * 0.8, high=months.mean(axis=0) * 1.1)
    still = yield_draws(["a", "b", "c"], whole, replace(NOTHING_VARIED, draws=5))
    np.testing.assert_allclose(still.drawn, np.tile(still.central, (5, 1)), rtol=1e-12)
    for source in ("years", "model", "condition"):
        moved = yield_draws(["a", "b", "c"], whole, replace(NOTHING_VARIED, draws=5, **{source: True}))
        assert np.ptp(moved.drawn, axis=0).min() > 1e-3
    assert np.array_equal(year_shares(3, NOTHING_VARIED)[0], np.full(3, 1 / 3))
    ranking = rank_places(table(litres=[1.0, 2.0]), [Criterion("yield", "litres")], uncertainty=NOTHING_VARIED)
    assert ranking.draws == 0


def test_sizing_month_follows_the_need_and_not_the_least_yield() -> None:
    per_day = np.full((1, 12, 1), 4.0)
    per_day[0, 11], per_day[0, 5] = 3.0, 3.5  # least in December; June's need is half as much again
    need = np.ones(12)
    need[5] = 1.5
    found = yield_draws(["a"], MonthlyYields(per_day * DAYS[:, np.newaxis], need=need), Uncertainty(draws=3))
    assert found.sizing_month.tolist() == [6]
    assert found.central[0] == pytest.approx(3.5 / (1.5 / (12.5 / 12)))
    need[5] = 0.0  # a month without need sizes nothing
    assert yield_draws(
        ["a"], MonthlyYields(per_day * DAYS[:, np.newaxis], need=need), Uncertainty(draws=3)
    ).sizing_month.tolist() == [12]


def test_gaps_in_years_and_short_records_are_handled_and_told() -> None:
    months = monthly(YEARS)
    months[1, 3, 0] = np.nan
    months[:, 3, 2] = np.nan
    found = yield_draws(["a", "b", "c"], MonthlyYields(months), replace(NOTHING_VARIED, years=True, draws=200))
    assert np.isfinite(found.drawn[:, :2]).all()
    assert np.isnan(found.drawn[:, 2]).all()
    assert found.sizing_month[2] == 0
    assert found.notes == ("only 3 years of weather are known; their spread is uncertain itself",)
    one = yield_draws(["a"], MonthlyYields(months[:1, :, :1]), Uncertainty(draws=2))
    assert len(one.notes) == 2
    assert "only one year" in one.notes[0]


def test_cost_is_inverse_to_yield() -> None:
    drawn = yield_draws(["a", "b"], MonthlyYields(monthly(np.array([[4.0, 0.0]]))), Uncertainty(draws=3))
    cost = inversely(np.array([0.5, np.inf]), drawn)
    np.testing.assert_allclose(cost[:, 0] * drawn.drawn[:, 0], 2.0)
    assert np.isposinf(cost[:, 1]).all()
