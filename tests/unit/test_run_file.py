"""Run files: every class of fault with its line, and all at once.

The expected words are the contract of the run file. What YAML itself means stands in test_yaml_text.py.
"""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from stillfield.errors import RunFileError, StillfieldError
from stillfield.settings import variables as variable_keys
from stillfield.settings import weather as weather_keys
from stillfield.settings.base import folder_name
from stillfield.settings.load import json_schema, load_run, resolved_yaml, schema_text
from stillfield.settings.weather import NetcdfWeather, SyntheticWeather, TypicalYearWeather
from stillfield.sources import open_source, recognise
from stillfield.sources.invented import synthetic
from stillfield.sources.typical import year_formats

CONFIG = Path(__file__).parents[2] / "config"

STILL = """\
name: plain
panels: [{share: 1, tilt_deg: 15}]
cover: {material: glass}
"""

#: Seven sound lines; a test appends its own from line 8 on.
SOUND = """\
name: trial
weather:
  kind: synthetic
  box: {south: 17.2, north: 22.8, west: -42.8, east: -37.2}
  shape: [4, 5]
  land: demo/coast.geojson
still: still.yaml
"""


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """Folder with the files that `SOUND` names; the working directory is another one."""
    (tmp_path / "here" / "demo").mkdir(parents=True)
    (tmp_path / "elsewhere").mkdir()
    here = tmp_path / "here"
    for name in ("coast.geojson", "villages.csv"):
        shutil.copy(CONFIG / "demo" / name, here / "demo" / name)
    (here / "still.yaml").write_text(STILL)
    monkeypatch.chdir(tmp_path / "elsewhere")
    return here


def load(folder, text):
    (folder / "run.yaml").write_text(text, encoding="utf-8")
    return load_run(folder / "run.yaml")


def faults(folder, text):
    with pytest.raises(RunFileError) as caught:
        load(folder, text)
    assert caught.value.exit_code == 2
    return [str(fault) for fault in caught.value.faults]


