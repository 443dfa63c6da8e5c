"""The invented region that ships with the program: valid outlines, villages on land, no real place near."""

from __future__ import annotations

import csv
import json
import re
from pathlib import Path

import numpy as np
import pytest
import shapely

from stillfield.sources.invented.synthetic import SyntheticSource, ground_at, read_land

DEMO = Path(__file__).parents[2] / "config" / "demo"
COAST = DEMO / "coast.geojson"
COLUMNS = (
    "name,id,latitude,longitude,population,households,feed_salinity_g_kg,distance_to_feed_km,elevation_m,note"
)


@pytest.fixture(scope="module")
def features() -> list[dict]:
    return json.loads(COAST.read_text(encoding="utf-8"))["features"]


@pytest.fixture(scope="module")
def villages() -> list[dict[str, str]]:
    with (DEMO / "villages.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def _numbers(villages, column) -> np.ndarray:
    return np.array([float(row[column]) for row in villages])


def _great_circle_km(latitude, longitude, other_latitude, other_longitude):
    """Haversine distance on a sphere of 6371 km."""
    lat0, lon0, lat1, lon1 = map(np.radians, (latitude, longitude, other_latitude, other_longitude))
    chord = np.sin((lat1 - lat0) / 2) ** 2 + np.cos(lat0) * np.cos(lat1) * np.sin((lon1 - lon0) / 2) ** 2
    return 2 * 6371.0 * np.arcsin(np.sqrt(chord))


def test_every_outline_is_a_valid_polygon_of_its_own(features):
    polygons = [shapely.geometry.shape(feature["geometry"]) for feature in features]
    assert {polygon.geom_type for polygon in polygons} == {"Polygon"}
    assert all(polygon.is_valid for polygon in polygons)
    assert all(polygon.exterior.is_ccw for polygon in polygons)  # RFC 7946, section 3.1.6
    union = shapely.union_all(polygons)
    assert sum(polygon.area for polygon in polygons) == pytest.approx(union.area, rel=1e-9)
    assert 300 <= sum(shapely.get_num_coordinates(polygons)) <= 1600
    assert len(polygons) >= 6


def test_the_coast_file_is_small_and_rounded(features):
    assert COAST.stat().st_size < 120_000
    corners = np.concatenate([feature["geometry"]["coordinates"][0] for feature in features])
    np.testing.assert_array_equal(corners, np.round(corners, 4))


def test_every_outline_says_that_it_is_invented(features):
    assert all("nvented" in feature["properties"]["note"] for feature in features)
    assert all(feature["properties"]["name"] for feature in features)


def test_no_real_land_is_near(features):
    # The nearest real shores, quoted from memory: Santo Antao (Cape Verde), Barbados, Bermuda, Sao Miguel.
    real = np.array([[17.07, -25.36], [13.20, -59.43], [32.30, -64.75], [37.80, -25.50]])
    corners = np.concatenate([np.array(feature["geometry"]["coordinates"][0]) for feature in features])
    distance = _great_circle_km(corners[:, 1, None], corners[:, 0, None], real[:, 0], real[:, 1])
    assert distance.min() > 1000.0
    assert corners[:, 1].min() >= 17.0
    assert corners[:, 1].max() <= 23.0


def test_the_village_table_has_its_columns_and_text_ids(villages):
    assert list(villages[0]) == COLUMNS.split(",")
    assert 35 <= len(villages) <= 50
    ids = [row["id"] for row in villages]
    assert len(set(ids)) == len(ids)
    assert all(re.fullmatch(r"\d{3}", identity) for identity in ids)
    assert any(identity.startswith("0") for identity in ids)
    names = [row["name"] for row in villages]
    assert len(set(names)) == len(names)


def test_village_figures_are_possible(villages):
    population = _numbers(villages, "population")
    assert population.min() >= 60
    assert population.max() <= 9000
    assert population.max() / np.median(population) > 5.0
    counted = [row for row in villages if row["households"]]
    assert 0 < len(counted) < len(villages)  # the column is optional, row by row
    people_per_home = _numbers(counted, "population") / _numbers(counted, "households")
    assert people_per_home.min() > 3.0
    assert people_per_home.max() < 8.0
    salinity = _numbers(villages, "feed_salinity_g_kg")
    wells, sea, brine = salinity <= 15, (salinity >= 36) & (salinity <= 38), salinity >= 40
    assert (wells | sea | brine).all()
    assert min(wells.sum(), sea.sum(), brine.sum()) >= 3
    assert _numbers(villages, "distance_to_feed_km").min() > 0.0


def test_villages_stand_on_land_at_the_height_of_the_relief(villages):
    land = read_land(COAST)
    latitude, longitude = _numbers(villages, "latitude"), _numbers(villages, "longitude")
    assert shapely.contains_xy(land, longitude, latitude).all()
    ground = ground_at(land, latitude, longitude)
    np.testing.assert_allclose(_numbers(villages, "elevation_m"), ground.elevation_m, atol=30.0)
    assert (ground.coast_km < 1.5).sum() >= 15
    assert (ground.coast_km > 50.0).sum() >= 4
    takes_sea = _numbers(villages, "feed_salinity_g_kg") >= 36
    assert np.all(_numbers(villages, "distance_to_feed_km")[takes_sea] >= 0.8 * ground.coast_km[takes_sea])


def test_some_villages_lie_on_missing_cells_with_land_within_reach(villages):
    weather = SyntheticSource(land=COAST, south=17.5, north=22.5, west=-42.5, east=-37.5, years=1).open().load()
    missing = 0
    latitude, longitude = weather.latitude.values, weather.longitude.values
    rows, columns = np.nonzero(weather.elevation.notnull().values)
    for row in villages:
        place = {"latitude": float(row["latitude"]), "longitude": float(row["longitude"])}
        height = float(weather.elevation.sel(place, method="nearest"))
        distance = _great_circle_km(
            place["latitude"], place["longitude"], latitude[rows], longitude[columns]
        )
        assert distance.min() < 15.0
        if np.isnan(height):
            missing += 1
        else:
            assert abs(height - float(row["elevation_m"])) < 60.0
    assert 4 <= missing <= len(villages) / 2
