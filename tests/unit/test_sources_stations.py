"""Station tables as people write them: columns, units, dates, clocks, positions, gaps, and what is refused."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest

from stillfield.api import monthly_yield
from stillfield.errors import UnitsError, WeatherError
from stillfield.physics.still import Panel, Still
from stillfield.sources import open_source
from stillfield.sources.gates import gate
from typical_year_samples import clear_sky

SITE = {"latitude_deg": 12.0, "longitude_deg": 45.0, "elevation_m": 15.0}
DAYS = pd.date_range("2013-01-01", periods=10)
ISO = DAYS.strftime("%Y-%m-%d")


def opened(path, *more, **options):
    return open_source("station-table", [str(path), *map(str, more)], **options).open()


def written(folder, lines, name="t.csv", encoding="utf-8"):
    path = folder / name
    path.write_text("\n".join(lines) + "\n", encoding=encoding)
    return path


def daily(dates=ISO, delimiter=",", heading=None, scale=1.0, decimal="."):
    """Ten days: irradiation 18 to 18.9 MJ m-2, 20 to 30 degC, wind 3 m/s at 2 m."""
    heading = heading or ["date", "irradiation (MJ/m2/d)", "tmin [degC]", "tmax [degC]", "wind_2m (m/s)"]
    rows = [[date, f"{(18 + 0.1 * i) * scale:.4f}", "20.0", "30.0", "3.0"] for i, date in enumerate(dates)]
    return [delimiter.join(heading), *(delimiter.join([row[0], *(one.replace(".", decimal) for one in row[1:])])
                                       for row in rows)]


def check(weather, **bounds):
    np.testing.assert_allclose(weather["irradiation"].values[:, 0], 18 + 0.1 * np.arange(10), rtol=2e-5)
    np.testing.assert_allclose(weather["temp_air"].values, 25.0)
    np.testing.assert_allclose(weather["wind_speed"].values, 3.0, **bounds)
    assert (weather.attrs["record"], weather.attrs["clock"]) == ("series", "own-days")


# --- one weather, many tables ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("delimiter", "decimal", "encoding"),
    [(",", ".", "utf-8"), (";", ",", "cp1252"), ("\t", ".", "utf-8-sig"), ("\t", ",", "utf-8"), (";", ".", "utf-8")],
)
def test_any_delimiter_and_decimal_sign(tmp_path, delimiter, decimal, encoding):
    lines = daily(delimiter=delimiter, decimal=decimal)
    lines[0] = lines[0].replace("[degC]", "(°C)")
    check(opened(written(tmp_path, lines, encoding=encoding), table={"site": SITE}))


@pytest.mark.parametrize(
    ("heading", "scale", "variables"),
    [
        ("SRAD (kJ/m2/d)", 1000.0, {}),
        ("radiation_kwh_m2", 1 / 3.6, {}),
        ("Solar radiation [Wh/m2]", 1000 / 3.6, {}),
        ("RADIATION", 1.0, {"irradiation": {"units": "MJ/m2/d"}}),
        ("Q", 1.0, {"irradiation": {"name": "Q", "units": "MJ m-2"}}),
        ("G (W/m2)", 1 / 0.0864, {"irradiation": {"name": "G (W/m2)", "means": "daily-mean"}}),
    ],
)  # fmt: skip
def test_sunshine_in_any_unit(tmp_path, heading, scale, variables):
    names = ["date", heading, "tmin (C)", "tmax (C)", "wind_2m (m/s)"]
    check(opened(written(tmp_path, daily(heading=names, scale=scale)), table={"site": SITE}, variables=variables))


@pytest.mark.parametrize(
    ("shape", "date_format"),
    [("%d/%m/%Y", "%d/%m/%Y"), ("%d-%b-%y", "%d-%b-%y"), ("%Y%m%d", None), ("%Y-%m-%dT%H:%M", None),
     ("%Y/%j", "%Y/%j")],
)
def test_any_form_of_date(tmp_path, shape, date_format):
    table = {"site": SITE, "date_format": date_format}
    check(opened(written(tmp_path, daily(DAYS.strftime(shape))), table=table))


@pytest.mark.parametrize("names", ["year month day", "year doy", "Jahr Tag"])
def test_dates_in_columns_of_numbers(tmp_path, names):
    parts = {"year month day": "%Y %m %d", "year doy": "%Y %j", "Jahr Tag": "%Y %j"}[names]
    lines = daily(DAYS.strftime(parts), delimiter=" ",
                  heading=[names, "irradiation(MJ/m2/d)", "tmin(C)", "tmax(C)", "wind_2m(m/s)"])
    columns = {"year": "Jahr", "day_of_year": "Tag"} if names == "Jahr Tag" else {}
    check(opened(written(tmp_path, lines), table={"site": SITE, "columns": columns}))


def test_blanks_comments_and_no_heading(tmp_path):
    body = [line.replace(",", "   ") for line in daily()[1:]]
    lines = ["* invented", "* nobody measured this", " 12.0 45.0 3", *body]
    variables = {
        "irradiation": {"name": "2", "units": "MJ/m2/d"}, "temp_air_min": {"name": "3", "units": "degC"},
        "temp_air_max": {"name": "4", "units": "degC"}, "wind_speed": {"name": "5", "units": "m/s", "height_m": 2},
    }
    table = {"comment": "*", "header": False, "skip_lines": 1, "columns": {"date": "1"}, "site": SITE}
    check(opened(written(tmp_path, lines), table=table, variables=variables))


def test_wind_height_follows_from_its_heading_or_is_asked_for(tmp_path):
    ten = opened(written(tmp_path, [line.replace("wind_2m", "WIND_10M") for line in daily()]), table={"site": SITE})
    # FAO-56, Annex 2 Table 2.9: 0.748 from 10 m to 2 m.
    np.testing.assert_allclose(ten["wind_speed"].values, 3.0 * 0.748, rtol=1e-3)
    bare = written(tmp_path, [line.replace("wind_2m", "wind") for line in daily()])
    with pytest.raises(WeatherError, match=r"height of the wind.*variables\.wind_speed\.height_m"):
        opened(bare, table={"site": SITE})


def test_vapour_pressure_becomes_a_dew_point(tmp_path):
    lines = [f"{line},{'vp (hPa)' if i == 0 else '23.38'}" for i, line in enumerate(daily())]
    # FAO-56, Table 2.3: 2.338 kPa is saturation at 20 degC.
    weather = opened(written(tmp_path, lines), table={"site": SITE})
    np.testing.assert_allclose(weather["temp_dew"].values, 20.0, atol=0.01)


# --- many stations -----------------------------------------------------------------------------------------------


def many(folder):
    """Two stations in one table, the second two days late and with a gap."""
    lines = daily()
    late = lines[3:6] + lines[7:]
    rows = ["id," + lines[0], *(f"007,{line}" for line in lines[1:]), *(f"NA,{line}" for line in late)]
    return written(folder, rows)


def test_stations_share_one_axis_and_keep_their_names(tmp_path):
    places = written(tmp_path, ["id;name;lat;lon;alt", "NA;North Hook;-3,5;-41;5", "007;Old Pier;12;45;15"], "p.csv")
    weather = opened(many(tmp_path), table={"stations": str(places)})
    assert weather.site.values.tolist() == ["007", "NA"]
    assert weather.name.values.tolist() == ["Old Pier", "North Hook"]
    assert weather.latitude.values.tolist() == [12.0, -3.5]
    assert weather.elevation.values.tolist() == [15.0, 5.0]
    assert np.isnan(weather.irradiation.sel(site="NA")).values.nonzero()[0].tolist() == [0, 1, 5]


def test_a_file_for_each_station_and_positions_in_the_rows(tmp_path):
    for name, latitude in (("east", 10.0), ("west", -10.0)):
        lines = daily()
        written(tmp_path, [lines[0] + ",lat,lon", *(f"{line},{latitude},300.5" for line in lines[1:])], f"{name}.csv")
    weather = opened(tmp_path / "*.csv")
    assert weather.site.values.tolist() == ["east", "west"]
    assert weather.latitude.values.tolist() == [10.0, -10.0]
    assert weather.longitude.values.tolist() == [-59.5, -59.5]


def test_a_site_without_position_is_named(tmp_path):
    places = written(tmp_path, ["id,lat,lon", "007,12,45"], "p.csv")
    with pytest.raises(WeatherError, match=r"position of a site is unknown \(got NA; wanted its row among 007"):
        opened(many(tmp_path), table={"stations": str(places)})
    with pytest.raises(WeatherError, match=r"table\.stations"):
        opened(many(tmp_path))
    with pytest.raises(WeatherError, match="one position and there are several sites"):
        opened(many(tmp_path), table={"site": SITE})


def test_a_station_that_moves_is_a_fault(tmp_path):
    lines = daily()
    moving = [lines[0] + ",lat,lon", *(f"{line},12,{45 + (i == 3)}" for i, line in enumerate(lines[1:]))]
    with pytest.raises(WeatherError, match="line 5, lon: differs from line 2 for the same site"):
        opened(written(tmp_path, moving))


# --- hours -------------------------------------------------------------------------------------------------------


def hourly(zone=3.0, first_hour=0, sun_unit="W/m2"):
    """Ten clear days of hours at 12 N 45 E, by the station's own clock."""
    stamps = pd.date_range("2013-03-01", periods=240, freq="h")
    sky = clear_sky(stamps.month, stamps.day, stamps.hour * 60 + 30, latitude=12.0, longitude=45.0, zone=zone)
    factor = {"W/m2": 1.0, "kJ/m2": 3.6}[sun_unit]
    rows = [f"{t:%Y-%m-%d},{t.hour + first_hour},{g * factor:.3f},{20 + t.hour / 4},2.0"
            for t, g in zip(stamps, sky, strict=True)]
    return [f"date,hour,ghi ({sun_unit}),temp (C),wind_2m (m/s)", *rows], sky


