"""One village, worked by hand in DEVELOPERS.md: every line adds up, and the package says the same.

The numbers are read from the text. What they should be is worked out by `worked_arithmetic`, which is plain Python.
"""

from __future__ import annotations

import ast
import math
import operator
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import worked_arithmetic as plain
from month_samples import months_of_days
from stillfield.decide import Days, Preferences, decide
from stillfield.decisions.cost import Part, StillCost
from stillfield.decisions.need import need_of
from stillfield.physics.still import Panel, Still
from stillfield.stages.size import Wishes
from stillfield.vocabulary import WATER_CAUTION

TEXT = (Path(__file__).parents[2] / "DEVELOPERS.md").read_text(encoding="utf-8")
SECTION = re.search(r"## One village, worked by hand\n(.*?)(?=\n## |\Z)", TEXT, re.DOTALL).group(1)
WEIGHTS = {"yield": 0.3, "people": 0.3, "salinity": 0.2, "distance": 0.2}
WORKS, SHARE_OF_DAYS = 0.9, 0.995


def table(heading: str) -> list[list[str]]:
    """Rows of the table whose heading starts so."""
    lines = SECTION[SECTION.index(f"| {heading} |"):].splitlines()
    rows = lines[2: next(number for number, line in enumerate(lines) if not line.startswith("|"))]
    return [[cell.strip() for cell in row.strip("|").split("|")] for row in rows]


def steps() -> dict[str, tuple[str, str]]:
    """Label of every line of the blocks to its expression and the value printed behind it."""
    found = {}
    for block in re.findall(r"```text\n(.*?)```", SECTION, re.DOTALL)[1:]:
        for line in re.sub(r"\n +", " ", block).splitlines():
            label, said = line[:34].strip(), line[34:]
            expression, _, value = said.rpartition(" = ") if " = " in said else ("", "", said)
            found[label] = (expression, value.split()[0])
    return found


STEPS = steps()
MONTHS = table("month")
LISTED = [float(one) for one in re.search(r"```text\n(.*?)```", SECTION, re.DOTALL).group(1).split()]
MEANS = {2005 + column: [float(row[1 + column].split()[0]) for row in MONTHS] for column in range(3)}
VILLAGES = table("village")
WALKED = table("day")

_OPERATORS = {ast.Add: operator.add, ast.Sub: operator.sub, ast.Mult: operator.mul, ast.Div: operator.truediv,
              ast.Pow: operator.pow}


def evaluated(node: ast.AST) -> float:
    """Value of an expression of numbers, the four operations, powers and logarithms."""
    match node:
        case ast.Expression(body=body):
            return evaluated(body)
        case ast.Constant(value=int() | float() as value):
            return float(value)
        case ast.BinOp(left=left, op=op, right=right):
            return _OPERATORS[type(op)](evaluated(left), evaluated(right))
        case ast.Call(func=ast.Name(id="log"), args=[value]):
            return math.log(evaluated(value))
    raise ValueError(ast.dump(node))


def half_unit(printed: str) -> float:
    """Half a unit of the last digit that is printed."""
    return 0.5 * 10.0 ** -len(printed.partition(".")[2])


