"""Need: published figures, profile through the year, households."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.decisions.need import (
    DAYS_OF_MONTHS,
    FIGURES,
    daily_need,
    factors_of_mean_one,
    households,
    monthly_need,
    need_of,
    need_of_days,
)
from stillfield.errors import DecisionError

SUMMER = [1.0, 1.0, 1.0, 1.0, 1.2, 1.5, 1.5, 1.5, 1.2, 1.0, 1.0, 1.0]


def test_parts_of_the_sphere_table_add_up_to_its_printed_total():
    """Sphere Handbook, basic survival needs (the 2011 edition prints the same table): 7.5 to 15 L in all."""
    parts = [FIGURES[name] for name in ("drinking", "cooking", "hygiene")]
    assert sum(part.low for part in parts) == FIGURES["basic"].low == 7.5
    assert sum(part.high for part in parts) == FIGURES["basic"].high == 15.0
    assert FIGURES["drinking-and-cooking"].high == FIGURES["drinking"].high + FIGURES["cooking"].high


def test_every_figure_says_where_it_is_printed():
    for name, figure in FIGURES.items():
        assert figure.name == name
        assert 0.0 < figure.low <= figure.litres_per_person_day == figure.high
        assert "quoted from memory" in figure.source


def test_a_name_or_a_number_gives_the_litres():
    assert need_of().figure == "drinking"
    assert need_of("basic").litres_per_person_day == 15.0
    stated = need_of(4)
    assert (stated.litres_per_person_day, stated.figure) == (4.0, "stated")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"figure": "drinkin"}, "no such figure of need"),
        ({"figure": 0.0}, "litres per person and day cannot be"),
        ({"figure": float("nan")}, "litres per person and day cannot be"),
        ({"people_per_household": -1.0}, "people per household cannot be"),
        ({"share": 0.0}, "share of the need"),
        ({"share": 1.01}, "share of the need"),
        ({"month_factors": [1.0] * 11}, "seasonal profile"),
        ({"month_factors": [0.0] * 12}, "seasonal profile"),
        ({"month_factors": [1.0] * 11 + [-0.1]}, "seasonal profile"),
        ({"month_factors": [1.0] * 11 + [float("nan")]}, "seasonal profile"),
    ],
)
def test_what_cannot_be_is_refused(arguments, words):
    with pytest.raises(DecisionError, match=words):
        need_of(**arguments)


def test_factors_stand_as_they_are_and_their_mean_is_told():
    need = need_of(3.0, month_factors=SUMMER)
    assert daily_need(need, 1.0).tolist() == pytest.approx([3.0 * factor for factor in SUMMER])
    by_hand = (2 * 1.2 * 30.5 + 1.5 * 92 + (365.25 - 61 - 92)) / 365.25
    assert need.mean_factor == pytest.approx(by_hand, rel=1e-12)


def test_factors_of_mean_one_keep_the_litres_of_the_year():
    scaled = need_of(3.0, month_factors=factors_of_mean_one(SUMMER))
    assert monthly_need(scaled, 1.0).sum() == pytest.approx(3.0 * 365.25, rel=1e-12)
    assert scaled.month_factors[6] / scaled.month_factors[0] == pytest.approx(1.5)


def test_need_of_many_places_is_that_of_each():
    need = need_of("drinking", month_factors=SUMMER, share=0.5)
    people = np.array([[10.0, 0.0, np.nan], [7.0, 250.0, 1.0]])
    litres = monthly_need(need, people)
    assert litres.shape == (12, 2, 3)
    for month in range(12):
        assert litres[month, 1, 1] == pytest.approx(3.0 * 0.5 * SUMMER[month] * DAYS_OF_MONTHS[month] * 250.0)
    assert (litres[:, 0, 1] == 0.0).all()
    assert np.isnan(litres[:, 0, 2]).all()


def test_a_household_needs_what_its_people_need():
    need = need_of(3.0, people_per_household=6.0)
    assert daily_need(need, need.people_per_household)[0] == 18.0
    assert households(need, [0, 1, 6, 7, 1200]).tolist() == [0.0, 1.0, 1.0, 2.0, 200.0]
    assert households(need_of(people_per_household=4.9), 49.0) == 10.0


def test_days_take_the_need_of_their_month():
    need = need_of(2.0, month_factors=SUMMER)
    days = need_of_days(need, [1.0, 3.0], [12, 1, 6])
    assert days.tolist() == [[2.0, 6.0], [2.0, 6.0], [3.0, 9.0]]
    with pytest.raises(DecisionError, match="month of the record"):
        need_of_days(need, 1.0, [0])


@pytest.mark.parametrize("people", [-1.0, float("inf")])
def test_people_that_cannot_be_are_refused(people):
    with pytest.raises(DecisionError, match="number of people"):
        daily_need(need_of(), people)
