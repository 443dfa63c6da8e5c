"""Regions: boxes, polygons and masks of land, also across the antimeridian; what is left is what lies inside."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridded_samples import whole
from stillfield.engine.job import Missing, months_of, prepare
from stillfield.engine.readers import LazyReader, Reader
from stillfield.engine.stored_reader import StoredReader
from stillfield.errors import WeatherError
from stillfield.methods.registry import get_method
from stillfield.physics.still import Panel, Still
from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.region import Box, Mask, Region, keep_region
from stillfield.stages.read import read_weather


def globe(step: float = 10.0, rows: tuple[float, ...] = (-15.0, -5.0, 5.0, 15.0)) -> xr.Dataset:
    """Two days on a global grid whose values are the longitude in -180..180, over 18."""
    longitude = np.arange(0.0, 360.0, step)
    values = np.broadcast_to((longitude + 180.0) % 360.0 / 18.0, (2, len(rows), longitude.size))
    return xr.Dataset(
        {"rsds": (("time", "lat", "lon"), values.copy(), {"units": "MJ m-2"})},
        coords={"time": np.array(["2010-03-10", "2010-03-11"], "datetime64[ns]"), "lat": list(rows), "lon": longitude})


@pytest.fixture
def weather(tmp_path: Path) -> xr.Dataset:
    return open_netcdf(whole(globe(), tmp_path))


def worked(weather: xr.Dataset) -> tuple[Reader, xr.Dataset]:
    """How weather is read by a run, and the months of the constant-efficiency rule."""
    prepared = prepare(weather, get_method("rule"))
    found = months_of(prepared, [Still("flat", (Panel(1.0, 0.0),))], missing=Missing(min_valid_days_share=0.05))
    return prepared.reader, found.monthly[0]


def counted(weather: xr.Dataset) -> dict[str, int]:
    """What a run counts of the irradiation."""
    return json.loads(worked(weather)[1].attrs["counts"])["irradiation"]


def polygon_file(path: Path, *rings: list[tuple[float, float]]) -> Path:
    features = [{"type": "Feature", "properties": {}, "geometry": {"type": "Polygon", "coordinates": [[*r, r[0]]]}}
                for r in rings]
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}), encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("west", "east", "columns"),
    [
        (20.0, 40.0, [20, 30, 40]),
        (-15.0, 12.0, [-10, 0, 10]),
        (345.0, 12.0, [-10, 0, 10]),
        (165.0, -165.0, [170, 180, 190]),
        (165.0, 195.0, [170, 180, 190]),
        (195.0, 215.0, [-160, -150]),
        (-180.0, 180.0, list(range(-180, 180, 10))),
        (0.0, 360.0, list(range(-180, 180, 10))),
    ],
)
def test_a_box_in_any_longitudes_gives_columns_that_run_eastward(weather, west, east, columns):
    cut = keep_region(weather, Region(box=Box(-10.0, 10.0, west, east)))
    assert cut.longitude.values.tolist() == columns
    assert cut.latitude.values.tolist() == [-5.0, 5.0]
    wanted = (np.array(columns, dtype=float) + 180.0) % 360.0 / 18.0
    np.testing.assert_allclose(cut.irradiation.isel(time=0, latitude=0), wanted)
    assert counted(cut)["values"] == 2 * 2 * len(columns)


def test_a_box_beside_the_weather_is_refused(weather):
    with pytest.raises(WeatherError, match=r"no weather in the region \(got 40\.0\.\.50\.0 N"):
        keep_region(weather, Region(box=Box(40.0, 50.0, 0.0, 10.0)))


def test_cells_whose_centre_lies_in_a_polygon_are_kept_and_the_others_count_nothing(weather, tmp_path):
    # A triangle over centres at 20 and 30 E on 5 N, and at 20 E on 15 N.
    path = polygon_file(tmp_path / "area.geojson", [(15.0, 0.0), (38.0, 0.0), (15.0, 22.0)])
    cut = keep_region(weather, Region(polygon=path))
    assert cut.latitude.values.tolist() == [5.0, 15.0]
    assert cut.longitude.values.tolist() == [20.0, 30.0]
    assert cut.irradiation.isel(time=0).notnull().values.tolist() == [[True, True], [True, False]]
    assert "3 of 144 cells have their centre inside area.geojson; the others are left out." in cut.attrs["conventions"]
    found = counted(cut)
    assert (found["values"], found.get("missing", 0)) == (2 * 3, 0)


ACROSS = [(165.0, -8.0), (195.0, -8.0), (195.0, 8.0), (165.0, 8.0)]


@pytest.mark.parametrize("ring", [
    ACROSS,
    [(-195.0, -8.0), (-165.0, -8.0), (-165.0, 8.0), (-195.0, 8.0)],
])  # fmt: skip
def test_a_polygon_across_the_antimeridian_is_one_block(weather, tmp_path, ring):
    cut = keep_region(weather, Region(polygon=polygon_file(tmp_path / "area.geojson", ring)))
    assert cut.longitude.values.tolist() == [170.0, 180.0, 190.0]
    np.testing.assert_allclose(cut.irradiation.isel(time=0, latitude=0), [350 / 18, 0.0, 10 / 18])


def test_two_polygons_on_either_side_of_the_antimeridian_are_one_block(weather, tmp_path):
    path = polygon_file(tmp_path / "area.geojson", [(165.0, -8.0), (180.0, -8.0), (180.0, 8.0), (165.0, 8.0)],
                        [(-180.0, -8.0), (-165.0, -8.0), (-165.0, 8.0), (-180.0, 8.0)])
    cut = keep_region(weather, Region(polygon=path))
    assert cut.longitude.values[[0, -1]].tolist() == [170.0, 190.0]


@pytest.mark.parametrize("kind", ["box", "polygon", "box and polygon"])
@pytest.mark.parametrize("order", ["0 to 360", "-180 to 180"])
def test_weather_across_the_antimeridian_is_read_past_xarray(tmp_path, kind, order):
    """The reader of plain files finds the columns that the region put side by side, and the months are the same."""
    world = globe() if order == "0 to 360" else globe().assign_coords(lon=np.arange(-180.0, 180.0, 10.0))
    if order == "-180 to 180":
        world["rsds"] = world.rsds.copy(data=np.roll(world.rsds.values, 18, axis=2))
    area = polygon_file(tmp_path / "area.geojson", ACROSS) if "polygon" in kind else None
    box = Box(-10.0, 10.0, 165.0 if kind == "box" else 155.0, -165.0) if "box" in kind else None
    weather = read_weather("netcdf", whole(world, tmp_path), region=Region(box, area))
    assert weather.longitude.values.tolist() == [170.0, 180.0, 190.0]
    np.testing.assert_allclose(weather.irradiation.isel(time=0, latitude=0), [350 / 18, 0.0, 10 / 18])
    plain = weather.copy(deep=False)
    plain.encoding = {}
    (stored, months), (lazy, others) = worked(weather), worked(plain)
    assert (type(stored), type(lazy)) == (StoredReader, LazyReader)
    march = months.monthly_yield.sel(month=3)
    assert march.notnull().all()
    assert march.isel(latitude=0).values.argsort().tolist() == [1, 2, 0]
    for name in ("monthly_yield", "annual_yield", "days_used"):
        np.testing.assert_allclose(months[name], others[name], rtol=1e-6)
    assert months.attrs["counts"] == others.attrs["counts"]


def test_polygons_that_cannot_be_used_are_refused(weather, tmp_path):
    small = polygon_file(tmp_path / "small.geojson", [(1.0, 1.0), (2.0, 1.0), (2.0, 2.0)])
    with pytest.raises(WeatherError, match=r"no cell centre lies inside the polygon \(got a polygon of 1\.\.2 N"):
        keep_region(weather, Region(polygon=small))
    (tmp_path / "no.geojson").write_text("area", encoding="utf-8")
    with pytest.raises(WeatherError, match="the polygon file is not GeoJSON"):
        keep_region(weather, Region(polygon=tmp_path / "no.geojson"))
    bow = polygon_file(tmp_path / "bow.geojson", [(0.0, 0.0), (20.0, 20.0), (20.0, 0.0), (0.0, 20.0)])
    with pytest.raises(WeatherError, match="the polygon file must hold valid polygons only"):
        keep_region(weather, Region(polygon=bow))


def mask_file(path: Path, values: np.ndarray, latitude: np.ndarray, longitude: np.ndarray, units: str | None) -> Path:
    attrs = {} if units is None else {"units": units}
    xr.Dataset({"lsm": (("lat", "lon"), values, attrs)}, coords={
        "lat": ("lat", latitude, {"units": "degrees_north"}), "lon": ("lon", longitude, {"units": "degrees_east"}),
    }).to_netcdf(path)
    return path


@pytest.mark.parametrize(("units", "scale"), [("(0 - 1)", 1.0), ("%", 100.0), (None, 1.0), ("1", 1.0)])
@pytest.mark.parametrize("north_up", [False, True])
def test_a_mask_as_share_or_percent_takes_the_sea_out(weather, tmp_path, units, scale, north_up):
    latitude, longitude = np.array([-15.0, -5.0, 5.0, 15.0]), np.arange(-180.0, 180.0, 10.0)
    share = np.where((longitude >= 0.0) & (longitude < 60.0), 0.6, 0.4) * np.ones((4, 1))
    rows = slice(None, None, -1 if north_up else 1)
    path = mask_file(tmp_path / "mask.nc", share[rows] * scale, latitude[rows], longitude, units)
    cut = keep_region(weather, Region(mask=Mask(path)))
    valid = cut.irradiation.isel(time=0).notnull()
    assert valid.sum() == 4 * 6
    assert cut.longitude.values[valid.any("latitude")].tolist() == [0.0, 10.0, 20.0, 30.0, 40.0, 50.0]
    assert "120 of 144 cells have less than 0.5 land in mask.nc; they are missing." in cut.attrs["conventions"]
    assert keep_region(weather, Region(mask=Mask(path, "lsm", 0.3))).irradiation.notnull().all()


def test_a_finer_mask_is_read_at_the_centre_of_the_cell_and_a_smaller_one_is_refused(weather, tmp_path):
    fine = np.arange(0.25, 360.0, 0.5)
    path = mask_file(tmp_path / "fine.nc", (fine < 100.0) * np.ones((80, 1)), np.arange(-19.75, 20.0, 0.5), fine, "1")
    cut = keep_region(weather, Region(box=Box(-10.0, 10.0, 75.0, 115.0), mask=Mask(path)))
    assert cut.irradiation.isel(time=0, latitude=0).notnull().values.tolist() == [True, True, False, False]
    part = mask_file(tmp_path / "part.nc", np.ones((3, 2)), np.array([-5.0, 5.0, 15.0]), np.array([0.0, 10.0]), "1")
    with pytest.raises(WeatherError, match=r"the mask does not cover the weather \(latitude\)"):
        keep_region(weather, Region(mask=Mask(part)))


def test_masks_that_are_no_share_of_land_are_refused(weather, tmp_path):
    latitude, longitude = np.array([-15.0, -5.0, 5.0, 15.0]), np.arange(-180.0, 180.0, 10.0)
    kinds = mask_file(tmp_path / "kinds.nc", np.full((4, 36), 3.0), latitude, longitude, None)
    with pytest.raises(WeatherError, match=r"the mask is no share of land \(got values from 3 to 3 in units 'none'"):
        keep_region(weather, Region(mask=Mask(kinds)))
    sea = mask_file(tmp_path / "sea.nc", np.zeros((4, 36)), latitude, longitude, "1")
    with pytest.raises(WeatherError, match="no cell is land by the mask"):
        keep_region(weather, Region(mask=Mask(sea)))
    with pytest.raises(WeatherError, match=r"the mask's variable is not there \(got land; wanted one of lsm"):
        keep_region(weather, Region(mask=Mask(sea, "land")))


def test_sites_are_kept_by_box_polygon_and_mask(tmp_path):
    stations = xr.Dataset(
        {"rsds": (("time", "station"), np.full((2, 3), 20.0), {"units": "MJ m-2"})},
        coords={"time": globe().time, "lat": ("station", [1.0, 2.0, 30.0], {"units": "degrees_north"}),
                "lon": ("station", [179.0, -179.0, 0.0], {"units": "degrees_east"})})
    stations.to_netcdf(tmp_path / "s.nc")
    files = [str(tmp_path / "s.nc")]
    assert read_weather("netcdf", files, region=Box(0.0, 3.0, 178.0, -178.0)).sizes["site"] == 2
    path = polygon_file(tmp_path / "a.geojson", [(178.0, 0.0), (182.0, 0.0), (182.0, 1.5), (178.0, 1.5)])
    assert read_weather("netcdf", files, region=Region(polygon=path)).latitude.values.tolist() == [1.0]
    mask = mask_file(tmp_path / "m.nc", np.array([[1.0, 1.0], [0.0, 1.0]]), np.array([0.0, 30.0]),
                     np.array([0.0, 180.0]), "1")
    kept = read_weather("netcdf", files, region=Region(mask=Mask(mask)))
    assert kept.irradiation.isel(time=0).notnull().values.tolist() == [True, True, False]
