"""Optics of steps in single precision: against the exact path, over latitudes, clocks, steps, stills and skies."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.polynomial import Polynomial

from stillfield.errors import MethodError
from stillfield.physics import compiling
from stillfield.physics.cover import MATERIALS, transmittance_and_absorptance
from stillfield.physics.forcing import step_forcing
from stillfield.physics.irradiance import complete_irradiance
from stillfield.physics.step_optics import angle_curves, cover_curves, step_optics
from stillfield.physics.still import CoverMaterial, Panel, Still
from stillfield.physics.sun import sun_over_steps
from stillfield.settings.still_file import load_still_file

FOLDER = Path(__file__).parents[2] / "config" / "stills"
STILLS = {path.stem: load_still_file(path) for path in sorted(FOLDER.glob("*.yaml"))}
STILLS["odd"] = Still(
    "odd", (Panel(0.7, 35.0, 30.0), Panel(0.3, 60.0, 200.0, "north")), CoverMaterial(1.6, 60.0, 0.01), wall_gain=0.3
)
LATITUDES = np.array([-60.0, -45.0, -33.3, -23.4, -12.0, -0.5, 0.0, 4.0, 15.5, 23.45, 30.0, 38.0, 47.0, 52.0, 60.0])
SHIFTS = np.random.default_rng(8).permutation(np.linspace(-0.5, 0.5, len(LATITUDES)))
DAYS = np.array([1, 17, 49, 80, 81, 121, 172, 173, 204, 266, 300, 355, 366])


def weather(steps: int, light: str = "ghi", seed: int = 5) -> dict[str, np.ndarray]:
    """Steps from deep cloud to a clear sky, in single precision; `light` names what the file has."""
    random = np.random.default_rng(seed)
    sun = sun_over_steps(LATITUDES, DAYS, steps, SHIFTS)
    day = np.repeat(random.uniform(0.05, 0.8, (len(DAYS), len(LATITUDES))), steps, axis=0)
    ghi = sun.normal_outside * sun.step_mean_cos_zenith * np.clip(day + random.normal(0, 0.1, day.shape), 0.0, 0.9)
    dni, dhi = complete_irradiance(sun, ghi)
    made = {
        "ghi": ghi, "temp_air": random.uniform(-15.0, 45.0, ghi.shape), "wind_speed": random.uniform(0, 9, ghi.shape),
    }
    if "dni" in light:
        made["dni"] = 0.9 * dni
    if "dhi" in light:
        made["dhi"] = np.minimum(1.1 * dhi + 3.0, ghi)
    return {name: values.astype(np.float32) for name, values in made.items()}


def both(still: Still, given: dict[str, np.ndarray], steps: int, days=DAYS, latitude=LATITUDES, shift=SHIFTS):
    """Forcing and S, compiled and exact (the same weather in double precision)."""
    place = {
        "latitude": latitude, "day_of_year": days, "steps_per_day": steps, "clock_to_solar_hours": shift,
    }
    double = {name: values.astype(float) for name, values in given.items()}
    quick = step_forcing(given, still, engine="compiled", **place)
    return quick, step_forcing(double, still, engine="numpy", **place)


@pytest.mark.parametrize("steps", [4, 8, 24, 96])
@pytest.mark.parametrize("light", ["ghi", "ghi dni", "ghi dhi", "ghi dni dhi"])
@pytest.mark.parametrize("still", STILLS.values(), ids=STILLS.keys())
def test_a_step_is_the_exact_one(still, light, steps):
    """The goal is 0.1 % of a day's S and 1 W m-2 of a step; the polynomials leave a tenth of it and less."""
    (quick, daily), (exact, exact_daily) = both(still, weather(steps, light), steps)
    assert quick.absorbed.dtype == daily.dtype == np.float32
    assert exact.absorbed.max() > 300.0
    np.testing.assert_allclose(quick.absorbed, exact.absorbed, rtol=1e-4, atol=0.04)
    np.testing.assert_allclose(quick.cover_absorbed, exact.cover_absorbed, rtol=1e-4, atol=0.04)
    np.testing.assert_allclose(daily, exact_daily, rtol=1e-4, atol=5e-4)