def test_a_sound_file_gives_frozen_settings_with_defaults(folder):
    settings = load(folder, SOUND)
    assert (settings.name, settings.method, settings.rule.efficiency) == ("trial", "fitted", 0.30)
    assert settings.weather.land.given == "demo/coast.geojson"
    assert settings.weather.land.path == folder / "demo" / "coast.geojson"
    assert [still.name for still in settings.stills] == ["plain"]
    assert settings.folder == Path("outputs/trial")
    assert settings.places is None
    with pytest.raises(ValueError, match="frozen"):
        settings.name = "other"


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        ("methd: rule", "line 8, methd: unknown key (did you mean 'method'?)"),
        ("need:\n  litre_per_person: 5",
         "line 9, need.litre_per_person: unknown key (did you mean 'litres_per_person_day'?)"),
        ("min_valid_hours: 20", "line 8, min_valid_hours: unknown key here (did you mean 'missing.min_valid_hours'?)"),
        ("output: {zzz: 1}", "line 8, output.zzz: unknown key (known here: folder)"),
        ("method: ruel", "line 8, method: should be one of 'fitted', 'heat-balance', 'rule', 'nafey-2000' "
                         "(got 'ruel'; did you mean 'rule'?)"),
        ("method: 3", "line 8, method: should be one of 'fitted', 'heat-balance', 'rule', 'nafey-2000' (got 3)"),
        ("rule:\n  efficiency: 0.9", "line 9, rule.efficiency: should be above 0 and at most 0.6 (got 0.9)"),
        ("rule: {efficiency: .nan}", "line 8, rule.efficiency: should be above 0 and at most 0.6 (got nan)"),
        ("rule: {efficiency: true}",
         "line 8, rule.efficiency: should be a number above 0 and at most 0.6 (got true)"),
        ("rule: {efficiency: }",
         "line 8, rule.efficiency: should be a number above 0 and at most 0.6 (got nothing)"),
        ("rule: {efficiency: '0,3'}",
         "line 8, rule.efficiency: should be a number above 0 and at most 0.6 (got the text '0,3'; write 0.3)"),
        ("rule: {efficiency: '0.3'}",
         "line 8, rule.efficiency: should be a number above 0 and at most 0.6 (got the text '0.3'; "
         "write 0.3 without quotation marks)"),
        ("places: {table: demo/villages.csv, max_cell_distance_km: 25 km}",
         "line 8, places.max_cell_distance_km: should be a number between 0 and 1000 (got the text '25 km'; "
         "write the number alone, in the unit of the key)"),
        ("places: {}", "line 8, places.table: is missing: Table of places with name, latitude and longitude: "
         "CSV, GeoJSON, GeoPackage or XLSX"),
        ("places:\n  table: villages.csv",
         "line 9, places.table: no such file 'villages.csv' (did you mean 'demo/villages.csv'?)"),
        ("places: {table: demo/vilages.csv}",
         "line 8, places.table: no such file 'demo/vilages.csv' (did you mean 'demo/villages.csv'?)"),
        ("places: {table: 'demo\\villages.csv'}",
         "line 8, places.table: no such file 'demo\\villages.csv' (did you mean 'demo/villages.csv'?)"),
        ("places: {table: Demo/VILLAGES.CSV}",
         "line 8, places.table: no such file 'Demo/VILLAGES.CSV' (did you mean 'demo/villages.csv'?)"),
        ("places: {table: demo}", "line 8, places.table: 'demo' is a folder, not a file"),
        ("places: {table: ''}", "line 8, places.table: should name a file (got an empty text)"),
        ("places: {table: qqqqqqq.xyz}", "line 8, places.table: no such file 'qqqqqqq.xyz'"),
        ("region: {south: 20, north: 10, west: 1, east: 2}",
         "line 8, region: south should lie south of north (got south 20, north 10; swapped?)"),
        ("region: {south: 1, north: 10, west: 20, east: 10}",
         "line 8, region: west should lie west of east (got west 20, east 10; swapped?)"),
        ("region: {south: 1, north: 10, west: 20}", "line 8, region: a box has four edges; east is missing"),
        ("region: {south: -91, north: 10, west: 20, east: 30}",
         "line 8, region.south: should be between -90 and 90 (got -91)"),
        ("rank: {weights: {yield: -1, people: 1}}",
         "line 8, rank.weights.yield: should be between 0 and 1000 (got -1)"),
        ("rank:\n  weights:\n    people: 0", "line 9, rank.weights: at least one weight should be above 0"),
        ("missing: 3", "line 8, missing: should be a group of keys (got 3)"),
        ("output: {folder: ''}", "line 8, output.folder: should name a folder (got an empty text)"),
        ("map: {land: [a, b]}", "line 8, map.land: should be text (got a list)"),
        ("method: rule\nmethod: fitted", "line 9, method: duplicate key (first on line 8)"),
        ("rule: !!python/object/apply:os.system [ls]",
         "line 8, rule: the tag '!!python/object/apply:os.system' is not accepted; write the value without it"),
        ("base: &b {efficiency: 0.2}\nrule: {<<: *b}", "line 8, base: unknown key (known here: name, weather, region, "
         "still, method, rule, places, need, storage, feed, still_field_factor, rank, missing, output, compute, map)"),
        ("\"a\\e[2Jb\": 1", "line 8, a\\x1b[2Jb: unknown key (known here: name, weather, region, still, method, rule, "
                            "places, need, storage, feed, still_field_factor, rank, missing, output, compute, map)"),
        ("need: {litres_per_person_day: 0}",
         "line 8, need.litres_per_person_day: should be between 0.1 and 100 (got 0)"),
        ("need: {figure: drink}",
         "line 8, need.figure: should be one of 'drinking', 'cooking', 'hygiene', 'drinking-and-cooking', 'basic', "
         "'hot-labour' (got 'drink'; did you mean 'drinking'?)"),
        ("need: {season: [1, 2, 3]}", "line 8, need.season: should be a list of 12 (got 3 items)"),
        ("need: {season: [-1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1]}",
         "line 8, need.season (item 1): should be between 0 and 100 (got -1)"),
        ("need: {season: [0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0]}",
         "line 8, need.season: water should be needed in at least one month"),
        ("need: {share: 1.2}", "line 8, need.share: should be above 0 and at most 1 (got 1.2)"),
        ("need: {people_per_household: 0}",
         "line 8, need.people_per_household: should be above 0 and at most 100 (got 0)"),
        ("storage: {share_of_days: 0}", "line 8, storage.share_of_days: should be above 0 and at most 1 (got 0)"),
        ("storage: {tank_days: [3, 1]}", "line 8, storage: tank_days should rise from 0 or more"),
        ("feed: {flushing: daily}", "line 8, feed.flushing: should be one of 'continuous', 'batch' (got 'daily')"),
        ("still_field_factor: {value: 0.8, low: 0.9, high: 1.0, source: yard}",
         "line 8, still_field_factor: should run from low over value to high (got 0.9, 0.8, 1)"),
        ("still_field_factor: {value: 0.8, low: 0.7, high: 0.9}", "line 8, still_field_factor.source: is missing: "
                                                                  "Trial it comes from"),
        ("rank: {screens: [{column: population, because: few}]}",
         "line 8, rank.screens (item 1): should have at_least or at_most, one of them"),
        ("rank: {screens: [{column: populaton, at_least: 50, because: few}]}",
         "line 8, rank.screens (item 1).column: should be one of 'population', 'feed_salinity_g_kg', "
         "'distance_to_feed_km', 'elevation_m', 'cell_distance_km', 'sizing_yield_l_m2_day', 'area_per_person_m2', "
         "'cost_per_litre', 'annual_yield_l_m2_year' (got 'populaton'; did you mean 'population'?)"),
        ("rank: {top: 0}", "line 8, rank.top: should be between 1 and 1000 (got 0)"),
        ("rank: {uncertainty: {draws: 5}}", "line 8, rank.uncertainty.draws: should be between 100 and 20000 (got 5)"),
        ("compute: {workers: 0}", "line 8, compute.workers: should be between 1 and 1024 (got 0)"),

    ],
)  # fmt: skip
def test_each_fault_names_its_line_key_and_cure(folder, lines, expected):
    assert expected in faults(folder, SOUND + lines + "\n")

