"""The README: what it tells people to type works as it stands."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield import errors
from stillfield.products.place_columns import PLACE_COLUMNS
from stillfield.products.tables import CELL_COLUMNS
from stillfield.settings.load import load_run
from stillfield.settings.model import RunSettings
from stillfield.settings.still_file import StillKeys
from stillfield.settings.trial_file import TrialSettings
from stillfield.vocabulary import METHODS, WATER_CAUTION
from whole_runs import CONFIG, finished, table

ROOT = Path(__file__).parents[2]
TEXT = (ROOT / "README.md").read_text(encoding="utf-8")


def block(marker: str) -> str:
    """First fenced block after a marker that stands alone on its line, as .ci/run takes it."""
    lines = TEXT.splitlines()
    assert lines.count(f"<!-- {marker} -->") == 1
    after = lines[lines.index(f"<!-- {marker} -->") + 1 :]
    first = next(number for number, line in enumerate(after) if line.startswith("```"))
    last = next(number for number, line in enumerate(after[first + 1 :], start=first + 1) if line.startswith("```"))
    return "\n".join(after[first + 1 : last]) + "\n"


@pytest.mark.parametrize(
    ("marker", "last"), [("demo", "stillfield run config/demo.yaml"), ("tests", "python -m pytest")]
)
def test_the_two_commands_set_up_and_do_one_thing(marker, last):
    commands = [command.strip() for command in block(marker).replace("\n", " ").split("&&")]
    assert commands[0] == "python3 -m venv .venv"
    assert "--require-hashes -r requirements.lock" in commands[1]
    assert commands[-1] == f".venv/bin/{last}"
    assert len(commands) == 4


def test_the_job_stands_in_one_paragraph_before_the_commands():
    title, paragraph, *_ = TEXT.split("\n\n")
    assert title == "# stillfield"
    assert len(paragraph.split()) < 120
    assert TEXT.index(paragraph) < TEXT.index("<!-- demo -->") < TEXT.index("<!-- tests -->") < 3000


def test_the_python_example_runs(monkeypatch, capsys):
    """The first figures are a regression test; the numbers behind them are checked elsewhere."""
    monkeypatch.chdir(ROOT)
    exec(compile(block("python"), "README.md", "exec"), {})
    first, second = capsys.readouterr().out.splitlines()
    assert re.fullmatch(r"GREENSBORO.*: 6\d\d L m-2 a year, worst month 1 with 0\.[45] L m-2 a day", first)
    assert re.fullmatch(r"MIAMI: 8\d\d L m-2 a year, worst month 12 with 1\.[45] L m-2 a day", second)


def test_the_first_run_runs(tmp_path):
    """With four cells of one invented year, hourly, as a reanalysis would have them."""
    config = tmp_path / "config"
    config.mkdir()
    (config / "stills").symlink_to(CONFIG / "stills")
    (config / "my-coast.yaml").write_text(block("first run"), encoding="utf-8")
    (config / "villages.csv").write_text("name,latitude,longitude,population\nNear,20.1,-40.1,50\nFar,25,-40,50\n")
    (tmp_path / "weather").mkdir()
    ends = pd.date_range("2011-01-01 01:00", periods=8760, freq="h")
    # Sunshine of the hour that ends at the stamp, by the sun of 40 W.
    sun = np.clip(np.sin((ends.hour.to_numpy() - 0.5 - 40 / 15 - 6) * np.pi / 12), 0, None) * 800 * 3600
    values = {"ssrd": (sun, "J m**-2"), "t2m": (298.0, "K"), "u10": (3.0, "m s**-1"), "v10": (-4.0, "m s**-1")}
    cells = np.ones((1, 2, 2))
    xr.Dataset(
        {name: (("time", "latitude", "longitude"), np.broadcast_to(value, 8760)[:, None, None] * cells, {"units": unit})
         for name, (value, unit) in values.items()},
        coords={"time": ends, "latitude": ("latitude", [20.0, 20.5], {"units": "degrees_north"}),
                "longitude": ("longitude", [-40.0, -40.5], {"units": "degrees_east"})},
    ).to_netcdf(tmp_path / "weather" / "year.nc")  # fmt: skip
    run_file = config / "my-coast.yaml"
    assert load_run(run_file).method == "fitted"
    near, far = table(finished(run_file, cwd=tmp_path) / "places.csv")
    assert (near["name"], near["rank"], far["rank"]) == ("Near", "1", "")
    # From 20.5 N, 40 W to 25 N, 40 W along the meridian.
    assert far["reason"] == ("no litres: the nearest cell with twelve known months is 500 km away, beyond "
                             "places.max_cell_distance_km")
    assert 500 < float(near["annual_yield_l_m2_year"]) < 1500


def test_the_keys_of_decisions_work_as_they_stand(tmp_path):
    weather = "{kind: typical-year, files: 'pvlib:data/12839.tm2'}"
    text = f"name: a\nweather: {weather}\nstill: {CONFIG}/stills/low-cost-film.yaml\n{block('decisions')}"
    (tmp_path / "run.yaml").write_text(text, encoding="utf-8")
    settings = load_run(tmp_path / "run.yaml")
    assert (settings.need.figure, settings.storage.tank_price_per_litre, settings.rank.top) == (
        "drinking-and-cooking", 0.08, 8)


def test_every_key_in_its_tables_is_a_key():
    models = (RunSettings, StillKeys, TrialSettings)
    schemas = [model.model_json_schema(by_alias=True) for model in models]
    tables = TEXT[TEXT.index("## Decisions") : TEXT.index("## Large regions")]
    cells = [line.split(" | ")[0] for line in tables.splitlines() if line.startswith("| `")]
    keys = [key for cell in cells for key in re.findall(r"`([a-z0-9_.]+)`", cell)]
    assert len(keys) > 35
    assert [key for key in keys if not any(is_key(key.split("."), schema, schema) for schema in schemas)] == []


def is_key(path, schema, whole):
    """Whether a key written with dots leads into a JSON schema; names of stills are passed over."""
    if not path:
        return True
    if "$ref" in schema:
        return is_key(path, whole["$defs"][schema["$ref"].rsplit("/", 1)[1]], whole)
    if any(is_key(path, choice, whole) for choice in schema.get("anyOf", [])):
        return True
    if path[0] in schema.get("properties", {}):
        return is_key(path[1:], schema["properties"][path[0]], whole)
    inner = schema.get("additionalProperties")
    return isinstance(inner, dict) and is_key(path, inner, whole)


@pytest.mark.parametrize("key", ["need.litres", "stills.area", "cost.prices", "weather_errors"])
def test_a_key_that_is_none_is_seen(key):
    assert not any(is_key(key.split("."), one, one) for one in (
        model.model_json_schema(by_alias=True) for model in (RunSettings, StillKeys, TrialSettings)))


def test_what_it_names_exists(tmp_path):
    assert WATER_CAUTION in " ".join(TEXT.split()).replace("**Before anyone drinks:** a solar", "A solar")
    for method in METHODS:
        assert f"| `{method}` |" in TEXT
    codes = {int(code) for code in re.findall(r"^\| (\d+) \|", TEXT, re.MULTILINE)}
    assert codes == {value for name, value in vars(errors).items() if name.startswith("EXIT_")}
    columns = {column.name for column in (*PLACE_COLUMNS, *CELL_COLUMNS)}
    named = set(re.findall(r"`((?:area|cell|nearest)_[a-z0-9_]+)`", TEXT))
    assert named
    assert named <= columns
    for path in re.findall(r"`((?:config|\.ci)/[\w./-]+)`", TEXT):
        assert (ROOT / path).exists() or path in ("config/villages.csv", "config/my-coast.yaml"), path