@pytest.mark.parametrize("humidity", ["none", "temp_dew", "relative_humidity"])
@pytest.mark.parametrize("steps", [4, 24])
def test_the_sky_is_the_exact_one(humidity, steps):
    given = weather(steps)
    random = np.random.default_rng(2)
    if humidity == "temp_dew":
        given["temp_dew"] = (given["temp_air"] - random.uniform(0, 50, given["ghi"].shape)).astype(np.float32)
    elif humidity == "relative_humidity":
        given["relative_humidity"] = random.uniform(-2.0, 104.0, given["ghi"].shape).astype(np.float32)
    (quick, _), (exact, _) = both(STILLS["single-slope-glass"], given, steps)
    np.testing.assert_allclose(quick.temp_sky, exact.temp_sky, atol=2e-3)
    depression = exact.temp_air - exact.temp_sky
    assert depression.min() < 5.0
    assert depression.max() > 15.0


@pytest.mark.parametrize("hours", [-13.5, -11.0, -4.0, 3.0, 7.25, 11.9, 13.0])
def test_a_clock_far_from_the_sun_is_followed(hours):
    """Hours from the clock to solar time as large as a record kept in universal time has."""
    days = np.array([20, 200])
    latitude = np.array([-35.0, 10.0, 58.0])
    sun = sun_over_steps(latitude, days, 24, hours)
    ghi = (800.0 * sun.step_mean_cos_zenith).astype(np.float32)
    given = {"ghi": ghi, "temp_air": ghi * 0.0 + 20.0, "wind_speed": ghi * 0.0 + 2.0, "temp_dew": ghi * 0.0 + 9.0}
    (quick, _), (exact, _) = both(STILLS["odd"], given, 24, days, latitude, hours)
    np.testing.assert_allclose(quick.absorbed, exact.absorbed, atol=0.04)
    np.testing.assert_allclose(quick.temp_sky, exact.temp_sky, atol=2e-3)


def test_polar_night_and_polar_day_are_exact_too():
    days, latitude = np.array([1, 172, 355]), np.array([-72.0, 66.0, 75.0])
    sun = sun_over_steps(latitude, days)
    ghi = (600.0 * sun.step_mean_cos_zenith).astype(np.float32)
    given = {"ghi": ghi, "temp_air": ghi * 0.0 - 5.0, "wind_speed": ghi * 0.0 + 2.0}
    (quick, daily), (exact, exact_daily) = both(STILLS["double-slope-glass"], given, 24, days, latitude, 0.0)
    assert (exact_daily == 0.0).any()
    assert exact_daily.max() > 10.0
    np.testing.assert_allclose(quick.absorbed, exact.absorbed, atol=0.05)
    np.testing.assert_allclose(daily, exact_daily, rtol=1e-4, atol=5e-4)


def test_gaps_stay_where_they_are():
    """A missing value leaves the same numbers missing as on the exact path."""
    steps = 24
    given = weather(steps, "ghi dni dhi")
    given["temp_dew"] = given["temp_air"] - np.float32(8.0)
    for row, (name, values) in enumerate(given.items()):
        values[12 + 48 * row, 3 + row] = np.nan
        if name not in ("dni", "wind_speed"):
            values[24 * 11 + 1, row] = np.nan
    (quick, daily), (exact, exact_daily) = both(STILLS["odd"], given, steps)
    for name in ("absorbed", "cover_absorbed", "temp_sky"):
        missing = np.isnan(getattr(exact, name))
        assert missing.any()
        np.testing.assert_array_equal(np.isnan(getattr(quick, name)), missing)
    np.testing.assert_array_equal(np.isnan(daily), np.isnan(exact_daily))


def test_direct_light_that_is_missing_by_night_does_not_matter():
    given = weather(24, "ghi dni dhi")
    whole, _ = both(STILLS["odd"], given, 24)
    sun = sun_over_steps(LATITUDES, DAYS, 24, SHIFTS)
    given["dni"][sun.sunlit == 0.0] = np.nan
    dark, _ = both(STILLS["odd"], given, 24)
    np.testing.assert_array_equal(dark[0].absorbed, whole[0].absorbed)


def test_negative_readings_at_night_are_taken_as_they_are():
    """A pyranometer reads a few W below zero under a clear night sky."""
    given = weather(24)
    given["ghi"][given["ghi"] == 0.0] = -3.0
    (quick, _), (exact, _) = both(STILLS["single-slope-glass"], given, 24)
    assert exact.absorbed.min() < 0.0
    np.testing.assert_allclose(quick.absorbed, exact.absorbed, rtol=1e-4, atol=0.04)


