"""The invented weather: repeatable, physically possible, and shaped like a dry coast."""

from __future__ import annotations

import json
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.invented import synthetic
from stillfield.sources.invented.synthetic import SyntheticSource, cell_centres, ground_at, read_land
from stillfield.sources.invented.synthetic_fields import (
    Season,
    clear_sky_irradiation,
    clear_sky_parabolas,
    random_waves,
    red_noise,
    relief_elevation,
    season_weight,
    wave_basis,
)
from stillfield.vocabulary import DAY_WEATHER

COAST = Path(__file__).parents[2] / "config" / "demo" / "coast.geojson"
BOX = {"south": 17.5, "north": 22.5, "west": -42.5, "east": -37.5}
VARIABLES = ("irradiation", "temp_air", "temp_air_min", "temp_air_max", "temp_dew", "wind_speed")


def source(**changes) -> SyntheticSource:
    settings = {"land": COAST, **BOX, "shape": (20, 20), "first_year": 2011, "years": 3, "seed": 7}
    return SyntheticSource(**(settings | changes))


@pytest.fixture(scope="module")
def weather() -> xr.Dataset:
    return source().open().load()


@pytest.fixture(scope="module")
def coast_km(weather) -> xr.DataArray:
    latitude, longitude = np.meshgrid(weather.latitude, weather.longitude, indexing="ij")
    ground = ground_at(read_land(COAST), latitude.ravel(), longitude.ravel())
    distance = xr.zeros_like(weather.elevation) + ground.coast_km.reshape(latitude.shape)
    return distance.where(weather.elevation.notnull())


def extraterrestrial(latitude, day_of_year):
    """Daily extraterrestrial radiation, FAO-56 equations 21 and 23 to 25. [MJ m-2]"""
    angle = 2.0 * np.pi * day_of_year / 365.0
    distance = 1.0 + 0.033 * np.cos(angle)
    declination = 0.409 * np.sin(angle - 1.39)
    phi = np.radians(latitude)
    sunset = np.arccos(-np.tan(phi) * np.tan(declination))
    height = sunset * np.sin(phi) * np.sin(declination) + np.cos(phi) * np.cos(declination) * np.sin(sunset)
    return 24.0 * 60.0 / np.pi * 0.0820 * distance * height


def test_the_yardstick_repeats_fao_56_example_8():
    # FAO-56, Example 8: 20 degrees south, 3 September (day 246): 32.2 MJ m-2.
    assert extraterrestrial(-20.0, 246.0) == pytest.approx(32.2, abs=0.05)


# --- repeatability -------------------------------------------------------------------------------


def test_a_seed_gives_the_same_weather_twice(weather):
    xr.testing.assert_identical(weather, source().open())


def test_another_seed_gives_other_weather_on_the_same_land(weather):
    other = source(seed=8).open()
    np.testing.assert_array_equal(other.elevation, weather.elevation)
    for name in VARIABLES:
        assert float((other[name] != weather[name]).where(weather[name].notnull()).mean()) > 0.9
    first, second = (_anomaly(data.irradiation).values.ravel() for data in (weather, other))
    known = np.isfinite(first)
    assert abs(np.corrcoef(first[known], second[known])[0, 1]) < 0.2


def test_a_longer_record_begins_with_the_shorter_one(weather):
    shorter = source(years=2).open()
    for name in VARIABLES:
        np.testing.assert_allclose(shorter[name], weather[name].isel(time=slice(0, 731)), atol=0.011)


def test_a_place_has_the_same_weather_on_a_finer_grid():
    coarse = source(shape=(6, 6), years=1).open()
    fine = source(shape=(18, 18), years=1).open()
    middle = fine.isel(latitude=slice(1, None, 3), longitude=slice(1, None, 3))
    np.testing.assert_allclose(middle.latitude, coarse.latitude)
    np.testing.assert_allclose(middle.elevation, coarse.elevation, atol=0.11)
    for name in VARIABLES:
        np.testing.assert_allclose(middle[name], coarse[name], atol=0.011)


# --- what the rest of the program relies on ------------------------------------------------------


def test_the_dataset_keeps_the_contract_of_sources(weather):
    assert set(weather.data_vars) == set(VARIABLES)
    for name in VARIABLES:
        assert weather[name].dims == ("time", "latitude", "longitude")
        assert weather[name].dtype == np.float32
        assert weather[name].attrs["units"] == DAY_WEATHER[name].unit
        assert float(weather[name].min()) >= DAY_WEATHER[name].low
        assert float(weather[name].max()) <= DAY_WEATHER[name].high
    assert weather.attrs["record"] == "series"
    assert weather.attrs["step_hours"] == 24.0
    assert weather.attrs["clock"] == "own-days"
    assert "nvented" in weather.attrs["origin"]
    conventions = weather.attrs["conventions"]
    assert conventions
    assert all(isinstance(sentence, str) and sentence.endswith(".") for sentence in conventions)
    expected = pd.date_range("2011-01-01", "2013-12-31", freq="D")  # 2012 is a leap year
    assert list(pd.DatetimeIndex(weather.time.values)) == list(expected)