FURTHER_KINDS = "'netcdf', 'zarr', 'grib', 'monthly-means', 'station-table'"


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("name: trial\n", "\n", "name: is missing: Name of the run and of its output folder"),
        ("name: trial", "name: 2024", "line 1, name: should be text (got 2024; put it in quotes: '2024')"),
        ("name: trial", "name: '..'", "line 1, name: should hold at least one letter or digit (got '..')"),
        ("name: trial", "name: " + "x" * 300,
         "line 1, name: should be 1 to 60 characters of text (got the text '" + "x" * 80 + "...')"),
        ("kind: synthetic", "kind: syntetic", "line 3, weather.kind: should be one of 'synthetic', 'typical-year', "
                                              f"{FURTHER_KINDS} (got 'syntetic'; did you mean 'synthetic'?)"),
        ("kind: synthetic", "seed: 1", "line 2, weather.kind: is missing: the kind of weather"),
        ("shape: [4, 5]", "shape: [4, 5, 6]", "line 5, weather.shape: should be a list of 2 (got 3 items)"),
        ("shape: [4, 5]", "shape: [4]", "line 5, weather.shape: should be a list of 2 (got 1 item)"),
        ("shape: [4, 5]", "shape: [4, 0]", "line 5, weather.shape (item 2): should be between 1 and 5000 (got 0)"),
        ("shape: [4, 5]", "shape: 4x5", "line 5, weather.shape: should be a list (got the text '4x5')"),
        ("shape: [4, 5]", "seed: 1.5",
         "line 5, weather.seed: should be a whole number between 0 and 4294967295 (got 1.5)"),
        ("shape: [4, 5]", "files: a.nc",
         "line 5, weather.files: unknown key for kind 'synthetic' (known here: kind, seed, years, box, shape, land)"),
        ("shape: [4, 5]", "shape: [5000, 5000]",
         "line 2, weather: asks for more than 200000000 cell-days; take fewer rows, columns or years"),
        ("south: 17.2, north: 22.8", "south: 17.2, north: 70",
         "line 2, weather: box should lie within 60 deg of the equator and between 180 W and 180 E, west of east"),
        ("still: still.yaml", "still: stil.yaml",
         "line 7, still: no such file 'stil.yaml' (did you mean 'still.yaml'?)"),
        ("still: still.yaml", "still: [still.yaml, ./still.yaml]",
         "line 7, still: two stills are called 'plain' ('still.yaml' and './still.yaml')"),
        ("still: still.yaml", "still: []", "line 7, still: should be a list of 1 or more (got 0 items)"),
        ("still: still.yaml", "still: 5", "line 7, still: should be text or a list (got 5)"),
        ("still: still.yaml\n", "", "still: is missing: Still file, or a list of several to compare"),
    ],
)  # fmt: skip
def test_faults_in_what_every_run_needs(folder, old, new, expected):
    assert old in SOUND
    assert faults(folder, SOUND.replace(old, new)) == [expected]


