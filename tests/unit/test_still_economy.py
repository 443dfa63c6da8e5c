"""Money in a still file: what arrives as records, what the physics does not see, and every class of fault."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import pytest

from stillfield.decisions.cost import ENDS, Part, StillCost, annual_cost
from stillfield.decisions.panel import PanelSupply
from stillfield.decisions.upgrade import Modification
from stillfield.errors import RunFileError
from stillfield.settings.economy import CostKeys, ModificationKeys, PartKeys
from stillfield.settings.still_file import load_still_design, load_still_file

STILLS = sorted((Path(__file__).parents[2] / "config" / "stills").glob("*.yaml"))

#: Three sound lines; a test appends its own from line 4 on.
SOUND = """\
name: plain
panels: [{share: 1, tilt_deg: 15}]
cover: {material: glass}
"""
COST = "cost: {capital_per_m2: 100, life_years: 10, interest: 0.08}\n"


@pytest.fixture
def load(tmp_path):
    def load_text(text):
        (tmp_path / "still.yaml").write_text(text)
        return load_still_design(tmp_path / "still.yaml", given="still.yaml")

    return load_text


def faults(load, text):
    with pytest.raises(RunFileError) as caught:
        load(text)
    return [str(fault) for fault in caught.value.faults]


def test_a_still_without_money_has_none(load):
    design = load(SOUND)
    assert design.cost is design.modification is None
    assert load(SOUND + "cost:\nmodification:\n") == design


def test_the_still_does_not_know_its_money(load):
    assert load(SOUND + COST).still == load(SOUND).still
    assert load(SOUND + COST).still.fingerprint() == load(SOUND).still.fingerprint()


def test_one_price_for_the_whole(load):
    text = """\
cost:
  currency: shells
  capital_per_m2: 100
  capital_low_per_m2: 80
  capital_high_per_m2: 130
  life_years: 10
  life_low_years: 5
  life_high_years: 15
  salvage_share: 0.2
  interest: 0.08
  maintenance_share: 0.15
  maintenance_per_m2_year: 2
  electricity_wh_m2_day: 10
  electricity_price_per_kwh: 0.5
  availability: 0.9
  unit_area_m2: 1.5
"""
    part = Part("still", 100.0, 10.0, 0.2, price_low=80.0, price_high=130.0, life_low=5.0, life_high=15.0)
    assert load(SOUND + text).cost == StillCost((part,), 0.08, "shells", 0.15, 2.0, 10.0, 0.5, 0.9, 1.5)


def test_parts_with_lives_of_their_own(load):
    text = """\
cost:
  interest: 0.05
  parts:
    - {name: film, price_per_m2: 4, life_years: 2, price_low_per_m2: 3, price_high_per_m2: 6, life_low_years: 1,
       life_high_years: 3, salvage_share: 0.1}
    - {name: frame, price_per_m2: 50, life_years: 12}
"""
    film = Part("film", 4.0, 2.0, 0.1, price_low=3.0, price_high=6.0, life_low=1.0, life_high=3.0)
    assert load(SOUND + text).cost == StillCost((film, Part("frame", 50.0, 12.0)), 0.05)


def test_a_modification_with_a_panel_or_a_price(load):
    months = "[" + ", ".join(["1.1"] * 12) + "]"
    text = f"""\
modification:
  name: fan
  yield_factor: 1.2
  low: 1.1
  high: 1.3
  monthly_factors: {months}
  extra_capital_per_m2: 8
  life_years: 5
  salvage_share: 0.1
  maintenance_per_m2_year: 0.5
  electricity_wh_m2_day: 20
  panel: {{price_per_wp: 2, life_years: 15, system_efficiency: 0.6}}
