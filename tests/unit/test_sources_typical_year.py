"""Mechanics of the typical-year readers, on invented files."""

from __future__ import annotations

import json
import re
from pathlib import Path

import numpy as np
import pytest

from stillfield.errors import WeatherError
from stillfield.sources import guess_kind, open_source
from stillfield.sources.typical.typical_year import open_typical_year
from typical_year_samples import calendar, clear_sky, epw_text, with_field, write

HEAD = 8
TEMP, DEW, HUMIDITY, GHI, DNI, WIND = 6, 7, 8, 13, 14, 21


def _conventions(weather) -> str:
    return "\n".join(weather.attrs["conventions"])


def test_an_epw_file_becomes_one_site_of_a_nominal_year(tmp_path):
    weather = open_typical_year([write(tmp_path / "drymouth.epw", epw_text())])
    assert dict(weather.drop_dims("count").sizes) == {"time": 8760, "site": 1}
    assert str(weather.time.values[0])[:16] == "2001-01-01T00:00"
    assert str(weather.time.values[-1])[:16] == "2001-12-31T23:00"
    assert weather.attrs["record"] == "typical-year"
    assert weather.attrs["clock"] == "local-standard"
    assert weather.attrs["step_hours"] == 1.0
    site = weather.isel(site=0)
    assert site.site.item() == "drymouth"
    assert site["name"].item() == "Drymouth"
    assert (site.latitude.item(), site.longitude.item(), site.elevation.item()) == (12.0, 67.5, 15.0)


def test_a_zone_of_half_hours_is_kept_and_the_sun_found(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(zone=4.5))])
    assert weather.utc_offset_hours.item() == 4.5
    assert weather.sun_offset_minutes.item() == pytest.approx(30.0, abs=1.5)
    assert "WARNING" not in _conventions(weather)


def test_months_of_different_years_stand_in_the_order_of_the_months(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(years=(2015, 1983, 1999, 2004)))])
    first_hours = weather.temp_air.isel(site=0).groupby("time.month").first()
    np.testing.assert_allclose(first_hours, 20 + np.arange(1, 13) / 10)


def test_wind_is_brought_from_ten_metres_to_two(tmp_path):
    path = write(tmp_path / "a.epw", epw_text())
    # FAO-56 equation 47 at 10 m: 4.87 / ln(672.58) = 0.748 (Annex 2, Table 2.9 prints 0.748).
    assert float(open_typical_year([path]).wind_speed.mean()) == pytest.approx(4.0 * 0.748, abs=0.002)
    at_two = open_typical_year([path], wind_height_m=2.0)
    assert float(at_two.wind_speed.mean()) == pytest.approx(4.0)
    assert "brought from" not in _conventions(at_two)


@pytest.mark.parametrize("late", [100.0, 170.0, -80.0, 700.0])
def test_a_file_hours_beside_the_sun_is_moved_and_says_so(tmp_path, late):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(late_minutes=late))])
    assert abs(weather.sun_offset_minutes.item() - 30.0) < 45.0
    warning = next(line for line in weather.attrs["conventions"] if "WARNING" in line)
    assert "off the middle of the hour" in warning
    # Moved back, the brightest hour of the day is the one with local solar noon: 11:30 to 12:30 on the clock.
    noon = int(np.argmax(weather.ghi.isel(site=0).groupby("time.hour").mean().values))
    assert noon in {11, 12}
    told = float(re.search(r"is ([+-]\d+) minutes off", warning).group(1))
    assert told == pytest.approx(-late, abs=2.0) or told == pytest.approx(late, abs=2.0)


def test_a_deviation_below_45_minutes_is_left_and_reported(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(late_minutes=-40.0))])
    assert weather.sun_offset_minutes.item() == pytest.approx(70.0, abs=2.0)
    assert "WARNING" not in _conventions(weather)
    assert "follows the sun" in _conventions(weather)


def test_sunshine_that_follows_no_sun_is_said_to_be_unchecked(tmp_path):
    lines = epw_text()
    lines[HEAD:] = [with_field(with_field(row, GHI, "150"), DNI, "0") for row in lines[HEAD:]]
    weather = open_typical_year([write(tmp_path / "a.epw", lines)])
    assert weather.sun_offset_minutes.item() == 30.0
    assert "WARNING: the sunshine of this file does not follow the sun" in _conventions(weather)


def test_the_leap_day_is_dropped_and_told(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(leap=True))])
    assert weather.sizes["time"] == 8760
    assert "29 February (24 rows) was dropped" in _conventions(weather)
    plain = open_typical_year([write(tmp_path / "b.epw", epw_text())])
    np.testing.assert_allclose(weather.temp_air, plain.temp_air)