def test_every_fault_is_told_at_once_in_the_order_of_the_lines(folder):
    text = """\
name: 7
weather:
  kind: synthetic
  box: {south: 17.2, north: 22.8, west: -42.8}
  land: coast.geojson
  years: {first: "2001", count: 0}
still: still.yaml
method: fited
rule: {efficiency: 2}
rule: {efficiency: 0.3}
need: {litres_per_person_dya: 4}
"""
    found = faults(folder, text)
    assert [fault.partition(":")[0] for fault in found] == [
        "line 1, name", "line 4, weather.box.east", "line 5, weather.land", "line 6, weather.years.first",
        "line 6, weather.years.count", "line 8, method", "line 9, rule.efficiency", "line 10, rule",
        "line 11, need.litres_per_person_dya",
    ]  # fmt: skip


def test_the_message_counts_the_faults_and_names_the_file_as_given(folder, monkeypatch):
    (folder / "run.yaml").write_text(SOUND + "methd: 1\nplacs: 2\n")
    monkeypatch.chdir(folder)
    with pytest.raises(RunFileError) as caught:
        load_run("run.yaml")
    assert str(caught.value).splitlines() == [
        "run.yaml has 2 faults:",
        "  line 8, methd: unknown key (did you mean 'method'?)",
        "  line 9, placs: unknown key (did you mean 'places'?)",
    ]


def test_faults_of_a_still_file_stand_among_those_of_the_run_file(folder):
    (folder / "still.yaml").write_text(STILL.replace("tilt_deg: 15", "tilt_deg: 95") + "colour: red\n")
    found = faults(folder, SOUND + "methd: rule\n")
    assert found[0] == (
        "line 7, still: still.yaml, line 2, panels (item 1).tilt_deg: should be between 0 and 80 (got 95)"
    )
    assert found[1].startswith("line 7, still: still.yaml, line 4, colour: unknown key")
    assert found[2].startswith("line 8, methd")


def test_paths_count_from_the_run_file_and_the_message_says_so(folder, monkeypatch):
    monkeypatch.chdir(folder.parent)
    (folder.parent / "tables").mkdir()
    shutil.copy(CONFIG / "demo" / "villages.csv", folder.parent / "tables" / "places.csv")
    found = faults(folder, SOUND + "places: {table: tables/places.csv}\n")
    assert found == [
        "line 8, places.table: no such file 'tables/places.csv' (paths count from the folder of this file; "
        "did you mean '../tables/places.csv'?)"
    ]
    assert load(folder, SOUND + "places: {table: ../tables/places.csv}\n").places.table.given == "../tables/places.csv"


def test_byte_order_mark_and_windows_line_ends_are_harmless(folder):
    (folder / "run.yaml").write_bytes(b"\xef\xbb\xbf" + SOUND.replace("\n", "\r\n").encode())
    assert load_run(folder / "run.yaml").name == "trial"


def test_a_missing_run_file_is_told_with_its_neighbour(folder):
    (folder / "run.yaml").write_text(SOUND)
    with pytest.raises(StillfieldError, match=r"rum\.yml: no such run file\. Did you mean '.*run\.yaml'\?"):
        load_run(folder / "rum.yml")
    with pytest.raises(StillfieldError, match="is a folder, not a run file"):
        load_run(folder)


