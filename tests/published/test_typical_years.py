"""Real typical years against the files' own text, their own astronomy, and one another."""

from __future__ import annotations

import csv
from importlib.resources import files
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from pvlib.solarposition import get_solarposition

from data.fetch import fetched
from stillfield.sources.grids.netcdf import open_netcdf
from stillfield.sources.typical.alignment import measure_sun_offset
from stillfield.sources.typical.typical_year import open_typical_year

TMY3 = ["723170TYA.CSV", "703165TY.csv"]
TMY2 = "12839.tm2"
PVGIS = ["tmy_45.000_8.000_2005_2023.csv", "tmy_45.000_8.000_2005_2023.json", "tmy_45.000_8.000_2005_2023.epw"]


def _shipped(name: str) -> Path:
    return Path(str(files("pvlib").joinpath("data", name)))


def _tmy3_column(name: str, column: str) -> np.ndarray:
    with _shipped(name).open(newline="") as stream:
        next(stream)
        return np.array([float(row[column]) for row in csv.DictReader(stream)])


def _tmy2_column(first: int, last: int) -> np.ndarray:
    """Characters `first` to `last`, counted from 1, of each row: User's Manual for TMY2s, Table 3-2."""
    rows = _shipped(TMY2).read_text().splitlines()[1:]
    return np.array([float(row[first - 1 : last]) for row in rows])


@pytest.fixture(scope="module")
def miami() -> xr.Dataset:
    return open_typical_year([f"pvlib:data/{TMY2}"])


@pytest.mark.parametrize("name", TMY3)
def test_tmy3_hours_are_those_of_the_text(name):
    weather = open_typical_year([f"pvlib:data/{name}"]).isel(site=0)
    assert weather.sizes["time"] == 8760
    # The files run from 01:00 of 1 January to 24:00 of 31 December, hours labelled by their end (Users Manual
    # for TMY3 Data Sets), so row by row they are the hours of the year by their start.
    for ours, theirs in (("ghi", "GHI (W/m^2)"), ("dni", "DNI (W/m^2)"), ("temp_air", "Dry-bulb (C)")):
        np.testing.assert_allclose(weather[ours], _tmy3_column(name, theirs), err_msg=ours)
    assert float(weather.ghi.sum()) == pytest.approx(_tmy3_column(name, "GHI (W/m^2)").sum(), rel=1e-12)
    # FAO-56 Annex 2 Table 2.9: factor 0.748 from 10 m to 2 m.
    assert float(weather.wind_speed.mean()) == pytest.approx(0.748 * _tmy3_column(name, "Wspd (m/s)").mean(), rel=1e-3)


def test_tmy2_hours_are_those_of_the_text_in_whole_units(miami):
    weather = miami.isel(site=0)
    # Table 3-2: global horizontal 018-021 [Wh m-2], dry bulb 068-071 and dew point 074-077 [0.1 degC],
    # wind speed 096-098 [0.1 m/s].
    np.testing.assert_allclose(weather.ghi, _tmy2_column(18, 21))
    np.testing.assert_allclose(weather.temp_air, _tmy2_column(68, 71) / 10)
    np.testing.assert_allclose(weather.temp_dew, _tmy2_column(74, 77) / 10)
    assert float(weather.wind_speed.mean()) == pytest.approx(0.748 * _tmy2_column(96, 98).mean() / 10, rel=1e-3)


def test_miami_is_warm_and_not_ten_times_as_warm(miami):
    # The head of the file: 25 deg 48 min N, 80 deg 16 min W, UTC-5, 2 m. The long-term annual mean of Miami is
    # 24 to 25 degC (quoted from memory).
    assert float(miami.temp_air.mean()) == pytest.approx(24.3, abs=0.05)
    assert miami.latitude.item() == pytest.approx(25 + 48 / 60)
    assert miami.longitude.item() == pytest.approx(-(80 + 16 / 60))
    assert miami.utc_offset_hours.item() == -5.0


@pytest.mark.parametrize("name", TMY3)
def test_the_sun_of_the_files_own_astronomy_stands_in_the_middle_of_the_hour(name):
    """Column ETR is extraterrestrial irradiance, computed by the makers of the file as a mean of the hour."""
    site = open_typical_year([f"pvlib:data/{name}"]).isel(site=0)
    fit = measure_sun_offset(
        _tmy3_column(name, "ETR (W/m^2)"), latitude=site.latitude.item(), longitude=site.longitude.item(),
        clock_offset_hours=site.utc_offset_hours.item(), day_of_year=np.arange(1.0, 366.0),
    )
    assert fit is not None
    assert fit.offset_minutes == pytest.approx(30.0, abs=1.0)