def test_hours_need_their_clock_and_keep_it(tmp_path):
    lines, sky = hourly()
    path = written(tmp_path, lines)
    with pytest.raises(WeatherError, match=r"clock of the times is unknown.*weather\.table\.utc_offset_hours"):
        opened(path, table={"site": SITE})
    weather = opened(path, table={"site": SITE, "utc_offset_hours": 3.0})
    assert (weather.attrs["clock"], weather.utc_offset_hours.item()) == ("local-standard", 3.0)
    np.testing.assert_allclose(weather.ghi.values[:, 0], sky, atol=0.001)
    assert not any("WARNING" in line for line in weather.attrs["conventions"])
    wrong = opened(path, table={"site": SITE, "utc_offset_hours": 1.0})
    assert any("WARNING: Sunshine follows the sun" in line for line in wrong.attrs["conventions"])


def test_hours_1_to_24_end_at_their_number(tmp_path):
    lines, sky = hourly(first_hour=1)
    weather = opened(written(tmp_path, lines), table={"site": SITE, "utc_offset_hours": 3.0})
    np.testing.assert_allclose(weather.ghi.values[:, 0], sky, atol=0.001)
    assert weather.time.values[0] == np.datetime64("2013-03-01")
    assert any("from 1 to 24" in line for line in weather.attrs["conventions"])


