"""Splitting correlations against print and pvlib, and the daily gain against real typical years."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pvlib
import pytest

from stillfield.physics.gain import daily_transmitted_from_hours, gain_over_steps
from stillfield.physics.gain_table import GainTable
from stillfield.physics.irradiance import (
    daily_diffuse_fraction,
    hourly_diffuse_share,
    hourly_global_share,
    split_global,
)
from stillfield.physics.still import Panel, Still
from stillfield.physics.sun import sun_over_steps, sunset_hour_angle

STILLS = {
    "single-15": Still("single-15", (Panel(1.0, 15.0),)),
    "double-15": Still("double-15", (Panel(0.5, 15.0, 90.0), Panel(0.5, 15.0, 270.0))),
}
MONTH = np.repeat(np.arange(12), [31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
YEAR = np.arange(1, 366)


@pytest.mark.parametrize("day", [15, 172, 300])
def test_split_of_global_equals_pvlib(day):
    """`pvlib.irradiance.erbs` is the outside truth, at instants (steps without sunrise or sunset)."""
    sun = sun_over_steps([25.0], np.array([day]))
    sun = replace(sun, up=sun.cos_zenith, sunlit=(sun.up > 0.0) * 1.0)
    ghi = np.linspace(0.0, 1.3, 24)[:, None] * sun.up * sun.normal_outside
    ghi = np.roll(ghi, 5, axis=0) * (sun.up > 0.0)
    dni, dhi = split_global(ghi, sun)
    there = pvlib.irradiance.erbs(ghi, np.degrees(np.arccos(sun.up)), day)
    # The two days of the year differ by 7/8 in the distance series: 3e-4 of the clearness.
    np.testing.assert_allclose(dhi, there["dhi"], rtol=2e-3, atol=0.1)
    np.testing.assert_allclose(dni, there["dni"], rtol=5e-3, atol=0.5)


def test_duffie_beckman_example_2_13_1():
    """Melbourne in January (dec -20.9 deg), 8 to 9 h: r_t = 0.076 (quoted from memory)."""
    sunset = sunset_hour_angle(-38.0, np.radians(-20.9))
    assert np.degrees(sunset) == pytest.approx(107.4, abs=0.1)
    assert hourly_global_share(np.radians(-52.5), sunset) == pytest.approx(0.076, abs=5e-4)


def test_duffie_beckman_example_2_13_2():
    """Madison, 23 August (dec 11 deg), 13 to 14 h: 3.7 of 31.4 MJ m-2 (quoted from memory)."""
    sunset = sunset_hour_angle(43.0, np.radians(11.0))
    assert 31.4 * hourly_global_share(np.radians(22.5), sunset) == pytest.approx(3.7, abs=0.05)


@pytest.mark.parametrize("hours", [8.0, 10.0, 12.0, 14.0, 16.0])
def test_hourly_shares_make_a_day(hours):
    """Liu & Jordan integrate to 1 exactly, Collares-Pereira & Rabl to the accuracy of their fit."""
    sunset = hours * np.pi / 24.0
    middle = (np.arange(4000) + 0.5) / 4000 * 2.0 * sunset - sunset
    assert hourly_diffuse_share(middle, sunset).mean() * hours == pytest.approx(1.0, abs=1e-6)
    assert hourly_global_share(middle, sunset).mean() * hours == pytest.approx(1.0, abs=0.01)


def test_daily_diffuse_fraction_has_the_printed_ends():
    """Duffie & Beckman eq. 2.11.1: 1 under a closed sky; 0.143 and 0.175 under the clearest."""
    winter, summer = np.radians(80.0), np.radians(95.0)
    assert daily_diffuse_fraction(0.0, winter) == 1.0
    assert daily_diffuse_fraction(0.75, winter) == 0.143
    assert daily_diffuse_fraction(0.75, summer) == 0.175
    for sunset, edge in ((winter, 0.715), (summer, 0.722)):  # the printed pieces meet within 0.02
        below, above = daily_diffuse_fraction([edge - 1e-9, edge + 1e-9], sunset)
        assert abs(below - above) < 0.02


@cache
def typical_year(file: str):
    """Return latitude, clock_to_solar_hours and hourly (ghi, dni, dhi) of a year shipped with pvlib."""
    path = pvlib.__path__[0] + "/data/" + file
    if file.endswith("tm2"):
        year, site = pvlib.iotools.read_tmy2(path)
        names = ("GHI", "DNI", "DHI")
    else:
        year, site = pvlib.iotools.read_tmy3(path, map_variables=True)
        names = ("ghi", "dni", "dhi")
    columns = tuple(year[name].to_numpy(dtype=float)[:, None] for name in names)
    return site["latitude"], site["longitude"] / 15.0 - site["TZ"], columns


@pytest.mark.parametrize("still", STILLS.values(), ids=STILLS.keys())
@pytest.mark.parametrize(
    ("file", "monthly", "annual"),
    [
        ("12839.tm2", 0.01, 0.01),  # 25.8 N, rms of months and error of the year
        ("723170TYA.CSV", 0.01, 0.01),  # 36.1 N
        ("703165TY.csv", 0.03, 0.02),  # 55.3 N, where winter days are two hours of low sun
    ],
)
def test_daily_gain_against_the_hours_of_typical_years(still, file, monthly, annual):
    """S from daily irradiation alone against S from the file's hourly beam and diffuse."""
    latitude, shift, (ghi, dni, dhi) = typical_year(file)
    hourly = gain_over_steps(still, [latitude], YEAR, ghi=ghi, dni=dni, dhi=dhi, clock_to_solar_hours=shift)
    truth = daily_transmitted_from_hours(hourly.transmitted)[:, 0]
    irradiation = daily_transmitted_from_hours(ghi)
    made = GainTable(still).for_latitudes([latitude]).transmitted(irradiation, YEAR)[:, 0]
    ratio = np.bincount(MONTH, made) / np.bincount(MONTH, truth)
    assert np.sqrt(np.mean((ratio - 1.0) ** 2)) < monthly
    assert abs(made.sum() / truth.sum() - 1.0) < annual


@pytest.mark.parametrize("file", ["12839.tm2", "723170TYA.CSV"])
def test_split_hours_against_the_components_of_typical_years(file):
    """With only the hourly global, Erbs' split moves the monthly S of a single slope by 1 % rms at most."""
    latitude, shift, (ghi, dni, dhi) = typical_year(file)
    still = STILLS["single-15"]
    given = gain_over_steps(still, [latitude], YEAR, ghi=ghi, dni=dni, dhi=dhi, clock_to_solar_hours=shift)
    made = gain_over_steps(still, [latitude], YEAR, ghi=ghi, clock_to_solar_hours=shift)
    sums = [
        np.bincount(MONTH, daily_transmitted_from_hours(g.transmitted)[:, 0]) for g in (made, given)
    ]
    assert np.sqrt(np.mean((sums[0] / sums[1] - 1.0) ** 2)) < 0.01
