"""Regions in run files: faults told at once, and a run across the antimeridian to its raster and manifest."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
import xarray as xr

from stillfield.errors import RunFileError
from stillfield.run import run
from stillfield.settings.load import load_run
from whole_runs import CONFIG, stillfield_command, write_run

RING = [[164.0, -20.0], [196.0, -20.0], [196.0, 20.0], [164.0, 20.0], [164.0, -20.0]]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A global daily file of 10 degrees whose sunshine tells the column, a polygon, and a mask in per cent."""
    folder = tmp_path_factory.mktemp("regions")
    time = np.arange("2010-01-01", "2011-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    latitude, longitude = np.array([15.0, 5.0, -5.0, -15.0, -25.0]), np.arange(0.0, 360.0, 10.0)
    sun = np.broadcast_to(5.0 + longitude / 36.0, (time.size, latitude.size, longitude.size))
    names = ("time", "lat", "lon")
    axes = {"lat": ("lat", latitude, {"units": "degrees_north"}), "lon": ("lon", longitude, {"units": "degrees_east"})}
    xr.Dataset({"rsds": (names, sun, {"units": "MJ m-2"})}, coords={"time": time, **axes}).to_netcdf(folder / "w.nc")
    land = np.full((5, 36), 100.0)
    land[1, 18] = 20.0  # 5 N, 180 E is sea
    xr.Dataset({"sftlf": (names[1:], land, {"units": "%"})}, coords=axes).to_netcdf(folder / "land.nc")
    polygon = {"type": "Polygon", "coordinates": [RING]}
    (folder / "area.geojson").write_text(json.dumps(polygon), encoding="utf-8")
    return folder


def run_file(folder: Path, **region: object) -> Path:
    return write_run(folder / "pacific.yaml", weather={"kind": "netcdf", "files": "w.nc", "day_clock": "local"},
                     region=region, output={"folder": str(folder / "out")},
                     map={"land": str(CONFIG / "demo" / "coast.geojson")})


def test_a_box_a_polygon_and_a_mask_across_the_antimeridian(folder):
    path = run_file(folder, south=-30.0, north=30.0, west=150.0, east=-150.0, polygon="area.geojson",
                    mask={"file": "land.nc", "at_least": 0.5})
    run(load_run(path), run_file=path)
    results = folder / "out" / "pacific"
    with rasterio.open(results / "annual_yield.tif") as image:
        values, bounds, nodata = image.read(1), image.bounds, image.nodata
    # Centres at 170, 180 and 190 E and from 15 S to 15 N lie in the polygon.
    assert (bounds.left, bounds.right, bounds.bottom, bounds.top) == pytest.approx((165.0, 195.0, -20.0, 20.0))
    expected = (5.0 + np.array([170.0, 180.0, 190.0]) / 36.0) * 365 * 0.30 / 2.3
    expected = np.broadcast_to(expected, (4, 3)).copy()
    expected[1, 1] = nodata  # sea by the mask
    np.testing.assert_allclose(values, expected, rtol=1e-5)


def test_inputs_and_sentences_of_the_region_are_in_the_manifest(folder):
    manifest = json.loads((folder / "out" / "pacific" / "manifest.json").read_text(encoding="utf-8"))
    assert {"area.geojson", "land.nc", "w.nc"} <= set(manifest["inputs"])
    told = " ".join(manifest["conventions"])
    assert "12 of 35 cells have their centre inside area.geojson; the others are left out." in told
    assert "1 of 12 cells have less than 0.5 land in land.nc; they are missing." in told
    assert manifest["counts"]["weather"]["irradiation"]["values"] == 365 * 11


def test_the_plan_tells_the_region(folder):
    path = run_file(folder, polygon="area.geojson", mask={"file": "land.nc"})
    done = stillfield_command("plan", path, cwd=folder)
    assert done.returncode == 0, done.stderr
    assert "cut to the polygons of area.geojson; land by land.nc (at least 0.5)" in " ".join(done.stdout.split())


@pytest.mark.parametrize(
    ("region", "fault"),
    [
        ({"polygon": "aera.geojson"}, "region.polygon: no such file 'aera.geojson' (did you mean 'area.geojson'?)"),
        ({"mask": {"file": "land.nc", "at_laest": 1}}, "region.mask.at_laest: unknown key (did you mean 'at_least'?)"),
        ({"mask": {"file": "land.nc", "at_least": 50}}, "region.mask.at_least: should be above 0 and at most 1 (got 5"),
        ({"polygons": "area.geojson"}, "region.polygons: unknown key (did you mean 'polygon'?)"),
        ({"south": 1.0, "north": 2.0}, "region: a box has four edges; west, east are missing"),
        ({"south": 3.0, "north": 2.0, "west": 1.0, "east": 2.0}, "region: south should lie south of north"),
        ({}, "region: should hold the edges of a box, a polygon or a mask"),
    ],
)
def test_faults_of_a_region_are_told_before_anything_is_read(folder, region, fault):
    with pytest.raises(RunFileError) as caught:
        load_run(run_file(folder, **region))
    assert any(fault in str(one) for one in caught.value.faults), [str(one) for one in caught.value.faults]