def test_hourly_energy_needs_its_meaning(tmp_path):
    lines, sky = hourly(sun_unit="kJ/m2")
    path, table = written(tmp_path, lines), {"site": SITE, "utc_offset_hours": 3.0}
    with pytest.raises(WeatherError, match="do not say of which period"):
        opened(path, table=table)
    weather = opened(path, table=table, variables={"ghi": {"means": "hour-starting accumulation"}})
    np.testing.assert_allclose(weather.ghi.values[:, 0], sky, atol=0.001)


def test_a_half_hour_zone_is_no_stamp_in_the_middle(tmp_path):
    lines, sky = hourly(zone=3.5)
    weather = opened(written(tmp_path, lines), table={"site": SITE, "utc_offset_hours": 3.5})
    np.testing.assert_allclose(weather.ghi.values[:, 0], sky, atol=0.001)
    assert weather.utc_offset_hours.item() == 3.5


def test_utc_hours_far_from_greenwich_are_cut_by_the_sun(tmp_path):
    lines, _ = hourly(zone=0.0)
    far = {"latitude_deg": 12.0, "longitude_deg": 150.0}
    weather = opened(written(tmp_path, lines), table={"site": far, "utc_offset_hours": 0.0})
    assert weather.attrs["clock"] == "UTC"
    assert "utc_offset_hours" not in weather.coords


