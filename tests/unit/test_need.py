"""Need: published figures, profile through the year, households, blending."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.decisions.need import (
    BLEND_CAUTION,
    CHLORIDE_SHARE_OF_SEA_SALT,
    DAYS_OF_MONTHS,
    FIGURES,
    TASTE_LIMITS,
    blend_under,
    daily_need,
    factors_of_mean_one,
    households,
    monthly_need,
    need_of,
    need_of_days,
    salinity_mg_l,
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


def test_blend_keeps_the_limit_exactly():
    """Mass balance of the salt, worked forward from the answer."""
    raw = np.array([1500.0, 3000.0, 35800.0])
    blend = blend_under(600.0, raw, distillate_mg_l=20.0)
    poured = blend.litres_per_litre - 1.0
    assert (poured * raw + 1.0 * 20.0) / (poured + 1.0) == pytest.approx(np.full(3, 600.0), rel=1e-12)
    assert poured / (poured + 1.0) == pytest.approx(blend.raw_share, rel=1e-12)
    assert blend.caution == BLEND_CAUTION


def test_raw_water_within_the_limit_needs_no_distillate_for_taste():
    blend = blend_under("dissolved-solids-good", [0.0, 600.0, np.nan])
    assert blend.raw_share[:2].tolist() == [1.0, 1.0]
    assert np.isinf(blend.litres_per_litre[:2]).all()
    assert np.isnan(blend.raw_share[2])
    assert np.isnan(blend.litres_per_litre[2])


def test_of_seawater_chloride_is_tasted_before_the_salt_as_a_whole():
    """250 mg/L of chloride are 454 mg/L of sea salt, below the 600 mg/L of dissolved solids."""
    sea = salinity_mg_l(35.0)
    by_salt = blend_under("dissolved-solids-good", sea)
    by_chloride = blend_under("chloride", CHLORIDE_SHARE_OF_SEA_SALT * sea)
    assert by_chloride.raw_share < by_salt.raw_share < 0.02
    assert by_chloride.raw_share * sea == pytest.approx(250.0 / CHLORIDE_SHARE_OF_SEA_SALT)


def test_litre_of_seawater_weighs_what_the_equation_of_state_says():
    """TEOS-10 by gsw; 0.1 % holds the difference of practical and absolute salinity."""
    import gsw

    # gsw takes absolute salinity and conservative temperature.
    for salinity in (5.0, 20.0, 35.0):
        heavy = gsw.rho(salinity, gsw.CT_from_t(salinity, 25.0, 0.0), 0.0)
        assert salinity_mg_l(salinity) == pytest.approx(salinity * heavy, rel=1e-3)
    assert np.isnan(salinity_mg_l([np.nan, 1.0])).tolist() == [True, False]


@pytest.mark.parametrize(
    ("limit", "raw", "distillate"), [("sodium", 1.0, 0.0), (600.0, -1.0, 0.0), (600.0, 1.0, 600.0), (600.0, 1.0, -1.0)]
)
def test_blends_that_cannot_be_are_refused(limit, raw, distillate):
    with pytest.raises(DecisionError, match=r"taste limit|cannot be blended"):
        blend_under(limit, raw, distillate_mg_l=distillate)


def test_taste_limits_carry_their_source():
    assert [limit.limit_mg_l for limit in TASTE_LIMITS.values()] == [600.0, 1000.0, 250.0]
    assert all("WHO" in limit.source for limit in TASTE_LIMITS.values())
