"""The demonstration as a user runs it: every promised output, read back by other readers, and the same again."""

from __future__ import annotations

import hashlib
import json
import shutil

import numpy as np
import pytest
import rasterio
import rasterio.features
import xarray as xr

from stillfield.settings.load import load_run
from stillfield.vocabulary import WATER_CAUTION
from whole_runs import CONFIG, MONTHS, months_of, stillfield_command, table

PROMISED = [
    "READ-ME-FIRST.txt", "annual_yield.tif", "cells.csv", "manifest.json", "maps/annual_yield.png",
    "maps/monthly_yield.png", "maps/worst_month.png", "maps/worst_month_yield.png", "monthly_yield.nc",
    "monthly_yield.tif", "monthly_yield_high.tif", "monthly_yield_low.tif", "places.csv", "places_months.csv",
    "places_storage.csv", "run.yaml", "worst_month_yield.tif",
]  # fmt: skip


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    """The demonstration as it is shipped, in an empty folder, and what the command said."""
    folder = tmp_path_factory.mktemp("demo")
    shutil.copytree(CONFIG, folder / "config")
    told = stillfield_command("run", "config/demo.yaml", cwd=folder)
    assert told.returncode == 0, told.stderr
    return folder, told


@pytest.fixture(scope="module")
def out(demo):
    return demo[0] / "outputs" / "demo"


@pytest.fixture(scope="module")
def monthly(out):
    with xr.open_dataset(out / "monthly_yield.nc") as opened:
        yield opened.load()


def files_below(folder):
    return sorted(path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file())


def test_everything_promised_is_there_and_nothing_else(demo, out):
    assert files_below(out) == PROMISED
    assert files_below(demo[0] / "outputs") == [f"demo/{name}" for name in PROMISED]
    for name in PROMISED:
        assert (out / name).stat().st_size > 100, name


def test_the_netcdf_holds_the_months_with_their_unit(monthly):
    litres = monthly["monthly_yield"]
    assert litres.dims == ("month", "latitude", "longitude")
    assert litres.shape == (12, 60, 60)
    assert litres.attrs["units"] == "L m-2 month-1"
    assert monthly["month"].values.tolist() == list(range(1, 13))
    assert monthly.attrs["caution"] == WATER_CAUTION
    assert monthly.sizes["year"] == 8
    # Ceiling of a single-effect still over a day: 0.60 of the sunshine (Cooper 1973, quoted from memory), and 40 MJ
    # a day is more sun than reaches the ground anywhere.
    assert 10.0 < float(litres.min()) < float(litres.max()) < 0.60 * 40 * 31 / 2.3
    np.testing.assert_allclose(litres.sum("month", skipna=False), monthly["annual_yield"], rtol=1e-6)


def test_the_raster_has_twelve_bands_north_up_with_the_same_litres(out, monthly):
    with rasterio.open(out / "monthly_yield.tif") as raster:
        assert raster.count == 12
        assert raster.crs.to_epsg() == 4326
        assert raster.transform.e < 0 < raster.transform.a
        litres = raster.read(masked=True)
        row, column = raster.index(-38.8, 21.5)
    cell = monthly["monthly_yield"].sel(latitude=21.5, longitude=-38.8, method="nearest")
    np.testing.assert_allclose(litres[:, row, column], cell.values, rtol=1e-6)
    assert (~litres.mask).sum() == int(monthly["monthly_yield"].notnull().sum())


def test_maps_are_pictures_of_a_page(out):
    from matplotlib.image import imread

    for path in (out / "maps").glob("*.png"):
        picture = imread(path)
        assert picture.shape[1] == 1600
        assert picture[..., :3].std() > 0.02, path.name