def works_out() -> dict[str, float]:
    """What the lines should say, from the inputs alone."""
    litres, months = plain.day_by_day(MEANS, 2006, 8, LISTED)
    needs = [5.0 if month in (7, 8) else 4.0 for month in months]
    august = [of_year[7] for of_year in (MEANS[2005], [*MEANS[2006][:7], sum(LISTED) / 31], MEANS[2007])]
    mean = sum(august) / 3
    years = {year: sum(litres[365 * n: 365 * (n + 1)]) for n, year in enumerate(MEANS)}
    annual, tank = sum(years.values()) / 3, 2 * sum(needs) / len(needs)
    area = 5.0 / mean / WORKS
    ten, five = plain.recovery(0.08, 10), plain.recovery(0.08, 5)
    yearly = 1.1 * (80 * ten + 30 * five) - 8 * (ten - 0.08)
    brine = mean * 0.9982 / 0.5
    criteria = [plain.scaled([float(row[at]) for row in VILLAGES], at == 2) for at in (1, 2, 3, 4)]
    scores = [sum(weight * one[at] for weight, one in zip(WEIGHTS.values(), criteria, strict=True)) for at in range(3)]
    return {
        "mean of August 2006": august[1], "mean of August": mean, "need of a person in August": 5.0,
        "area of a person": area, "area, weathered still": area / 0.75, "area, new still": area / 1.25,
        "area of the village": area * 240, "stills, whole ones": area * 240 / 1.5,
        "August, reached in 5 of 10 years": plain.reached(august, 0.5),
        "August, reached in 3 of 4 years": plain.reached(august, 0.75),
        "August, reached in 9 of 10 years": plain.reached(august, 0.9),
        "reliability": plain.reached(august, 0.9) / plain.reached(august, 0.5),
        **{f"year {year}": total for year, total in years.items()},
        "mean year": annual, "year, reached in 9 of 10": plain.reached(years.values(), 0.9),
        "mean need of a day": tank / 2, "tank of a person": tank, "days that must be met": 0.995 * 1095,
        "area with that tank, by trial": plain.least_area(litres, needs, tank, WORKS, SHARE_OF_DAYS),
        "distillate of 1 L m-2": WORKS * float(STEPS["area with that tank, by trial"][1]),
        "recovery factor, 8 %, 10 years": ten, "recovery factor, 8 %, 5 years": five,
        "sinking fund factor, 10 years": ten - 0.08, "pay-off": 80 * ten + 30 * five,
        "upkeep": 0.1 * (80 * ten + 30 * five), "what comes back": 8 * (ten - 0.08), "cost of a year": yearly,
        "litres of a year": WORKS * annual, "cost of a litre": yearly / WORKS / annual,
        "the same, new still": yearly / WORKS / annual / 1.25,
        "the same, weathered still": yearly / WORKS / annual / 0.75,
        "capital of the village": 342 * 1.5 * 110, "cost of a year, of a person": 342 * 1.5 * yearly / 240,
        "distillate": mean * 0.9982, "brine": brine, "feed": 1.5 * brine, "brine to get rid of": brine / 1.00668,
        "feed to bring": 1.5 * brine / 1.00388, "salt of a year": annual * 0.9982 * 3 * 8 / 1000,
        **{f"{name} of Tessamar": one[0] for name, one in
           zip(("litres", "people", "salinity", "distance"), criteria, strict=True)},
        **{f"score of {row[0]}": score for row, score in zip(VILLAGES, scores, strict=True)},
    }


@pytest.mark.parametrize("label", STEPS)
def test_every_line_adds_up_and_says_what_plain_arithmetic_says(label):
    expression, printed = STEPS[label]
    expected = works_out()[label]
    if expression:
        value = evaluated(ast.parse(expression, mode="eval"))
        # The line may start from rounded numbers; what it prints must still be what they give.
        assert value == pytest.approx(float(printed), abs=1.02 * half_unit(printed) + 2e-4 * abs(value))
        assert expected == pytest.approx(float(printed), abs=1.001 * half_unit(printed))
    else:
        # By trial, and rounded up so that it is enough.
        assert expected <= float(printed) < expected + 0.001


def test_no_step_is_left_out():
    assert set(STEPS) == set(works_out())


def test_months_add_up():
    for name, *litres, mean, need, ratio in MONTHS:
        values = [float(one.split()[0]) for one in litres]
        assert sum(values) / 3 == pytest.approx(float(mean), abs=1e-9), name
        assert float(need) == (5.0 if name in ("July", "August") else 4.0)
        assert float(need) / (sum(values) / 3) == pytest.approx(float(ratio), abs=0.00051)
    ratios = [float(row[6]) for row in MONTHS]
    assert MONTHS[ratios.index(max(ratios))][0] == "August"
    means = [float(row[4]) for row in MONTHS]
    assert MONTHS[means.index(min(means))][0] == "January"


def test_the_walk_through_august_is_what_a_tank_does():
    litres, months = plain.day_by_day(MEANS, 2006, 8, LISTED)
    needs = [5.0 if month in (7, 8) else 4.0 for month in months]
    area, tank = float(STEPS["area with that tank, by trial"][1]), 2 * sum(needs) / len(needs)
    rows = plain.walk(litres, needs, area, tank, WORKS)
    first = 365 + sum(plain.MONTH_DAYS[:7])
    assert len(WALKED) == 31
    for number, row in enumerate(WALKED):
        there, left, met = rows[first + number]
        given = litres[first + number]
        expected = [number + 1, given, rows[first + number - 1][1], area * WORKS * given, there, 5.0, left]
        np.testing.assert_allclose([float(cell.split(",")[0]) for cell in row], expected, atol=0.00501)
        assert row[5].endswith("short") != met
    short = [number + 1 for number in range(31) if not rows[first + number][2]]
    assert f"The days {', '.join(map(str, short[:-1]))} and {short[-1]} fall short" in SECTION
    assert sum(not met for _, _, met in rows) == len(short) == 5
    assert sum(not met for _, _, met in plain.walk(litres, needs, area - 0.001, tank, WORKS)) > 5
    without = [5.0 / 2.6 * one < 0.5 * 5.0 for one in LISTED]
    assert [day + 1 for day in range(31) if without[day]][:5] == [7, 8, 9, 10, 11]
    assert plain.longest_run(without) == 5