def test_cell_centres_lie_half_a_cell_inside_the_box(weather):
    assert float(weather.latitude[0]) == pytest.approx(17.5 + 0.125)
    assert float(weather.longitude[-1]) == pytest.approx(-37.5 - 0.125)
    np.testing.assert_allclose(np.diff(cell_centres(-1.0, 1.0, 8)), 0.25)


def test_sea_cells_are_missing_exactly_where_the_polygons_say(weather):
    polygons = [feature["geometry"]["coordinates"] for feature in json.loads(COAST.read_text())["features"]]
    expected = np.array(
        [[any(_inside(x, y, rings) for rings in polygons) for x in weather.longitude.values]
         for y in weather.latitude.values]
    )
    assert 0.4 < expected.mean() < 0.7
    np.testing.assert_array_equal(weather.elevation.notnull(), expected)
    for name in VARIABLES:
        known = weather[name].notnull()
        np.testing.assert_array_equal(known.any("time"), expected)
        np.testing.assert_array_equal(known.all("time"), expected)


def _inside(x, y, rings):
    """Even-odd rule, counting the edges a ray to the east crosses; written apart from the program."""
    crossings = 0
    for ring in rings:
        for (x0, y0), (x1, y1) in pairwise(ring):
            if (y0 > y) != (y1 > y) and x < x0 + (y - y0) * (x1 - x0) / (y1 - y0):
                crossings += 1
    return crossings % 2 == 1


# --- physics -------------------------------------------------------------------------------------


def test_no_day_beats_what_a_clear_sky_lets_through(weather):
    ratio = weather.irradiation / extraterrestrial(weather.latitude, weather.time.dt.dayofyear)
    # FAO-56 equation 37: a clear sky at sea level passes 0.75; Linke turbidity 2 is clearer than most.
    assert float(ratio.max()) < 0.80
    assert float(ratio.min()) > 0.05


@pytest.mark.parametrize("day", [15.0, 80.0, 172.0, 266.0, 355.0])
def test_clear_sky_days_agree_with_the_fao_56_clear_sky(day):
    # FAO-56 equation 37 at sea level, 0.75 Ra the year round. A fixed share knows nothing of the longer path
    # of a low winter sun, so 10 % is the agreement to expect; the test below is the sharp one.
    latitude = np.array([17.0, 20.0, 23.0])
    clear = clear_sky_irradiation(latitude, np.array([day]), 3.0)[0]
    np.testing.assert_allclose(clear, 0.75 * extraterrestrial(latitude, day), rtol=0.10)


def test_clear_sky_quadrature_agrees_with_pvlib_minute_by_minute():
    from pvlib import atmosphere, clearsky, irradiance, solarposition

    for date in ("2011-03-21", "2011-06-21", "2011-12-21"):
        times = pd.date_range(date, periods=1440, freq="min", tz="Etc/GMT")
        day = np.array([float(times[0].day_of_year)])
        zenith = solarposition.spa_python(times, 20.0, 0.0)["apparent_zenith"].to_numpy()
        zenith = zenith[zenith < 90.0]
        extra = irradiance.get_extra_radiation(day[0], method="spencer")
        airmass = atmosphere.get_relative_airmass(zenith)
        ghi = clearsky.ineichen(zenith, airmass, 3.5, altitude=0.0, dni_extra=extra)["ghi"]
        expected = ghi.sum() * 60.0 * 1e-6
        # This path has refraction and the almanac's solar position; both are worth less than 1 %.
        assert clear_sky_irradiation(np.array([20.0]), day, 3.5)[0, 0] == pytest.approx(expected, rel=0.01)


def test_parabola_in_turbidity_follows_the_integral():
    latitude, days = np.array([-60.0, -23.0, 0.0, 23.0, 60.0]), np.arange(1.0, 366.0, 28.0)
    level, slope, bend = clear_sky_parabolas(latitude, days)
    for linke in (2.0, 2.7, 3.5, 4.4, 6.2, 7.5, 9.0):
        exact = clear_sky_irradiation(latitude, days, linke)
        parabola = np.exp(level + linke * (slope + linke * bend))
        np.testing.assert_allclose(parabola[:, 1:4], exact[:, 1:4], rtol=0.001)
        np.testing.assert_allclose(parabola, exact, rtol=0.004)


