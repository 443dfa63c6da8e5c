"""The daily gain: closed form against fine integration, table against closed form, and its manners."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numba import njit

from stillfield.physics.gain import (
    daily_gain,
    daily_transmitted_from_hours,
    day_moments,
    gain_over_steps,
)
from stillfield.physics.gain_compiled import gain_tables, look_up
from stillfield.physics.gain_table import GainTable, _row
from stillfield.physics.irradiance import (
    complete_irradiance,
    disaggregate_day,
    hourly_diffuse_fraction,
    split_global,
)
from stillfield.physics.still import Panel, Still
from stillfield.physics.sun import day_length, extraterrestrial_irradiation, sun_over_steps

LATITUDES = np.array([-45.0, -33.0, -10.0, 0.0, 15.0, 23.0, 36.0, 45.0])
DAYS = np.arange(3, 367, 13)
STILLS = {
    "single": Still("single", (Panel(1.0, 15.0),)),
    "steep": Still("steep", (Panel(1.0, 30.0),), wall_gain=0.2),
    "double": Still("double", (Panel(0.5, 15.0, 90.0), Panel(0.5, 15.0, 270.0))),
    "odd": Still("odd", (Panel(0.7, 35.0, 30.0), Panel(0.3, 60.0, 200.0, "north"))),
}


def clearness(shape: tuple[int, ...], seed: int = 0) -> np.ndarray:
    return np.random.default_rng(seed).uniform(0.05, 0.8, shape)


@pytest.mark.parametrize("still", STILLS.values(), ids=STILLS.keys())
def test_closed_form_equals_a_day_in_steps_of_ten_minutes(still):
    """Two ways to the same integral: moments over the hour angle, and weather made step by step."""
    k = clearness((len(DAYS), len(LATITUDES)))
    irradiation = k * extraterrestrial_irradiation(LATITUDES, DAYS)
    fine = disaggregate_day(
        irradiation, LATITUDES, DAYS, temp_air=k, wind_speed=k, steps_per_day=144, clock_to_solar_hours=0.3
    )
    steps = gain_over_steps(
        still, LATITUDES, DAYS, ghi=fine.ghi, dni=fine.dni, dhi=fine.dhi, clock_to_solar_hours=0.3
    )
    summed = daily_transmitted_from_hours(steps.transmitted, 144)
    made = daily_gain(still, day_moments(still, LATITUDES, DAYS), k) * irradiation
    np.testing.assert_allclose(made, summed, rtol=4e-3)
    np.testing.assert_allclose(made.mean(), summed.mean(), rtol=5e-4)


def test_closed_form_of_a_flat_still_is_exact():
    """Without panels that the sun may leave there is no kink to integrate over: 2e-4 is the steps' share."""
    still = Still("flat", (Panel(1.0, 0.0),))
    k = clearness((len(DAYS), len(LATITUDES)), 3)
    irradiation = k * extraterrestrial_irradiation(LATITUDES, DAYS)
    fine = disaggregate_day(irradiation, LATITUDES, DAYS, temp_air=k, wind_speed=k, steps_per_day=144)
    steps = gain_over_steps(still, LATITUDES, DAYS, ghi=fine.ghi, dni=fine.dni, dhi=fine.dhi)
    summed = daily_transmitted_from_hours(steps.transmitted, 144)
    made = daily_gain(still, day_moments(still, LATITUDES, DAYS), k) * irradiation
    np.testing.assert_allclose(made, summed, rtol=2e-4)


@pytest.mark.parametrize("still", STILLS.values(), ids=STILLS.keys())
def test_table_equals_closed_form(still):
    k = clearness((len(DAYS), len(LATITUDES)), 1)
    exact = daily_gain(still, day_moments(still, LATITUDES, DAYS), k)
    looked_up = GainTable(still).for_latitudes(LATITUDES).gain(DAYS, k)
    # Erbs' curve has a step at 0.715 or 0.722 that the table bridges over one cell of 0.02.
    step = (k > 0.69) & (k < 0.75)
    np.testing.assert_allclose(looked_up[~step], exact[~step], rtol=1e-3)
    np.testing.assert_allclose(looked_up[step], exact[step], rtol=8e-3)


def test_cells_come_back_in_their_order_and_share_rows():
    rows = GainTable(STILLS["single"]).for_latitudes([40.0, -20.0, 40.0, 40.01])
    assert rows.table.shape[1] == 2
    gain = rows.gain(np.array([172]), np.full((1, 4), 0.6))
    one = GainTable(STILLS["single"]).for_latitudes([-20.0]).gain(np.array([172]), np.array([[0.6]]))
    assert gain[0, 1] == one[0, 0]
    assert gain[0, 0] == gain[0, 2] == gain[0, 3] != gain[0, 1]


def test_transmitted_is_gain_times_irradiation_and_missing_stays_missing():
    rows = GainTable(STILLS["double"]).for_latitudes([10.0, 30.0])
    days = np.array([1, 100, 366])
    irradiation = np.array([[18.0, 12.0], [np.nan, 22.0], [0.0, 11.0]])
    k = irradiation / extraterrestrial_irradiation([10.0, 30.0], days)
    made = rows.transmitted(irradiation, days)
    known = ~np.isnan(irradiation)
    np.testing.assert_allclose(made[known], (rows.gain(days, k) * irradiation)[known], rtol=1e-3)
    assert np.isnan(made[~known]).all()
    assert made[2, 0] == 0.0


