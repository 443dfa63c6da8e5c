"""Whole runs on every calendar and on grids of every awkward shape, to the rasters, tables and the manifest."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pytest
import rasterio
import xarray as xr

from stillfield.run import run
from stillfield.settings.load import load_run
from whole_runs import CONFIG, write_run

#: Name of the case -> calendar, days of its year 2004, latitudes, longitudes as the file has them.
SHAPES: dict[str, tuple[str, int, list[float], list[float]]] = {
    "one row, noleap": ("noleap", 365, [10.0], [30.0, 30.5, 31.0]),
    "one column, all_leap": ("all_leap", 366, [12.0, 11.5, 11.0], [30.0]),
    "across the antimeridian, 360_day": ("360_day", 360, [10.0, 11.0], [178.0, 179.0, 180.0, 181.0]),
    "uneven rows, proleptic": ("proleptic_gregorian", 366, [10.0, 11.0, 11.9, 12.7], [30.0, 31.0]),
    "one cell, standard": ("standard", 366, [10.0], [30.0]),
}


def daily_files(path: Path, shape: tuple[str, int, list[float], list[float]]) -> np.ndarray:
    """Write a year whose sunshine differs by cell and month; give the rule's litres of each cell in the year.

    Two values are slightly negative, three carry an undeclared -999, one day is missing everywhere.
    """
    calendar, days, latitude, longitude = shape
    time = xr.date_range("2004-01-01", periods=days, freq="D", calendar=calendar, use_cftime=True)
    month = np.array([date.month for date in time])
    cells = 1.0 + 0.02 * np.arange(len(latitude) * len(longitude)).reshape(len(latitude), len(longitude))
    sun = (12.0 + 0.5 * month)[:, None, None] * cells
    values = sun.copy()
    values[40] = np.nan
    values[60:63, 0, 0] = -999.0
    values[100:102, 0, 0] = -0.01
    effect = sun.copy()  # of every month the mean of the valid days, times its days
    effect[100:102, 0, 0] = 0.0
    effect[40] = np.nan
    effect[60:63, 0, 0] = np.nan
    litres = sum(np.nanmean(effect[month == m], axis=0) * (month == m).sum() for m in range(1, 13)) * 0.30 / 2.3
    names = ("time", "lat", "lon")
    xr.Dataset(
        {"rsds": (names, values, {"units": "MJ m-2"}), "tas": (names, 0 * sun + 25.0, {"units": "degC"}),
         "sfcWind": (names, 0 * sun + 3.0, {"units": "m s-1"})},
        coords={"time": time, "lat": ("lat", latitude, {"units": "degrees_north"}),
                "lon": ("lon", longitude, {"units": "degrees_east"})},
    ).to_netcdf(path, encoding={"rsds": {"_FillValue": np.nan}})
    return litres


@pytest.fixture(scope="module", params=SHAPES)
def finished(request, tmp_path_factory) -> tuple[str, np.ndarray, Path]:
    """Folder of a finished run by the rule, with a village beside each end of the grid."""
    folder = tmp_path_factory.mktemp("run")
    shape = SHAPES[request.param]
    litres = daily_files(folder / "w.nc", shape)
    last = (shape[3][-1] + 180.0) % 360.0 - 180.0
    (folder / "villages.csv").write_text(
        f"name,latitude,longitude\nFirst,{shape[2][0] + 0.01},{shape[3][0] + 0.01}\nLast,{shape[2][-1]},{last}\n",
        encoding="utf-8")
    path = write_run(folder / "shapes.yaml", weather={"kind": "netcdf", "files": "w.nc", "day_clock": "local"},
                     places={"table": "villages.csv", "max_cell_distance_km": 30},
                     output={"folder": str(folder / "out")},
                     map={"land": str(CONFIG / "demo" / "coast.geojson")})
    run(load_run(path), run_file=path)
    return request.param, litres, folder / "out" / "shapes"


def test_the_year_is_the_rule_by_hand(finished):
    name, litres, folder = finished
    with xr.open_dataset(folder / "monthly_yield.nc") as found:
        found.load()
    annual = found["annual_yield"]
    if "site" in annual.dims:
        np.testing.assert_allclose(annual, litres.ravel(), rtol=1e-6)
        return
    order = np.argsort(SHAPES[name][2])
    np.testing.assert_allclose(annual, litres[order], rtol=1e-6)
    assert found["days_expected"].sum("month").values.ravel()[0] == SHAPES[name][1]


def test_the_raster_lies_where_the_cells_are(finished):
    name, litres, folder = finished
    image_path = folder / "annual_yield.tif"
    if name.startswith(("uneven rows", "one cell")):
        assert not image_path.exists()
        notes = (folder / "READ-ME-FIRST.txt").read_text(encoding="utf-8")
        assert ("unevenly spaced" in notes) == name.startswith("uneven rows")
        return
    with rasterio.open(image_path) as image:
        values, bounds = image.read(1), image.bounds
    _, _, latitude, longitude = SHAPES[name]
    step = abs(longitude[1] - longitude[0]) if len(longitude) > 1 else abs(latitude[1] - latitude[0])
    assert bounds.left == pytest.approx(longitude[0] - step / 2)
    assert bounds.right == pytest.approx(longitude[-1] + step / 2)
    assert bounds.top == pytest.approx(max(latitude) + step / 2)
    np.testing.assert_allclose(values, litres[np.argsort(latitude)[::-1]], rtol=1e-5)


def test_the_maps_are_there(finished):
    name, _, folder = finished
    wanted = "site_months.png" if name.startswith("one cell") else "monthly_yield.png"
    assert (folder / "maps" / wanted).stat().st_size > 10_000


def test_villages_find_their_cells_and_tables_stay_within_180(finished):
    name, litres, folder = finished
    with (folder / "places.csv").open(encoding="utf-8", newline="") as stream:
        rows = {row["name"]: row for row in csv.DictReader(stream)}
    assert float(rows["First"]["annual_yield_l_m2_year"]) == pytest.approx(litres[0, 0], rel=1e-3)
    assert float(rows["Last"]["annual_yield_l_m2_year"]) == pytest.approx(litres[-1, -1], rel=1e-3)
    with (folder / "cells.csv").open(encoding="utf-8", newline="") as stream:
        east = [float(row["longitude_deg"]) for row in csv.DictReader(stream)]
    assert all(-180.0 <= one <= 180.0 for one in east)
    assert (-179.0 in east) == name.startswith("across")


def test_what_was_changed_is_counted_in_the_manifest_and_told(finished):
    name, litres, folder = finished
    counted = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))["counts"]["weather"]["irradiation"]
    cells, days = litres.size, SHAPES[name][1]
    assert counted == {"clipped": 2, "missing": cells + 3, "sentinel": 3, "values": cells * days}
    notes = " ".join((folder / "READ-ME-FIRST.txt").read_text(encoding="utf-8").split())
    assert f"2 of {cells * days} values of irradiation were slightly negative and set to 0." in notes
    assert f"3 of {cells * days} values of irradiation were numbers that stand for missing" in notes
    assert f"{cells + 3} of {cells * days} values of irradiation are missing." in notes
