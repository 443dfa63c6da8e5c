"""The shipped coast: the file is the one its manifest names, and the Earth in it is the real one."""

from __future__ import annotations

import hashlib
import json
from importlib.resources import files

import numpy as np
import pytest
from shapely.geometry import Point, Polygon

from stillfield.errors import StillfieldError
from stillfield.products.coast import coastline, land_in, read_land, world_land

DATA = files("stillfield.products") / "data"


def is_land(longitude: float, latitude: float) -> bool:
    here = (longitude - 0.01, latitude - 0.01, longitude + 0.01, latitude + 0.01)
    return any(Polygon(outer, holes).contains(Point(longitude, latitude)) for outer, *holes in land_in(here))


def test_data_are_the_files_the_manifest_names():
    sources = json.loads((DATA / "SOURCES.json").read_text(encoding="utf-8"))
    for name, facts in sources.items():
        content = (DATA / name).read_bytes()
        assert (hashlib.sha256(content).hexdigest(), len(content)) == (facts["sha256"], facts["bytes"])
    assert "Permission to use, copy, modify" in (DATA / "land-50m.LICENSE.txt").read_text(encoding="utf-8")


# Positions quoted from memory, common geographical knowledge; each is tens of kilometres from any shore.
@pytest.mark.parametrize(
    ("longitude", "latitude", "land"),
    [
        (86.67, 46.28, True),      # Eurasian pole of inaccessibility, 46°17′N 86°40′E
        (-123.39, -48.88, False),  # oceanic pole of inaccessibility, 48°52′S 123°23′W
        (25.0, 23.0, True),        # Libyan Desert
        (134.0, -25.0, True),      # middle of Australia
        (51.0, 42.0, False),       # Caspian Sea, a hole in the land
        (-30.0, 0.0, False),       # equatorial Atlantic
        (179.6, 71.1, True),       # Wrangel Island, west of the antimeridian
        (-179.0, 71.1, True),      # Wrangel Island, east of it
        (0.0, -89.0, True),        # near the South Pole
        (0.0, 89.0, False),        # near the North Pole
    ],
)
def test_land_and_sea_are_where_they_are(longitude, latitude, land):
    assert is_land(longitude, latitude) is land
    assert is_land(longitude + 360.0, latitude) is land


def sphere_area_km2(ring):
    """Area by the closed form R^2 * integral of sin(latitude) d(longitude), R = 6371 km; signed."""
    x, y = np.radians(ring[:, 0]), np.sin(np.radians(ring[:, 1]))
    return 6371.0**2 * float(np.sum(np.diff(x) * (y[1:] + y[:-1]) / 2))


def test_land_covers_the_published_areas():
    # Land of the Earth 148.94 million km2, of which Antarctica with its ice shelves 14.2 (The World Factbook,
    # quoted from memory); Antarctica without ice shelves 12.295 million km2 (Bedmap2, Fretwell et al. 2013,
    # table of grounded ice, quoted from memory). Natural Earth's land leaves floating ice out.
    areas = [(polygon[0][:, 1].max() < -60.0, sum(map(sphere_area_km2, polygon))) for polygon in world_land()]
    antarctic = abs(sum(area for south, area in areas if south))
    elsewhere = abs(sum(area for south, area in areas if not south))
    assert elsewhere == pytest.approx(148.94e6 - 14.2e6, rel=0.01)
    assert antarctic == pytest.approx(12.295e6, rel=0.01)


def test_a_cape_lies_on_the_coastline():
    # Cape Agulhas, 34°50′S 20°00′E (quoted from memory); 1:50 million is good to a few kilometres.
    points = np.concatenate(coastline((19.0, -36.0, 21.0, -34.0)))
    southernmost = points[points[:, 1].argmin()]
    np.testing.assert_allclose(southernmost, [20.0, -34.83], atol=0.1)


def test_lines_are_kept_to_the_box():
    box = (12.0, 36.5, 15.7, 38.4)
    lines = coastline(box)
    for line in lines:
        low, high = np.minimum(line[:-1], line[1:]), np.maximum(line[:-1], line[1:])
        assert np.all((high >= box[:2]) & (low <= box[2:]))
    assert sum(map(len, lines)) < 400


def test_no_line_crosses_the_map_at_the_antimeridian():
    lines = coastline((170.0, -50.0, 190.0, 75.0))
    assert len(lines) > 20
    assert max(np.abs(np.diff(line[:, 0])).max() for line in lines) < 3.0


def test_no_line_over_the_pole():
    lowest = min(line[:, 1].min() for line in coastline((-180.0, -90.0, 180.0, 90.0)))
    assert -86.0 < lowest < -60.0


def test_whole_turns_move_the_coast_with_the_box():
    here, there = coastline((12.0, 36.5, 15.7, 38.4)), coastline((372.0, 36.5, 375.7, 38.4))
    assert len(here) == len(there)
    for a, b in zip(here, there, strict=True):
        np.testing.assert_allclose(b - a, np.broadcast_to((360.0, 0.0), a.shape), atol=1e-9)


def test_own_land_from_geojson(tmp_path):
    square = [[[0, 0], [0, 4], [4, 4], [4, 0], [0, 0]], [[1, 1], [2, 1], [2, 2], [1, 2], [1, 1]]]
    content = {"type": "FeatureCollection", "features": [
        {"type": "Feature", "properties": {}, "geometry": {"type": "MultiPolygon", "coordinates": [square]}}]}
    path = tmp_path / "land.geojson"
    path.write_text(json.dumps(content), encoding="utf-8")
    (polygon,) = read_land(path)
    assert [len(ring) for ring in polygon] == [5, 5]
    assert len(coastline((-1.0, -1.0, 5.0, 5.0), [polygon])) == 2
    assert coastline((10.0, 10.0, 11.0, 11.0), [polygon]) == []


@pytest.mark.parametrize(
    "content", ["no json", "[]", '{"type": "Point", "coordinates": [0, 0]}', '{"type": "Feature"}'])
def test_what_is_no_land_is_refused_by_name(tmp_path, content):
    path = tmp_path / "land.geojson"
    path.write_text(content, encoding="utf-8")
    with pytest.raises(StillfieldError, match=r"land\.geojson"):
        read_land(path)
