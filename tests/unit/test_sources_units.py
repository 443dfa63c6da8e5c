"""Spellings of units as real files write them."""

from __future__ import annotations

import pytest

from stillfield.errors import UnitsError
from stillfield.sources.units import EVERYDAY, EVERYDAY_KINDS, conversion, irradiation_kind

#: spelling, wanted unit, one value before and after. Factors: SI Brochure, 9th ed., tables 6 and 8, and the
#: definitions of degree Celsius and Fahrenheit; 1 knot = 1852 m per hour.
KNOWN = [
    *[(text, "degC", 25.0, 25.0) for text in ("degC", "deg C", "DEG C", "Deg C", "C", "°C", "Celsius", "celsius",
                                              "degree_C", "degrees_Celsius", "degrees C")],
    *[(text, "degC", 300.0, 26.85) for text in ("K", "degK", "Kelvin", "kelvin", "deg_K", "degrees K")],
    ("degF", "degC", 77.0, 25.0),
    *[(text, "W m-2", 500.0, 500.0) for text in ("W m-2", "W/m2", "W/M2", "W m**-2", "W/m^2", "W m^-2", "W.m-2",
                                                 "W m⁻²", "watt/m2", "W/m²", "w/m2", "W·m-2")],
    ("kW m-2", "W m-2", 0.5, 500.0),
    *[(text, "MJ m-2", 3.6e6, 3.6) for text in ("J m-2", "J m**-2", "J/m2", "J/M2", "J m^-2")],
    ("kJ m-2", "MJ m-2", 3600.0, 3.6),
    ("MJ m-2", "MJ m-2", 3.6, 3.6),
    ("MJ/M2", "MJ m-2", 3.6, 3.6),
    ("mJ m-2", "MJ m-2", 3.6e9, 3.6),
    *[(text, "MJ m-2", 1.0, 3.6) for text in ("kWh m-2", "kWh/m2", "kW-hr/m^2", "KWH/M2")],
    ("Wh m-2", "MJ m-2", 1000.0, 3.6),
    ("J cm-2", "MJ m-2", 360.0, 3.6),
    ("kWh m-2 day-1", "MJ m-2 day-1", 5.0, 18.0),
    ("kW-hr/m^2/day", "MJ m-2 day-1", 5.0, 18.0),
    ("MJ/m^2/day", "MJ m-2 day-1", 18.0, 18.0),
    *[(text, "m s-1", 5.0, 5.0) for text in ("m s-1", "m/s", "M/S", "m s**-1", "m s^-1", "meters/second", "m.s-1")],
    ("km/h", "m s-1", 18.0, 5.0),
    ("centimeter/s", "m s-1", 500.0, 5.0),
    ("knots", "m s-1", 1.0, 1852 / 3600),
    *[(text, "%", 60.0, 60.0) for text in ("%", "percent")],
    *[(text, "%", 0.6, 60.0) for text in ("1", "", "(0 - 1)", "fraction", "dimensionless", "unitless")],
]


@pytest.mark.parametrize(("spelling", "wanted", "before", "after"), KNOWN)
def test_a_spelling_is_understood(spelling, wanted, before, after):
    factor, offset = conversion(spelling, wanted)
    assert factor * before + offset == pytest.approx(after, rel=1e-12)


@pytest.mark.parametrize("spelling", [None, "", "  "])
def test_a_missing_unit_is_refused_with_the_choices(spelling):
    with pytest.raises(UnitsError, match=r"t in a\.nc: the unit is missing \(wanted 'degC', 'K' or 'degF'\)\. State"):
        conversion(spelling, "degC", where="t in a.nc")


@pytest.mark.parametrize("spelling", ["~", "0.01", "1e-3", "10 m s-1", "sunny", "mj m-2"])
def test_an_unknown_unit_is_refused_with_its_text(spelling):
    with pytest.raises(UnitsError, match=r"unit '.*' is not known \(wanted 'J m-2', 'kJ m-2'"):
        conversion(spelling, "MJ m-2")


@pytest.mark.parametrize(
    ("spelling", "wanted"),
    [("degrees", "degC"), ("W m-2", "MJ m-2"), ("J m-2", "W m-2"), ("kg m-2 s-1", "MJ m-2"), ("K", "m s-1"),
     ("m s-1", "%"), ("MJ m-2 day-1", "MJ m-2")],
)
def test_a_unit_of_another_kind_is_refused(spelling, wanted):
    with pytest.raises(UnitsError, match="is of another kind"):
        conversion(spelling, wanted)


def test_kinds_of_sunshine_units():
    assert {irradiation_kind(text) for text in ("W m-2", "W/m2", "kW m-2", "J m-2 s-1")} == {"power"}
    assert {irradiation_kind(text) for text in ("J m**-2", "MJ m-2", "kWh/m2", "J cm-2")} == {"energy"}
    assert {irradiation_kind(text) for text in ("MJ m-2 day-1", "kWh/m2/day", "kW-hr/m^2/day", "MJ/m2/d")} == {
        "energy-per-day"}


def test_a_unit_that_is_not_of_sunshine_is_refused():
    with pytest.raises(UnitsError, match="the unit of sunshine is missing"):
        irradiation_kind(None)
    with pytest.raises(UnitsError, match=r"x in a\.nc: 'K' is no unit of sunshine \(wanted 'W m-2' for a rate"):
        irradiation_kind("K", where="x in a.nc")


@pytest.mark.parametrize(("pair", "factor"), list(EVERYDAY.items()))
def test_everyday_conversions_are_those_of_the_registry(pair: tuple[str, str], factor: float) -> None:
    from cf_xarray.units import units as registry

    unit, wanted = pair
    quantity = registry.Quantity(1.0, unit).to("percent" if wanted == "%" else wanted)
    assert factor == pytest.approx(float(quantity.magnitude), rel=1e-14)


@pytest.mark.parametrize(("unit", "kind"), list(EVERYDAY_KINDS.items()))
def test_everyday_kinds_have_the_dimension_of_their_kind(unit: str, kind: str) -> None:
    from cf_xarray.units import units as registry

    like = {"power": "W m-2", "energy": "J m-2", "energy-per-day": "J m-2 day-1"}[kind]
    assert registry.Unit(unit).dimensionality == registry.Unit(like).dimensionality