# --- weather ----------------------------------------------------------------------------------------------

FILES = """\
name: trial
weather:
  kind: {kind}
  files: {files}
still: still.yaml
"""


def test_one_file_needs_no_brackets_and_patterns_are_sorted(folder):
    for year in (2003, 2001, 2002):
        (folder / "demo" / f"{year}.nc").touch()
    one = load(folder, FILES.format(kind="netcdf", files="demo/2001.nc")).weather
    many = load(folder, FILES.format(kind="netcdf", files="demo/*.nc")).weather
    assert [path.name for path in one.paths] == ["2001.nc"]
    assert [path.name for path in many.paths] == ["2001.nc", "2002.nc", "2003.nc"]


def test_a_name_that_really_holds_a_star_is_one_file(folder):
    (folder / "a*.nc").touch()
    (folder / "ab.nc").touch()
    assert len(load(folder, FILES.format(kind="netcdf", files="'a*.nc'")).weather.paths) == 1


@pytest.mark.parametrize(
    ("files", "expected"),
    [
        ("demo/*.nc", ": no file matches 'demo/*.nc' (looked in 'demo'; files there end in .csv, .geojson)"),
        ("gone/*.nc", ": no file matches 'gone/*.nc' (there is no folder 'gone' beside this file)"),
        ("pvlib:data/12839.tm3",
         ": no such file 'pvlib:data/12839.tm3' (did you mean 'pvlib:data/12839.tm2'?)"),
        ("nosuchpackage:x.nc", ": no package 'nosuchpackage' is installed"),
        ("__main__:x.nc", ": no package '__main__' is installed"),
        ("sys:x.nc", ": no package 'sys' is installed"),
        ("pvlib:../x.nc", ": should stay inside the package 'pvlib' (got '../x.nc')"),
        ("https://example.org/a.nc", ": should be a file on this machine; fetch 'https://example.org/a.nc' "
                                     "first and name the copy"),
        ("[still.yaml, '*.yaml']", ": names 'still.yaml' twice ('still.yaml' and '*.yaml')"),
        ("[]", ": should be a list of 1 or more (got 0 items)"),
        ("[still.yaml, 3]", "(item 2): should be text (got 3; put it in quotes: '3')"),
        ("\"a\\0b\"", ": no such file 'a\\x00b'"),
        ("x" * 5000, ": cannot be used as a file name (got '" + "x" * 80 + "...')"),
    ],
)
def test_weather_files_that_are_not_there(folder, files, expected):
    found = faults(folder, FILES.format(kind="netcdf", files=files))
    assert [fault.removeprefix("line 4, weather.files").lstrip() for fault in found] == [expected]


@pytest.mark.parametrize(
    ("variable", "expected"),
    [
        ("irradiatoin: {name: ssrd}", "irradiatoin: unknown key (did you mean 'irradiation'?)"),
        ("ghi: {means: daily_total}", "ghi.means: should be one of 'daily-total', 'daily-mean', 'daylight-mean', "
         "'step-mean', "
         "'hour-ending accumulation', 'hour-starting accumulation', 'since-00-UTC', 'monthly-total' "
         "(got 'daily_total'; did you mean 'daily-total'?)"),
        ("ghi: {stamp: begin}", "ghi.stamp: should be one of 'start', 'middle', 'end' (got 'begin')"),
        ("wind_speed: {height_m: 0}", "wind_speed.height_m: should be between 0.5 and 200 (got 0)"),
        ("wind_speed: 10", "wind_speed: should be text or a group of keys (got 10)"),
        ("wind_speed: ''", "wind_speed: should be 1 or more characters of text (got the text '')"),
        ("ghi: {unit: W}", "ghi.unit: unknown key (did you mean 'units'?)"),
    ],
)  # fmt: skip
def test_faults_of_the_variable_mapping(folder, variable, expected):
    text = FILES.format(kind="netcdf", files="demo/*").replace("still:", f"  variables: {{{variable}}}\nstill:")
    assert faults(folder, text) == [f"line 5, weather.variables.{expected}"]


