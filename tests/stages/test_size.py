"""From litres to area, tank, stills, money, feed and brine, each beside plain arithmetic."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from decision_samples import DAYS, SEASON, STILL, daily, monthly_of, places
from stillfield.decide import Days, Preferences, decide
from stillfield.decisions.cost import Part, StillCost
from stillfield.decisions.need import need_of
from stillfield.decisions.trial import FieldFactor
from stillfield.physics.still import Panel, Still
from stillfield.stages.size import Wishes

#: 120 of capital per m2 without interest over ten years and 3 a year of upkeep: 15 a year.
COST = StillCost((Part("still", 120.0, 10.0),), interest=0.0, maintenance_per_m2_year=3.0, availability=0.8,
                 unit_area_m2=1.5, currency="shells")
ORDER = Preferences(weights={"yield": 1.0}, uncertainty=None)
#: The cell at 10 N, 40 E: 3 L m-2 a day in the mean, 1.8 in January.
HERE = [(10.0, 40.0)]


def decided(wishes=None, *, years=(1.0,), table=None, record="series", **more):
    table = places(HERE, population=[200.0]) if table is None else table
    return decide(monthly_of(daily(years, record=record)), table, still=more.pop("still", STILL), wishes=wishes,
                  preferences=ORDER, **more)


def followed(days, *cells):
    """Days of some cells, as a run with one still keeps them."""
    values = days["daily_yield"].to_numpy().reshape(days.sizes["time"], -1)
    return Days({cell: values[:, cell][None] for cell in cells}, days["time"])


def test_area_is_the_need_over_the_litres_of_the_sizing_month():
    row = decided(Wishes(need_of(4.5, people_per_household=6.0))).places.iloc[0]
    assert (row["sizing_month"], row["least_yield_month"]) == (1, 1)
    assert row["sizing_yield_l_m2_day"] == pytest.approx(1.8)
    assert row["need_l_person_day"] == 4.5
    assert row["area_per_person_m2"] == pytest.approx(2.5)
    assert row["area_per_person_at_low_yield_m2"] == pytest.approx(2.5 / 0.75)
    assert row["area_per_person_at_high_yield_m2"] == pytest.approx(2.5 / 1.25)
    assert row["area_per_household_m2"] == pytest.approx(15.0)
    assert row["area_village_m2"] == pytest.approx(500.0)
    assert row["need_l_day"] == pytest.approx(900.0)


def test_share_of_the_need_and_days_off_change_the_area():
    whole = decided(Wishes(need_of(4.5))).places.iloc[0]
    part = decided(Wishes(need_of(4.5, share=0.4))).places.iloc[0]
    assert part["need_l_person_day"] == pytest.approx(0.4 * 4.5)
    assert part["area_per_person_m2"] == pytest.approx(0.4 * whole["area_per_person_m2"])
    resting = decided(Wishes(need_of(4.5)), cost=COST).places.iloc[0]
    assert resting["area_per_person_m2"] == pytest.approx(2.5 / 0.8)
    assert resting["sizing_yield_l_m2_day"] == whole["sizing_yield_l_m2_day"]


def test_a_seasonal_need_moves_the_sizing_month_away_from_the_least_yield():
    season = [1.0] * 6 + [3.0] + [1.0] * 5
    found = decided(Wishes(need_of(3.0, month_factors=season)))
    row = found.places.iloc[0]
    # January 3 / 1.8 = 1.67 m2, July 9 / 4.2 = 2.14 m2.
    assert (row["sizing_month"], row["least_yield_month"]) == (7, 1)
    assert row["area_per_person_m2"] == pytest.approx(9.0 / 4.2)
    assert row["sizing_yield_l_m2_day"] == pytest.approx(4.2)
    share = found.months["share_of_need_at_sized_area"].to_numpy()
    np.testing.assert_allclose(share, 3.0 * SEASON * (9.0 / 4.2) / (3.0 * np.array(season)))
    assert share.argmin() == 6
    assert share.min() == pytest.approx(1.0)


@pytest.mark.parametrize("cost", [None, COST])
def test_the_area_meets_the_need_of_the_sizing_month_once_and_of_the_others_more(cost):
    months = decided(Wishes(need_of(4.5)), cost=cost).months
    assert months["month"].tolist() == list(range(1, 13))
    np.testing.assert_allclose(months["share_of_need_at_sized_area"], SEASON / SEASON[0], rtol=1e-6)


def test_a_month_without_need_asks_for_nothing():
    months = decided(Wishes(need_of(3.0, month_factors=[0.0] * 6 + [1.0] * 6))).months
    assert months["need_l_person_day"].tolist() == [0.0] * 6 + [3.0] * 6
    assert months["share_of_need_at_sized_area"].isna().tolist() == [True] * 6 + [False] * 6


def test_a_field_factor_takes_the_place_of_the_band():
    factor = FieldFactor(0.5, 0.4, 0.7, "trial 'yard'")
    found = decided(Wishes(need_of(4.5), field_factor=factor), years=(0.9, 1.1))
    plain = decided(Wishes(need_of(4.5)), years=(0.9, 1.1)).places.iloc[0]
    row = found.places.iloc[0]
    for name, expected in (("", 0.5), ("_low", 0.4), ("_high", 0.7)):
        assert row[f"sizing_yield{name}_l_m2_day"] == pytest.approx(expected * 1.8)
    assert row["area_per_person_m2"] == pytest.approx(5.0)
    assert row["area_per_person_at_low_yield_m2"] == pytest.approx(6.25)
    assert row["sizing_yield_p90_l_m2_day"] == pytest.approx(0.5 * plain["sizing_yield_p90_l_m2_day"])
    assert ("Litres of places are the modelled ones times 0.5 (0.4 to 0.7), the field factor of trial 'yard'."
            in found.notes)


def test_reached_in_so_many_years_is_numpys_percentile_of_the_years():
    shares = (0.8, 1.1, 0.95, 1.05, 1.0)
    found = decided(Wishes(need_of(3.0)), years=shares)
    row, by_year = found.places.iloc[0], 1.8 * np.array(shares)
    annual = np.array([sum(3.0 * SEASON[month - 1] * share for month in pd.date_range(
        f"{2001 + number}-01-01", f"{2001 + number}-12-31").month) for number, share in enumerate(shares)])
    for name, below in (("p50", 50), ("p75", 25), ("p90", 10)):
        assert row[f"sizing_yield_{name}_l_m2_day"] == pytest.approx(np.percentile(by_year, below))
        assert row[f"annual_yield_{name}_l_m2_year"] == pytest.approx(np.percentile(annual, below))
        january = found.months[f"yield_{name}_l_m2_month"].iloc[0]
        assert january == pytest.approx(31 * np.percentile(by_year, below))
    assert row["reliability"] == pytest.approx(np.percentile(by_year, 10) / np.percentile(by_year, 50))
    assert row["years_of_record"] == 5
    # 0.9 ** 5 = 0.59, by hand.
    assert any(note.startswith("Only 5 years of record: with a chance of 59 %") for note in found.notes)
    assert not any("years of record" in note for note in decided(years=(1.0,) * 10).notes)


def test_a_typical_year_knows_no_poor_year_and_no_tank():
    days = daily(record="typical-year")
    found = decided(record="typical-year", days=followed(days, 0))
    assert not [name for name in found.places if any(part in name for part in ("p50", "p75", "p90", "reliability",
                                                                              "tank", "spell"))]
    assert found.places["years_of_record"].tolist() == [0]
    assert not [name for name in found.months if "_p" in name.replace("_person", "") or "years" in name]
    assert found.storage.empty
    assert any(note.startswith("A typical year holds no poor year") for note in found.notes)


def walked(litres, area, tank, need):
    """Share of days met by a tank that is full at first, day by day."""
    stored, met = tank, 0
    for one in litres:
        have = stored + area * one
        met += have >= need * (1 - 1e-9)
        stored = min(tank, max(0.0, have - need))
    return met / len(litres)


def test_tanks_stand_beside_the_smallest_area_that_serves():
    days = daily((1.0, 0.9), noise=0.6)
    table = places([*HERE, (11.0, 40.0)])
    wishes = Wishes(need_of(3.0), share_of_days=0.9, tank_days=(0.0, 2.0, 30.0))
    found = decide(monthly_of(days), table, still=STILL, wishes=wishes, preferences=ORDER, days=followed(days, 0))
    curve = found.storage[found.storage["name"] == "v0"]
    assert curve["tank_per_person_l"].tolist() == [0.0, 6.0, 90.0]
    litres = days["daily_yield"].to_numpy()[:, 0, 0]
    for row in curve.itertuples():
        area, tank = row.area_per_person_m2, row.tank_per_person_l
        assert row.share_of_days_served == pytest.approx(walked(litres, area, tank, 3.0))
        assert row.share_of_days_served >= 0.9
        # The area is the smallest to a thousandth.
        assert walked(litres, area * 0.998, tank, 3.0) < 0.9
    assert curve["area_per_person_m2"].is_monotonic_decreasing
    chosen = found.places.set_index("name").loc["v0"]
    pair = (chosen["tank_per_person_l"], chosen["area_with_tank_per_person_m2"])
    assert pair in set(zip(curve["tank_per_person_l"], curve["area_per_person_m2"], strict=True))
    other = found.places.set_index("name").loc["v1"]
    assert np.isnan(other["area_with_tank_per_person_m2"])
    assert set(found.storage[found.storage["name"] == "v1"]["reason"]) == {"no day with yield and need"}


def test_a_dear_tank_is_small_and_a_cheap_one_large():
    days = daily((1.0,), noise=0.6)
    found = []
    for price in (1000.0, 0.001):
        wishes = Wishes(need_of(3.0), tank_days=(0.0, 2.0, 30.0), tank_price_per_litre=price)
        found.append(decided(wishes, cost=COST, days=followed(days, 0)).places["tank_per_person_l"].iloc[0])
    assert found == [0.0, 90.0]


def test_the_longest_poor_spell_is_counted_from_the_days():
    days = daily()
    days["daily_yield"][100:107] *= 0.3
    found = decide(monthly_of(days), places(HERE), still=STILL, preferences=ORDER, days=followed(days, 0),
                   wishes=Wishes(need_of(3.0), poor_share=0.55)).places.iloc[0]
    # April gives 3 L m-2 a day and the area 3 / 1.8 m2: 0.3 of it are 1.5 of 3 L, half the need.
    assert (found["longest_poor_spell_days"], found["longest_poor_spell_start"]) == (7, "2001-04-11")
    rich = decided(days=followed(daily(), 0)).places.iloc[0]
    assert (rich["longest_poor_spell_days"], rich["longest_poor_spell_start"]) == (0, "")


def test_prices_in_the_still_file_make_cost_columns():
    row = decided(Wishes(need_of(4.5)), cost=COST).places.iloc[0]
    # 3.125 m2 a person, 625 m2 for 200, 417 stills of 1.5 m2; 15 a year per m2.
    assert row["stills_village"] == 417
    assert row["capital_village"] == pytest.approx(417 * 1.5 * 120)
    assert row["annual_cost_per_person"] == pytest.approx(417 * 1.5 * 15 / 200)
    litres = float(3.0 * SEASON @ DAYS) * 0.8
    assert row["cost_per_litre"] == pytest.approx(15 / litres, rel=1e-3)
    assert row["cost_per_litre_low"] == pytest.approx(15 / (1.25 * litres), rel=1e-3)
    assert row["cost_per_litre_high"] == pytest.approx(15 / (0.75 * litres), rel=1e-3)
    assert row["currency"] == "shells"
    plain = decided(Wishes(need_of(4.5))).places
    assert not [name for name in plain if "cost" in name or "capital" in name or name in ("currency", "stills_village")]


def test_unknown_numbers_of_people_leave_the_person_known():
    table = places([*HERE, (11.0, 40.0)], population=[np.nan, 40.0])
    rows = decided(Wishes(need_of(4.5)), table=table).places.set_index("name")
    assert rows.loc["v0", "area_per_person_m2"] == pytest.approx(2.5)
    assert np.isnan(rows.loc["v0", "area_village_m2"])
    assert "area_village_m2" not in decided(table=places(HERE)).places


def test_feed_brine_and_salt_balance_by_mass():
    table = places(HERE, feed_salinity_g_kg=[0.0])
    row = decided(table=table).places.iloc[0]
    # Fresh water, two parts in three become distillate... with a factor of 1.5 feed is 3 and brine 2 of each litre.
    assert row["feed_l_m2_day"] == pytest.approx(3 * 1.8)
    assert row["brine_l_m2_day"] == pytest.approx(2 * 1.8)
    assert row["salt_kg_m2_year"] == 0.0
    salty = decided(table=places(HERE, feed_salinity_g_kg=[10.0])).places.iloc[0]
    # Water of 20 degC weighs 0.9982 kg a litre (CRC Handbook); the salt of the feed is all that is left.
    assert salty["salt_kg_m2_year"] == pytest.approx(0.9982 * 3 * salty["annual_yield_l_m2_year"] * 10 / 1000)
    unmixed = decided(still=Still("fresh", (Panel(1.0, 15.0),), concentration_factor=1.0))
    assert not [name for name in unmixed.places if "feed" in name or "brine" in name]
    assert any("no feed or brine is told" in note for note in unmixed.notes)
