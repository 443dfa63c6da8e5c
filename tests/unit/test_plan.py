"""The plan: figures that can be counted by hand, nothing computed, keys that stay."""

from __future__ import annotations

import csv
import json
from calendar import isleap
from pathlib import Path

import dask
import dask.array as da
import numpy as np
import pytest
import xarray as xr

from stillfield.errors import MethodError, WeatherError
from stillfield.methods import fit_store
from stillfield.plan import PLAN_VERSION, plan
from stillfield.products.plan_text import plan_text
from stillfield.settings.load import load_run
from stillfield.sources.grids import netcdf_series
from stillfield.sources.invented.synthetic import SyntheticSource
from whole_runs import CONFIG, SMALL_WEATHER, STILL, write_run

FILES = ("723170TYA.CSV", "703165TY.csv", "12839.tm2")


def planned(run_file):
    return plan(load_run(run_file), run_file=run_file)


def no_computing(*_given, **_options):
    raise AssertionError("something was computed")


@pytest.fixture
def nothing_computes(monkeypatch):
    """Fail at the first lazy value anybody asks for."""
    monkeypatch.setattr("dask.threaded.get", no_computing)
    with dask.config.set(scheduler=no_computing):
        with pytest.raises(AssertionError, match="something was computed"):
            da.ones(2).compute()
        yield


@pytest.fixture
def days_of_weather(tmp_path):
    """Four files of ten days: 3 by 4 cells around 9 N, 40 E."""
    rows, columns = 8.0 + 0.5 * np.arange(3), 39.0 + 0.25 * np.arange(4)
    for part in range(4):
        time = np.datetime64("2012-02-20", "ns") + np.arange(10 * part, 10 * part + 10) * np.timedelta64(1, "D")
        shape = (10, 3, 4)
        dims = ("time", "lat", "lon")
        xr.Dataset(
            {"sun": (dims, np.full(shape, 230.0, np.float32), {"units": "W m-2"}),
             "tas": (dims, np.full(shape, 300.0, np.float32), {"units": "K"}),
             "blow": (dims, np.full(shape, 4.0, np.float32), {"units": "m s-1", "standard_name": "wind_speed"})},
            coords={"time": time, "lat": ("lat", rows, {"units": "degrees_north"}),
                    "lon": ("lon", columns, {"units": "degrees_east"})},
        ).to_netcdf(tmp_path / f"part{part}.nc")
    return {
        "kind": "netcdf", "files": "part*.nc",
        "variables": {"irradiation": {"name": "sun", "means": "daily-mean"}, "wind_speed": {"height_m": 10}},
    }


def test_the_demo_is_told_as_its_run_file_and_tables_have_it(nothing_computes):
    told = planned(CONFIG / "demo.yaml")
    time, space = told["weather"]["time"], told["weather"]["space"]
    assert (time["first_day"], time["last_day"], time["years"]) == ("2011-01-01", "2018-12-31", 8)
    assert time["days"] == sum(366 if isleap(year) else 365 for year in range(2011, 2019))
    assert (space["kind"], space["rows"], space["columns"], space["cells"]) == ("grid", 60, 60, 3600)
    assert space["box"] == {"south": 17.2, "north": 22.8, "west": -42.8, "east": -37.2}
    assert space["resolution_deg"] == pytest.approx([5.6 / 60, 5.6 / 60], abs=1e-6)
    with (CONFIG / "demo" / "villages.csv").open(encoding="utf-8-sig") as stream:
        assert told["places"]["count"] == len(list(csv.DictReader(stream)))
    assert told["weather"]["files"] == told["estimate"]["bytes_to_read"] == 0
    assert told["stills"][0]["fits"] == dict.fromkeys(("maintained", "weathered", "new"), "shipped")


def test_land_cells_are_those_that_have_weather():
    keys = {**SMALL_WEATHER["box"], "shape": (6, 5), "years": 1, "land": Path(SMALL_WEATHER["land"])}
    weather = SyntheticSource(**keys).open()
    with_weather = int(np.isfinite(weather["irradiation"].isel(time=0).values).sum())
    assert 0 < with_weather < 30
    from stillfield.stages.survey import survey_space

    assert survey_space(weather)["land_cells"] == with_weather


def test_typical_years_are_told_as_their_files_have_them():
    import pvlib

    told = planned(CONFIG / "typical-years.yaml")
    time, space = told["weather"]["time"], told["weather"]["space"]
    assert (time["record"], time["clock"]) == ("typical-year", "local-standard")
    assert (time["days"], time["step_hours"]) == (365, 1.0)
    assert (space["kind"], space["cells"], space["sites"]) == ("sites", 3, [name.partition(".")[0] for name in FILES])
    # Header lines of the files: Miami 25 48 N, 80 16 W; Greensboro 36.1 N, 79.95 W; Sand Point 55.317 N, 160.517 W.
    assert space["box"] == {"south": 25.8, "north": 55.317, "west": -160.517, "east": -79.95}
    folder = Path(pvlib.__file__).parent / "data"
    assert told["weather"]["bytes"] == sum((folder / name).stat().st_size for name in FILES)
    assert told["method"]["variant"] == "hourly"
    assert {"ghi", "temp_air", "wind_speed"} <= set(told["method"]["variables"])