@pytest.mark.parametrize(
    ("variables", "expected"),
    [
        ("{temp_air: {height_m: 2}}",
         "variables.temp_air.height_m has no meaning; only wind_speed, wind_u, wind_v have a height"),
        ("{ghi: ssrd, irradiation: rsds}",
         "variables: irradiation and ghi are two names of the same sunshine; state one of them"),
    ],
)  # fmt: skip
def test_contradictions_in_the_variable_mapping(folder, variables, expected):
    text = FILES.format(kind="netcdf", files="demo/*").replace("still:", f"  variables: {variables}\nstill:")
    assert faults(folder, text) == [f"line 2, weather: {expected}"]


def test_words_of_the_run_file_are_those_of_the_readers():
    assert variable_keys.MEANS == recognise.MEANINGS
    assert variable_keys.STAMPS == recognise.STAMPS
    assert set(variable_keys.VARIABLES) == {"irradiation", "ghi", *recognise.ROLES[1:]}
    assert weather_keys.FORMATS[1:] == year_formats.FORMATS
    assert weather_keys.LARGEST_LATITUDE == synthetic.LARGEST_LATITUDE
    assert weather_keys.MAX_CELL_DAYS == synthetic.LARGEST_CELL_DAYS


def test_files_in_packages_keep_their_name_so_that_outputs_know_no_machine(folder):
    files = "[pvlib:data/12839.tm2, 'pvlib:data/7*.CSV']"
    weather = load(folder, FILES.format(kind="typical-year", files=files)).weather
    assert isinstance(weather, TypicalYearWeather)
    assert weather.names == ("pvlib:data/12839.tm2", "pvlib:data/723170TYA.CSV")
    assert all(path.is_file() for path in weather.paths)


def test_options_are_those_the_sources_take(folder):
    weather = load(folder, SOUND).weather
    assert isinstance(weather, SyntheticWeather)
    source = open_source(weather.kind, weather.names, **weather.options())
    assert (source.shape, source.first_year, source.south) == ((4, 5), 2011, 17.2)
    typical = load(folder, FILES.format(kind="typical-year", files="pvlib:data/12839.tm2")).weather
    assert open_source(typical.kind, typical.names, **typical.options()).open().sizes["time"] == 8760


def test_a_mapping_of_variables_keeps_what_was_stated(folder):
    variables = "{irradiation: {name: ssrd, units: J m-2, means: daily-total}, temp_air: t2m}"
    text = FILES.format(kind="netcdf", files="demo/*").replace("still:", f"  variables: {variables}\nstill:")
    weather = load(folder, text).weather
    assert isinstance(weather, NetcdfWeather)
    assert recognise.read_mapping(weather.options()["variables"])["sun"].means == "daily-total"
    assert weather.options()["variables"] == {
        "irradiation": {"name": "ssrd", "units": "J m-2", "means": "daily-total"}, "temp_air": {"name": "t2m"},
    }


# --- meanings ---------------------------------------------------------------------------------------------


def test_groups_whose_keys_are_all_commented_out_keep_their_defaults(folder):
    text = SOUND + "rule:\n#  efficiency: 0.2\nrank:\n  weights:\nneed:\nmissing:\nplaces:\nregion:\n"
    assert load(folder, text) == load(folder, SOUND)


def test_weights_left_out_count_nothing_and_none_at_all_are_the_usual_ones(folder):
    assert load(folder, SOUND + "rank: {weights: {people: 2}}\n").rank.weights.by_criterion() == {
        "yield": 0.0, "reliability": 0.0, "cost": 0.0, "people": 2.0, "salinity": 0.0, "distance": 0.0,
    }
    assert sum(load(folder, SOUND).rank.weights.by_criterion().values()) == pytest.approx(1.0)


def test_the_need_is_drinking_water_all_year_unless_it_is_stated(folder):
    need = load(folder, SOUND).need
    assert (need.litres_per_person_day, need.figure, need.season) == (None, "drinking", None)
    assert (need.people_per_household, need.share) == (5.0, 1.0)
    season = load(folder, SOUND + "need: {figure: basic, season: [1,1,1,1,1,1.5,2,2,1,1,1,0]}\n").need.season
    assert season == (1, 1, 1, 1, 1, 1.5, 2, 2, 1, 1, 1, 0)