def test_cells_do_not_know_of_each_other():
    """One cell alone, a strip and more than a strip of cells."""
    random = np.random.default_rng(4)
    latitude, shift = random.uniform(-50, 50, 1100), random.uniform(-0.5, 0.5, 1100)
    days = np.array([100, 101])
    sun = sun_over_steps(latitude, days, 24, shift)
    ghi = (700.0 * sun.step_mean_cos_zenith).astype(np.float32)
    given = {"ghi": ghi, "temp_air": ghi * 0.0 + 20.0, "wind_speed": ghi * 0.0 + 2.0}

    def run(some: slice):
        part = {name: values[:, some] for name, values in given.items()}
        return step_forcing(
            part, STILLS["odd"], latitude=latitude[some], day_of_year=days, steps_per_day=24,
            clock_to_solar_hours=shift[some], engine="compiled",
        )

    whole = run(slice(None))
    for some in (slice(0, 1), slice(511, 513), slice(600, 1100)):
        part = run(some)
        np.testing.assert_allclose(part[0].absorbed, whole[0].absorbed[:, some], rtol=1e-6, atol=1e-5)
        np.testing.assert_allclose(part[1], whole[1][:, some], rtol=1e-6)


def test_days_do_not_know_of_each_other():
    given = weather(24)
    place = {"latitude": LATITUDES, "steps_per_day": 24, "clock_to_solar_hours": SHIFTS, "engine": "compiled"}
    whole = step_forcing(given, STILLS["odd"], day_of_year=DAYS, **place)
    for start, end in ((0, 1), (1, 6), (6, len(DAYS))):
        part = {name: values[start * 24 : end * 24] for name, values in given.items()}
        forcing, daily = step_forcing(part, STILLS["odd"], day_of_year=DAYS[start:end], **place)
        np.testing.assert_array_equal(forcing.temp_sky, whole[0].temp_sky[start * 24 : end * 24])
        np.testing.assert_array_equal(daily, whole[1][start:end])


def test_double_precision_takes_the_exact_path():
    given = {name: values.astype(float) for name, values in weather(24).items()}
    place = {"latitude": LATITUDES, "day_of_year": DAYS, "steps_per_day": 24, "clock_to_solar_hours": SHIFTS}
    chosen = step_forcing(given, STILLS["odd"], **place)
    exact = step_forcing(given, STILLS["odd"], engine="numpy", **place)
    assert chosen[0].absorbed.dtype == np.float64
    np.testing.assert_array_equal(chosen[0].absorbed, exact[0].absorbed)


def test_without_numba_the_exact_path_serves_and_compiled_is_refused(monkeypatch):
    monkeypatch.setattr(compiling, "find_spec", lambda name: None)
    given = weather(24)
    place = {"latitude": LATITUDES, "day_of_year": DAYS, "steps_per_day": 24, "clock_to_solar_hours": SHIFTS}
    served = step_forcing(given, STILLS["odd"], **place)
    exact = step_forcing(given, STILLS["odd"], engine="numpy", **place)
    np.testing.assert_array_equal(served[0].absorbed, exact[0].absorbed)
    with pytest.raises(MethodError, match="numba"):
        step_forcing(given, STILLS["odd"], engine="compiled", **place)


@pytest.mark.parametrize("name", [*MATERIALS, "nothing", "dense", "dark"])
def test_curves_of_the_cover(name):
    """Weighted with what a panel takes in; 'nothing' has to pass everything."""
    others = {
        "nothing": CoverMaterial(1.0, 0.0), "dense": CoverMaterial(1.9, 4.0), "dark": CoverMaterial(1.526, 32.0, 0.02),
    }
    cover = {**MATERIALS, **others}[name]
    cosine = np.linspace(1e-4, 1.0, 5001)
    exact = transmittance_and_absorptance(cosine, cover)
    for curve, wanted in zip(cover_curves(cover), exact, strict=True):
        error = Polynomial(curve)(2.0 * np.sqrt(cosine) - 1.0) - wanted
        assert np.abs(cosine * error).max() < 5e-5


def test_curves_of_angles():
    cosine, sine, arc = (Polynomial(curve) for curve in angle_curves())
    turn = np.linspace(1e-3, np.pi, 2001)
    np.testing.assert_allclose(cosine(turn**2), np.cos(turn), atol=2e-6)
    np.testing.assert_allclose(turn * sine(turn**2), np.sin(turn), atol=2e-6)
    x = np.linspace(0.0, 1.0, 2001)
    np.testing.assert_allclose(np.sqrt(1.0 - x) * arc(x), np.arccos(x), atol=2e-7)


def test_too_long_steps_are_refused():
    with pytest.raises(ValueError, match="steps_per_day is 3"):
        step_optics(STILLS["odd"], LATITUDES, steps_per_day=3)