def test_the_caution_stands_with_it():
    assert WATER_CAUTION in " ".join(SECTION.split()).replace("drinks: a solar", "drinks: A solar")


@pytest.fixture(scope="module")
def said():
    """What the package says of the three villages."""
    litres, _ = plain.day_by_day(MEANS, 2006, 8, LISTED)
    shares = [float(row[1]) for row in VILLAGES]
    days = xr.Dataset(
        {"daily_yield": (("time", "latitude", "longitude"), np.outer(litres, shares)[:, None, :])},
        {"time": pd.date_range("2005-01-01", "2007-12-31", freq="D"), "latitude": [10.0],
         "longitude": [40.0, 41.0, 42.0]},
        {"record": "series"},
    )
    places = pd.DataFrame({
        "name": [row[0] for row in VILLAGES], "id": ["1", "2", "3"], "latitude": 10.0, "longitude": [40.0, 41.0, 42.0],
        "population": [float(row[2]) for row in VILLAGES], "feed_salinity_g_kg": [float(row[3]) for row in VILLAGES],
        "distance_to_feed_km": [float(row[4]) for row in VILLAGES],
    })
    cost = StillCost(
        (Part("basin", 80.0, 10.0, salvage_share=0.1), Part("cover", 30.0, 5.0)), interest=0.08, maintenance_share=0.1,
        availability=WORKS, unit_area_m2=1.5,
    )
    need = need_of(4.0, month_factors=[1.25 if month in (7, 8) else 1.0 for month in range(1, 13)])
    followed = {cell: share * np.array(litres)[None] for cell, share in enumerate(shares)}
    still = Still("by hand", (Panel(1.0, 15.0),), concentration_factor=1.5)
    wishes = Wishes(need, share_of_days=SHARE_OF_DAYS, tank_days=(0.0, 2.0))
    return decide(
        months_of_days(days, band=(0.75, 1.25)), places, still=still, cost=cost, wishes=wishes,
        preferences=Preferences(WEIGHTS, uncertainty=None), days=Days(followed, days["time"]),
    )


COLUMNS = {
    "mean of August": "sizing_yield_l_m2_day", "need of a person in August": "need_l_person_day",
    "area of a person": "area_per_person_m2", "area, weathered still": "area_per_person_at_low_yield_m2",
    "area, new still": "area_per_person_at_high_yield_m2", "area of the village": "area_village_m2",
    "August, reached in 5 of 10 years": "sizing_yield_p50_l_m2_day",
    "August, reached in 3 of 4 years": "sizing_yield_p75_l_m2_day",
    "August, reached in 9 of 10 years": "sizing_yield_p90_l_m2_day", "reliability": "reliability",
    "mean year": "annual_yield_l_m2_year", "year, reached in 9 of 10": "annual_yield_p90_l_m2_year",
    "tank of a person": "tank_per_person_l", "cost of a litre": "cost_per_litre",
    "the same, new still": "cost_per_litre_low", "the same, weathered still": "cost_per_litre_high",
    "capital of the village": "capital_village", "cost of a year, of a person": "annual_cost_per_person",
    "brine to get rid of": "brine_l_m2_day", "feed to bring": "feed_l_m2_day", "salt of a year": "salt_kg_m2_year",
}


@pytest.mark.parametrize("label", COLUMNS)
def test_the_package_says_the_same(said, label):
    printed = STEPS[label][1]
    row = said.places.set_index("name").loc["Tessamar"]
    assert float(row[COLUMNS[label]]) == pytest.approx(float(printed), abs=1.01 * half_unit(printed))


def test_the_package_decides_the_same(said):
    rows = said.places.set_index("name")
    row = rows.loc["Tessamar"]
    assert (row["sizing_month"], row["least_yield_month"], row["stills_village"]) == (8, 1, 342)
    assert (row["longest_poor_spell_days"], row["longest_poor_spell_start"]) == (5, "2006-08-07")
    # The package finds the area to a thousandth of itself.
    least = works_out()["area with that tank, by trial"]
    assert least * (1 - 1e-9) <= row["area_with_tank_per_person_m2"] <= least * 1.001
    for village, *_ in VILLAGES:
        assert rows.loc[village, "score"] == pytest.approx(works_out()[f"score of {village}"], abs=1e-6)
    ranked = re.findall(r"score of (\w+) .*-> rank (\d)", SECTION)
    assert {name: str(rows.loc[name, "rank"]) for name, _ in ranked} == dict(ranked)
    assert said.places["name"].tolist() == ["Bolvane", "Tessamar", "Cerrith"]