def test_a_region_may_cross_the_antimeridian(folder):
    region = load(folder, SOUND + "region: {south: -20, north: -10, west: 175, east: -175}\n").region
    assert region.box.width_deg == pytest.approx(10.0)


@pytest.mark.parametrize(
    ("name", "folder_wanted"),
    [
        ("North Hook, 3 years", "north-hook-3-years"), ("../../etc", "etc"), ("/abs", "abs"), ("CON", "run-con"),
        ("com1", "run-com1"), ("a" * 300, "a" * 60), ("-x-", "x"), ("Küste 2", "küste-2"), ("DEMO", "demo"),
        ("a\\b:c*d", "a-b-c-d"), ("...", ""),
    ],
)  # fmt: skip
def test_names_become_folders_that_cannot_lead_elsewhere(name, folder_wanted):
    assert folder_name(name) == folder_wanted


def test_the_output_folder_can_be_changed_and_is_checked(folder):
    settings = load(folder, SOUND)
    assert settings.with_output("elsewhere").folder == Path("elsewhere/trial")
    assert settings.folder == Path("outputs/trial")
    (Path.cwd() / "taken").touch()
    with pytest.raises(StillfieldError, match="the output folder 'taken' is a file, not a folder"):
        settings.with_output("taken")


# --- out again --------------------------------------------------------------------------------------------


def test_the_resolved_file_reads_back_as_the_same_settings(folder):
    settings = load(folder, SOUND + "places: {table: demo/villages.csv}\nrank: {weights: {people: 1}}\n")
    text = resolved_yaml(settings)
    assert load(folder, text) == settings
    assert resolved_yaml(load(folder, text)) == text


def test_the_resolved_file_tells_no_place_on_the_machine(folder):
    text = SOUND.replace("demo/coast.geojson", str(folder / "demo" / "coast.geojson")).replace(
        "still: still.yaml", f"still: {folder / 'still.yaml'}"
    )
    resolved = resolved_yaml(load(folder, text).with_output(str(folder / "out")))
    assert str(folder) not in resolved
    assert {"land: .../coast.geojson", "- .../still.yaml", "folder: .../out"} <= {
        line.strip().replace("'", "") for line in resolved.splitlines()
    }


@pytest.mark.parametrize("kind", ["run", "still", "trial"])
def test_the_shipped_schema_is_current(kind):
    shipped = (CONFIG / f"{kind}-file.schema.json").read_text(encoding="utf-8")
    assert shipped == schema_text(kind), f"write it anew: stillfield schema {kind} > config/{kind}-file.schema.json"


@pytest.mark.parametrize("kind", ["run", "still", "trial"])
def test_every_key_of_the_schema_is_described(kind):
    schema = json_schema(kind)
    groups = [schema, *schema["$defs"].values()]
    silent = [
        f"{group['title']}.{key}"
        for group in groups for key, value in group.get("properties", {}).items()
        if "description" not in value and "const" not in value
    ]  # fmt: skip
    assert not silent


@pytest.mark.parametrize("path", sorted({*CONFIG.glob("*.yaml")} - {CONFIG / "trial.yaml"}), ids=lambda path: path.name)
def test_shipped_run_files_load(path):
    settings = load_run(path)
    assert settings.stills
    assert folder_name(settings.name) == settings.name


def test_a_field_factor_belongs_to_one_still(tmp_path):
    stills = [str(CONFIG / "stills" / f"{name}.yaml") for name in ("single-slope-glass", "deep-basin")]
    (tmp_path / "run.yaml").write_text(
        "name: two\nweather: {kind: typical-year, files: 'pvlib:data/12839.tm2'}\n"
        f"still: [{stills[0]!r}, {stills[1]!r}]\n"
        "still_field_factor: {value: 0.9, low: 0.8, high: 1.0, source: a trial}\n")
    with pytest.raises(RunFileError, match=r"line 4, still_field_factor: belongs to one still"):
        load_run(tmp_path / "run.yaml")
