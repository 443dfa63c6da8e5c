"""Trial files and their logs as people write them."""

from __future__ import annotations

import datetime as dt
import shutil

import pytest

from stillfield.errors import RunFileError, StillfieldError
from stillfield.settings.trial_file import load_trial
from stillfield.settings.trial_log import read_log
from whole_runs import STILL

WEATHER = "weather: {kind: typical-year, files: 'pvlib:data/12839.tm2'}\n"
STILLS = "stills:\n  a: {file: still.yaml, area_m2: 1.5}\n  b: {file: still.yaml, area_m2: 2, modification: wick}\n"
HEAD = "name: small\nsite: {latitude_deg: 20, longitude_deg: -39}\nlog: {table: log.csv}\n"
LOG = "date,still,litres\n2021-01-01,a,3.5\n2021-01-02,b,\n"


def load(folder, text=HEAD + WEATHER + STILLS, log=LOG):
    shutil.copy(STILL, folder / "still.yaml")
    (folder / "log.csv").write_bytes(log if isinstance(log, bytes) else log.encode())
    (folder / "trial.yaml").write_text(text, encoding="utf-8")
    return load_trial(folder / "trial.yaml")


def faults(folder, *arguments):
    with pytest.raises(RunFileError) as told:
        load(folder, *arguments)
    return [str(fault) for fault in told.value.faults]


def test_a_plain_trial_file_and_its_log_are_read(tmp_path):
    settings, rows = load(tmp_path)
    assert settings.stills["b"].modification == "wick"
    assert [(row.row, row.date, row.still, row.litres) for row in rows] == [
        (2, dt.date(2021, 1, 1), "a", 3.5), (3, dt.date(2021, 1, 2), "b", None)]


def test_logs_as_spreadsheets_write_them_are_read(tmp_path):
    """Byte-order mark, semicolons, decimal commas, own headings and dates, an empty row that still counts."""
    text = HEAD.replace("{table: log.csv}", "{table: log.csv, date_format: '%d/%m/%Y', columns: {litres: Wasser}}")
    log = "\ufeffDay;Still;Wasser;Notes\r\n01/02/2021;a;3,25;über\r\n;;;\r\n02/02/2021;a;2;\r\n"
    _, rows = load(tmp_path, text + WEATHER + STILLS, log)
    assert [(row.row, row.date, row.litres, row.remarks) for row in rows] == [
        (2, dt.date(2021, 2, 1), 3.25, "über"), (4, dt.date(2021, 2, 2), 2.0, "")]


def test_weather_of_the_log_is_brought_to_one_unit(tmp_path):
    """1 kWh is 3.6 MJ."""
    log = "date,still,litres,irradiation_kwh_m2,temp_air_degc,wind_speed_m_s\n2021-01-01,a,3,5,25,2\n"
    _, rows = load(tmp_path, HEAD + STILLS, log)
    assert rows[0].weather == pytest.approx({"irradiation": 18.0, "temp_air": 25.0, "wind_speed": 2.0})


def test_a_log_without_weather_says_which_columns_are_wanted(tmp_path):
    (said,) = faults(tmp_path, HEAD + STILLS)
    for words in ("line 1, weather", "irradiation_mj_m2/irradiation_kwh_m2", "temp_air_degc", "name weather"):
        assert words in said


def test_two_weathers_of_one_day_are_a_fault_of_the_second_row(tmp_path):
    log = ("date,still,litres,irradiation_mj_m2,temp_air_degc,wind_speed_m_s\n2021-01-01,a,3,18,25,2\n"
           "2021-01-01,b,3,19,25,2\n")
    assert faults(tmp_path, HEAD + STILLS, log) == [
        "line 3, irradiation: differs from that of the same day in row 2"]


@pytest.mark.parametrize(("row", "words"), [
    ("2021-02-30,a,3", "line 4, date: should be a date such as 2021-03-31 (got '2021-02-30')"),
    ("2021-01-03,A2,3", "line 4, still: should be one of 'a', 'b' (got 'A2'"),
    ("2021-01-03,a,3;5", "line 4, litres: should be a number (got '3;5')"),
    ('2021-01-03,a,"3,5"', "line 4, litres: should be a number (got '3,5'; write 3.5)"),
    ("2021-01-03,a,nan", "line 4, litres: should be a number (got 'nan')"),
    ("2021-01-03,a,-0.5", "line 4, litres: should be between 0 and 1e+06 (got -0.5)"),
    ("2021-01-01,a,3.5", "line 4, date: 'a' has 2021-01-01 in row 2 already"),
])  # fmt: skip
def test_a_bad_row_is_told_by_its_number(tmp_path, row, words):
    (said,) = faults(tmp_path, HEAD + WEATHER + STILLS, f"{LOG}{row}\n")
    assert said.startswith(words)


def test_one_still_before_and_after_a_change_has_one_name_in_the_log(tmp_path):
    stills = ("stills:\n  before: {file: still.yaml, area_m2: 1, in_log: a, end: 2021-01-01}\n"
              "  after: {file: still.yaml, area_m2: 1, in_log: a, start: 2021-01-02}\ncompare: [[after, before]]\n")
    settings, _ = load(tmp_path, HEAD + WEATHER + stills, "date,still,litres\n2021-01-01,a,3\n2021-01-02,a,4\n")
    assert settings.names_in_log == ("a",)
    assert settings.stills["after"].start == dt.date(2021, 1, 2)


@pytest.mark.parametrize(("more", "words"), [
    ("compare: [[a, c]]\n", "compare: should be one of 'a', 'b' (got 'c'"),
    ("compare: [[a, a]]\n", "compare: 'a' is compared with itself"),
    ("outliers: keep_out\n", "outliers: should be one of 'keep-out', 'refuse', 'keep'"),
    ("weather_error: 2\n", "weather_error: should be between 0 and 1 (got 2)"),
    ("estimater: robust\n", "estimater: unknown key (did you mean 'estimator'?)"),
])  # fmt: skip
def test_faults_of_the_trial_file_are_told(tmp_path, more, words):
    (said,) = faults(tmp_path, HEAD + WEATHER + STILLS + more)
    assert words in said


def test_dates_that_run_backward_are_a_fault(tmp_path):
    stills = "stills:\n  a: {file: still.yaml, area_m2: 1, start: 2021-03-01, end: 2021-02-01}\n"
    (said,) = faults(tmp_path, HEAD + WEATHER + stills)
    assert "start should not lie after end" in said


def test_an_empty_log_and_a_missing_trial_file_are_told(tmp_path):
    with pytest.raises(StillfieldError, match="the log is empty"):
        load(tmp_path, HEAD + WEATHER + STILLS, "date,still,litres\n")
    with pytest.raises(StillfieldError, match="no such trial file"):
        load_trial(tmp_path / "none.yaml")


def test_a_log_in_an_old_code_page_is_read(tmp_path):
    (tmp_path / "log.csv").write_bytes("date,still,litres,remarks\n2021-01-01,a,3,über\n".encode("cp1252"))
    rows, found = read_log(tmp_path / "log.csv", {}, date_format=None, stills=["a"], weather=False)
    assert found == []
    assert rows[0].remarks == "über"


def test_one_day_of_one_still_is_one_row_in_each_column_of_the_faults(tmp_path):
    """Several faults of one row are all told."""
    said = faults(tmp_path, HEAD + WEATHER + STILLS, "date,still,litres\nnever,c,much\n")
    assert [one.partition(":")[0] for one in said] == ["line 2, date", "line 2, still", "line 2, litres"]