"""
    panel = PanelSupply(2.0, 15.0, 0.6)
    wanted = Modification("fan", 1.2, 1.1, 1.3, (1.1,) * 12, 8.0, 5.0, 0.1, 0.5, 20.0, panel=panel)
    assert load(SOUND + COST + text).modification == wanted
    priced = text[: text.index("  panel")] + "  electricity_price_per_kwh: 0.3\n"
    assert load(SOUND + COST + priced).modification.electricity_price_per_kwh == 0.3


def test_every_number_of_the_records_can_be_set():
    whole = {name for name in CostKeys.model_fields if name.startswith(("capital", "life", "salvage"))}
    assert set(CostKeys.model_fields) - whole == {field.name for field in fields(StillCost)}
    assert set(ModificationKeys.model_fields) == {field.name for field in fields(Modification)}
    assert len(PartKeys.model_fields) == len(fields(Part))


CHANGE = "modification: {name: fan, yield_factor: 1.2, low: 1.1, high: 1.3"


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        ("cost: {interest: 0.08}",
         "line 4, cost: needs parts, or capital_per_m2 and life_years (absent: capital_per_m2, life_years)"),
        ("cost: {interest: 0.08, capital_per_m2: 9}",
         "line 4, cost: needs parts, or capital_per_m2 and life_years (absent: life_years)"),
        ("cost: {interest: 0, capital_per_m2: 9, parts: [{name: a, price_per_m2: 1, life_years: 1}]}",
         "line 4, cost: either parts or capital_per_m2, not both"),
        ("cost: {capital_per_m2: 9, life_years: 3}",
         "line 4, cost.interest: is missing: Interest of a year above inflation; 0.08 is 8 % [a-1]"),
        ("cost: {capital_per_m2: 9, life_years: 3, interest: 8}",
         "line 4, cost.interest: should be between 0 and 1 (got 8)"),
        ("cost: {capital_per_m2: 9, capital_low_per_m2: 10, life_years: 3, interest: 0}",
         "line 4, cost: low end of the capital should not be above the capital (got 10 above 9)"),
        ("cost: {capital_per_m2: 9, life_years: 3, life_high_years: 2, interest: 0}",
         "line 4, cost: high end of the life should not be below the life (got 2 below 3)"),
        ("cost:\n  interest: 0\n  parts:\n    - {name: a, price_per_m2: 1, life_years: 1}\n"
         "    - {name: b, price_per_m2: 1, price_high_per_m2: 0.5, life_years: 1}",
         "line 8, cost.parts (item 2): high end of the price should not be below the price (got 0.5 below 1)"),
        ("cost: {interest: 0, parts: []}", "line 4, cost.parts: should be a list of 1 to 40 (got 0 items)"),
        ("cost: {interest: 0, parts: [{name: a, price_per_m2: 1}]}",
         "line 4, cost.parts (item 1).life_years: is missing: Years until it is replaced [a]"),
        ("cost: {capital_per_m2: 5 EUR, life_years: 3, interest: 0}",
         "line 4, cost.capital_per_m2: should be a number between 0 and 1000000000000 (got the text '5 EUR'; write the "
         "number alone, in the unit of the key)"),
        ("cost: 12", "line 4, cost: should be a group of keys (got 12)"),
        (COST + CHANGE.replace("1.1", "1.25") + "}",
         "line 5, modification: low should not be above the yield_factor (got 1.25 above 1.2)"),
        (COST + CHANGE + ", electricity_wh_m2_day: 5}",
         "line 5, modification: electricity_wh_m2_day also needs electricity_price_per_kwh or a panel"),
        (COST + CHANGE + ", electricity_price_per_kwh: 1, panel: {price_per_wp: 1, life_years: 9}}",
         "line 5, modification: electricity comes from electricity_price_per_kwh or from a panel, not from both"),
        (COST + CHANGE + ", monthly_factors: [1, 1]}",
         "line 5, modification.monthly_factors: should be a list of 12 (got 2 items)"),
        (COST + CHANGE + f", monthly_factors: [{', '.join(['1'] * 11)}, 0]}}",
         "line 5, modification: monthly_factors should be above 0 (got 0)"),
        (COST + CHANGE + ", extra_capital: 4}",
         "line 5, modification.extra_capital: unknown key (did you mean 'extra_capital_per_m2'?)"),
        (CHANGE + "}",
         "line 4, modification: also needs 'cost' of the still, against which it is compared"),
    ],
)  # fmt: skip
def test_each_fault_names_its_line_key_and_cure(load, lines, expected):
    assert faults(load, SOUND + lines + "\n") == [expected]


def test_a_fault_of_money_is_a_fault_of_the_still_file(tmp_path):
    path = tmp_path / "still.yaml"
    path.write_text(SOUND + "cost: {interest: 2}\n")
    with pytest.raises(RunFileError, match=r"cost\.interest: should be between 0 and 1 \(got 2\)"):
        load_still_file(path)


@pytest.mark.parametrize("path", STILLS, ids=lambda path: path.stem)
def test_shipped_costs_say_that_they_are_examples(path):
    assert "# Example figures, replace by local prices; no source.\ncost:" in path.read_text(encoding="utf-8")
    cost = load_still_design(path).cost
    low, central, high = (annual_cost(cost, end).total for end in ENDS)
    assert 0 < low < central < high
    assert cost.currency == "money"


def test_a_shipped_still_shows_a_modification():
    shown = {path.stem: load_still_design(path).modification for path in STILLS}
    assert [name for name, modification in shown.items() if modification is not None] == ["double-slope-glass"]
    assert shown["double-slope-glass"].panel is not None