def test_temperatures_are_ordered_and_the_air_is_never_oversaturated(weather):
    land = weather.where(weather.elevation.notnull(), drop=True)
    assert bool(((land.temp_air_min < land.temp_air) | land.temp_air.isnull()).all())
    assert bool(((land.temp_air < land.temp_air_max) | land.temp_air.isnull()).all())
    assert bool(((land.temp_dew < land.temp_air_min) | land.temp_air.isnull()).all())


# --- noise ---------------------------------------------------------------------------------------


def test_red_noise_has_unit_variance_and_the_memory_it_was_given():
    series = red_noise(np.random.default_rng(3), days=4000, columns=60, persistence=0.7).astype(float)
    # Standard error of these pooled estimates is below 0.005.
    assert series.std() == pytest.approx(1.0, abs=0.02)
    assert series[0].std() == pytest.approx(1.0, abs=0.35)  # 60 columns: the first day is stationary too
    for lag in (1, 2, 3):
        assert (series[lag:] * series[:-lag]).mean() == pytest.approx(0.7**lag, abs=0.02)
    between = np.corrcoef(series.T) - np.eye(60)
    assert np.abs(between).max() < 0.2


def test_wave_fields_correlate_as_their_length_says():
    east = np.array([0.0, 50.0, 100.0, 200.0, 400.0])
    correlation = np.zeros(east.size)
    draws = 150
    for seed in range(draws):
        waves = random_waves(np.random.default_rng(seed), count=40, length_km=100.0)
        basis = wave_basis(waves, east, np.zeros(east.size)).astype(float)
        np.testing.assert_allclose((basis**2).sum(axis=0), 1.0, rtol=1e-5)
        correlation += basis[:, 0] @ basis / draws
    # Closed form exp(-r^2 / 2 L^2); the standard error is at most 1 / sqrt(2 * 40 * 150) = 0.01.
    np.testing.assert_allclose(correlation, np.exp(-0.5 * (east / 100.0) ** 2), atol=0.04)


def test_neighbours_share_their_days_and_strangers_do_not(weather):
    anomaly = _anomaly(weather.irradiation)
    pairs = {step: xr.corr(anomaly, anomaly.shift(longitude=-step), dim="time").mean() for step in (1, 8)}
    assert float(pairs[1]) > 0.7
    assert float(pairs[8]) < 0.45
    tomorrow = xr.corr(anomaly, anomaly.shift(time=-1), dim="time").mean()
    assert 0.2 < float(tomorrow) < 0.8


def _anomaly(irradiation: xr.DataArray) -> xr.DataArray:
    """What is left of each day when the month of its year is taken away."""
    month = irradiation.resample(time="MS").mean().reindex(time=irradiation.time, method="ffill")
    return irradiation - month


# --- climate -------------------------------------------------------------------------------------


def test_seasons_look_like_a_dry_low_latitude_coast(weather):
    months = weather.groupby("time.month").mean()
    sunshine = months.irradiation.mean(("latitude", "longitude"))
    assert 14.0 < float(sunshine.min()) < 18.0
    assert 24.0 < float(sunshine.max()) < 28.0
    assert int(sunshine.idxmin("month")) in (12, 1)
    warmth = months.temp_air.mean(("latitude", "longitude"))
    assert 18.0 < float(warmth.min()) < float(warmth.max()) < 36.0
    assert 3.0 < float(warmth.max() - warmth.min()) < 16.0


def test_fog_belongs_to_the_shore_and_summer_cloud_to_the_uplands(weather, coast_km):
    ratio = weather.irradiation / extraterrestrial(weather.latitude, weather.time.dt.dayofyear)
    months = ratio.groupby("time.month").mean()
    shore = months.where(coast_km < 12.0).mean(("latitude", "longitude"))
    inland = months.where(coast_km > 90.0).mean(("latitude", "longitude"))
    assert float((shore / inland).sel(month=6)) < 0.92
    assert float((shore / inland).sel(month=9)) > 0.96
    assert float(inland.sel(month=8)) < 0.95 * float(inland.sel(month=6))


def test_the_sea_softens_the_day_and_feeds_damp_and_wind(weather, coast_km):
    swing = (weather.temp_air_max - weather.temp_air_min).mean("time")
    damp, wind = weather.temp_dew.mean("time"), weather.wind_speed.mean("time")
    for field, sign in ((swing, -1), (damp, 1), (wind, 1)):
        shore = float(field.where(coast_km < 12.0).mean())
        inland = float(field.where(coast_km > 90.0).mean())
        assert sign * (shore - inland) > 0.25 * min(shore, inland)