@njit(error_model="numpy")
def looked_up(gain, day_of_year, light, out):
    for day in range(len(light)):
        look_up(gain, day_of_year[day] - 1, light[day], out[0, day], out[1, day], out[2, day])


@pytest.mark.parametrize(
    "latitudes", [[21.3], np.linspace(10.0, 10.1, 64), np.linspace(-50.0, 50.0, 37), [75.0, -75.0]]
)
def test_compiled_look_up_equals_that_in_numpy(latitudes):
    """Cells of one row, in long runs of rows, and each in its own."""
    rows = GainTable(STILLS["odd"]).for_latitudes(latitudes)
    days = np.array([1, 59, 172, 355, 366])
    random = np.random.default_rng(8)
    light = random.uniform(-0.5, 45.0, (5, len(latitudes))).astype(np.float32)
    light[random.random(light.shape) < 0.1] = np.nan
    compiled = np.empty((3, *light.shape), np.float32)
    looked_up(gain_tables(rows), days, light, compiled)
    numpy = rows.sunshine(light, days)
    np.testing.assert_allclose(compiled[0], numpy.transmitted, rtol=1e-5, atol=1e-6)
    np.testing.assert_allclose(compiled[1], numpy.clearness, rtol=1e-5, atol=1e-6)
    np.testing.assert_allclose(4.0 * compiled[2] + 12.0, numpy.day_length, rtol=1e-5)
    rounded = np.round(np.asarray(latitudes) / 0.05) * 0.05
    np.testing.assert_allclose(numpy.day_length, day_length(rounded, days))


def test_rows_are_made_once_whatever_the_condition_and_the_basin():
    still = STILLS["steep"]
    first = GainTable(still).for_latitudes([33.0])
    made = _row.cache_info().misses
    again = GainTable(replace(still, name="b", brine_depth_m=0.1).in_condition("new")).for_latitudes([33.0, 33.02])
    assert _row.cache_info().misses == made
    np.testing.assert_array_equal(first.table, again.table)
    GainTable(replace(still, wall_gain=0.9)).for_latitudes([33.0])
    assert _row.cache_info().misses == made + 1


def test_more_irradiation_than_the_sun_gives_is_not_extrapolated():
    rows = GainTable(STILLS["single"]).for_latitudes([20.0])
    one, above = rows.gain(np.array([80]), np.array([[1.0]])), rows.gain(np.array([80]), np.array([[1.4]]))
    assert one == above


def test_polar_night_and_day_give_numbers():
    rows = GainTable(STILLS["single"]).for_latitudes([75.0, -75.0])
    made = rows.transmitted(np.array([[0.0, 30.0], [30.0, 0.0]]), np.array([355, 172]))
    assert np.isfinite(made).all()
    assert made[0, 0] == made[1, 1] == 0.0


def test_pieces_of_days_do_not_change_the_hours():
    """A long run is worked through in pieces; each day must come out as it does alone."""
    latitude = np.linspace(-40.0, 40.0, 300)
    days = np.arange(100, 112)
    ghi = clearness((len(days) * 24, 300), 2) * 1000.0
    whole = gain_over_steps(STILLS["odd"], latitude, days, ghi=ghi, clock_to_solar_hours=0.2)
    for day in (0, 5, 11):
        some = slice(24 * day, 24 * day + 24)
        alone = gain_over_steps(
            STILLS["odd"], latitude, days[day : day + 1], ghi=ghi[some], clock_to_solar_hours=0.2
        )
        np.testing.assert_array_equal(whole.transmitted[some], alone.transmitted)
        np.testing.assert_array_equal(whole.cover_absorbed[some], alone.cover_absorbed)


def test_closure_fills_the_missing_component():
    sun = sun_over_steps([20.0], np.array([150]))
    high = sun.up[:, 0] > 0.1
    dni = np.full((24, 1), 600.0)
    dhi = np.full((24, 1), 120.0)
    ghi = dni * sun.up + dhi
    np.testing.assert_allclose(complete_irradiance(sun, ghi, dni=dni)[1], dhi)
    np.testing.assert_allclose(complete_irradiance(sun, ghi, dhi=dhi)[0][high], dni[high])


def test_steps_of_sunrise_are_judged_by_their_sunlit_part():
    """A sky of even clearness has one diffuse fraction all day, sunrise included."""
    sun = sun_over_steps(np.full(8, 40.0), np.array([60]), 24, np.linspace(0.0, 1.0, 8))
    ghi = 0.5 * sun.normal_outside * sun.step_mean_cos_zenith
    _, dhi = split_global(ghi, sun)
    high = sun.up > 0.07
    assert ((sun.sunlit < 0.95) & high).any()
    np.testing.assert_allclose(dhi[high] / ghi[high], hourly_diffuse_fraction(0.5), rtol=1e-12)


def test_too_coarse_steps_are_refused():
    with pytest.raises(ValueError, match=r"6\.0 h"):
        sun_over_steps([0.0], [1], steps_per_day=2)


def test_a_clock_far_from_the_sun_only_shifts_the_hours():
    """Days cut at UTC on the other side of the world: the same sun, eleven hours later."""
    near = sun_over_steps([35.0], np.array([120]), 24, 0.0)
    far = sun_over_steps([35.0], np.array([120]), 24, -11.0)
    np.testing.assert_allclose(np.roll(near.up, 11, axis=0), far.up, atol=1e-12)
    np.testing.assert_allclose(np.roll(near.east, 11, axis=0), far.east, atol=1e-12)