@pytest.mark.parametrize("name", [*TMY3, TMY2])
def test_hour_means_are_found_to_be_hour_means(name):
    """Global irradiance of these files is the mean of the hour, so its sun stands near its middle."""
    weather = open_typical_year([f"pvlib:data/{name}"])
    assert weather.sun_offset_minutes.item() == pytest.approx(30.0, abs=3.0)
    assert not any("WARNING" in line for line in weather.attrs["conventions"])


def test_the_sun_offset_agrees_with_an_independent_ephemeris():
    """pvlib's solar position (NREL's algorithm) at the offset the reader found fits best of all offsets."""
    site = open_typical_year([str(fetched(PVGIS[0]))]).isel(site=0)
    ghi = site.ghi.values.reshape(365, 24)
    bright = np.argsort(-ghi.sum(axis=1))[:12]
    start = pd.DatetimeIndex(site.time.values).values.reshape(365, 24)[bright].ravel()
    utc = pd.DatetimeIndex(start - np.timedelta64(round(site.utc_offset_hours.item() * 60), "m"), tz="UTC")
    scores = {}
    for offset in range(0, 22, 3):
        zenith = get_solarposition(utc + pd.Timedelta(minutes=offset), site.latitude.item(),
                                   site.longitude.item())["zenith"].to_numpy()
        scores[offset] = np.corrcoef(ghi[bright].ravel(), np.clip(np.cos(np.radians(zenith)), 0, None))[0, 1]
    best = max(scores, key=lambda offset: scores[offset])
    assert site.sun_offset_minutes.item() == pytest.approx(best, abs=4.0)


def test_one_pvgis_year_in_three_formats_is_one_answer():
    csv_form, json_form, epw_form = (open_typical_year([str(fetched(name))]).isel(site=0) for name in PVGIS)
    assert "rows follow the sun in UTC+0 h" in "".join(epw_form.attrs["conventions"])
    for other in (json_form, epw_form):
        assert float(other.ghi.sum()) == pytest.approx(float(csv_form.ghi.sum()), rel=0.005)
        assert float(other.temp_air.mean()) == pytest.approx(float(csv_form.temp_air.mean()), rel=0.005)
        assert other.utc_offset_hours.item() == csv_form.utc_offset_hours.item()
        assert other.sun_offset_minutes.item() == pytest.approx(csv_form.sun_offset_minutes.item(), abs=3.0)
        np.testing.assert_allclose(other.ghi, csv_form.ghi, atol=0.01)
        np.testing.assert_allclose(other.temp_air, csv_form.temp_air, atol=0.01)
        # The EPW form rounds wind to 0.1 m/s and brings a dew point by a formula of its own; the other two carry
        # relative humidity only.
        np.testing.assert_allclose(other.wind_speed, csv_form.wind_speed, atol=0.06)
        assert float(abs(other.temp_dew - csv_form.temp_dew).mean()) < 0.1


def test_pvgis_says_itself_when_it_saw_the_sun():
    """Head line "Irradiance Time Offset (h): 0.1761" of the CSV form: 10.6 minutes after the hour."""
    weather = open_typical_year([str(fetched(PVGIS[0]))])
    assert weather.sun_offset_minutes.item() == pytest.approx(0.1761 * 60, abs=2.0)


def test_an_iwec_file_is_aligned_and_below_the_sea():
    weather = open_typical_year([str(fetched("NLD_Amsterdam062400_IWEC.epw"))])
    assert weather.elevation.item() == -2.0
    assert weather.sun_offset_minutes.item() == pytest.approx(30.0, abs=3.0)


def test_half_hourly_nsrdb_rows_become_hours():
    path = fetched("test_read_psm4.csv")
    weather = open_typical_year([str(path)])
    with path.open(newline="") as stream:
        next(stream), next(stream)
        rows = list(csv.DictReader(stream))
    assert len(rows) == 17520
    assert float(weather.ghi.sum()) == pytest.approx(sum(float(row["GHI"]) for row in rows) / 2, rel=1e-9)
    # Two instants, 0 and 30 minutes after the hour, so the sun of their mean stands at 15 minutes.
    assert weather.sun_offset_minutes.item() == pytest.approx(15.0, abs=2.0)


def test_a_typical_year_written_as_one_cell_reads_back_as_the_same_weather(miami, tmp_path):
    site = miami.isel(site=0)
    cell = site[["ghi", "temp_air", "temp_dew", "wind_speed"]].reset_coords(drop=True)
    cell = cell.expand_dims(latitude=[site.latitude.item()], longitude=[site.longitude.item()])
    cell.latitude.attrs["units"], cell.longitude.attrs["units"] = "degrees_north", "degrees_east"
    cell.to_netcdf(tmp_path / "cell.nc")
    again = open_netcdf([str(tmp_path / "cell.nc")])
    assert dict(again.sizes) == {"time": 8760, "latitude": 1, "longitude": 1}
    for name in cell.data_vars:
        np.testing.assert_allclose(again[name].values.ravel(), site[name].values, rtol=1e-6, err_msg=name)