def test_offsets_within_the_times_are_taken(tmp_path):
    lines, sky = hourly()
    rows = [line.split(",") for line in lines[1:]]
    text = [f"{r[0]}T{int(r[1]):02d}:00+03:00,{r[2]},{r[3]},{r[4]}" for r in rows]
    path = written(tmp_path, [lines[0].replace("date,hour", "timestamp"), *text])
    weather = opened(path, table={"site": SITE})
    assert weather.time.values[0] == np.datetime64("2013-02-28T21:00")
    np.testing.assert_allclose(weather.ghi.values[:, 0], sky, atol=0.001)
    with pytest.raises(WeatherError, match="the run file states another"):
        opened(path, table={"site": SITE, "utc_offset_hours": 3.0})


# --- gaps and faults -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("cell", ["", "-99", "-99.90", "-999", "-9999", "NA", "nan", "-", "77.7"])
def test_what_stands_for_missing_is_missing(tmp_path, cell):
    lines = daily()
    lines[4] = lines[4].replace("30.0", cell)
    weather = opened(written(tmp_path, lines), table={"site": SITE, "missing": [77.7]})
    assert np.isnan(weather.temp_air.values[:, 0]).nonzero()[0].tolist() == [3]
    assert np.isfinite(weather.irradiation.values).all()


def test_all_faults_are_told_with_their_lines(tmp_path):
    lines = ["# invented", *daily()]
    lines[3] = lines[3].replace("30.0", "warm")
    lines[6] = lines[6].replace("2013-01-05", "2013-02-30")
    with pytest.raises(WeatherError) as caught:
        opened(written(tmp_path, lines), table={"site": SITE, "comment": "#"})
    assert "line 4, tmax [degC]: should be a number (got 'warm')" in str(caught.value)
    assert "line 7, date: is no date (got '2013-02-30')" in str(caught.value)