def test_half_hours_are_averaged_to_hours(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.epw", epw_text(per_hour=2))])
    plain = open_typical_year([write(tmp_path / "b.epw", epw_text())])
    assert "2 rows of an hour were averaged" in _conventions(weather)
    assert float(weather.ghi.sum()) == pytest.approx(float(plain.ghi.sum()), rel=2e-3)
    assert weather.sun_offset_minutes.item() == pytest.approx(30.0, abs=1.5)


def test_one_lacking_hour_stays_missing(tmp_path):
    lines = epw_text()[:-1]
    weather = open_typical_year([write(tmp_path / "a.epw", lines)])
    assert int(weather.ghi.isnull().sum()) == 1
    assert bool(weather.ghi.isel(time=-1).isnull())
    assert "1 of 8760 hours are absent" in _conventions(weather)


def test_a_truncated_file_is_refused(tmp_path):
    path = write(tmp_path / "a.epw", epw_text()[: HEAD + 72])
    with pytest.raises(WeatherError, match=r"a\.epw: the file does not hold a whole year \(got 72 rows, the first "
                                           r"missing hour starts 01-04 00:00"):
        open_typical_year([path])


def test_two_years_in_one_file_are_refused(tmp_path):
    lines = epw_text()
    with pytest.raises(WeatherError, match=r"a time comes 2 times \(got month-day 01-01 00:00"):
        open_typical_year([write(tmp_path / "a.epw", lines + lines[HEAD:])])


def test_numbers_that_mark_missing_are_masked_and_counted(tmp_path):
    lines = epw_text()
    for at, (position, value) in enumerate([(GHI, "9999"), (TEMP, "99.9"), (WIND, "999"), (HUMIDITY, "999"),
                                            (DEW, "99.9")]):
        lines[HEAD + 12 + at] = with_field(lines[HEAD + 12 + at], position, value)
    weather = open_typical_year([write(tmp_path / "a.epw", lines)])
    for name in ("ghi", "temp_air", "wind_speed", "relative_humidity", "temp_dew"):
        assert int(weather[name].isnull().sum()) == 1, name
        assert f"1 values of {name} are marked missing" in _conventions(weather)


def test_a_column_missing_throughout_is_left_out_and_dew_point_derived(tmp_path):
    lines = epw_text()
    lines[HEAD:] = [with_field(row, DEW, "99.9") for row in lines[HEAD:]]
    weather = open_typical_year([write(tmp_path / "a.epw", lines)])
    # FAO-56 Annex 2 Table 2.3: 2.487 kPa at 21 degC, 70 % of it is 1.741 kPa; the table has 1.705 at 15.0 and
    # 1.761 at 15.5 degC, so the dew point is 15.3 degC.
    october = weather.sel(time="2001-10-01T00:00").isel(site=0)
    assert float(october.temp_air) == pytest.approx(21.0)
    assert float(october.temp_dew) == pytest.approx(15.3, abs=0.05)
    assert "Dew point was derived" in _conventions(weather)


def test_no_sunshine_at_all_is_refused(tmp_path):
    lines = epw_text()
    lines[HEAD:] = [with_field(row, GHI, "9999") for row in lines[HEAD:]]
    with pytest.raises(WeatherError, match="no values of ghi"):
        open_typical_year([write(tmp_path / "a.epw", lines)])


def test_impossible_weather_names_the_hour(tmp_path):
    lines = epw_text()
    lines[HEAD + 30] = with_field(lines[HEAD + 30], TEMP, "290.0")
    with pytest.raises(WeatherError, match=r"a\.epw, time 2001-01-02T06:00, site a: temp_air cannot be true \(got 290"):
        open_typical_year([write(tmp_path / "a.epw", lines)])


def test_several_files_share_one_axis_and_get_distinct_ids(tmp_path):
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    lines = epw_text(latitude=-8.0, longitude=120.0, zone=8.0)
    lines[HEAD:] = [with_field(row, DNI, "9999") for row in lines[HEAD:]]
    names = [write(tmp_path / "one" / "coast.epw", epw_text()), write(tmp_path / "two" / "coast.epw", lines)]
    weather = open_typical_year(names)
    assert weather.site.values.tolist() == ["coast", "coast-2"]
    assert weather.utc_offset_hours.values.tolist() == [4.5, 8.0]
    assert "dni" not in weather
    assert "dni left out: not in every file" in _conventions(weather)
    alone = open_typical_year(names[1:])
    np.testing.assert_array_equal(weather.ghi.isel(site=1), alone.ghi.isel(site=0))


def test_content_decides_the_format_not_the_name(tmp_path):
    weather = open_typical_year([write(tmp_path / "weather.csv", epw_text())])
    assert "EPW hours" in _conventions(weather)
    assert guess_kind([str(tmp_path / "weather.csv")]) == "typical-year"


def test_a_byte_order_mark_and_windows_text_are_read(tmp_path):
    marked = open_typical_year([write(tmp_path / "a.epw", epw_text(), encoding="utf-8-sig")])
    western = open_typical_year([write(tmp_path / "b.epw", epw_text(city="Seño"), encoding="cp1252")])
    assert marked["name"].item() == "Drymouth"
    assert western["name"].item() == "Seño"


def _pvgis_csv(rows: int = 8760, longitude: float = 82.0) -> list[str]:
    month, day, start = calendar()
    ghi = clear_sky(month, day, start + 12, latitude=20.0, longitude=longitude, zone=0.0)
    head = ["Latitude (decimal degrees): 20.000", f"Longitude (decimal degrees): {longitude:.3f}", "Elevation (m): 9.0",
            "Irradiance Time Offset (h): 0.2", "month,year", *[f"{m},{2005 + m}" for m in range(1, 13)],
            "time(UTC),T2m,RH,G(h),Gb(n),Gd(h),IR(h),WS10m,WD10m,SP"]
    body = [f"{2005 + m}{m:02d}{d:02d}:{s // 60:02d}00,{20 + s / 1440:.2f},60.0,{g:.1f},0.0,0.0,300.0,2.0,90.0,101000.0"
            for m, d, s, g in zip(month, day, start, ghi, strict=True)]
    return head + body[:rows]


def test_utc_rows_come_to_local_standard_time(tmp_path):
    weather = open_typical_year([write(tmp_path / "a.csv", _pvgis_csv())])
    assert weather.utc_offset_hours.item() == 5.0  # 82 E is 5.47 h from Greenwich
    assert weather.sun_offset_minutes.item() == pytest.approx(12.0, abs=1.5)
    raw = np.array([float(line.split(",")[3]) for line in _pvgis_csv()[18:]])
    np.testing.assert_allclose(weather.ghi.isel(site=0), np.roll(raw, 5))


def test_a_cut_pvgis_table_is_refused(tmp_path):
    with pytest.raises(WeatherError, match=r"the file does not hold a whole year \(got 100 rows; wanted 8760\)"):
        open_typical_year([write(tmp_path / "a.csv", _pvgis_csv(rows=100))])
    with pytest.raises(WeatherError, match="a PVGIS table whose head with latitude and longitude was cut off"):
        open_typical_year([write(tmp_path / "b.csv", _pvgis_csv()[17:])])


def test_a_pvgis_series_is_no_typical_year(tmp_path):
    path = tmp_path / "a.json"
    path.write_text(json.dumps({"inputs": {}, "outputs": {"hourly": []}}))
    with pytest.raises(WeatherError, match="no typical year in this JSON file"):
        open_typical_year([str(path)])


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"", "the file is empty"),
        (b"<!DOCTYPE html><html>404</html>", "this is a web page or an error message saved as a file"),
        (b"\x89HDF\r\n\x1a\n", "this is a NetCDF-4 or HDF5 file; use the source kind 'netcdf'"),
        (b"CDF\x01", "this is a NetCDF file; use the source kind 'netcdf'"),
        (b"GRIB", "this is a GRIB file"),
        (b"PK\x03\x04", "this is a ZIP archive; unpack it"),
        (b"date,sun\n1,2\n", "not a typical-year file of a known format"),
    ],
)
def test_foreign_files_are_named(tmp_path, content, sentence):
    (tmp_path / "a.epw").write_bytes(content)
    with pytest.raises(WeatherError, match=sentence):
        open_typical_year([str(tmp_path / "a.epw")])