def test_years_differ_so_that_poor_years_exist():
    record = source(shape=(10, 10), years=8).open().load()
    monthly = record.irradiation.resample(time="MS").mean().mean(("latitude", "longitude"))
    yearly = monthly.groupby("time.year").mean()
    assert 0.005 < float(yearly.std() / yearly.mean()) < 0.06
    assert float((monthly.groupby("time.month").std() / monthly.groupby("time.month").mean()).max()) > 0.03


def test_a_season_runs_on_across_new_year():
    weights = season_weight(np.array([364.0, 1.0, 20.0, 200.0]), Season(peak_day=1.0, spread_days=20.0))
    assert weights[1] == 1.0
    assert weights[0] > weights[2] > weights[3]


# --- land ----------------------------------------------------------------------------------------


def test_relief_climbs_from_the_shore_within_its_bounds():
    rng = np.random.default_rng(5)
    east, north = rng.uniform(-400, 400, (2, 2000))
    assert np.all(relief_elevation(east, north, np.zeros(2000)) == 2.0)
    near, far = (relief_elevation(east, north, np.full(2000, km)) for km in (10.0, 120.0))
    assert np.all(far > near)
    assert near.min() >= 2.0
    assert relief_elevation(east, north, np.full(2000, 1e4)).max() <= 1010.0


def test_distances_run_to_the_shore_and_not_to_the_cut_frame(tmp_path):
    corner = [[0, 0], [4, 0], [4, 4], [2, 4], [2, 2], [0, 2], [0, 0]]
    path = tmp_path / "land.json"
    path.write_text(json.dumps({"type": "Polygon", "coordinates": [corner]}))
    ground = ground_at(read_land(path), np.array([3.0, 1.0]), np.array([3.5, 1.0]))
    # One degree of a meridian is 111.195 km on a sphere of 6371 km; the middle latitude is 2 degrees.
    east_of_shore = 1.5 * 111.195 * np.cos(np.radians(2.0))
    np.testing.assert_allclose(ground.coast_km, [east_of_shore, 111.195], rtol=1e-6)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"south": 22.5, "north": 17.5}, "no area"),
        ({"west": 170.0, "east": -170.0}, "no area"),
        ({"north": 85.0}, "leaves the map"),
        ({"south": float("nan")}, "no area"),
        ({"shape": (0, 20)}, "at least 1 row"),
        ({"years": 0}, "at least 1 row"),
        ({"seed": -1}, "seed of 0 or above"),
        ({"shape": (100_000, 100_000)}, "not fit into memory"),
        ({"west": -42.5, "east": -42.4, "south": 17.5, "north": 17.6, "shape": (2, 2)}, "no cell centre"),
        ({"land": Path("absent.geojson")}, "cannot be read"),
    ],
)
def test_what_cannot_be_made_is_refused_in_plain_words(changes, words):
    with pytest.raises(WeatherError, match=words):
        source(**changes).open()


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("not json", "not GeoJSON"),
        ("[1, 2]", "not GeoJSON"),
        ('{"type": "FeatureCollection", "features": [{"geometry": null}]}', "not GeoJSON"),
        ('{"type": "FeatureCollection", "features": []}', "valid polygons only"),
        ('{"type": "LineString", "coordinates": [[0, 0], [1, 1]]}', "LineString"),
        ('{"type": "Polygon", "coordinates": [[[0, 0], [1, 1], [1, 0], [0, 1], [0, 0]]]}', r"number: \[1\]"),
    ],
)
def test_a_land_file_that_is_none_is_refused(tmp_path, text, words):
    path = tmp_path / "land.geojson"
    path.write_text(text)
    with pytest.raises(WeatherError, match=words):
        read_land(path)


def test_nothing_is_made_before_a_value_is_asked_for(monkeypatch):
    made = []
    monkeypatch.setattr(synthetic, "_weather_on_grid", lambda *_: made.append(1) or {})
    laid_out = source().open()
    assert not made
    assert {values.dtype for values in laid_out.data_vars.values()} == {np.dtype("float32")}


def test_one_making_serves_every_variable_and_every_question(monkeypatch):
    real, made = synthetic._weather_on_grid, []
    monkeypatch.setattr(synthetic, "_weather_on_grid", lambda *given: made.append(1) or real(*given))
    laid_out = source(years=1, shape=(4, 4)).open()
    laid_out.load()
    laid_out = source(years=1, shape=(4, 4)).open()
    assert float(laid_out["irradiation"].max()) > float(laid_out["irradiation"].min())
    assert len(made) == 2