def test_gridded_files_are_told_without_reading_their_weather(tmp_path, days_of_weather, nothing_computes, monkeypatch):
    monkeypatch.setattr(netcdf_series, "_read_values", no_computing)
    told = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, method="fitted"))
    weather = told["weather"]
    assert (weather["files"], weather["time"]["days"]) == (4, 40)
    assert (weather["time"]["first_day"], weather["time"]["last_day"]) == ("2012-02-20", "2012-03-30")
    assert weather["bytes"] == sum(path.stat().st_size for path in tmp_path.glob("part*.nc"))
    assert weather["space"]["box"] == {"south": 7.75, "north": 9.25, "west": 38.875, "east": 39.875}
    assert weather["space"]["resolution_deg"] == [0.5, 0.25]
    assert weather["space"]["land_cells"] is None
    assert weather["variables"] == [
        {"name": "sun", "units": "W m-2", "quantity": "irradiation", "unit": "MJ m-2", "recognised_by": "mapped"},
        {"name": "tas", "units": "K", "quantity": "temp_air", "unit": "degC", "recognised_by": "alias"},
        {"name": "blow", "units": "m s-1", "quantity": "wind_speed", "unit": "m s-1", "recognised_by": "standard_name"},
    ]
    assert any("from 10 m to 2 m" in said for said in weather["conventions"])
    assert told["method"]["variant"] == "daily"


def test_the_region_cuts_the_cells(tmp_path, days_of_weather):
    region = {"south": 8.4, "north": 9.3, "west": 39.2, "east": 40.0}
    told = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, region=region))
    # Centres 8.5 and 9.0 N; 39.25, 39.5 and 39.75 E.
    assert (told["weather"]["space"]["rows"], told["weather"]["space"]["columns"]) == (2, 3)
    assert "region      cut to 8.4 to 9.3 N, 39.2 to 40 E" in plan_text(told)


def test_the_variant_follows_the_weather(tmp_path, days_of_weather):
    for part in range(4):
        with xr.open_dataset(tmp_path / f"part{part}.nc") as old:
            more = old.load().assign(dew=old["tas"] - 10.0)
        more["dew"].attrs = {"units": "K", "standard_name": "dew_point_temperature"}
        more.to_netcdf(tmp_path / f"part{part}.nc")
    told = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, method="fitted"))
    assert told["method"]["variant"] == "daily-humidity"


def test_faults_are_the_words_of_the_run(tmp_path, days_of_weather):
    with pytest.raises(MethodError, match="method 'heat-balance' works on steps of at most 6 h"):
        planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, method="heat-balance"))
    away = {"south": 40, "north": 50, "west": 0, "east": 10}
    with pytest.raises(WeatherError, match="region"):
        planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, region=away))


def test_places_outside_the_cells_are_counted_and_named(tmp_path, days_of_weather):
    (tmp_path / "villages.csv").write_text(
        "name,latitude,longitude\nInner,8.5,39.5\nEdge,9.24,39.87\nNorth,9.3,39.5\nWest,8.5,38.8\n"
    )
    told = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, places={"table": "villages.csv"}))
    assert (told["places"]["count"], told["places"]["outside"]) == (4, 2)
    assert told["places"]["outside_names"] == ["North", "West"]
    assert "2 outside the weather: North, West" in plan_text(told)


def test_places_far_from_every_site_are_counted(tmp_path):
    # One degree of latitude is 111 km; the site lies at 25.8 N, 80.267 W.
    (tmp_path / "v.csv").write_text("name,latitude,longitude\nNear,25.9,-80.3\nFar,26.8,-80.3\n")
    told = planned(write_run(
        tmp_path / "run.yaml", weather={"kind": "typical-year", "files": "pvlib:data/12839.tm2"},
        places={"table": "v.csv", "max_cell_distance_km": 50},
    ))
    assert told["places"]["outside_names"] == ["Far"]


