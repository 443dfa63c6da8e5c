"""Real station tables against their own text, and sunshine from the temperature range against measured sunshine."""

from __future__ import annotations

import csv
import re
from datetime import datetime

import numpy as np
import pytest

from data.fetch import fetched
from stillfield.errors import WeatherError
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.physics.temperature_range import clear_sky_share, irradiation_from_temperature
from stillfield.sources.stations.station_table import open_station_table

# Positions and units are those written in the heads of the files, or (Ronda) in the data set they come from.
RONDA = {
    "variables": {
        "irradiation": {"units": "kJ/m2/d"}, "temp_air_min": {"units": "degC"}, "temp_air_max": {"units": "degC"},
        "vapour_pressure": {"units": "hPa"}, "wind_speed": {"units": "m/s"},
    },
    "table": {"date_format": "%d-%b-%y", "site": {"latitude_deg": 36.75, "longitude_deg": -5.17, "elevation_m": 723}},
}
WAGENINGEN = {
    "variables": {
        "irradiation": {"name": "4", "units": "kJ/m2/d"}, "temp_air_min": {"name": "5", "units": "degC"},
        "temp_air_max": {"name": "6", "units": "degC"}, "vapour_pressure": {"name": "7", "units": "kPa"},
        "wind_speed": {"name": "8", "units": "m/s", "height_m": 2},
    },
    "table": {
        "comment": "*", "header": False, "skip_lines": 1, "columns": {"site": "1", "year": "2", "day_of_year": "3"},
        "site": {"latitude_deg": 51.97, "longitude_deg": 5.67, "elevation_m": 7},
    },
}


def test_a_table_with_headings_is_that_of_its_text():
    path = fetched("8443_ronda.csv")
    weather = open_station_table([str(path)], **RONDA).isel(site=0)
    with path.open(newline="") as stream:
        rows = list(csv.DictReader(stream))
    rows.sort(key=lambda row: datetime.strptime(row["DAY"], "%d-%b-%y"))
    assert weather.sizes["time"] == len(rows)
    assert str(weather.time.values[0])[:10] == "2013-01-09"
    assert rows[0]["DAY"] == "09-JAN-13"
    np.testing.assert_allclose(weather.irradiation, [float(row["RADIATION"]) / 1000 for row in rows])
    np.testing.assert_allclose(weather.temp_air_max, [float(row["TEMPERATURE_MAX"]) for row in rows])
    # FAO-56, Annex 2 Table 2.9: 0.748 from 10 m to 2 m; Table 2.3: 0.8 kPa saturates at 3.8 degC.
    wind = np.array([float(row["WINDSPEED_10M"]) for row in rows])
    np.testing.assert_allclose(weather.wind_speed, 0.748 * wind, rtol=1e-3)
    assert float(weather.temp_dew[0]) == pytest.approx(3.9, abs=0.15)
    assert rows[0]["VAPOURPRESSURE"] == "8.1"
    assert any("absent" in line for line in weather.attrs["conventions"])  # a hundred days of the record are not there


def test_columns_of_blanks_without_headings_are_those_of_their_text():
    paths = [fetched("NL1.976"), fetched("NL1.977")]
    weather = open_station_table([str(path) for path in paths], **WAGENINGEN).isel(site=0)
    assert weather.sizes["time"] == 366 + 365
    # Lines "1 1976   1  2200.   2.0   9.7   0.730   3.6  12.1" and "1 1976 366  2360.  -5.6   2.1   0.500   4.3   3.5".
    first, last = weather.isel(time=0), weather.isel(time=365)
    assert (float(first.irradiation), float(first.temp_air_max), float(first.wind_speed)) == (2.2, 9.7, 3.6)
    assert str(last.time.values)[:10] == "1976-12-31"
    assert float(last.irradiation) == pytest.approx(2.36)
    assert float(last.temp_air) == pytest.approx((2.1 - 5.6) / 2)


def test_rows_of_nonsense_in_a_real_file_are_found():
    """Between its days this file holds rows such as "1 1989 43 1. 1.0 1.0 3.000 1.0 3.0"; they cannot pass unseen."""
    with pytest.raises(WeatherError, match=r"line 71: a time comes twice with different values .*1989-02-12.*line 70"):
        open_station_table([str(fetched("NL1.989"))], **WAGENINGEN)


@pytest.mark.parametrize(
    ("name", "latitude", "longitude", "units"), [("hyderabad_climate.txt", 17.4, 78.5, "degC"),
                                                 ("tunis_climate.txt", 36.8, 10.2, None)],
)  # fmt: skip
def test_tables_without_sunshine_are_refused_until_an_estimate_is_asked_for(name, latitude, longitude, units):
    extremes = {} if units is None else {key: {"units": units} for key in ("temp_air_min", "temp_air_max")}
    options = {"variables": extremes, "table": {"site": {"latitude_deg": latitude, "longitude_deg": longitude}}}
    path = str(fetched(name))
    with pytest.raises(WeatherError, match="radiation_from_temperature"):
        open_station_table([path], **options)
    weather = open_station_table([path], radiation_from_temperature={"k_rs": 0.17}, **options)
    assert any("WARNING: sunshine was not measured" in line for line in weather.attrs["conventions"])
    # The years of the record as its text has them: first and last row.
    rows = [re.split(r"\s+", line.strip()) for line in fetched(name).read_text().splitlines()[1:] if line.strip()]
    assert weather.time.dt.year.values[[0, -1]].tolist() == [int(rows[0][2]), int(rows[-1][2])]
    np.testing.assert_allclose(weather.temp_air_min.values[:, 0], [float(row[3]) for row in rows])


# --- sunshine from the temperature range -------------------------------------------------------------------------


def test_hargreaves_is_that_of_the_handbook():
    """FAO-56, Example 15: Lyon in July, 26.6 and 14.8 degC, R_a 40.6 MJ m-2, k_Rs 0.16: R_s 22.3 MJ m-2."""
    sun = irradiation_from_temperature(np.array([14.8]), np.array([26.6]), np.array([40.6]), k_rs=0.16)
    assert sun[0] == pytest.approx(22.3, abs=0.05)
    # FAO-56, eq. 37: no more than a clear sky lets through; and no root of a negative range.
    assert irradiation_from_temperature(-5.0, 35.0, 40.0, k_rs=0.16) == pytest.approx(30.0)
    assert float(clear_sky_share(500.0)) == pytest.approx(0.76)
    assert np.isnan(irradiation_from_temperature(20.0, 15.0, 40.0, k_rs=0.16))


def test_hargreaves_is_as_rough_as_the_warning_says():
    """Against sunshine measured at Wageningen in 1976, months of the bright half of the year: 17 % off, days more.

    The sunshine of Ronda's table is no measurement to check this with: it is always 12 % above the estimate, so it
    was made from the same temperatures.
    """
    measured = open_station_table([str(fetched("NL1.976"))], **WAGENINGEN).isel(site=0).compute()
    outside = extraterrestrial_irradiation([51.97], measured.time.dt.dayofyear.values)[:, 0]
    estimate = measured.irradiation.copy(data=irradiation_from_temperature(
        measured.temp_air_min.values, measured.temp_air_max.values, outside, k_rs=0.16))
    bright = measured.time.dt.month.isin(range(4, 10))
    true, ours = (values[bright].groupby("time.month").mean() for values in (measured.irradiation, estimate))
    assert 0.10 < float(np.abs(ours / true - 1).mean()) < 0.20
    assert float(np.quantile(np.abs(estimate / measured.irradiation - 1)[bright], 0.9)) > 0.4
