"""`stillfield trial` from the command line: the invented demonstration, weather in the log, and what is refused."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import shutil
from datetime import date, timedelta
from typing import NamedTuple

import numpy as np
import pytest

from stillfield.cli import main
from stillfield.decisions.trial import FieldFactor, apply_field_factor
from stillfield.settings.trial_file import load_trial
from stillfield.trial_weather import modelled_litres, site_days
from stillfield.vocabulary import WATER_CAUTION
from whole_runs import CONFIG, SMALL_WEATHER, STILL, finished, months_of, stillfield_command, table, write_run

#: Truth behind the invented log.
FACTORS = {"plain": 0.82, "wick": 0.82 * 1.25}
STARTS = {"plain": date(2011, 2, 1), "wick": date(2011, 5, 15)}
DAYS = 90
AREA_M2 = 1.2


def invented_log(modelled):
    """The demonstration's log: the model's litres times a factor, with errors of 12 % that last (0.4 from day to day).

    Two days of each still are left blank, and litres are read to 0.05 L. `modelled` gives litres by still and dates.
    """
    random = np.random.default_rng(20110201)
    rows = []
    for still, start in STARTS.items():
        dates = [start + timedelta(days=number) for number in range(DAYS)]
        error = np.zeros(DAYS)
        shocks = random.standard_normal(DAYS)
        error[0] = shocks[0]
        for number in range(1, DAYS):
            error[number] = 0.4 * error[number - 1] + np.sqrt(1 - 0.4**2) * shocks[number]
        litres = FACTORS[still] * modelled(still, dates) * AREA_M2 * (1 + 0.12 * error)
        for number, (day, value) in enumerate(zip(dates, litres, strict=True)):
            blank = number in (31, 64)
            rows.append([day.isoformat(), still, "" if blank else f"{round(value / 0.05) * 0.05:.2f}",
                         "away" if blank else ""])
    return rows


@pytest.fixture(scope="module")
def demo():
    settings, rows = load_trial(CONFIG / "trial.yaml")
    weather = site_days(settings, rows)

    def modelled(still, dates):
        return modelled_litres(weather, settings.stills[still].file.still, np.array(dates, dtype="datetime64[D]"))

    return rows, modelled


@pytest.fixture(scope="module")
def finished_demo(tmp_path_factory):
    folder = tmp_path_factory.mktemp("trial")
    told = stillfield_command("trial", CONFIG / "trial.yaml", cwd=folder)
    assert told.returncode == 0, told.stderr
    return told.stdout, folder / "outputs" / "trial"


def test_the_log_of_the_demonstration_is_made_by_its_recipe(demo):
    rows, modelled = demo
    made = invented_log(modelled)
    assert [(row.date.isoformat(), row.still) for row in rows] == [(one[0], one[1]) for one in made]
    litres = np.array([np.nan if row.litres is None else row.litres for row in rows])
    np.testing.assert_allclose(litres, [float(one[2] or "nan") for one in made], atol=0.11)


def test_the_demonstration_finds_the_factors_it_was_made_with_and_the_better_still(finished_demo):
    text, folder = finished_demo
    figures = json.loads((folder / "trial.json").read_text(encoding="utf-8"))
    for still, truth in FACTORS.items():
        found = figures["stills"][still]["factor"]
        assert found["low"] < truth < found["high"]
        assert found["high"] / found["low"] < 1.25
        assert found["days"] == DAYS - 2
        assert {one["rule"] for one in figures["stills"][still]["findings"]} >= {"days_without_litres"}
    (comparison,) = figures["comparisons"]
    assert comparison["verdict"] == "better"
    assert comparison["low"] < 1.25 < comparison["high"]
    assert not comparison["paired"]
    assert "wick is better" in text
    assert "Raw: wick" in text
    assert " ".join(WATER_CAUTION.split()) in " ".join(text.split())
    factor = FieldFactor(**figures["stills"]["plain"]["still_field_factor"])
    assert apply_field_factor(100.0, factor)[0] == pytest.approx(82.0, abs=6.0)


def test_the_factor_of_a_trial_pasted_into_a_run_file_multiplies_the_litres_of_places(finished_demo, tmp_path):
    figures = json.loads((finished_demo[1] / "trial.json").read_text(encoding="utf-8"))
    factor = figures["stills"]["plain"]["still_field_factor"]
    keys = {"weather": SMALL_WEATHER, "places": {"table": str(CONFIG / "demo" / "villages.csv"),
                                                "max_cell_distance_km": 60}}
    plain, tried = (
        {row["id"]: row for row in table(finished(write_run(tmp_path / f"{name}.yaml", **keys, **more), cwd=tmp_path)
                                         / "places.csv") if row["annual_yield_l_m2_year"]}
        for name, more in (("plain", {}), ("tried", {"still_field_factor": factor})))
    assert len(plain) > 3
    assert plain.keys() == tried.keys()
    for place, before in plain.items():
        after = tried[place]
        for end, share in (("", "value"), ("_low", "low"), ("_high", "high")):
            # The rule knows no condition: without a factor both ends are the central figure.
            for name in (f"annual_yield{end}_l_m2_year", f"sizing_yield{end}_l_m2_day"):
                assert float(after[name]) == pytest.approx(float(before[name]) * factor[share], abs=0.011)
        assert months_of(after) == pytest.approx([litres * factor["value"] for litres in months_of(before)], abs=0.011)
        area = float(before["area_per_person_m2"]) / factor["value"]
        assert float(after["area_per_person_m2"]) == pytest.approx(area, abs=0.011)
    notes = " ".join((tmp_path / "outputs" / "tried" / "READ-ME-FIRST.txt").read_text(encoding="utf-8").split())
    assert f"the modelled ones times {factor['value']:g}" in notes
    assert factor["source"] in notes


def test_every_day_stands_in_the_table_with_its_row_of_the_log(finished_demo):
    with (finished_demo[1] / "trial.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert len(rows) == 2 * DAYS
    assert [int(row["log_row"]) for row in rows] == list(range(2, 2 * DAYS + 2))
    used = [row for row in rows if row["used"] == "yes"]
    plain = [row for row in used if row["still"] == "plain"]
    measured, modelled = (sum(float(row[f"{what}_l_m2_day"]) for row in plain) for what in ("measured", "modelled"))
    figures = json.loads((finished_demo[1] / "trial.json").read_text(encoding="utf-8"))
    assert measured / modelled == pytest.approx(figures["stills"]["plain"]["factor"]["factor"], abs=0.003)
    assert "BEFORE ANYONE DRINKS" in (finished_demo[1] / "READ-ME-FIRST.txt").read_text(encoding="utf-8")


def write_trial(folder, rows, heading="date,still,litres,irradiation_mj_m2,temp_air_degc,wind_speed_m_s", more=""):
    shutil.copy(STILL, folder / "still.yaml")
    (folder / "log.csv").write_text("\n".join([heading, *rows]) + "\n", encoding="utf-8")
    (folder / "trial.yaml").write_text(
        "name: small\nlog: {table: log.csv}\nsite: {latitude_deg: 20, longitude_deg: -39}\n"
        f"stills:\n  a: {{file: still.yaml, area_m2: 1.0}}\n{more}", encoding="utf-8")
    out, err = io.StringIO(), io.StringIO()
    with contextlib.chdir(folder), contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
        code = main(["trial", "trial.yaml"])
    return Told(code, out.getvalue(), err.getvalue())


class Told(NamedTuple):
    """What the command line, run in this process, told."""

    returncode: int
    stdout: str
    stderr: str


def measured_days(count, litres=None, step=1):
    """Rows of a log with its own weather; 2.5 to 4.5 L."""
    start = date(2021, 1, 1)
    sun = 18 + 4 * np.sin(np.arange(count))
    water = 0.16 * sun + 0.1 * np.cos(3 * np.arange(count))
    water = water if litres is None else litres(water)
    return [f"{start + timedelta(days=step * n)},a,{water[n]:.2f},{sun[n]:.2f},24,2" for n in range(count)]


def test_weather_measured_at_the_stills_is_enough(tmp_path):
    told = write_trial(tmp_path, measured_days(60))
    assert told.returncode == 0, told.stderr
    assert "WARNING: the days span 60 days, which is one season" in told.stdout
    figures = json.loads((tmp_path / "outputs" / "small" / "trial.json").read_text(encoding="utf-8"))
    one = figures["stills"]["a"]
    # One season: a run gets a wider interval than chance among the days alone makes.
    assert one["still_field_factor"]["high"] > 1.1 * one["factor"]["high"]


def test_three_days_are_refused(tmp_path):
    told = write_trial(tmp_path, measured_days(3))
    assert (told.returncode, told.stdout) == (2, "")
    assert "3 days with litres and weather are too few" in told.stderr
    assert not (tmp_path / "outputs").exists()


def test_a_reading_ten_times_too_high_is_refused_with_its_row(tmp_path):
    seventh = np.arange(40) == 7
    told = write_trial(tmp_path, measured_days(40, litres=lambda water: np.where(seventh, 10 * water, water)))
    assert told.returncode == 2
    assert "more litres than the sunshine could evaporate" in told.stderr
    assert "(row 9)" in told.stderr


def test_days_far_from_the_rest_are_kept_out_with_their_rows(tmp_path):
    told = write_trial(tmp_path, measured_days(40, litres=lambda water: np.where(np.arange(40) == 7, 0.1, water)))
    assert told.returncode == 0, told.stderr
    assert "WARNING: 1 day far from all others kept out (row 9)" in told.stdout
    assert "39 days" in told.stdout


def test_every_fault_of_the_log_is_told_by_its_row(tmp_path):
    rows = measured_days(12)
    rows[2] = rows[2].replace("2021-01-03", "2021-01-02")
    rows[4] = rows[4].replace("2021-01-05", "5.1.2021")
    rows[5] = rows[5].replace(",a,", ",b,")
    rows[6] = "2021-01-07,a,-2,18,24,2"
    rows[7] = "2021-01-08,a,two,18,24,2"
    told = write_trial(tmp_path, rows)
    assert (told.returncode, told.stdout) == (2, "")
    assert "log.csv has" in told.stderr
    for words in ("line 4, date: 'a' has 2021-01-02 in row 3 already", "line 6, date: should be a date",
                  "line 7, still: should be 'a'", "line 8, litres: should be between 0", "line 9, litres: should be a "
                  "number (got 'two'"):  # fmt: skip
        assert words in told.stderr


def test_a_typical_year_has_no_days_of_a_trial(tmp_path):
    weather = "weather: {kind: typical-year, files: 'pvlib:data/12839.tm2'}\n"
    told = write_trial(tmp_path, measured_days(12), more=weather)
    assert told.returncode == 2
    assert "has none of the days of a trial" in told.stderr


def test_faults_of_the_trial_file_are_told_at_once(tmp_path):
    told = write_trial(tmp_path, measured_days(12), more="estimator: robst\ncompare: [[a, b]]\noutlers: keep\n")
    assert told.returncode == 2
    for words in ("trial.yaml has", "estimator", "outlers: unknown key (did you mean 'outliers'?)"):
        assert words in told.stderr