def test_a_stated_format_overrides_and_a_broken_file_says_so(tmp_path):
    path = write(tmp_path / "a.txt", ["nothing", "of", "this"])
    with pytest.raises(WeatherError, match=r"a\.txt: broken epw file"):
        open_typical_year([path], format="epw")
    with pytest.raises(WeatherError, match=r"unknown format \(got xyz; wanted epw, tmy2"):
        open_typical_year([path], format="xyz")


def test_names_that_lead_nowhere_are_refused(tmp_path):
    with pytest.raises(WeatherError, match="no such file"):
        open_typical_year([str(tmp_path / "*.epw")])
    with pytest.raises(WeatherError, match="no installed package is called 'no_such_package'"):
        open_typical_year(["no_such_package:a.epw"])
    with pytest.raises(WeatherError, match="package 'pvlib' holds no such file"):
        open_typical_year(["pvlib:data/nothing.tm2"])
    with pytest.raises(WeatherError, match="package 'pvlib' holds no such file"):
        open_typical_year(["pvlib:../../secret"])
    with pytest.raises(WeatherError, match="this is a folder"):
        open_typical_year([str(tmp_path)])
    with pytest.raises(WeatherError, match="no weather files are named"):
        open_typical_year([])


def test_patterns_are_sorted(tmp_path):
    for name in ("b", "a", "c"):
        write(tmp_path / f"{name}.epw", epw_text())
    assert open_typical_year([str(tmp_path / "*.epw")]).site.values.tolist() == ["a", "b", "c"]


def test_the_registry_knows_kinds_and_options(tmp_path):
    path = write(tmp_path / "a.epw", epw_text())
    assert open_source("typical-year", [Path(path)], wind_height_m=2.0).open().sizes["site"] == 1
    with pytest.raises(WeatherError, match=r"unknown kind of weather \(got cloud; wanted typical-year, netcdf"):
        open_source("cloud", [path])
    with pytest.raises(WeatherError, match="typical-year weather takes no option 'height'"):
        open_source("typical-year", [path], height=3)
