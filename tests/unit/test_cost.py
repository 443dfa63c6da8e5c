"""Annual cost: closed forms, limits, ends and shapes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from stillfield.decisions.cost import (
    ENDS,
    MONTH_DAYS,
    Part,
    StillCost,
    annual_cost,
    capital_recovery_factor,
    cost_per_litre,
    cost_per_litre_band,
    sinking_fund_factor,
)
from stillfield.decisions.provision import number_of_stills, provide
from stillfield.errors import StillfieldError

WHOLE = StillCost((Part("still", 100.0, 10.0),), interest=0.08)


def paid_off(debt, payment, interest, years):
    """Debt left after yearly payments, by walking through the years."""
    for _ in range(years):
        debt = debt * (1.0 + interest) - payment
    return debt


@pytest.mark.parametrize("interest", [0.0, 1e-9, 0.03, 0.12, 0.9])
@pytest.mark.parametrize("years", [1, 2, 15, 40])
def test_the_recovery_pays_the_debt_off_and_the_fund_fills(interest, years):
    payment = float(capital_recovery_factor(interest, years))
    assert paid_off(1.0, payment, interest, years) == pytest.approx(0.0, abs=1e-9 * (1 + interest) ** years)
    deposit = float(sinking_fund_factor(interest, years))
    assert -paid_off(0.0, deposit, interest, years) == pytest.approx(1.0, rel=1e-9)


def test_factors_without_interest_are_the_limit_of_little_interest():
    tiny = capital_recovery_factor(1e-12, [1.0, 7.0, 30.0])
    assert tiny == pytest.approx(np.asarray(capital_recovery_factor(0.0, [1.0, 7.0, 30.0])), rel=1e-10)


def test_what_lasts_for_ever_costs_its_interest():
    assert float(capital_recovery_factor(0.05, np.inf)) == pytest.approx(0.05)
    assert float(capital_recovery_factor(0.05, 100_000)) == pytest.approx(0.05)
    assert float(sinking_fund_factor(0.05, np.inf)) == 0.0


def test_factors_work_over_arrays():
    interest = np.array([[0.0], [0.1]])
    assert capital_recovery_factor(interest, np.array([1.0, 2.0, 4.0])).shape == (2, 3)


@pytest.mark.parametrize(("interest", "years"), [(-0.01, 5), (0.1, 0), (0.1, -3), (np.nan, 5), (0.1, np.nan)])
def test_impossible_factors_are_refused(interest, years):
    with pytest.raises(StillfieldError, match="impossible"):
        capital_recovery_factor(interest, years)


def test_each_part_is_paid_over_its_own_life():
    """A film of 2 years costs what its purchases in years 0, 2, ... 8 cost when they are paid off over 10."""
    film, frame = Part("film", 5.0, 2.0), Part("frame", 60.0, 10.0)
    year = annual_cost(StillCost((film, frame), interest=0.08))
    worth_today = 60.0 + sum(5.0 / 1.08**bought for bought in range(0, 10, 2))
    assert year.recovery == pytest.approx(worth_today * 0.08 / (1 - 1.08**-10), rel=1e-12)
    assert year.capital == 65.0


def test_items_of_the_year_add_up():
    cost = StillCost(
        (Part("still", 100.0, 10.0, salvage_share=0.2),), interest=0.0, maintenance_share=0.5,
        maintenance_per_m2_year=3.0, electricity_wh_m2_day=1000.0, electricity_price_per_kwh=0.1, availability=0.8,
    )  # fmt: skip
    year = annual_cost(cost)
    assert (year.recovery, year.maintenance, year.salvage) == pytest.approx((10.0, 8.0, 2.0))
    assert year.electricity == pytest.approx(0.1 * 292.0)
    assert year.total == pytest.approx(10.0 + 8.0 - 2.0 + 29.2)


def test_the_cheap_end_has_low_prices_and_long_lives():
    part = Part("still", 100.0, 10.0, price_low=80.0, price_high=150.0, life_low=5.0, life_high=20.0)
    cost = StillCost((part,), interest=0.0)
    assert [annual_cost(cost, end).total for end in ENDS] == pytest.approx([4.0, 10.0, 30.0])
    band = cost_per_litre_band(cost, np.array([400.0, 0.0]), np.array([500.0, 5.0]), np.array([800.0, 10.0]))
    assert band.low == pytest.approx([0.005, 0.4])
    assert band.central == pytest.approx([0.02, 2.0])
    assert band.high == pytest.approx([0.075, np.inf])


@pytest.mark.parametrize("salvage", [0.0, 0.5, 1.0])
@pytest.mark.parametrize("interest", [0.0, 0.05, 0.3])
def test_the_ends_stand_in_order_whatever_is_salvaged(salvage, interest):
    part = Part("still", 100.0, 10.0, salvage, price_low=90.0, price_high=110.0, life_low=4.0, life_high=25.0)
    totals = [annual_cost(StillCost((part,), interest), end).total for end in ENDS]
    assert totals == sorted(totals)


def test_ends_that_are_not_stated_are_the_central_figure():
    assert len({annual_cost(WHOLE, end).total for end in ENDS}) == 1


def test_no_yield_costs_without_end_and_no_knowledge_has_no_price():
    assert cost_per_litre(20.0, [0.0, np.nan]) == pytest.approx([np.inf, np.nan], nan_ok=True)


def test_idle_days_make_the_litre_dearer():
    once, often = (cost_per_litre_band(replace(WHOLE, availability=share), 1.0, 900.0, 1000.0) for share in (1.0, 0.5))
    assert float(often.central) == pytest.approx(2.0 * float(once.central))


@pytest.mark.parametrize(
    ("area", "unit", "expected"),
    [(0.0, 1.0, 0), (1e-3, 1.0, 1), (3.0, 1.0, 3), (0.1 * 3, 0.1, 3), (3.01, 1.0, 4), (7.0, 2.0, 4)],
)
def test_stills_are_whole_and_enough(area, unit, expected):
    assert float(number_of_stills(area, unit)) == expected


def test_a_village_pays_for_whole_stills():
    cost = StillCost((Part("still", 50.0, 5.0),), interest=0.0, unit_area_m2=2.0)
    places = provide(cost, np.array([1.5, 1.5, np.nan]), np.array([10.0, 0.0, 4.0]), 4.0)
    assert places.area_per_household_m2 == pytest.approx([6.0, 6.0, np.nan], nan_ok=True)
    assert places.stills == pytest.approx([8.0, 0.0, np.nan], nan_ok=True)
    assert places.stills_per_household == pytest.approx([3.0, 3.0, np.nan], nan_ok=True)
    assert places.capital.central == pytest.approx([800.0, 0.0, np.nan], nan_ok=True)
    assert places.annual_cost_per_person.high == pytest.approx([16.0, np.nan, np.nan], nan_ok=True)


@pytest.mark.parametrize(
    "wrong",
    [
        {"price_per_m2": -1.0}, {"life_years": 0.0}, {"salvage_share": 1.2}, {"price_low": 120.0},
        {"price_high": 90.0}, {"life_low": 11.0}, {"life_high": 9.0}, {"life_low": 0.0}, {"price_per_m2": np.nan},
    ],
)  # fmt: skip
def test_impossible_parts_are_refused(wrong):
    with pytest.raises(StillfieldError, match="'still' is impossible"):
        replace(WHOLE.parts[0], **wrong)


@pytest.mark.parametrize(
    "wrong",
    [{"parts": ()}, {"interest": -0.1}, {"availability": 0.0}, {"availability": 1.1}, {"unit_area_m2": 0.0},
     {"maintenance_share": -1.0}, {"electricity_wh_m2_day": np.nan}],
)  # fmt: skip
def test_impossible_costs_are_refused(wrong):
    with pytest.raises(StillfieldError, match="impossible"):
        replace(WHOLE, **wrong)


def test_the_months_are_those_of_a_year():
    assert sum(MONTH_DAYS) == 365
