"""`stillfield plan` from outside: the faults of `run` in its words, nothing written, and a list that comes true."""

from __future__ import annotations

import json
import shutil

import numpy as np
import pytest
import xarray as xr

from stillfield.cli import main
from whole_runs import CONFIG, SMALL_WEATHER, STILL, stillfield_command, write_run

SITE = {"kind": "typical-year", "files": "pvlib:data/12839.tm2"}
GRID = {"kind": "netcdf", "files": "w*.nc"}


def listing(folder):
    """Everything below a folder, with sizes and times of change."""
    return sorted(
        (path.relative_to(folder).as_posix(), path.stat().st_size, path.stat().st_mtime_ns)
        for path in folder.rglob("*")
    )


def weather_files(folder, *, lacking=(), format="NETCDF4", **changed):
    """Two files of three days on 2 by 3 cells; `changed` are attributes of the sunshine."""
    dims = ("time", "latitude", "longitude")
    for part in (0, 1):
        time = np.datetime64("2012-06-01", "ns") + np.arange(3 * part, 3 * part + 3) * np.timedelta64(1, "D")
        variables = {
            "rsds": (dims, np.full((3, 2, 3), 21.0), {"units": "MJ m-2", **changed}),
            "tas": (dims, np.full((3, 2, 3), 27.0), {"units": "degC"}),
            "sfcWind": (dims, np.full((3, 2, 3), 3.0), {"units": "m s-1"}),
        }
        xr.Dataset(
            {name: value for name, value in variables.items() if name not in lacking},
            coords={"time": time, "latitude": ("latitude", [9.0, 9.5], {"units": "degrees_north"}),
                    "longitude": ("longitude", [40.0, 40.5, 41.0], {"units": "degrees_east"})},
        ).to_netcdf(folder / f"w{part}.nc", format=format)


def cut_off(folder, share=0.7, **options):
    weather_files(folder, **options)
    whole = (folder / "w1.nc").read_bytes()
    (folder / "w1.nc").write_bytes(whole[: int(share * len(whole))])


def a_web_page(folder):
    weather_files(folder)
    (folder / "w1.nc").write_text("<!DOCTYPE html><title>Log in</title>")


def villages(folder, text):
    weather_files(folder)
    (folder / "v.csv").write_text(text)


#: What is laid out, the keys of the run file, and a word of the message.
BROKEN = {
    "unknown key": (weather_files, {"weather": GRID, "metod": "rule"}, "did you mean 'method'"),
    "no such weather": (lambda folder: None, {"weather": GRID}, "no file matches 'w*.nc'"),
    "villages without names": (
        lambda folder: villages(folder, "lat,lon\n1,2\n"), {"weather": GRID, "places": {"table": "v.csv"}},
        "no column for name"),
    "villages off the map": (
        lambda folder: villages(folder, "name,lat,lon\nA,91,2\nB,1,500\n"),
        {"weather": GRID, "places": {"table": "v.csv"}}, "2 faults"),
    "NetCDF-4 cut off": (cut_off, {"weather": GRID}, "w1.nc"),
    "classic file cut off": (
        lambda folder: cut_off(folder, format="NETCDF3_64BIT"), {"weather": GRID}, "the file is cut off"),
    "web page": (a_web_page, {"weather": GRID}, "web page"),
    "unknown unit": (lambda folder: weather_files(folder, units="suns"), {"weather": GRID}, "suns"),
    "mean of what": (lambda folder: weather_files(folder, units="W m-2"), {"weather": GRID}, "daily-mean"),
    "no sunshine": (lambda folder: weather_files(folder, lacking=["rsds"]), {"weather": GRID}, "no sunshine"),
    "no wind for the method": (
        lambda folder: weather_files(folder, lacking=["sfcWind"]), {"weather": GRID, "method": "fitted"},
        "lacks what method 'fitted' needs"),
    "daily weather for hours": (
        weather_files, {"weather": GRID, "method": "heat-balance"}, "the weather is daily"),
    "empty region": (
        weather_files, {"weather": GRID, "region": {"south": 50, "north": 60, "west": 0, "east": 9}}, "region"),
    "no typical year": (
        lambda folder: (folder / "a.epw").write_text("nothing\n"), {"weather": {"kind": "typical-year",
                                                                               "files": "a.epw"}}, "a.epw"),
    "output under a file": (
        lambda folder: (folder / "taken").mkdir() or (folder / "taken" / "run").touch(),
        {"weather": SITE, "output": {"folder": "taken"}}, "a file, not a folder"),
}  # fmt: skip


@pytest.mark.parametrize("case", BROKEN)
def test_a_plan_finds_what_the_run_finds(tmp_path, monkeypatch, capsys, case):
    lay_out, keys, word = BROKEN[case]
    lay_out(tmp_path)
    write_run(tmp_path / "run.yaml", **keys)
    monkeypatch.chdir(tmp_path)
    before = listing(tmp_path)
    ends = {}
    for command in ("run", "plan"):
        code = main([command, "run.yaml", *(["--quiet"] if command == "run" else [])])
        ends[command] = (code, *capsys.readouterr())
    assert ends["plan"] == ends["run"]
    code, out, complaint = ends["plan"]
    assert code in (2, 3)
    assert out == ""
    assert word in complaint
    assert listing(tmp_path) == before


PLACES = {"table": str(CONFIG / "demo" / "villages.csv")}
TWO_STILLS = [str(STILL), str(STILL.with_name("deep-basin.yaml"))]


@pytest.mark.parametrize(
    ("name", "keys"),
    [("grid", {"weather": SMALL_WEATHER, "places": PLACES, "still": TWO_STILLS}), ("sites", {"weather": SITE})],
)
def test_a_run_writes_what_the_plan_lists(tmp_path, name, keys):
    run_file = write_run(tmp_path / f"{name}.yaml", **keys)
    told = stillfield_command("plan", run_file, "--json", cwd=tmp_path)
    assert (told.returncode, told.stderr) == (0, "")
    assert sorted(path.name for path in tmp_path.iterdir()) == [run_file.name]
    done = stillfield_command("run", run_file, "--quiet", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    written = {path.relative_to(tmp_path).as_posix() for path in (tmp_path / "outputs").rglob("*") if path.is_file()}
    plan = json.loads(told.stdout)
    assert written == set(plan["outputs"])
    on_disk = sum((tmp_path / path).stat().st_size for path in written)
    # A rough estimate: no more than three times off either way.
    assert on_disk / 3 < plan["estimate"]["disk_bytes"] < on_disk * 3


def test_the_demo_is_planned_in_words_and_nothing_is_written(tmp_path):
    shutil.copytree(CONFIG, tmp_path / "config")
    before = listing(tmp_path)
    told = stillfield_command("plan", "config/demo.yaml", "--output", "there", cwd=tmp_path)
    assert (told.returncode, told.stderr) == (0, "")
    assert listing(tmp_path) == before
    for words in ("2011-01-01 to 2018-12-31, 2922 days", "60 x 60 = 3600 cells", "there/demo/maps/", "44 in demo"):
        assert words in told.stdout
