"""Bad input ends with exit code 2, one message that names file, place and cure, and nothing written."""

from __future__ import annotations

import hashlib

import numpy as np
import pandas as pd
import xarray as xr

from whole_runs import CONFIG, SMALL_WEATHER, STILL, finished, stillfield_command, write_run

SITE = {"kind": "typical-year", "files": "pvlib:data/12839.tm2"}


def weather_file(path, *, units="W m-2", kelvin=True, days=3):
    """Write a few invented hours of four cells on the equator as NetCDF."""
    hour = np.arange(24 * days) % 24
    sun = np.clip(np.sin((hour - 5.5) * np.pi / 12), 0, None) * 900
    cells = np.ones((1, 2, 2))
    dims = ("time", "latitude", "longitude")
    xr.Dataset(
        {
            "rsds": (dims, sun[:, None, None] * cells, {} if units is None else {"units": units}),
            "tas": (dims, np.full((24 * days, 2, 2), 298.0), {"units": "K" if kelvin else "degC"}),
            "sfcWind": (dims, np.full((24 * days, 2, 2), 3.0), {"units": "m s-1"}),
        },
        coords={
            "time": pd.date_range("2010-01-01", periods=24 * days, freq="h"),
            "latitude": ("latitude", [0.0, 1.0], {"units": "degrees_north"}),
            "longitude": ("longitude", [0.0, 1.0], {"units": "degrees_east"}),
        },
    ).to_netcdf(path)


def gridded(name, **variables):
    return {"kind": "netcdf", "files": name, "variables": {"wind_speed": {"height_m": 10}, **variables}}


def complaint(folder, **keys):
    """Run, expect exit code 2 and exactly one message, find nothing written, and give the message."""
    write_run(folder / "run.yaml", **keys)
    before = sorted(path.name for path in folder.rglob("*"))
    told = stillfield_command("run", "--quiet", "run.yaml", cwd=folder)
    assert told.returncode == 2, told.stderr
    assert told.stdout == ""
    assert "Traceback" not in told.stderr
    assert told.stderr.startswith("stillfield: ")
    assert told.stderr.count("stillfield: ") == 1
    first, *more = told.stderr.splitlines()
    # More than one line only where a text file has faults, one line each.
    assert all(line.startswith("  ") for line in more)
    if more:
        assert f"has {len(more)} fault" in first
    assert sorted(path.name for path in folder.rglob("*")) == before
    return told.stderr


def test_a_missing_weather_file_is_named_with_the_line_and_the_file_that_was_meant(tmp_path):
    weather_file(tmp_path / "weather.nc")
    said = complaint(tmp_path, weather=gridded("wether.nc"))
    for words in ("run.yaml", "line 5, weather.files", "no such file 'wether.nc'", "did you mean 'weather.nc'"):
        assert words in said


def test_an_unknown_key_is_told_with_the_key_that_was_meant(tmp_path):
    said = complaint(tmp_path, weather=SITE, need={"litre_per_person_day": 3})
    for words in ("run.yaml", "line ", "need.litre_per_person_day: unknown key", "mean 'litres_per_person_day'?"):
        assert words in said


def test_a_wrong_type_is_told_with_what_is_wanted(tmp_path):
    said = complaint(tmp_path, weather=SITE, need={"litres_per_person_day": "three"})
    for words in ("run.yaml", "need.litres_per_person_day: should be a number between 0.1 and 100", "'three'"):
        assert words in said


def test_every_fault_of_a_run_file_is_told_at_once(tmp_path):
    said = complaint(tmp_path, weather={**SITE, "format": "tmy"}, method="ruel", missing={"min_valid_hours": 25})
    assert "run.yaml has 3 faults" in said
    for words in ("weather.format", "did you mean 'rule'?", "missing.min_valid_hours: should be", "between 1 and 24"):
        assert words in said


def test_a_fault_in_the_still_file_is_told_with_its_line_there(tmp_path):
    text = STILL.read_text(encoding="utf-8")
    (tmp_path / "steep.yaml").write_text(text.replace("tilt_deg: 15 ", "tilt_deg: 95 "), encoding="utf-8")
    line = 1 + next(number for number, row in enumerate(text.splitlines()) if "tilt_deg: 15" in row)
    said = complaint(tmp_path, weather=SITE, still="steep.yaml")
    for words in ("run.yaml", f"steep.yaml, line {line}, panels (item 1).tilt_deg: should be between 0 and 80 (got 95"):
        assert words in said


def test_a_variable_that_is_not_there_is_told_with_those_that_are(tmp_path):
    weather_file(tmp_path / "weather.nc")
    said = complaint(tmp_path, weather=gridded("weather.nc", irradiation={"name": "sunny"}))
    for words in ("weather.nc", "variables.irradiation.name", "sunny", "rsds, tas, sfcWind", "Correct "):
        assert words in said


def test_a_missing_unit_is_told_with_the_choices_and_never_guessed(tmp_path):
    weather_file(tmp_path / "weather.nc", units=None)
    said = complaint(tmp_path, weather=gridded("weather.nc"))
    for words in ("rsds in weather.nc", "unit", "missing", "'W m-2'", "'MJ m-2'", "State `units`"):
        assert words in said


def test_a_unit_that_is_none_is_told(tmp_path):
    weather_file(tmp_path / "weather.nc", units="furlong")
    said = complaint(tmp_path, weather=gridded("weather.nc"))
    for words in ("weather.nc", "'furlong'", "'W m-2'"):
        assert words in said


