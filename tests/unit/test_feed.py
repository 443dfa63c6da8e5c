"""Feed and brine: balances of water and salt, saturation, shapes, words."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
from scipy.integrate import quad

from stillfield.decisions.feed import (
    SATURATION_G_KG,
    brine_warnings,
    draw_off_factor,
    feed_and_brine,
    mean_basin_factor,
    per_day,
    solution_density,
)
from stillfield.errors import StillfieldError
from stillfield.physics.brine import density

#: Percent of salt by mass in saturated brine against temperature [degC]: table of the Salt Institute.
SATURATED_PERCENT = {15.56: 26.395, 21.11: 26.45, 26.67: 26.52, 37.78: 26.68}


@pytest.mark.parametrize("salinity", [0.0, 5.0, 35.0, 90.0])
@pytest.mark.parametrize("factor", [1.2, 2.0, 2.9])
def test_water_and_salt_balance_by_mass(salinity, factor):
    month = feed_and_brine(80.0, factor, salinity)
    feed_kg = month.feed_litres * solution_density(salinity) / 1000
    brine_kg = month.brine_litres * solution_density(salinity * factor) / 1000
    distillate_kg = 80.0 * 0.9982  # density of water at 20 degC
    assert float(feed_kg) == pytest.approx(float(brine_kg) + distillate_kg, rel=1e-12)
    assert float(feed_kg) == pytest.approx(distillate_kg * factor / (factor - 1.0), rel=1e-12)
    assert float(month.salt_kg) == pytest.approx(float(brine_kg) * salinity * factor / 1000, rel=1e-12)
    assert float(month.flushed_share) == pytest.approx(float(brine_kg / feed_kg), rel=1e-12)
    assert (float(month.crystals_kg), bool(month.saturated)) == (0.0, False)


def test_unknown_salinity_gives_litres_and_no_salt():
    month = feed_and_brine(30.0, 1.5)
    assert float(month.feed_litres) == pytest.approx(90.0)
    assert float(month.brine_litres) == pytest.approx(60.0)
    assert month.salt_kg is month.crystals_kg is month.brine_salinity_g_kg is month.saturated is None


def test_months_and_places_at_once_with_one_place_unknown():
    monthly = np.full((12, 3), 100.0)
    months = feed_and_brine(monthly, 2.0, np.array([0.0, np.nan, 140.0]))
    for value in vars(months).values():
        assert value.shape == (12, 3)
    assert months.feed_litres[0, :2] == pytest.approx([200.0, 200.0])
    assert np.isnan(months.salt_kg[:, 1]).all()
    assert months.salt_kg[:, 0] == pytest.approx(0.0)
    assert months.saturated[5].tolist() == [False, False, True]
    assert months.brine_salinity_g_kg[0, 2] == 280.0


def test_past_saturation_the_rest_crystallises():
    """10 kg of mixture with 30 % of salt: 7 kg of water keep 7 x 264/736 kg in solution."""
    month = feed_and_brine(10.0 / 0.9982, 2.0, 150.0)
    assert float(month.salt_kg) == pytest.approx(3.0)
    assert float(month.crystals_kg) == pytest.approx(3.0 - 7.0 * 264 / 736, rel=1e-12)
    assert float(month.brine_litres) == pytest.approx((10.0 - float(month.crystals_kg)) / 1.2006, rel=1e-6)


def test_more_salt_than_brine_leaves_crystals_alone():
    month = feed_and_brine(10.0, 8.0, 200.0)
    assert float(month.crystals_kg) == pytest.approx(float(month.salt_kg))
    assert float(month.brine_litres) == 0.0


def test_saturation_is_that_of_the_handbook():
    for percent in SATURATED_PERCENT.values():
        assert pytest.approx(percent * 10, rel=0.012) == SATURATION_G_KG
    assert pytest.approx(0.360, rel=0.005) == SATURATION_G_KG / (1000 - SATURATION_G_KG)


@pytest.mark.parametrize("salinity", [0.0, 10.0, 35.0, 70.0, 120.0, 160.0])
def test_density_is_near_that_of_sea_salt(salinity):
    assert float(solution_density(salinity)) == pytest.approx(float(density(20.0, salinity)), rel=0.005)
    if salinity <= 42.0:
        assert float(solution_density(salinity)) == pytest.approx(float(gsw.rho(salinity, 20.0, 0.0)), rel=0.002)


@pytest.mark.parametrize("factor", [1.01, 1.5, 2.0, 5.0])
def test_a_batch_basin_has_the_mean_of_its_drying(factor):
    dried = 1.0 - 1.0 / factor
    mean = quad(lambda share: 1.0 / (1.0 - share), 0.0, dried)[0] / dried
    assert float(mean_basin_factor(factor, "batch")) == pytest.approx(mean, rel=1e-9)
    assert float(draw_off_factor(mean, "batch")) == pytest.approx(factor, rel=1e-6)


def test_a_continuous_basin_is_what_leaves_it():
    assert draw_off_factor([1.5, 2.0]).tolist() == mean_basin_factor([1.5, 2.0]).tolist() == [1.5, 2.0]
    assert draw_off_factor(np.array([1.5, 2.0]), "batch").shape == (2,)


@pytest.mark.parametrize("factor", [1.0, 0.5, np.nan, np.inf])
def test_endless_feed_is_refused(factor):
    with pytest.raises(StillfieldError, match="endless feed"):
        feed_and_brine(10.0, factor, 35.0)


@pytest.mark.parametrize("salinity", [-1.0, 300.0])
def test_impossible_feed_is_refused(salinity):
    with pytest.raises(StillfieldError, match="salinity of the feed is impossible"):
        feed_and_brine(10.0, 2.0, np.array([10.0, salinity]))


def test_a_day_of_each_month():
    assert per_day(np.ones((12, 2)) * 62.0)[[0, 3]] == pytest.approx(np.array([[2.0, 2.0], [62 / 30] * 2]))
    with pytest.raises(StillfieldError, match="months should stand first"):
        per_day(np.ones(365))


def test_warnings_name_what_is_wrong():
    assert brine_warnings(None, 2.0, basin_salinity_g_kg=70.0) == ()
    assert brine_warnings([np.nan], 2.0, basin_salinity_g_kg=70.0) == ()
    assert brine_warnings([35.0, np.nan], 2.0, basin_salinity_g_kg=70.0) == ()
    (fresher,) = brine_warnings([2.0, 30.0], 2.0, basin_salinity_g_kg=70.0)
    assert "basin of 70 g/kg, but this feed and flushing give 4 g/kg: fresher, so more" in fresher
    (saltier,) = brine_warnings(60.0, 2.0, basin_salinity_g_kg=70.0)
    assert "120 g/kg: saltier, so fewer" in saltier
    settles, differs = brine_warnings(100.0, 3.0, basin_salinity_g_kg=150.0)
    assert "passes the saturation of salt (264 g/kg)" in settles
    assert "factor of at most 2.6" in settles
    assert "300 g/kg" in differs
    assert "no use" in brine_warnings(255.0, 1.1, basin_salinity_g_kg=280.5)[0]


def test_batch_flushing_keeps_the_basin_fresher():
    assert brine_warnings(35.0, 3.0, basin_salinity_g_kg=35 * 1.648, flushing="batch") == ()
    assert len(brine_warnings(35.0, 3.0, basin_salinity_g_kg=35 * 1.648)) == 1
