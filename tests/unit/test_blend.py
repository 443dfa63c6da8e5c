"""Blend: the mass balance of salt up to a taste limit."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.decisions.blend import (
    BLEND_CAUTION,
    CHLORIDE_SHARE_OF_SEA_SALT,
    TASTE_LIMITS,
    blend_under,
    salinity_mg_l,
)
from stillfield.errors import DecisionError


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
