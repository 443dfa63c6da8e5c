"""Mechanics of the heat balance: days, gaps, frost, start-up, shapes, engines and refusals."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from stillfield.errors import MethodError
from stillfield.physics import compiling
from stillfield.physics.heat_balance import BalanceResult, Forcing, simulate
from stillfield.physics.still import Panel, Still

STILL = Still("plain", (Panel(1.0, 15.0),))
DEEP = replace(STILL, brine_depth_m=0.20)


def made_days(days: int, *, peak: float = 800.0, air: float = 25.0, steps: int = 24) -> Forcing:
    """Two cells, the second with more sun."""
    hour = ((np.arange(steps * days) + 0.5) * 24.0 / steps % 24.0)[:, None]
    sun = peak * np.maximum(np.sin((hour - 6.0) / 12.0 * np.pi), 0.0) * np.array([0.8, 1.0])
    level = air + 5.0 * np.sin((hour - 9.0) / 12.0 * np.pi) + np.zeros_like(sun)
    return Forcing(0.7 * sun, 0.05 * sun, level, np.full_like(sun, 2.0), level - 12.0)


def run(forcing: Forcing, still: Still = STILL, **more) -> BalanceResult:
    return simulate(forcing, still, engine="numpy", **more)


def test_equal_days_give_equal_litres():
    daily = run(made_days(4)).daily_yield
    np.testing.assert_allclose(daily, daily[:1].repeat(4, axis=0), rtol=1e-4)
    assert (daily[:, 1] > daily[:, 0]).all()


@pytest.mark.parametrize("still", [STILL, DEEP])
def test_default_start_up_reaches_the_periodic_state(still):
    first = run(made_days(3), still).daily_yield[0]
    settled = run(made_days(3), still, spinup_days=30).daily_yield[0]
    np.testing.assert_allclose(first, settled, rtol=5e-3)


def test_cyclic_year_starts_on_its_last_days():
    forcing = made_days(6)
    forcing.absorbed[-48:] = 0.0
    cyclic = run(forcing, DEEP, cyclic=True).daily_yield
    unrolled = Forcing(*(np.concatenate([field, field]) for field in vars(forcing).values()))
    np.testing.assert_allclose(cyclic[0], run(unrolled, DEEP).daily_yield[6], rtol=1e-3)
    assert (cyclic[0] < 0.9 * run(forcing, DEEP).daily_yield[0]).all()


def test_night_belongs_to_the_day_that_heated_the_water():
    forcing = made_days(3)
    forcing.absorbed[24:48] = 0.0  # no sun on the second day
    daily = run(forcing, DEEP).daily_yield
    record = run(forcing, DEEP, record=True).record
    np.testing.assert_allclose(daily[0], record.distillate[6:30].sum(axis=0), rtol=1e-12)
    np.testing.assert_allclose(daily[1], record.distillate[30:54].sum(axis=0), rtol=1e-12)


def test_start_hour_moves_the_cut():
    forcing = made_days(2)
    record = run(forcing, record=True).record
    daily = run(forcing, day_start_hour=0.0).daily_yield
    np.testing.assert_allclose(daily[1], record.distillate[24:48].sum(axis=0), rtol=1e-12)


def test_last_day_is_completed_with_its_own_early_hours():
    forcing = made_days(2)
    repeated = Forcing(*(np.concatenate([field, field[24:]]) for field in vars(forcing).values()))
    np.testing.assert_array_equal(run(forcing).daily_yield, run(repeated).daily_yield[:2])


def test_blocks_do_not_change_the_litres(monkeypatch):
    forcing = made_days(2)
    many = Forcing(*(np.tile(field, (1, 5)) for field in vars(forcing).values()))
    whole = run(many).daily_yield
    monkeypatch.setattr("stillfield.physics.balance_numpy.BLOCK_CELLS", 3)
    np.testing.assert_array_equal(run(many).daily_yield, whole)


def test_compiled_blocks_do_not_change_the_litres():
    forcing = made_days(2)
    many = Forcing(*(np.tile(field, (1, 150)) for field in vars(forcing).values()))  # more than one block
    alone = simulate(forcing, STILL, engine="compiled").daily_yield
    np.testing.assert_allclose(simulate(many, STILL, engine="compiled").daily_yield, np.tile(alone, (1, 150)))


@pytest.mark.parametrize("steps", [4, 8, 48])
def test_other_steps_give_near_the_same_litres(steps):
    hourly, other = (run(made_days(2, steps=n), steps_per_day=n).daily_yield for n in (24, steps))
    np.testing.assert_allclose(other, hourly, rtol=0.15 if steps == 4 else 0.05)


def test_scalars_are_spread_over_the_cells():
    forcing = made_days(2)
    spread = Forcing(forcing.absorbed, forcing.cover_absorbed, forcing.temp_air, np.array(2.0), forcing.temp_sky)
    np.testing.assert_array_equal(run(spread).daily_yield, run(forcing).daily_yield)


def test_the_callers_arrays_stay_writable_and_unchanged():
    forcing = made_days(2)
    before = forcing.absorbed.copy()
    run(forcing)
    forcing.absorbed[0] = forcing.absorbed[0]
    np.testing.assert_array_equal(forcing.absorbed, before)


def test_day_with_a_gap_is_missing_and_the_next_recovers():
    forcing = made_days(5)
    whole = run(forcing).daily_yield
    forcing.temp_air[36:39, 0] = np.nan
    daily = run(forcing).daily_yield
    assert np.isnan(daily[1, 0])
    np.testing.assert_allclose(daily[2:, 0], whole[2:, 0], rtol=0.01)
    np.testing.assert_array_equal(daily[:, 1], whole[:, 1])


def test_gap_in_the_night_costs_the_day_before():
    forcing = made_days(4)
    forcing.wind_speed[50, 0] = np.nan  # 02:00 of the third day
    assert np.isnan(run(forcing).daily_yield[:, 0]).tolist() == [False, True, False, False]


def test_deep_basin_is_missing_until_it_has_forgotten_the_gap():
    forcing = made_days(9)
    whole = run(forcing, DEEP).daily_yield
    forcing.absorbed[60, 0] = np.nan  # noon of the third day
    daily = run(forcing, DEEP).daily_yield
    assert np.isnan(daily[:, 0]).tolist() == [False, False, True, True, True, False, False, False, False]
    np.testing.assert_allclose(daily[5:, 0], whole[5:, 0], rtol=0.05)


def test_gap_before_the_first_yield_day_counts():
    forcing = made_days(6)
    forcing.absorbed[3, 1] = np.nan
    daily = run(forcing, DEEP).daily_yield
    assert np.isnan(daily[:, 1]).tolist() == [True, True, False, False, False, False]
    assert np.isfinite(daily[:, 0]).all()


def test_gap_at_the_end_of_a_cyclic_year_reaches_its_start():
    forcing = made_days(6)
    forcing.absorbed[-12, 0] = np.nan
    daily = run(forcing, DEEP, cyclic=True).daily_yield
    assert np.isnan(daily[:, 0]).tolist() == [True, True, False, False, False, True]
    assert np.isfinite(daily[:, 1]).all()


def test_memory_may_be_longer_than_a_cyclic_record():
    forcing = made_days(1)
    forcing.absorbed[12, 0] = np.nan
    assert np.isnan(run(forcing, DEEP, cyclic=True).daily_yield).tolist() == [[True, False]]


def test_all_missing_is_all_missing():
    forcing = made_days(2)
    forcing.temp_air[:] = np.nan
    result = run(forcing)
    assert np.isnan(result.daily_yield).all()
    assert not result.frost.any()


def test_frost_is_flagged_and_makes_nothing():
    result = run(made_days(4, peak=150.0, air=-15.0), record=True)
    assert result.frost.all()
    assert (result.daily_yield == 0.0).all()
    assert (result.record.ice > 0.0).all()
    assert result.record.water.min() > -30.0


def test_no_frost_in_the_warm():
    assert not run(made_days(2)).frost.any()


# Ice holds the water at its freezing point: 2 cm of water give off 20 kg m-2 of ice times 333.4 kJ/kg.
def test_water_freezes_at_its_freezing_point_first():
    forcing = made_days(6, peak=0.0, air=-12.0)
    record = run(forcing, spinup_days=0, record=True).record
    half_frozen = (record.ice[:, 0] > 0.0) & (record.ice[:, 0] < 0.99 * 6.6e6)
    assert half_frozen.sum() > 10
    np.testing.assert_allclose(record.water[half_frozen, 0], 0.0, atol=1e-9)
    assert record.ice.max() == pytest.approx(992.0 * 0.02 * 333.4e3, rel=0.01)


def test_salt_keeps_the_frost_away():
    forcing = made_days(3, air=4.0, peak=500.0)
    fresh, salt = (run(forcing, salinity=s).frost.mean() for s in (0.0, 150.0))
    assert fresh > salt


def test_salinity_and_pressure_per_cell():
    forcing = made_days(2)
    both = run(forcing, salinity=np.array([0.0, 50.0]), pressure=np.array([101325.0, 101325.0])).daily_yield
    np.testing.assert_allclose(both[:, 0], run(forcing, salinity=0.0).daily_yield[:, 0], rtol=1e-12)
    np.testing.assert_allclose(both[:, 1], run(forcing, salinity=50.0).daily_yield[:, 1], rtol=1e-12)


def test_record_has_the_shape_of_the_weather():
    record = run(made_days(2), record=True).record
    assert {values.shape for values in vars(record).values()} == {(48, 2)}


@pytest.mark.parametrize("shape", [(23, 2), (25, 2), (24,)])
def test_weather_that_is_not_whole_days_is_refused(shape):
    field = np.zeros(shape)
    with pytest.raises(MethodError, match="whole days"):
        run(Forcing(field, field, field, field, field))


def test_start_hour_that_does_not_exist_is_refused():
    with pytest.raises(MethodError, match="0 to 24"):
        run(made_days(1), day_start_hour=24.0)


def test_brine_beyond_the_range_is_refused():
    with pytest.raises(MethodError, match="concentration factor"):
        run(made_days(1), replace(STILL, feed_salinity_g_kg=150.0))


def test_without_numba_auto_takes_numpy_and_compiled_says_how_to_get_it(monkeypatch):
    monkeypatch.setattr(compiling, "find_spec", lambda name: None)
    forcing = made_days(1)
    np.testing.assert_array_equal(
        simulate(forcing, STILL).daily_yield, simulate(forcing, STILL, engine="numpy").daily_yield
    )
    with pytest.raises(MethodError, match=r"stillfield\[speed\]"):
        simulate(forcing, STILL, engine="compiled")


def test_numba_is_not_imported_before_it_is_needed():
    import subprocess
    import sys

    code = "import sys, stillfield.physics.heat_balance; sys.exit('numba' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