def test_a_fit_is_to_be_made_until_it_is_kept(tmp_path, monkeypatch, days_of_weather):
    monkeypatch.chdir(tmp_path)
    own = STILL.read_text(encoding="utf-8").replace("brine_depth_m: 0.02", "brine_depth_m: 0.023")
    assert own != STILL.read_text(encoding="utf-8")
    (tmp_path / "own.yaml").write_text(own)
    run_file = write_run(tmp_path / "run.yaml", weather=days_of_weather, still="own.yaml", method="fitted")
    told = planned(run_file)
    assert set(told["stills"][0]["fits"].values()) == {"to be made"}
    to_write = [name for name in told["outputs"] if name.startswith("outputs/fits/fit-")]
    assert len(to_write) == 3
    still = load_run(run_file).stills[0]
    # A fit of another still under the right name is no kept fit; one under its own fingerprint is.
    shipped = next(iter(fit_store._shipped().values()))
    kept = tmp_path / "outputs" / "fits" / f"fit-{still.fingerprint()}.json"
    kept.parent.mkdir(parents=True)
    kept.write_text(fit_store.fit_text([shipped]))
    assert planned(run_file)["stills"][0]["fits"]["maintained"] == "to be made"
    kept.write_text(fit_store.fit_text([type(shipped)(still.fingerprint(), shipped.correlations)]))
    again = planned(run_file)
    assert again["stills"][0]["fits"] == {"maintained": "kept", "weathered": "to be made", "new": "to be made"}
    assert again["estimate"]["seconds"] < told["estimate"]["seconds"]
    # The files a run keeps are those the plan listed.
    monkeypatch.setattr(fit_store, "_made", lambda still: type(shipped)(still.fingerprint(), shipped.correlations))
    for condition in again["stills"][0]["fits"]:
        fit_store.fit_for(still.in_condition(condition), kept.parent)
    assert sorted(path.as_posix() for path in Path("outputs/fits").iterdir()) == sorted(to_write)


def test_several_stills_cost_more_and_have_folders_of_their_own(tmp_path, days_of_weather):
    stills = [str(CONFIG / "stills" / f"{name}.yaml") for name in ("single-slope-glass", "deep-basin")]
    one = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather))
    two = planned(write_run(tmp_path / "run.yaml", weather=days_of_weather, still=stills))
    assert [still["folder"] for still in two["stills"]] == [
        "outputs/run/single-slope-glass", "outputs/run/deep-basin",
    ]
    beside = {"outputs/run/stills.csv", "outputs/run/stills_notes.txt"}
    assert beside <= set(two["outputs"])
    assert len(two["outputs"]) == 2 * len(one["outputs"]) + len(beside)
    assert two["estimate"]["disk_bytes"] == pytest.approx(2 * one["estimate"]["disk_bytes"], abs=1)


def keys_of(value):
    """Nested keys; of a list, those of its first item."""
    if isinstance(value, dict):
        return {key: keys_of(inner) for key, inner in value.items()}
    return [keys_of(value[0])] if isinstance(value, list) and value and isinstance(value[0], dict) else None


def test_keys_are_the_promised_ones(tmp_path, days_of_weather):
    (tmp_path / "v.csv").write_text("name,latitude,longitude\nInner,8.5,39.5\n")
    told = planned(write_run(
        tmp_path / "run.yaml", weather=days_of_weather, method="fitted", places={"table": "v.csv"},
    ))
    assert PLAN_VERSION == told["plan_version"] == 1
    promised = {
        "plan_version": None, "stillfield": None, "name": None, "run_file": None,
        "weather": {
            **dict.fromkeys(["kind", "origin", "files", "bytes", "conventions", "region"]),
            "variables": [dict.fromkeys(["name", "units", "quantity", "unit", "recognised_by"])],
            "time": dict.fromkeys(["record", "clock", "step_hours", "first", "last", "first_day", "last_day", "days",
                                   "years", "calendar"]),
            "space": {**dict.fromkeys(["kind", "cells", "land_cells", "rows", "columns", "resolution_deg", "sites"]),
                      "box": dict.fromkeys(["south", "north", "west", "east"])},
        },
        "method": dict.fromkeys(["name", "resolution", "variables", "variant", "has_band"]),
        "stills": [{**dict.fromkeys(["name", "condition", "condition_low", "condition_high", "folder"]),
                    "fits": dict.fromkeys(["maintained", "weathered", "new"])}],
        "places": dict.fromkeys(["table", "count", "outside", "outside_names", "max_cell_distance_km"]),
        "work": dict.fromkeys(["blocks", "cells", "windows", "records", "spans", "at_once", "scheduler", "by"]),
        "outputs": None,
        "estimate": dict.fromkeys(["bytes_to_read", "memory_bytes", "disk_bytes", "seconds", "basis"]),
    }
    assert keys_of(told) == promised
    assert json.loads(json.dumps(told, allow_nan=False)) == told


def test_every_promised_key_is_documented():
    documented = plan.__doc__
    told = keys_of(planned(CONFIG / "demo.yaml"))

    def names(value):
        for key, inner in value.items():
            yield key
            if isinstance(inner, dict) and key not in ("box", "fits"):
                yield from names(inner)

    assert [name for name in names(told) if f"``{name}``" not in documented] == []


def test_the_text_holds_what_a_planner_asks(tmp_path, days_of_weather):
    text = plan_text(planned(write_run(tmp_path / "run.yaml", weather=days_of_weather)))
    for words in (
        "sun ('W m-2') -> irradiation [MJ m-2], by the run file", "tas ('K') -> temp_air [degC], by its usual name",
        "2012-02-20 to 2012-03-30, 40 days, daily", "3 x 4 = 12 cells", "7.75 to 9.25 N", "rule; no band",
        "outputs/run/: READ-ME-FIRST.txt", "maps/: annual_yield.png", "Rough:",
    ):
        assert words in text
    # The first line names the run file, which may be long.
    assert max(map(len, text.splitlines()[1:])) <= 100