def test_a_wrong_unit_attribute_meets_the_gate_by_cell_and_day(tmp_path):
    """298 K labelled degC is no air temperature, and a method that takes the temperature finds out."""
    weather_file(tmp_path / "weather.nc", kelvin=False)
    said = complaint(tmp_path, weather=gridded("weather.nc"), method="nafey-2000")
    for words in ("weather.nc", "temp_air", "298", "2010-01-01"):
        assert words in said


def test_a_file_cut_short_is_refused(tmp_path):
    weather_file(tmp_path / "weather.nc")
    content = (tmp_path / "weather.nc").read_bytes()
    (tmp_path / "weather.nc").write_bytes(content[: len(content) // 2])
    said = complaint(tmp_path, weather=gridded("weather.nc"))
    for words in ("weather.nc", "cut off", "get it again"):
        assert words in said


def test_a_web_page_saved_as_weather_is_called_one(tmp_path):
    (tmp_path / "tmy.epw").write_text("<!DOCTYPE html><html><body>Not found</body></html>")
    said = complaint(tmp_path, weather={"kind": "typical-year", "files": "tmy.epw"})
    for words in ("tmy.epw", "a web page", "download the data again"):
        assert words in said


def test_every_bad_row_of_a_village_table_is_told_by_its_number(tmp_path):
    rows = [
        "name,latitude,longitude,population", "Good,25.8,-80.2,10", "Swapped,-120.2,25.8,10",
        "Many,25.8,-80.2,lots", "Nowhere,25.8,,10",
    ]  # fmt: skip
    (tmp_path / "villages.csv").write_text("\n".join(rows))
    said = complaint(tmp_path, weather=SITE, places={"table": "villages.csv"})
    assert "villages.csv has 3 faults" in said
    for words in (
        "row 3, latitude: should be between -90 and 90 (got -120.2", "swapped?", "row 4, population", "'lots'",
        "row 5, longitude: is empty",
    ):  # fmt: skip
        assert words in said


def test_an_hourly_method_on_daily_weather_is_told_what_to_do(tmp_path):
    said = complaint(tmp_path, weather=SMALL_WEATHER, method="heat-balance")
    for words in ("heat-balance", "the weather is daily", "Give hourly weather, or choose method 'fitted'"):
        assert words in said


def test_a_region_without_weather_is_told_where_the_weather_is(tmp_path):
    said = complaint(tmp_path, weather=SITE, region={"south": 0, "north": 1, "west": 0, "east": 1})
    for words in ("region", "25.8", "-80.2", "Correct the box or the weather files"):
        assert words in said


def test_a_land_outline_that_is_none_is_bad_input_and_found_before_the_weather_is_read(tmp_path):
    (tmp_path / "land.geojson").write_text('{"type": "nothing"}')
    said = complaint(tmp_path, weather=SITE, map={"land": "land.geojson"})
    for words in ("land.geojson", "GeoJSON", "Give polygons"):
        assert words in said


def test_villages_need_a_whole_year_of_weather(tmp_path):
    weather_file(tmp_path / "weather.nc", days=40)
    (tmp_path / "villages.csv").write_text("name,latitude,longitude\nA,0.2,0.3\n")
    said = complaint(tmp_path, weather=gridded("weather.nc"), places={"table": "villages.csv"})
    for words in ("twelve months", "Give weather for every month of a year"):
        assert words in said


def test_an_output_folder_that_cannot_be_made_is_3_before_the_weather_is_read(tmp_path):
    (tmp_path / "taken").write_text("a file")
    write_run(tmp_path / "run.yaml", weather=SITE, output={"folder": "taken/below"})
    told = stillfield_command("run", "run.yaml", cwd=tmp_path)
    assert (told.returncode, told.stdout) == (3, "")
    (line,) = told.stderr.splitlines()  # no line of progress: nothing was begun
    for words in ("stillfield: ", "taken/below/run: cannot write the results", "taken: a file, not a folder",
                  "choose another output.folder"):  # fmt: skip
        assert words in line
    assert (tmp_path / "taken").read_text() == "a file"


def test_a_run_that_fails_leaves_the_results_of_an_earlier_one_alone(tmp_path):
    run_file = write_run(tmp_path / "run.yaml", weather=SITE)
    out = finished(run_file, cwd=tmp_path)
    before = {path: hashlib.sha256(path.read_bytes()).hexdigest() for path in out.rglob("*") if path.is_file()}
    assert out / "manifest.json" in before
    write_run(run_file, weather={"kind": "typical-year", "files": "bad.epw"})
    (tmp_path / "bad.epw").write_text("LOCATION,Nowhere,-,-,-,0,10.0,20.0,1.5,3.0\n1,2\n")
    told = stillfield_command("run", "--quiet", "run.yaml", cwd=tmp_path)
    assert told.returncode == 2
    assert "bad.epw" in told.stderr
    assert before == {path: hashlib.sha256(path.read_bytes()).hexdigest() for path in out.rglob("*") if path.is_file()}


def test_the_shipped_run_files_are_checked_here_as_they_are(tmp_path):
    """A run file that is shipped must not be the one with the fault."""
    from stillfield.settings.load import load_run

    names = sorted(path.name for path in CONFIG.glob("*.yaml") if path.name != "trial.yaml")  # a trial is no run
    assert {"demo.yaml", "typical-years.yaml"} <= set(names)
    assert [load_run(CONFIG / name).name for name in names] == [name.removesuffix(".yaml") for name in names]