@pytest.mark.parametrize(
    ("change", "options", "error", "message"),
    [
        (lambda lines: [*lines, lines[3].replace("20.0", "21.0")], {}, WeatherError,
         r"line 12: a time comes twice with different values \(got site t at 2013-01-03 00:00, also in t\.csv, line 4"),
        (lambda lines: [lines[0].replace(" (MJ/m2/d)", ""), *lines[1:]], {}, UnitsError, "unit of sunshine is missing"),
        (lambda lines: [lines[0].replace("[degC]", "[W]"), *lines[1:]], {}, UnitsError, "of another kind"),
        (lambda lines: [lines[0].replace("date", "when"), *lines[1:]], {}, WeatherError, "no column holds the time"),
        (lambda lines: [line.replace("2013-01-", "Jan ") for line in lines], {}, WeatherError,
         r"dates are not ISO 8601.*table\.date_format"),
        (lambda lines: [lines[0].replace("wind_2m (m/s)", "irradiance_srad"), *lines[1:]],
         {"variables": {"irradiation": {"name": "sunny"}}}, WeatherError, "no table has this column.*got sunny"),
        (lambda lines: [lines[0].replace("wind_2m (m/s)", "srad (MJ/m2/d)").replace("irradiation", "rad"), *lines[1:]],
         {}, WeatherError, r"several columns could be irradiation.*variables\.irradiation\.name"),
        (lambda lines: [lines[0].replace("tmax", "tmin"), *lines[1:]], {}, WeatherError,
         "two columns have one heading"),
        (lambda lines: lines[:1], {}, WeatherError, "the table is empty"),
        (lambda lines: [lines[0].replace("irradiation (MJ/m2/d)", "x"), *lines[1:]], {}, WeatherError,
         r"no sunshine was recognised.*radiation_from_temperature"),
        (lambda lines: [line.replace("18.5", "1850") for line in lines], {}, WeatherError,
         r"t\.csv, time 2013-01-06T00:00, site t: irradiation cannot be true \(got 1\.85e\+06 MJ m-2; 1 such values"),
    ],
)  # fmt: skip
def test_tables_that_cannot_be_right_are_refused(tmp_path, change, options, error, message):
    path = written(tmp_path, change(daily()))
    with pytest.raises(error, match=message):
        opened(path, table={"site": SITE}, **options)


def test_what_is_put_right_is_counted_once(tmp_path):
    lines = daily()
    lines[2], lines[5] = lines[2].replace("18.1000", "-0.0100"), lines[5].replace("18.4000", "")
    weather = opened(written(tmp_path, lines), table={"site": SITE})
    assert weather.irradiation.values[[1, 4], 0].tolist() == pytest.approx([0.0, np.nan], nan_ok=True)
    for again in (weather, gate(weather)[0]):
        months = monthly_yield(again, Still("flat", (Panel(1.0, 0.0),)), method="rule")
        counted = json.loads(months.attrs["counts"])["irradiation"]
        assert {kind: counted[kind] for kind in ("clipped", "missing", "values")} == {
            "clipped": 1, "missing": 1, "values": 10}
        told = [line for line in months.attrs["conventions"] if "values of irradiation" in line]
        assert told == ["1 of 10 values of irradiation were slightly negative and set to 0.",
                        "1 of 10 values of irradiation are missing."]


def test_a_row_that_comes_twice_alike_counts_once(tmp_path):
    lines = daily()
    check(opened(written(tmp_path, [*lines, lines[5]]), table={"site": SITE}))


def test_binary_files_are_named(tmp_path):
    path = tmp_path / "t.csv"
    path.write_bytes(b"CDF\x01\x00\x00\x00\x00")
    with pytest.raises(WeatherError, match="no table of text"):
        opened(path)


# --- months ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("years", [None, (2003, 2004)])
def test_monthly_means_of_a_station(tmp_path, years):
    rows = [f"{'' if years is None else f'{year},'}{month},{18 + month / 10 + i - (years is not None) / 2},25,3"
            for i, year in enumerate(years or [0]) for month in range(1, 13)]
    heading = ("" if years is None else "year,") + "month,irradiation (MJ/m2/d),temp (C),wind_2m (m/s)"
    path = written(tmp_path, [heading, *rows])
    days = open_source("monthly-means", [str(path)], table={"site": SITE}).open()
    assert dict(days.sizes)["time"] == 365
    assert days.attrs["record"] == "typical-year"
    means = days.irradiation.groupby("time.month").mean("time").values[:, 0]
    np.testing.assert_allclose(means, 18 + np.arange(1, 13) / 10, rtol=1e-9)
    assert any("Column 'temp (C)' is read as temp_air" in line for line in days.attrs["conventions"])
    told = '{"name": "temp (C)", "quantity": "temp_air", "units": "C", "how": "its heading"}'
    assert told in days.attrs["recognised"]
