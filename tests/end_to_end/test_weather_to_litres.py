"""From real weather files to litres through the command line, held against the text of the files."""

from __future__ import annotations

import csv
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from data.fetch import fetched
from stillfield.sources.typical.typical_year import open_typical_year
from whole_runs import finished, months_of, stillfield_command, table, write_run

TMY3 = ("723170TYA.CSV", "703165TY.csv")
TMY2 = "12839.tm2"
PVGIS = [f"tmy_45.000_8.000_2005_2023.{ending}" for ending in ("csv", "json", "epw")]
METHODS = ("rule", "fitted", "heat-balance")

#: Half of the last printed digit of a yearly figure in the tables.
HALF_DIGIT = 0.005


def raw_text(name: str) -> str:
    return Path(str(files("pvlib").joinpath("data", name))).read_text(encoding="latin-1")


def sunshine_of_text(name: str) -> np.ndarray:
    """Global horizontal irradiance of every hour [Wh m-2], from the raw text and nothing else.

    TMY3: column "GHI (W/m^2)", global horizontal radiation received in the hour (Users Manual for TMY3 Data
    Sets, Table 1-3). TMY2: characters 018-021, the same in Wh m-2 (User's Manual for TMY2s, Table 3-2).
    """
    lines = raw_text(name).splitlines()
    if name == TMY2:
        return np.array([int(line[17:21]) for line in lines[1:]], dtype=float)
    return np.array([float(row["GHI (W/m^2)"]) for row in csv.DictReader(lines[1:])])


@pytest.fixture(scope="module")
def typical_years(tmp_path_factory):
    """The three typical years that come with pvlib, by two methods, as rows of cells.csv by site."""
    folder = tmp_path_factory.mktemp("typical")
    weather = {"kind": "typical-year", "files": [f"pvlib:data/{name}" for name in (*TMY3, TMY2)]}
    found = {}
    for method in METHODS:
        out = finished(write_run(folder / f"{method}.yaml", weather=weather, method=method), cwd=folder)
        found[method] = {row["site"]: row for row in table(out / "cells.csv")}
    return found


@pytest.mark.parametrize("name", [*TMY3, TMY2])
def test_a_years_litres_are_the_rule_on_the_sunshine_in_the_text(typical_years, name):
    """Q = E G A / 2.3 with E = 0.30 and G the sunshine of the year in MJ m-2, which the rule has no more to it."""
    hours = sunshine_of_text(name)
    assert hours.size == 8760
    row = typical_years["rule"][Path(name).stem]
    by_hand = 0.30 * hours.sum() * 3600 / 1e6 / 2.3
    # Yields are single precision until they are summed; a year keeps six figures of the seven.
    assert float(row["annual_yield_l_m2_year"]) == pytest.approx(by_hand, abs=HALF_DIGIT + 1e-6 * by_hand)
    assert row["annual_yield_rule_l_m2_year"] == row["annual_yield_l_m2_year"]
    by_month = np.split(hours, np.cumsum([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30]) * 24)
    expected = [0.30 * month.sum() * 3600 / 1e6 / 2.3 for month in by_month]
    np.testing.assert_allclose(months_of(row), expected, atol=HALF_DIGIT + 1e-4)
    assert int(row["days_used_min"]) == 28


def test_the_warmth_of_miami_is_not_read_in_tenths(tmp_path):
    """Nafey 2000 by hand on means of the text: linear in sun, warmth and wind, so the mean year suffices.

    M = -1.39 + 0.894e-3 H + 0.033 T - 0.017 V - 0.017 phi with H in Wh m-2 d-1 and phi the cover's tilt. Warmth in
    tenths would add 0.033 x 9 x 24 = 7 L a day, wind in tenths take 0.5 L.
    """
    lines = raw_text(TMY2).splitlines()[1:]
    warmth = np.mean([int(line[67:71]) for line in lines]) / 10  # dry bulb, characters 068-071, tenths of a degC
    wind = np.mean([int(line[95:98]) for line in lines]) / 10 * 0.748  # 096-098, at 10 m; FAO-56 Table 2.9
    assert 23.0 < warmth < 25.5  # annual mean of Miami 24 to 25 degC, quoted from memory
    sun = sunshine_of_text(TMY2).sum() / 365
    by_hand = 365 * (-1.39 + 0.894e-3 * sun + 0.033 * warmth - 0.017 * wind - 0.017 * 15)
    weather = {"kind": "typical-year", "files": f"pvlib:data/{TMY2}"}
    out = finished(write_run(tmp_path / "miami.yaml", weather=weather, method="nafey-2000"), cwd=tmp_path)
    (row,) = table(out / "cells.csv")
    # The line is floored at zero; a handful of dark days of Miami fall below it and keep their zero.
    assert float(row["annual_yield_l_m2_year"]) == pytest.approx(by_hand, rel=0.003)