def test_cells_say_what_the_netcdf_says(out, monthly):
    rows = table(out / "cells.csv")
    assert len(rows) == int(monthly["annual_yield"].notnull().sum())
    for row in rows[:: len(rows) // 20]:
        where = {"latitude": float(row["latitude_deg"]), "longitude": float(row["longitude_deg"])}
        cell = monthly.sel(where, method="nearest")
        np.testing.assert_allclose(months_of(row), cell["monthly_yield"].values, atol=0.006)
        assert float(row["annual_yield_l_m2_year"]) == pytest.approx(float(cell["annual_yield"]), abs=0.006)


def test_every_village_is_ranked_once_first_to_visit_first(demo, out):
    villages = table(demo[0] / "config" / "demo" / "villages.csv")
    rows = table(out / "places.csv")
    assert sorted(row["id"] for row in rows) == sorted(village["id"] for village in villages)
    ranks = [int(row["rank"]) for row in rows]
    assert ranks == sorted(ranks)
    assert ranks[0] == 1
    scores = [float(row["score"]) for row in rows]
    assert scores == sorted(scores, reverse=True)
    given = {village["id"]: village for village in villages}
    for row in rows:
        assert row["name"] == given[row["id"]]["name"]
        assert row["population"] == given[row["id"]]["population"]  # whole numbers stay whole
        assert float(row["feed_salinity_g_kg"]) == float(given[row["id"]]["feed_salinity_g_kg"])


def test_a_village_is_sized_on_its_worst_month(out):
    """The same need all year, so the month to size for is the one with the fewest litres."""
    days = dict(zip(MONTHS, (31, 28.25, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31), strict=True))
    for row in table(out / "places.csv"):
        daily = {month: litres / days[month] for month, litres in zip(MONTHS, months_of(row), strict=True)}
        worst = min(daily, key=daily.__getitem__)
        assert row["sizing_month"] == row["least_yield_month"]
        assert row["sizing_month"][:3].lower() == worst
        assert float(row["sizing_yield_l_m2_day"]) == pytest.approx(daily[worst], rel=0.003)
        # 5 L per person and day in config/demo.yaml, from stills that work on 95 of 100 days.
        area = 5.0 / 0.95 / float(row["sizing_yield_l_m2_day"])
        assert float(row["area_per_person_m2"]) == pytest.approx(area, rel=0.005)
        assert float(row["area_village_m2"]) == pytest.approx(area * int(row["population"]), rel=0.005)
        assert int(row["stills_village"]) == pytest.approx(float(row["area_village_m2"]), abs=1 + 0.0005 * area * 8400)


def test_how_sure_the_order_is_stands_beside_it(out):
    rows = table(out / "places.csv")
    for row in rows:
        assert int(row["rank_low"]) <= int(row["rank"]) <= int(row["rank_high"])
        assert row["remark"].startswith(f"Rank {row['rank']} of {len(rows)} ({row['rank_low']} to {row['rank_high']})")
        assert row["years_of_record"] == "8"
        reached = [float(row[f"sizing_yield_{name}_l_m2_day"]) for name in ("p90", "p75", "p50")]
        assert reached == sorted(reached)
        assert float(row["cost_per_litre_low"]) < float(row["cost_per_litre"]) < float(row["cost_per_litre_high"])
    # Ten seats are shared among the places in every draw (rank.top is 10); the table has two decimals.
    assert sum(float(row["top_probability"]) for row in rows) == pytest.approx(10, abs=0.005 * len(rows))


def test_months_and_tanks_of_a_village_agree_with_its_row(out):
    places = {row["id"]: row for row in table(out / "places.csv")}
    months, tanks = table(out / "places_months.csv"), table(out / "places_storage.csv")
    assert len(months) == 12 * len(places)
    for row in months:
        of_place = places[row["id"]]
        assert row["yield_l_m2_month"] == of_place[f"yield_{row['month'][:3].lower()}_l_m2_month"]
        share = float(row["share_of_need_at_sized_area"])
        assert share == 1.0 if row["month"] == of_place["sizing_month"] else share >= 1.0
    for number, of_place in places.items():
        curve = [row for row in tanks if row["id"] == number]
        assert [float(row["tank_days"]) for row in curve] == [0, 1, 2, 3, 5, 7, 14]
        areas = [float(row["area_per_person_m2"]) for row in curve]
        assert areas == sorted(areas, reverse=True)
        assert all(float(row["share_of_days_served"]) >= 0.95 for row in curve)
        chosen = (of_place["tank_per_person_l"], of_place["area_with_tank_per_person_m2"])
        assert chosen in {(row["tank_per_person_l"], row["area_per_person_m2"]) for row in curve}


def nearest(axis, value):
    """Numbers of the cells whose centre is nearest along an axis: two on a border."""
    away = abs(axis - value)
    return np.flatnonzero(away <= away.min() + 1e-9).tolist()


def test_villages_on_sea_cells_take_the_next_cell_on_land_and_say_so(out, monthly):
    """Which cells are sea is told here by GDAL, which burns the polygons into cells whose centre they cover."""
    latitude, longitude = monthly["latitude"].values, monthly["longitude"].values
    content = json.loads((CONFIG / "demo" / "coast.geojson").read_text(encoding="utf-8"))
    step = 5.6 / 60  # box and shape of config/demo.yaml
    on_land = rasterio.features.rasterize(
        [feature["geometry"] for feature in content["features"]], out_shape=(60, 60), dtype="uint8",
        transform=rasterio.Affine(step, 0.0, -42.8, 0.0, step, 17.2),
    ).astype(bool)  # fmt: skip
    assert latitude[0] < latitude[-1]
    assert 0.4 < on_land.mean() < 0.7
    known = monthly["annual_yield"].notnull().transpose("latitude", "longitude").values
    np.testing.assert_array_equal(known, on_land)
    substituted = 0
    for row in table(out / "places.csv"):
        # A place on the border of two cells is equally near to both.
        own = [
            (north, east)
            for north in nearest(latitude, float(row["latitude_deg"]))
            for east in nearest(longitude, float(row["longitude_deg"]))
        ]
        used = (
            int(abs(latitude - float(row["cell_latitude_deg"])).argmin()),
            int(abs(longitude - float(row["cell_longitude_deg"])).argmin()),
        )  # fmt: skip
        assert on_land[used]
        sea = not any(on_land[cell] for cell in own)
        assert row["nearest_cell_missing"] == ("yes" if sea else "no"), row["name"]
        if sea:
            substituted += 1
            assert used not in own
            assert 0.0 < float(row["cell_distance_km"]) <= 25.0
    assert substituted >= 5


def test_the_resolved_run_file_loads_again_as_the_same_run(demo, out):
    beside = demo[0] / "config" / "again.yaml"
    shutil.copy(out / "run.yaml", beside)
    again, first = load_run(beside), load_run(demo[0] / "config" / "demo.yaml")
    assert again.model_dump(mode="json") == first.model_dump(mode="json")


def test_the_manifest_accounts_for_inputs_and_outputs(demo, out):
    manifest = json.loads((out / "manifest.json").read_text(encoding="utf-8"))
    assert {"format", "settings", "inputs", "versions", "conventions", "digests", "files", "caution"} <= set(manifest)
    assert sorted([*manifest["files"], "manifest.json"]) == PROMISED
    # Named as in the run file, wherever the command was started.
    assert set(manifest["inputs"]) == {"demo/coast.geojson", "demo/villages.csv", "stills/single-slope-glass.yaml"}
    for name, identity in manifest["inputs"].items():
        path = demo[0] / "config" / name
        assert identity["sha256"] == hashlib.sha256(path.read_bytes()).hexdigest()
        assert identity["bytes"] == path.stat().st_size
    for name, digest in manifest["digests"].items():
        if name in PROMISED:
            assert digest == hashlib.sha256((out / name).read_bytes()).hexdigest(), name
    assert {"cells.csv", "places.csv", "places_months.csv", "places_storage.csv", "monthly",
            "monthly_yield.tif"} <= set(manifest["digests"])
    assert manifest["versions"]["xarray"] == xr.__version__
    assert manifest["settings"]["method"] == "fitted"
    assert any("invented" in sentence for sentence in manifest["conventions"])
    assert str(demo[0]) not in (out / "manifest.json").read_text(encoding="utf-8")


def test_water_caution_stands_wherever_litres_are_told(demo, out):
    def flat(text):
        return " ".join(text.split())

    assert WATER_CAUTION in flat(demo[1].stdout)
    assert WATER_CAUTION in flat((out / "READ-ME-FIRST.txt").read_text(encoding="utf-8"))


def test_the_summary_says_the_answer_and_how_sure_it_is(demo, out, monthly):
    first = table(out / "places.csv")[0]
    words = demo[1].stdout
    assert f"1  {first['name']}" in words
    assert f"{float(first['sizing_yield_l_m2_day']):.2f} L/m2 a day in {first['sizing_month']}" in words
    assert f"rank {first['rank_low']} to {first['rank_high']}" in words
    assert f"a year        {float(monthly['annual_yield'].median()):.0f} (" in words
    ends = [float(monthly[f"annual_yield_{end}"].median()) for end in ("low", "high")]
    assert ends[0] < 0.9 * float(monthly["annual_yield"].median()) < ends[1]
    assert f"condition band {ends[0]:.0f} to {ends[1]:.0f}" in words
    assert f"{len(PROMISED)} files in outputs/demo" in words.replace("\\", "/")


def test_a_second_run_gives_the_same_bytes(demo, out):
    def digests():
        return {name: hashlib.sha256((out / name).read_bytes()).hexdigest() for name in files_below(out)}

    before = digests()
    (out / "my-notes.txt").write_text("kept")
    told = stillfield_command("run", "--quiet", "config/demo.yaml", cwd=demo[0])
    assert (told.returncode, told.stdout, told.stderr) == (0, "", "")
    assert (out / "my-notes.txt").read_text() == "kept"
    (out / "my-notes.txt").unlink()
    assert digests() == before
