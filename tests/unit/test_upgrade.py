"""Modifications and materials: worked by hand, by brute force, and where nothing can be told."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from stillfield.decisions.cost import ENDS, MONTH_DAYS, Part, StillCost, annual_cost
from stillfield.decisions.panel import PanelSupply, panel_size, peak_sun_hours
from stillfield.decisions.upgrade import (
    Modification,
    compare_modification,
    compare_stills,
    verdict_in_words,
)
from stillfield.errors import StillfieldError

STILL = StillCost((Part("still", 100.0, 10.0),), interest=0.0)
MIRROR = Modification("mirror", 1.25, 1.15, 1.35, extra_capital_per_m2=10.0, life_years=10.0)
LITRES = np.array([40.0, 50, 70, 90, 110, 120, 125, 120, 100, 75, 55, 45])  # 1000 L a year


def test_a_mirror_worked_by_hand():
    """100 over 10 years and 1000 L: 0.010 a litre. 10 more: 11 a year over 1150, 1250 and 1350 L."""
    found = compare_modification(STILL, MIRROR, LITRES)
    assert float(found.annual_cost_per_litre_without) == pytest.approx(0.010)
    assert float(found.annual_litres_with.low) == pytest.approx(1150.0)
    band = found.annual_cost_per_litre_with
    assert (float(band.low), float(band.central), float(band.high)) == pytest.approx((11 / 1350, 11 / 1250, 11 / 1150))
    # In June 30/365 of the year's cost falls on 120 L.
    assert found.monthly_cost_per_litre_without[5] == pytest.approx(10 * 30 / 365 / 120)
    assert found.monthly_cost_per_litre_with.central[5] == pytest.approx(11 * 30 / 365 / 150)
    assert found.break_even_extra_capital.low == pytest.approx(15.0)
    assert found.break_even_extra_capital.high == pytest.approx(35.0)
    assert found.annual_verdict == "pays"
    assert set(found.monthly_verdict) == {"pays"}


@pytest.mark.parametrize(("price", "verdict"), [(14.9, "pays"), (15.1, "cannot tell"), (34.9, "cannot tell"),
                                                (35.1, "does not pay")])  # fmt: skip
def test_the_verdict_turns_at_the_break_even_capital(price, verdict):
    found = compare_modification(STILL, replace(MIRROR, extra_capital_per_m2=price), LITRES)
    assert found.annual_verdict == verdict


def test_the_break_even_capital_makes_the_litre_cost_the_same():
    cost = StillCost((Part("film", 8.0, 2.0), Part("frame", 70.0, 12.0, salvage_share=0.1)), interest=0.09,
                     maintenance_share=0.15, maintenance_per_m2_year=1.0, availability=0.9)
    fan = Modification("fan", 1.3, 1.2, 1.4, extra_capital_per_m2=6.0, life_years=4.0, salvage_share=0.2,
                       maintenance_per_m2_year=0.2, electricity_wh_m2_day=6.0, electricity_price_per_kwh=0.3)
    room = compare_modification(cost, fan, LITRES).break_even_extra_capital
    for end, factor in zip(ENDS, (1.2, 1.3, 1.4), strict=True):
        even = compare_modification(cost, replace(fan, extra_capital_per_m2=float(getattr(room, end))), LITRES)
        assert float(even.break_even_factor.central) == pytest.approx(factor, rel=1e-12)


def test_every_corner_of_the_intervals_agrees_with_the_verdict():
    """Brute force: all mixtures of prices, lives and factors, costs and litres worked out for each by themselves."""
    part = Part("still", 100.0, 10.0, price_low=70.0, price_high=160.0, life_low=6.0, life_high=14.0)
    cost = StillCost((part,), interest=0.07, maintenance_share=0.1)
    rng = np.random.default_rng(20)
    prices, lives = rng.uniform(70, 160, 4000), rng.uniform(6, 14, 4000)
    yearly = 1.1 * prices * 0.07 / (1 - 1.07**-lives)
    added = 1.1 * 0.07 / (1 - 1.07**-5.0)
    told = set()
    for capital in (2.0, 9.0, 12.0, 20.0, 60.0):
        change = Modification("plate", 1.25, 1.15, 1.35, extra_capital_per_m2=capital, life_years=5.0)
        verdict = str(compare_modification(cost, change, LITRES).annual_verdict)
        cheaper = (yearly + capital * added) / rng.uniform(1.15, 1.35, 4000) < yearly
        told.add(verdict)
        assert {"pays": cheaper.all(), "does not pay": not cheaper.any()}.get(verdict, True)
        if verdict == "cannot tell":
            assert 0 < cheaper.mean() < 1
    assert told == {"pays", "cannot tell", "does not pay"}


def test_months_may_differ_in_verdict_and_the_year_is_weighted_by_litres():
    factors = (1.0,) * 6 + (1.5,) * 6
    found = compare_modification(STILL, replace(MIRROR, monthly_factors=factors), LITRES)
    assert found.annual_factor.central == pytest.approx((LITRES[:6].sum() + 1.5 * LITRES[6:].sum()) / LITRES.sum())
    assert set(found.monthly_verdict[:6]) == {"does not pay"}  # up to 1.35/1.25 = 1.08, below 1.10
    assert set(found.monthly_verdict[6:]) == {"pays"}


def test_places_and_no_water_and_no_knowledge():
    litres = np.stack([LITRES, np.zeros(12), np.full(12, np.nan)], axis=1)
    found = compare_modification(STILL, MIRROR, litres)
    assert found.annual_verdict.tolist() == ["pays", "cannot tell", "cannot tell"]
    assert found.monthly_verdict.shape == (12, 3)
    assert found.annual_cost_per_litre_with.central == pytest.approx([11 / 1250, np.inf, np.nan], nan_ok=True)
    for name in ("annual_cost_without", "annual_cost_with", "break_even_factor", "break_even_extra_capital"):
        assert getattr(found, name).central.shape == (3,)


def test_a_free_still_is_never_made_cheaper():
    found = compare_modification(StillCost((Part("gift", 0.0, 10.0),), 0.05), MIRROR, LITRES)
    assert found.annual_verdict == "does not pay"


def test_grid_electricity_is_paid_on_working_days():
    cost = replace(STILL, availability=0.5)
    fan = replace(MIRROR, electricity_wh_m2_day=100.0, electricity_price_per_kwh=0.4)
    found = compare_modification(cost, fan, LITRES)
    assert float(found.annual_cost_with.central) == pytest.approx(10.0 + 1.0 + 0.1 * 365 * 0.5 * 0.4)
    assert float(found.annual_litres_without) == pytest.approx(500.0)
    assert found.panel_wp is None


def test_a_panel_is_sized_for_the_month_of_least_sun_at_each_place():
    sun = np.stack([np.linspace(9.0, 25.0, 12), np.linspace(18.0, 25.0, 12)], axis=1)
    fan = replace(MIRROR, electricity_wh_m2_day=70.0, panel=PanelSupply(2.0, 20.0, 0.7))
    cost = replace(STILL, maintenance_share=0.1)
    found = compare_modification(cost, fan, np.stack([LITRES, LITRES], axis=1), sun)
    assert found.panel_wp == pytest.approx([40.0, 20.0])  # 70 Wh / (2.5 h x 0.7), 70 / (5 x 0.7)
    extra = 1.1 * (10.0 / 10.0 + np.array([40.0, 20.0]) * 2.0 / 20.0)
    assert found.annual_cost_with.central - found.annual_cost_without.central == pytest.approx(extra)
    with pytest.raises(StillfieldError, match="needs the irradiation"):
        compare_modification(cost, fan, LITRES)


def test_sun_hours_are_the_energy_over_one_kilowatt():
    assert peak_sun_hours([0.0, 3.6, 21.6]).tolist() == [0.0, 1.0, 6.0]
    assert np.isinf(panel_size(10.0, np.zeros(12)))
    assert float(panel_size(0.0, np.zeros(12))) == 0.0
    assert np.isnan(panel_size(10.0, [5.0, np.nan]))


def test_a_dearer_cover_against_a_film():
    """Film 20 every 2 years, glass 150 for 15: both 10 a year. Then only the litres count."""
    film, glass = (StillCost((Part("cover", price, life),), 0.0) for price, life in ((20.0, 2.0), (150.0, 15.0)))
    better = compare_stills(film, glass, LITRES, LITRES * 1.3)
    assert float(better.break_even_factor.central) == pytest.approx(1.0)
    assert better.annual_verdict == "pays"
    assert compare_stills(film, glass, LITRES, LITRES * 1.1).annual_verdict == "cannot tell"
    assert compare_stills(film, glass, LITRES, LITRES * 1.1, ratio_uncertainty=0.05).annual_verdict == "pays"
    assert compare_stills(film, glass, LITRES, LITRES * 0.8).annual_verdict == "does not pay"
    # 1.3 times the litres may cost 13 a year: 195 of capital, 175 more than the film.
    assert float(better.break_even_extra_capital.central) == pytest.approx(175.0)


def test_each_still_has_its_own_working_days():
    once, half = STILL, replace(STILL, availability=0.5)
    found = compare_stills(once, half, LITRES, LITRES)
    assert found.annual_factor.central == pytest.approx(0.5)
    assert found.annual_cost_per_litre_with.central == pytest.approx(2 * found.annual_cost_per_litre_without)


def test_a_still_that_works_where_the_other_does_not_pays():
    found = compare_stills(STILL, STILL, np.zeros(12), LITRES)
    assert (found.annual_verdict, set(found.monthly_verdict)) == ("pays", {"pays"})
    assert float(found.annual_litres_with.central) == pytest.approx(1000.0)
    assert compare_stills(STILL, STILL, LITRES, np.zeros(12)).annual_verdict == "does not pay"


def test_prices_with_intervals_make_replacement_verdicts_more_cautious():
    part = Part("cover", 100.0, 10.0, price_low=60.0, price_high=140.0)
    wide = StillCost((part,), 0.0)
    found = compare_stills(wide, wide, LITRES, LITRES * 1.3)
    assert (float(found.break_even_factor.low), float(found.break_even_factor.high)) == pytest.approx((6 / 14, 14 / 6))
    assert found.annual_verdict == "cannot tell"


def test_what_cannot_be_compared_is_refused():
    with pytest.raises(StillfieldError, match="two currencies"):
        compare_stills(STILL, replace(STILL, currency="shells"), LITRES, LITRES)
    with pytest.raises(StillfieldError, match="shape of the litres"):
        compare_stills(STILL, STILL, LITRES, np.ones((12, 2)))
    with pytest.raises(StillfieldError, match="shape of the months"):
        compare_modification(STILL, MIRROR, np.ones(365))


@pytest.mark.parametrize(
    "wrong",
    [
        {"low": 1.3}, {"high": 1.2}, {"low": 0.0}, {"monthly_factors": (1.0,) * 11}, {"extra_capital_per_m2": -1.0},
        {"life_years": 0.0}, {"electricity_wh_m2_day": 5.0}, {"salvage_share": 2.0},
        {"electricity_wh_m2_day": 5.0, "electricity_price_per_kwh": 0.1, "panel": PanelSupply(1.0, 10.0)},
    ],
)  # fmt: skip
def test_impossible_modifications_are_refused(wrong):
    with pytest.raises(StillfieldError, match="'mirror' is impossible"):
        replace(MIRROR, **wrong)


def test_costs_of_the_months_add_up_to_the_year():
    found = compare_modification(replace(STILL, interest=0.06), MIRROR, LITRES)
    paid = (found.monthly_cost_per_litre_with.central * found.monthly_litres_with.central).sum()
    assert paid == pytest.approx(float(found.annual_cost_with.central))
    assert float(found.annual_cost_without.central) == annual_cost(replace(STILL, interest=0.06)).total
    assert len(found.monthly_litres_without) == len(MONTH_DAYS)


@pytest.mark.parametrize(("price", "words"), [(5.0, "mirror: pays. It makes 1.15 to 1.35 times"),
                                              (90.0, "mirror: does not pay. It makes")])  # fmt: skip
def test_verdicts_in_words(price, words):
    litres = np.stack([LITRES, LITRES], axis=1)
    found = compare_modification(STILL, replace(MIRROR, extra_capital_per_m2=price), litres)
    assert verdict_in_words(found, (1,), currency="shells").startswith(words)
    assert "25.00 shells per m2 more (15.00 to 35.00)" in verdict_in_words(found, (1,), currency="shells")