@pytest.mark.parametrize("method", METHODS)
def test_one_year_in_three_formats_is_one_answer(tmp_path, method):
    """The same PVGIS typical year, downloaded as CSV, JSON and EPW."""
    names = []
    for name in PVGIS:
        ending = Path(name).suffix
        names.append(f"as-{ending[1:]}{ending}")
        (tmp_path / names[-1]).write_bytes(fetched(name).read_bytes())
    run_file = write_run(tmp_path / "x.yaml", weather={"kind": "typical-year", "files": names}, method=method)
    rows = table(finished(run_file, cwd=tmp_path) / "cells.csv")
    assert sorted(row["site"] for row in rows) == ["as-csv", "as-epw", "as-json"]
    annual = [float(row["annual_yield_l_m2_year"]) for row in rows]
    assert min(annual) > 100.0
    assert max(annual) == pytest.approx(min(annual), rel=0.005)


def one_cell(path: Path, *, hours_to_utc: int) -> Path:
    """Write the typical year of Miami as a CF NetCDF file of one cell and one calendar year, hourly, in UTC."""
    site = open_typical_year([f"pvlib:data/{TMY2}"]).isel(site=0)
    cell = site[["ghi", "dni", "dhi", "temp_air", "temp_dew", "wind_speed"]].reset_coords(drop=True)
    cell = cell.assign_coords(time=cell["time"] + np.timedelta64(hours_to_utc, "h"))
    cell = cell.expand_dims(latitude=[site["latitude"].item()], longitude=[site["longitude"].item()])
    cell["latitude"].attrs = {"units": "degrees_north", "standard_name": "latitude"}
    cell["longitude"].attrs = {"units": "degrees_east", "standard_name": "longitude"}
    cell.attrs = {"Conventions": "CF-1.11"}
    cell.transpose("time", "latitude", "longitude").to_netcdf(path)
    return path


@pytest.mark.parametrize(("method", "tolerance"), [("rule", 0.001), ("fitted", 0.01), ("heat-balance", 0.01)])
def test_a_typical_year_as_a_cell_in_utc_gives_the_typical_years_months(tmp_path, typical_years, method, tolerance):
    """Miami keeps UTC-5, so the local days are whole days of the UTC file as well: the record starts at 05:00 UTC.

    Nothing is lost at the edges. The heat balance starts the cell from its own first days, the typical year from
    its last, and the sun of the cell stands in the middle of the hour, that of the typical year where it was
    measured, a minute away.
    """
    one_cell(tmp_path / "miami.nc", hours_to_utc=5)
    weather = {"kind": "netcdf", "files": "miami.nc", "variables": {"wind_speed": {"height_m": 2}}}
    run_file = write_run(tmp_path / "x.yaml", weather=weather, method=method)
    (cell,) = table(finished(run_file, cwd=tmp_path) / "cells.csv")
    site = typical_years[method]["12839"]
    np.testing.assert_allclose(months_of(cell), months_of(site), rtol=tolerance)
    assert cell["days_used_min"] == site["days_used_min"] == "28"


def test_a_day_cut_short_by_the_end_of_the_record_is_left_out_and_counted(tmp_path):
    """From 00:00 to 24:00 UTC of one year the last local day of Miami lacks its last five hours.

    Were it summed all the same, or the UTC day taken for the local one, December would change for the worse.
    """
    one_cell(tmp_path / "shifted.nc", hours_to_utc=5)
    with xr.open_dataset(tmp_path / "shifted.nc") as shifted:
        whole = shifted.load().roll(time=5).assign_coords(time=shifted["time"] - np.timedelta64(5, "h"))
    whole.to_netcdf(tmp_path / "utc.nc")
    weather = {"kind": "netcdf", "files": "utc.nc", "variables": {"wind_speed": {"height_m": 2}}}
    out = finished(write_run(tmp_path / "utc.yaml", weather=weather), cwd=tmp_path)
    with xr.open_dataset(out / "monthly_yield.nc") as result:
        assert result["days_used"].values.ravel().tolist() == [31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30]
        assert result["days_expected"].values.ravel().tolist() == [31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31]
        litres = result["monthly_yield"].values.ravel()
    hours = sunshine_of_text(TMY2)
    days = 0.30 * hours.reshape(365, 24).sum(axis=1) * 3600 / 1e6 / 2.3
    assert litres[0] == pytest.approx(days[:31].sum(), rel=1e-5)
    assert litres[11] == pytest.approx(days[334:364].mean() * 31, rel=1e-5)


def test_a_method_that_knows_no_condition_claims_no_band(tmp_path):
    weather = {"kind": "typical-year", "files": f"pvlib:data/{TMY2}"}
    told = stillfield_command("run", write_run(tmp_path / "x.yaml", weather=weather), cwd=tmp_path)
    assert told.returncode == 0, told.stderr
    assert "method rule" in told.stdout
    assert "band" not in told.stdout
    assert "maintained" not in told.stdout
    notes = (tmp_path / "outputs" / "x" / "READ-ME-FIRST.txt").read_text(encoding="utf-8")
    assert "Method rule knows no condition of the still" in notes
    assert "A typical year holds no poor year" in notes
    with xr.open_dataset(tmp_path / "outputs" / "x" / "monthly_yield.nc") as result:
        assert "monthly_yield_poor_year" not in result
