"""Vapour and brine against IAPWS values, FAO-56, salt tables and three independent libraries."""

from __future__ import annotations

import gsw
import numpy as np
import psychrolib
import pytest

from stillfield.errors import MethodError
from stillfield.physics import brine, vapour


@pytest.fixture(scope="module")
def coolprop():
    from CoolProp import CoolProp

    return CoolProp


# IAPWS saturation line, IAPWS-IF97 / SR1-86: 20 to 70 degC, Pa.
@pytest.mark.parametrize(
    ("celsius", "pascal"), [(20, 2339), (40, 7385), (55, 15763), (60, 19947), (70, 31202)]
)
def test_saturation_pressure_is_that_of_the_iapws_tables(celsius, pascal):
    assert vapour.saturation_pressure(celsius) == pytest.approx(pascal, rel=2e-4)
    assert vapour.saturation_pressure_fast(celsius) == pytest.approx(pascal, rel=2e-4)


# FAO-56: Annex 2 Table 2.3 (quoted from memory), and Examples 3 (15, 24.5), 4 (19.5) and 5 (18, 25). kPa.
@pytest.mark.parametrize(
    ("celsius", "kilopascal"),
    [(1.0, 0.657), (10.0, 1.228), (15.0, 1.705), (18.0, 2.064), (19.5, 2.267), (20.0, 2.338), (24.5, 3.075),
     (25.0, 3.168), (30.0, 4.243), (40.0, 7.376)],
)
def test_fao56_form_prints_its_table(celsius, kilopascal):
    assert vapour.saturation_pressure_fao56(celsius) / 1000.0 == pytest.approx(kilopascal, abs=0.001)


def test_saturation_pressure_against_coolprop(coolprop):
    celsius = np.linspace(0.5, 99.0, 60)
    expected = coolprop.PropsSI("P", "T", celsius + 273.15, "Q", 0, "Water")
    np.testing.assert_allclose(vapour.saturation_pressure(celsius), expected, rtol=8e-5)
    np.testing.assert_allclose(vapour.saturation_pressure_fast(celsius), expected, rtol=9e-5)


def test_saturation_pressure_against_psychrolib():
    psychrolib.SetUnitSystem(psychrolib.SI)
    for celsius in np.linspace(1.0, 90.0, 40):
        assert vapour.saturation_pressure(celsius) == pytest.approx(
            psychrolib.GetSatVapPres(float(celsius)), rel=4e-4
        )


def test_fast_form_follows_the_reference():
    celsius = np.linspace(*vapour.ROOT_RANGE_C, 5001)
    ratio = vapour.saturation_pressure_fast(celsius) / vapour.saturation_pressure(celsius)
    assert np.abs(ratio - 1.0).max() < 7e-6


def test_root_polynomial_is_the_least_squares_one():
    low, high = vapour.ROOT_RANGE_C
    celsius = low + (high - low) * 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, 4001)))
    root = vapour.saturation_pressure(celsius) ** 0.125
    fit = np.polynomial.Polynomial.fit(celsius, root, 6, w=1.0 / root).convert()
    stored = np.polynomial.Polynomial(vapour.ROOT_POLYNOMIAL)
    np.testing.assert_allclose(stored(celsius), fit(celsius), rtol=1e-8)


def test_fast_form_holds_its_ends():
    assert vapour.saturation_pressure_fast(-60.0) == vapour.saturation_pressure_fast(-40.0)
    assert vapour.saturation_pressure_fast(150.0) == vapour.saturation_pressure_fast(105.0)


def test_latent_heat_against_coolprop(coolprop):
    celsius = np.linspace(1.0, 90.0, 30)
    steam, water = (coolprop.PropsSI("H", "T", celsius + 273.15, "Q", q, "Water") for q in (1, 0))
    error = np.abs(vapour.latent_heat(celsius) - (steam - water))
    assert error[celsius <= 60.0].max() < 1700.0
    assert error.max() < 6100.0


def test_latent_heat_against_gsw():
    celsius = np.linspace(1.0, 40.0, 20)
    np.testing.assert_allclose(vapour.latent_heat(celsius), gsw.latentheat_evap_t(0.0, celsius), rtol=2e-3)


