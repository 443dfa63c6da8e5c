"""Days seen through their steps: both engines, known answers, cuts in time, and gaps."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from stillfield.errors import MethodError
from stillfield.physics import compiling
from stillfield.physics.basin import diffuse_gain
from stillfield.physics.correlation import VARIANTS, Day
from stillfield.physics.day_shape import day_from_steps
from stillfield.physics.forcing import step_forcing
from stillfield.physics.step_days import PREDICTORS, StepDays
from stillfield.physics.still import Still
from stillfield.physics.sun import day_length, sun_over_steps
from stillfield.settings.still_file import load_still_file

FOLDER = Path(__file__).parents[2] / "config" / "stills"
STILLS = {path.stem: load_still_file(path) for path in sorted(FOLDER.glob("*.yaml"))}
SHALLOW, DEEP = STILLS["single-slope-glass"], STILLS["deep-basin"]
LATITUDES = np.array([-58.0, -35.0, -12.0, 0.0, 8.0, 22.0, 41.0, 60.0])
SHIFTS = np.array([0.1, -0.5, 0.5, 0.0, -0.3, 0.25, -0.07, 0.4])
DAYS = np.arange(164, 176)
ENGINES = ("compiled", "numpy")
# q is a difference of two sums of temperatures, good to single precision of a few tens of degrees.
TOLERANCE = {"warm_hours": 1e-3, "sky_depression": 2e-3}


def weather(steps: int, names: str = "", seed: int = 3) -> dict[str, np.ndarray]:
    random = np.random.default_rng(seed)
    sun = sun_over_steps(LATITUDES, DAYS, steps, SHIFTS)
    share = np.repeat(random.uniform(0.1, 0.75, (len(DAYS), len(LATITUDES))), steps, axis=0)
    ghi = sun.normal_outside * sun.step_mean_cos_zenith * share * random.uniform(0.7, 1.0, share.shape)
    temp = random.uniform(10.0, 30.0, ghi.shape)
    made = {"ghi": ghi, "temp_air": temp, "wind_speed": random.uniform(0.2, 8.0, ghi.shape)}
    more = {
        "dni": 0.6 * ghi / np.maximum(sun.up, 0.2), "dhi": 0.4 * ghi, "temp_dew": temp - 10.0,
        "relative_humidity": random.uniform(10.0, 100.0, ghi.shape),
    }
    made |= {name: more[name] for name in names.split()}
    return {name: values.astype(np.float32) for name, values in made.items()}


def days_of(still: Still, given, steps: int, engine: str, cuts=(), days=DAYS) -> list[Day]:
    """Predictors by windows that end at the days `cuts` and with the record."""
    walk = StepDays(still, LATITUDES, steps_per_day=steps, clock_to_solar_hours=SHIFTS, engine=engine)
    found, start = [], 0
    for end in (*cuts, len(days)):
        part = {name: values[start * steps : end * steps] for name, values in given.items()}
        day, count = walk.advance(part, days[start:end], last=end == len(days))
        assert day.transmitted.shape == (count, len(LATITUDES))
        found.append(day)
        start = end
    return found


def joined(days: list[Day]) -> dict[str, np.ndarray]:
    return {name: np.concatenate([getattr(day, name) for day in days]) for name in PREDICTORS}


def double(given: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    return {name: values.astype(float) for name, values in given.items()}


@pytest.mark.parametrize("steps", [4, 6, 24, 48])
@pytest.mark.parametrize("names", ["", "temp_dew", "dni relative_humidity", "dhi temp_dew", "dni dhi temp_dew"])
@pytest.mark.parametrize("still", STILLS.values(), ids=STILLS.keys())
def test_engines_agree(still, names, steps):
    given = weather(steps, names)
    quick = joined(days_of(still, given, steps, "compiled"))
    plain = joined(days_of(still, double(given), steps, "numpy"))
    for name in PREDICTORS:
        assert quick[name].dtype == np.float32
        assert np.ptp(plain[name]) > 0.0
        np.testing.assert_allclose(
            quick[name], plain[name], rtol=1e-4, atol=TOLERANCE.get(name, 2e-4), err_msg=name
        )


@pytest.mark.parametrize("engine", ENGINES)
@pytest.mark.parametrize("cuts", [(1,), (11,), (1, 2, 3, 5, 11), (4, 8), tuple(range(1, 12))])
@pytest.mark.parametrize("still", [SHALLOW, DEEP], ids=["shallow", "deep"])
def test_cuts_in_time_change_no_digit(still, cuts, engine):
    given = weather(24, "temp_dew")
    given["ghi"][24 * 4 + 3 : 24 * 4 + 12, 2] = np.nan
    whole, cut = joined(days_of(still, given, 24, engine)), days_of(still, given, 24, engine, cuts)
    for name, values in joined(cut).items():
        np.testing.assert_array_equal(values, whole[name], err_msg=name)
    assert [len(day.transmitted) for day in cut][:-1] == [
        end - start - (start == 0) for start, end in zip((0, *cuts[:-1]), cuts, strict=True)
    ]


@pytest.mark.parametrize("engine", ENGINES)
def test_even_light_without_beam_has_known_answers(engine):
    """Diffuse light round the clock: no peak, nothing warmer by day, and the still's diffuse gain."""
    steps, count = 24, 20
    even = np.full((count * steps, len(LATITUDES)), 100.0, np.float32)
    hour = np.tile(np.arange(steps), count)[:, None] + np.zeros(len(LATITUDES))
    given = {
        "ghi": even, "dni": 0.0 * even, "dhi": even, "wind_speed": 0.0 * even + 2.25,
        "temp_air": (20.0 + 5.0 * np.cos(hour * np.pi / 12.0)).astype(np.float32),
    }
    days = np.arange(40, 40 + count)
    found = joined(days_of(SHALLOW, given, steps, engine, days=days))
    gain = diffuse_gain(SHALLOW)
    np.testing.assert_allclose(found["transmitted"], 8.64 * (gain.sky + gain.ground), rtol=1e-5)
    np.testing.assert_allclose(found["temp_air"], 20.0, rtol=1e-5)
    np.testing.assert_allclose(found["temp_range"], 10.0, rtol=1e-5)
    np.testing.assert_allclose(found["wind_speed"], 2.25, rtol=1e-5)
    np.testing.assert_allclose(found["warm_hours"], 0.0, atol=1e-4)
    np.testing.assert_allclose(found["windy_hours"], 0.0, atol=1e-6)
    np.testing.assert_allclose(found["peakiness"][3:], 1.0, rtol=1e-5)


