"""The heat balance against an independent coding of its equations, solved tightly and in the lagged way.

That coding is `stillfield.evidence.reference_balance`; it uses nothing of the kernel.
"""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.evidence.reference_balance import lagged_solution, made_weather, tight_solution
from stillfield.physics.heat_balance import Forcing, simulate
from stillfield.physics.still import Panel, Still

DAYS = 3


STILLS = {
    "shallow": Still("shallow", (Panel(1.0, 15.0),), brine_depth_m=0.01, condition="new"),
    "usual": Still("usual", (Panel(0.5, 12.0), Panel(0.5, 12.0, 180.0))),
    "salt": Still("salt", (Panel(1.0, 15.0),), feed_salinity_g_kg=35.0, condition="weathered"),
    "deep": Still("deep", (Panel(1.0, 15.0),), brine_depth_m=0.15, condition="neglected"),
}
CLIMATES = {"hot": (950.0, 32.0), "mild": (600.0, 16.0)}


@pytest.mark.parametrize("climate", CLIMATES)
@pytest.mark.parametrize("name", STILLS)
def test_day_within_half_a_percent_of_a_tight_solution(name, climate):
    peak, air = CLIMATES[climate]
    forcing = made_weather(DAYS, 7, peak=peak, mean_air=air)
    expected = tight_solution(forcing, STILLS[name], DAYS)
    got = simulate(forcing, STILLS[name], spinup_days=0, engine="numpy").daily_yield[:, 0]
    np.testing.assert_allclose(got, expected, rtol=5e-3)
    np.testing.assert_allclose(got.sum(), expected.sum(), rtol=1e-3)


# Sharma & Mullick 1993, ASME J. Solar Energy Eng. 115:231: lagged coefficients give the 24 h output within
# 1.5 %.
@pytest.mark.parametrize("name", ["usual", "salt"])
def test_total_within_the_published_bound_of_the_lagged_scheme(name):
    forcing = made_weather(DAYS, 11, peak=900.0, mean_air=27.0)
    expected = lagged_solution(forcing, STILLS[name], DAYS).sum()
    got = simulate(forcing, STILLS[name], spinup_days=0, engine="numpy").daily_yield.sum()
    assert got == pytest.approx(expected, rel=0.015)


@pytest.mark.parametrize("relation", ["dunkle", "moist-air"])
@pytest.mark.parametrize("depth", [0.01, 0.02, 0.20])
def test_halving_the_step_moves_a_day_by_less_than_two_permille(depth, relation):
    forcing = _several(6, peak=900.0, mean_air=25.0)
    still = Still("any", (Panel(1.0, 15.0),), brine_depth_m=depth, heat_transfer=relation)
    coarse, fine = (simulate(forcing, still, substeps=n, engine="numpy").daily_yield for n in (2, 4))
    np.testing.assert_allclose(coarse, fine, rtol=2e-3)


def _several(cells: int, *, peak: float, mean_air: float, days: int = 4) -> Forcing:
    """Weather of several cells side by side."""
    each = [made_weather(days, seed, peak=peak, mean_air=mean_air) for seed in range(cells)]
    names = ("absorbed", "cover_absorbed", "temp_air", "wind_speed", "temp_sky")
    return Forcing(*(np.concatenate([getattr(one, name) for one in each], axis=1) for name in names))


def test_sub_steps_converge_in_second_order():
    forcing = _several(6, peak=900.0, mean_air=25.0)
    still = STILLS["usual"]
    runs = [simulate(forcing, still, substeps=n, engine="numpy").daily_yield for n in (2, 4, 32)]
    coarse, fine = (float(np.sqrt(np.mean((run - runs[2]) ** 2))) for run in runs[:2])
    assert 3.0 < coarse / fine < 6.0


@pytest.mark.parametrize("relation", ["dunkle", "moist-air"])
def test_compiled_and_numpy_give_the_same_litres(relation):
    forcing = _several(5, peak=900.0, mean_air=6.0)
    forcing.temp_air[30:34, 2] = np.nan
    still = Still("any", (Panel(1.0, 15.0),), heat_transfer=relation, feed_salinity_g_kg=10.0)
    ours, theirs = (simulate(forcing, still, engine=engine) for engine in ("numpy", "compiled"))
    np.testing.assert_allclose(theirs.daily_yield, ours.daily_yield, rtol=1e-12)
    np.testing.assert_array_equal(theirs.frost, ours.frost)
    assert np.isnan(ours.daily_yield).any()


def test_compiled_record_is_that_of_numpy():
    forcing = _several(3, peak=900.0, mean_air=20.0)
    ours, theirs = (simulate(forcing, STILLS["usual"], engine=e, record=True) for e in ("numpy", "compiled"))
    for name, values in vars(ours.record).items():
        np.testing.assert_allclose(getattr(theirs.record, name), values, rtol=1e-9, atol=1e-8, err_msg=name)
    np.testing.assert_allclose(theirs.daily_yield, simulate(forcing, STILLS["usual"], engine="numpy").daily_yield)


@pytest.mark.parametrize("engine", ["numpy", "compiled"])
def test_single_precision_gives_the_same_litres(engine):
    double = _several(4, peak=900.0, mean_air=20.0)
    single = Forcing(*(np.asarray(field, dtype=np.float32) for field in vars(double).values()))
    runs = [simulate(forcing, STILLS["usual"], engine=engine).daily_yield for forcing in (double, single)]
    assert runs[1].dtype == np.float32
    np.testing.assert_allclose(runs[1], runs[0], rtol=1e-4)
