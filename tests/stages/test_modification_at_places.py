"""A modification at places: the arithmetic done again by hand, the words, and places without litres."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from product_samples import monthly_sites
from stillfield.decide import decide
from stillfield.decisions.cost import Part, StillCost
from stillfield.decisions.panel import PanelSupply
from stillfield.decisions.upgrade import Modification
from stillfield.physics.still import Panel, Still
from stillfield.stages.upgrade import Change, irradiation_of_rule

STILL = Still("invented", (Panel(1.0, 15.0),))
#: 100 money over 10 years without interest: 10 money a year.
COST = StillCost((Part("still", 100.0, 10.0),), currency="crowns", interest=0.0, availability=0.9)


def decided(modification, *, places=3, far=False):
    monthly = monthly_sites([f"Site {number}" for number in range(places)])
    monthly["monthly_yield_by_year"] = monthly["monthly_yield"].expand_dims(year=[0])
    table = pd.DataFrame({
        "name": [f"Village {number}" for number in range(places)], "id": [str(number) for number in range(places)],
        "latitude": monthly["latitude"].to_numpy() + (40.0 if far else 0.0),
        "longitude": monthly["longitude"].to_numpy(),
    })  # fmt: skip
    decision = decide(monthly, table, still=STILL, cost=COST, change=Change(modification, 0.3))
    return monthly, decision


def test_factor_needed_and_cost_per_litre_are_those_worked_by_hand():
    # 20 money over 5 years: 4 a year on top of 10, so it pays from 1.4 times the litres on.
    mirror = Modification("mirror", 1.5, 1.45, 1.6, extra_capital_per_m2=20.0, life_years=5.0)
    monthly, decision = decided(mirror)
    for _, row in decision.places.iterrows():
        litres = 0.9 * float(monthly["annual_yield"][int(row["id"])])
        assert row["modification_pays"] == "pays"
        assert row["modification_factor_needed"] == pytest.approx(1.4)
        assert row["cost_per_litre"] == pytest.approx(10.0 / litres)
        assert row["cost_per_litre_modified"] == pytest.approx(14.0 / (1.5 * litres))
        assert row["cost_per_litre_modified_low"] == pytest.approx(14.0 / (1.6 * litres))
        assert row["cost_per_litre_modified_high"] == pytest.approx(14.0 / (1.45 * litres))
        # 10 x 1.5 - 10 = 5 a year may go to it: 25 over its 5 years.
        assert row["modification_capital_to_break_even_per_m2"] == pytest.approx(25.0)
    said = " ".join(decision.notes)
    assert "mirror: pays." in said
    assert "crowns" in said
    assert "By month: pays in every month." in said
    assert "over all 3 places with litres, pays: 3." in said


def test_months_bear_their_share_of_the_cost_and_have_verdicts_of_their_own():
    factors = (1.05,) * 6 + (1.5,) * 6
    shade = Modification("shade", 1.25, 1.2, 1.3, factors, extra_capital_per_m2=20.0, life_years=10.0)
    monthly, decision = decided(shade)
    january, july = (decision.months[(decision.months["id"] == "1") & (decision.months["month"] == month)].iloc[0]
                     for month in (1, 7))
    # 2 a year on top of 10: pays from 1.2 on. 1.5 x 1.2 / 1.25 = 1.44 is above it, 1.05 x 1.3 / 1.25 = 1.09 below.
    assert (january["modification_pays"], july["modification_pays"]) == ("does not pay", "pays")
    litres = float(monthly["monthly_yield"][0, 1])
    assert january["yield_modified_l_m2_month"] == pytest.approx(1.05 * litres)
    assert january["cost_per_litre"] == pytest.approx(10.0 * 31 / 365 / (0.9 * litres), rel=1e-3)
    assert january["cost_per_litre_modified"] == pytest.approx(12.0 * 31 / 365 / (0.9 * 1.05 * litres), rel=1e-3)
    assert "does not pay in January, February, March, April, May, June" in " ".join(decision.notes)


def test_a_panel_is_sized_from_the_month_of_least_sun():
    fan = Modification("fan", 1.2, 1.1, 1.3, electricity_wh_m2_day=20.0,
                       panel=PanelSupply(price_per_wp=2.0, life_years=20.0, system_efficiency=0.5))
    monthly, decision = decided(fan)
    days = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])[:, None]
    sun = monthly["monthly_yield_rule"].to_numpy() * 2.3 / 0.3 / days  # MJ m-2 d-1
    watts = 20.0 / (sun.min(axis=0) / 3.6 * 0.5)
    found = decision.places.set_index("id").loc[["0", "1", "2"]]
    np.testing.assert_allclose(found["modification_panel_wp_per_m2"], watts)
    np.testing.assert_allclose(found["modification_factor_needed"], (10.0 + watts * 2.0 / 20.0) / 10.0)
    assert "Wp per m2 of basin" in " ".join(decision.notes)


def test_irradiation_comes_back_whole_from_the_rule():
    sun = np.linspace(8.0, 26.0, 24).reshape(12, 2)
    days = np.array([31, 28.25, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])[:, None]
    np.testing.assert_allclose(irradiation_of_rule(sun * days * 0.27 / 2.3, 0.27, typical=False), sun)


def test_places_without_litres_have_no_verdict():
    _, decision = decided(Modification("mirror", 1.2, 1.1, 1.3, extra_capital_per_m2=5.0), far=True)
    assert set(decision.places["modification_pays"]) == {""}
    assert decision.places["cost_per_litre_modified"].isna().all()
    assert set(decision.months["modification_pays"]) == {""}
    assert any("no place has litres" in note for note in decision.notes)