def test_fao_day_length():
    """FAO-56, Example 9: 20 S on 3 September has 11.7 h; our sun, whose declination is another, 11.63."""
    flat = np.zeros((24, 1), np.float32)
    given = {"ghi": flat, "temp_air": flat, "wind_speed": flat}
    for engine in ENGINES:
        walk = StepDays(SHALLOW, np.array([-20.0]), steps_per_day=24, engine=engine)
        day, _ = walk.advance(given, np.array([246]), last=True)
        assert float(day.day_length[0, 0]) == pytest.approx(11.7, abs=0.08)


@pytest.mark.parametrize("engine", ENGINES)
def test_day_length_is_that_of_the_sun(engine):
    found = joined(days_of(SHALLOW, weather(24), 24, engine))
    np.testing.assert_allclose(found["day_length"], day_length(LATITUDES, DAYS), rtol=2e-5)


def test_the_whole_record_gives_the_same_days():
    """All but the last day's peakiness, which in a typical year goes on with the first day."""
    given = double(weather(24, "temp_dew"))
    place = {"latitude": LATITUDES, "day_of_year": DAYS, "steps_per_day": 24}
    forcing, transmitted = step_forcing(given, DEEP, **place, clock_to_solar_hours=SHIFTS)
    whole = day_from_steps(given, forcing, transmitted, DEEP, **place)
    found = joined(days_of(DEEP, given, 24, "numpy"))
    for name in PREDICTORS:
        end = -1 if name == "peakiness" else None
        np.testing.assert_allclose(found[name][:end], getattr(whole, name)[:end], rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("engine", ENGINES)
def test_the_last_day_is_followed_by_its_own_early_hours(engine):
    given = weather(24)
    again = {name: np.concatenate([values, values[-24:]]) for name, values in given.items()}
    days = np.append(DAYS, DAYS[-1])
    found = joined(days_of(DEEP, given, 24, engine))
    longer = joined(days_of(DEEP, again, 24, engine, days=days))
    np.testing.assert_allclose(found["peakiness"], longer["peakiness"][:-1], rtol=1e-6)


@pytest.mark.parametrize("engine", ENGINES)
def test_gaps_stay_in_the_days_and_numbers_they_belong_to(engine):
    given = weather(24, "temp_dew")
    for column, name in enumerate(("ghi", "temp_air", "wind_speed", "temp_dew")):
        given[name][24 * (2 + column) + 11, column] = np.nan
    found = joined(days_of(SHALLOW, given, 24, engine))
    light = {"transmitted", "warm_hours", "sky_depression", "windy_hours"}
    warmth = {"temp_air", "temp_range", "warm_hours", "sky_depression"}
    wanted = {0: light, 1: warmth, 2: {"wind_speed", "windy_hours"}, 3: {"sky_depression"}}
    for name, values in found.items():
        missing = {(int(day), int(cell)) for day, cell in np.argwhere(np.isnan(values))}
        assert missing == {(2 + cell, cell) for cell, names in wanted.items() if name in names}, name


@pytest.mark.parametrize("engine", ENGINES)
def test_missing_sunshine_counts_as_none_for_the_peak(engine):
    given = weather(24)
    dark = {name: values.copy() for name, values in given.items()}
    given["ghi"][24 * 5 + 12] = np.nan
    dark["ghi"][24 * 5 + 12] = 0.0
    found, other = (joined(days_of(DEEP, one, 24, engine)) for one in (given, dark))
    np.testing.assert_allclose(found["peakiness"], other["peakiness"], rtol=1e-6)


def test_more_cells_than_a_strip():
    """Cells beyond the first strip of the compiled pass carry their own state."""
    copies = 150  # of 8 cells
    given = weather(24, "temp_dew")
    wide = {name: np.tile(values, copies) for name, values in given.items()}
    walk = StepDays(
        DEEP, np.tile(LATITUDES, copies), steps_per_day=24, clock_to_solar_hours=np.tile(SHIFTS, copies),
        engine="compiled",
    )
    half = len(DAYS) // 2 * 24
    first, _ = walk.advance({name: values[:half] for name, values in wide.items()}, DAYS[: half // 24], last=False)
    rest, _ = walk.advance({name: values[half:] for name, values in wide.items()}, DAYS[half // 24 :], last=True)
    narrow = joined(days_of(DEEP, given, 24, "compiled"))
    for name, values in joined([first, rest]).items():
        np.testing.assert_allclose(values, np.tile(narrow[name], copies), rtol=1e-5, atol=1e-4, err_msg=name)


def test_it_has_all_that_the_hourly_variant_asks_for():
    day = days_of(SHALLOW, weather(24), 24, "numpy")[0]
    assert day.variant == "hourly"
    letters = set("".join(VARIANTS["hourly"])) - {"1", "E", "m", "n"}  # from the days around it
    assert letters == set("STwNDPqkv")
    assert len(PREDICTORS) == len(letters)


def test_the_engine_follows_what_is_installed(monkeypatch):
    monkeypatch.setattr(compiling, "find_spec", lambda name: None)
    given = weather(24)
    chosen, plain = (joined(days_of(SHALLOW, given, 24, engine)) for engine in ("auto", "numpy"))
    np.testing.assert_array_equal(chosen["transmitted"], plain["transmitted"])
    with pytest.raises(MethodError, match="numba"):
        StepDays(SHALLOW, LATITUDES, steps_per_day=24, engine="compiled")