def test_reciprocal_of_the_latent_heat():
    celsius = np.linspace(-20.0, 100.0, 500)
    reciprocal = np.polynomial.polynomial.polyval(celsius, np.asarray(vapour.LATENT_RECIPROCAL))
    np.testing.assert_allclose(reciprocal * vapour.latent_heat(celsius), 1.0, rtol=3e-6)


def test_dew_point_against_psychrolib():
    psychrolib.SetUnitSystem(psychrolib.SI)
    for celsius in (5.0, 20.0, 35.0, 45.0):
        for humidity in (10.0, 40.0, 80.0, 100.0):
            expected = psychrolib.GetTDewPointFromRelHum(celsius, humidity / 100.0)
            # psychrolib changes to ice below 0 degC, FAO-56 does not: 0.1 of the depth below freezing.
            tolerance = 0.1 + 0.12 * max(-expected, 0.0)
            assert vapour.dew_point(celsius, humidity) == pytest.approx(expected, abs=tolerance)


# FAO-56 Example 4 gives an actual vapour pressure of 1.91 kPa; Example 5: e_a = 1.70 kPa from the mean of
# e°(18) x 82 % and e°(25) x 54 %.
def test_actual_vapour_pressure_of_example_5():
    parts = [vapour.saturation_pressure_fao56(vapour.dew_point(t, rh)) for t, rh in ((18.0, 82.0), (25.0, 54.0))]
    assert np.mean(parts) / 1000.0 == pytest.approx(1.70, abs=0.005)


@pytest.mark.parametrize(("salinity", "tolerance"), [(5, 5e-4), (35, 6e-4), (70, 3e-3), (120, 7e-3)])
def test_water_activity_against_gsw(salinity, tolerance):
    for celsius in (10.0, 25.0, 40.0, 60.0):
        potential = gsw.chem_potential_water_t_exact
        difference = (potential(salinity, celsius, 0) - potential(0.0, celsius, 0)) * 1000.0
        expected = np.exp(difference / (brine.GAS_CONSTANT_VAPOUR * (celsius + 273.15)))
        assert brine.water_activity(salinity) == pytest.approx(expected, rel=tolerance)


# Osmotic coefficients of sodium chloride at 25 degC: Robinson & Stokes, Electrolyte Solutions, Appendix 8.10,
# quoted from memory: 0.9355 at 1 mol/kg, 0.9833 at 2, 1.1158 at 4.
@pytest.mark.parametrize(("molality", "osmotic"), [(1.0, 0.9355), (2.0, 0.9833), (4.0, 1.1158)])
def test_water_activity_against_sodium_chloride(molality, osmotic):
    salt = molality * 58.44
    expected = np.exp(-2.0 * molality * osmotic * 0.018015)
    assert brine.water_activity(1000.0 * salt / (1000.0 + salt)) == pytest.approx(expected, rel=0.003)


@pytest.mark.parametrize(("salinity", "tolerance"), [(5, 0.05), (35, 0.03), (70, 0.3), (120, 0.8)])
def test_freezing_point_against_gsw(salinity, tolerance):
    assert brine.freezing_point(salinity) == pytest.approx(gsw.t_freezing(salinity, 0, 0), abs=tolerance)


# CRC Handbook, Concentrative properties of aqueous solutions: sodium chloride 10 % freezes at -6.56 degC,
# 20 % at -16.46 degC (quoted from memory).
@pytest.mark.parametrize(("salinity", "celsius"), [(100.0, -6.56), (200.0, -16.46)])
def test_freezing_point_of_sodium_chloride(salinity, celsius):
    assert brine.freezing_point(salinity) == pytest.approx(celsius, abs=0.5)


def test_density_and_heat_capacity_against_gsw():
    celsius, salinity = np.meshgrid(np.linspace(5.0, 60.0, 8), np.linspace(0.0, 100.0, 6))
    np.testing.assert_allclose(
        brine.density(celsius, salinity), gsw.rho_t_exact(salinity, celsius, 0), rtol=4e-3
    )
    np.testing.assert_allclose(
        brine.heat_capacity(celsius, salinity), gsw.cp_t_exact(salinity, celsius, 0), rtol=4e-3
    )


@pytest.mark.parametrize("salinity", [-1.0, 201.0, np.nan])
def test_salinity_out_of_range_is_refused(salinity):
    with pytest.raises(MethodError, match="0 to 200 g kg-1"):
        brine.water_activity(salinity)
