"""Transfer between water, cover, air and sky against printed examples and CoolProp."""

from __future__ import annotations

import numpy as np
import pytest

from stillfield.errors import WeatherError
from stillfield.physics import balance_kernel, convection, sky, wind
from stillfield.physics.balance_numbers import cell_rows, numbers
from stillfield.physics.moist_air import saturated_moist_air
from stillfield.physics.still import Panel, Still
from stillfield.physics.vapour import latent_heat


def _book_pressure(celsius: float) -> float:
    """Vapour pressure by the cubic printed in the book; off by 5 % here, so for this test alone. [Pa]."""
    return 1e5 * (0.004516 + 7.178e-4 * celsius - 2.649e-6 * celsius**2 + 6.944e-7 * celsius**3)


# Kalogirou, Solar Energy Engineering, chapter 8, solar still example: water 55, glass 45 degC, h_c = 2.48.
def test_still_example_of_kalogirou():
    factor = convection.transfer("dunkle").evaporation[0]
    evaporated = factor * 2.48 * (_book_pressure(55.0) - _book_pressure(45.0))
    assert evaporated == pytest.approx(229.6, rel=3e-3)
    assert evaporated * 3600.0 / latent_heat(55.0) == pytest.approx(0.349, rel=4e-3)


# Dunkle 1961 by hand for water 60, cover 50 degC with the pressures of the steam tables, 19 947 and 12 352 Pa:
# X = 10 + 7595 · 333.15 / (268 900 - 19 947) = 20.164, h = 0.884 · 2.7218 = 2.406,
# q_c = 24.06, q_e = 0.016273 · 2.406 · 7595 = 297.4 W m-2.
def test_dunkle_by_hand():
    result = convection.exchange(60.0, 50.0)
    assert result.coefficient == pytest.approx(2.406, abs=0.001)
    assert result.convected == pytest.approx(24.06, abs=0.01)
    assert result.evaporated == pytest.approx(297.4, abs=0.2)


def test_no_evaporation_towards_a_warmer_or_damper_side():
    assert convection.exchange(40.0, 40.0).evaporated == 0.0
    assert convection.exchange(40.0, 45.0).evaporated == 0.0
    assert convection.exchange(40.0, 39.9, activity=0.98).evaporated == 0.0


# Still air of 0.0265 W m-1 K-1 over some 13 cm conducts 0.2 W m-2 K-1.
def test_convection_never_falls_under_conduction():
    assert convection.exchange(30.0, 60.0).coefficient == pytest.approx(0.2, rel=1e-6)


# The two relations rest on the same measurements of convection; by the analogy they must agree at the
# temperatures Dunkle's constants were worked out for (about 50 degC).
def test_moist_air_numbers_meet_those_of_dunkle():
    k_h, k_e = convection.moist_air_numbers(50.0, 101325.0)
    assert k_h == pytest.approx(convection.DUNKLE_CONVECTION, rel=0.06)
    assert k_e == pytest.approx(convection.DUNKLE_EVAPORATION, rel=0.02)


# Shawaqfeh & Farid 1995 and Tsilingiris 2007: Dunkle over-predicts when hot, about 10 % at most.
def test_moist_air_relation_lies_near_dunkle():
    for water in (30.0, 50.0, 70.0):
        old, new = (convection.exchange(water, water - 10.0, name).evaporated for name in ("dunkle", "moist-air"))
        assert new == pytest.approx(old, rel=0.25)


def test_cubics_follow_the_exact_numbers():
    mean = np.linspace(-5.0, 85.0, 50)
    for pressure in (75000.0, 101325.0):
        fit = convection.transfer("moist-air", pressure)
        k_h, k_e = convection.moist_air_numbers(mean, pressure)
        np.testing.assert_allclose(np.polynomial.polynomial.polyval(mean, np.asarray(fit.convection)), k_h, rtol=5e-3)
        np.testing.assert_allclose(np.polynomial.polynomial.polyval(mean, np.asarray(fit.evaporation)), k_e, rtol=1e-2)


def test_moist_air_properties_against_coolprop():
    from CoolProp import CoolProp

    for celsius in (10.0, 30.0, 50.0, 60.0):
        state = ("T", celsius + 273.15, "P", 101325, "R", 1)
        air = saturated_moist_air(celsius)
        assert air.density == pytest.approx(1.0 / CoolProp.HAPropsSI("Vha", *state), rel=2e-3)
        assert air.heat_capacity == pytest.approx(CoolProp.HAPropsSI("Cha", *state), rel=0.013)
        assert air.viscosity == pytest.approx(CoolProp.HAPropsSI("M", *state), rel=0.035)
        assert air.conductivity == pytest.approx(CoolProp.HAPropsSI("K", *state), rel=0.03)


# Diffusivity of water vapour in air at 25 degC and 1 atm: 0.250 cm2/s in the CRC Handbook (quoted from memory).
def test_diffusivity():
    assert saturated_moist_air(25.0).diffusivity == pytest.approx(2.50e-5, rel=0.02)


def test_log_mean_of_equal_and_unequal_numbers():
    result = convection.log_mean(np.array([3.0, 1.0]), np.array([3.0, 2.0]))
    np.testing.assert_allclose(result, [3.0, 1.0 / np.log(2.0)], rtol=1e-12)


# FAO-56 Example 14: 3.2 m/s at 10 m is 2.4 m/s at 2 m (factor 0.748 in Annex 2 Table 2.9).
def test_wind_brought_to_2m():
    assert wind.wind_speed_at_2m(3.2, 10.0) == pytest.approx(2.4, abs=0.05)
    assert wind.wind_speed_at_2m(1.0, 10.0) == pytest.approx(0.748, abs=0.0005)
    assert wind.wind_speed_at_2m(1.7, 2.0) == 1.7


def test_wind_height_below_the_log_law_is_refused():
    with pytest.raises(WeatherError, match="anemometer"):
        wind.wind_speed_at_2m(3.0, 0.05)


# Watmuff, Charters & Proctor 1977: h_w = 2.8 + 3.0 v.
@pytest.mark.parametrize(("speed", "coefficient"), [(0.0, 2.8), (2.0, 8.8), (5.0, 17.8)])
def test_wind_coefficient(speed, coefficient):
    assert wind.wind_coefficient(speed) == pytest.approx(coefficient)


# Swinbank 1963: 0.0552 T^1.5 at 300 K is 286.8 K.
def test_swinbank():
    assert sky.sky_temperature_swinbank(26.85) + 273.15 == pytest.approx(286.8, abs=0.05)


# Berdahl & Martin 1984 by hand, dew point 10 degC: 0.711 + 0.056 + 0.0073 ± 0.013 at midnight and noon.
@pytest.mark.parametrize(("hour", "emissivity"), [(0.0, 0.7873), (6.0, 0.7743), (12.0, 0.7613), (24.0, 0.7873)])
def test_berdahl_martin(hour, emissivity):
    assert sky.clear_sky_emissivity(10.0, hour) == pytest.approx(emissivity, abs=1e-9)
    expected = 298.15 * emissivity**0.25 - 273.15
    assert sky.sky_temperature_berdahl_martin(25.0, 10.0, hour) == pytest.approx(expected, abs=1e-9)


def test_sky_is_never_warmer_than_the_air():
    air, dew = np.meshgrid(np.linspace(-40.0, 60.0, 41), np.linspace(-60.0, 45.0, 41))
    assert (sky.sky_temperature_berdahl_martin(air, dew, 0.0) <= air).all()
    assert (sky.sky_temperature_swinbank(air) <= air).all()


# Crawford & Duchon 1999: overcast radiates as the air, a clear sky as without clouds.
def test_clouds():
    assert sky.cloudy_sky_emissivity(0.75, 0.0) == 1.0
    assert sky.cloudy_sky_emissivity(0.75, 1.3) == 0.75
    assert sky.sky_temperature(20.0, sky.cloudy_sky_emissivity(0.75, 0.0)) == pytest.approx(20.0)


@pytest.mark.parametrize("relation", ["dunkle", "moist-air"])
@pytest.mark.parametrize("pressure", [75000.0, 101325.0])
def test_kernel_follows_the_plain_form(relation, pressure):
    water, cover = (part.ravel() for part in np.meshgrid(np.linspace(1.0, 80.0, 25), np.linspace(-10.0, 75.0, 25)))
    activity = 0.95
    still = Still("plain", (Panel(1.0, 15.0),), heat_transfer=relation)
    cells = cell_rows(still, 1800.0, water.size, salinity=0.0, pressure=np.asarray(pressure))
    cells[0] = activity
    flow = balance_kernel.flow(
        water, cover, np.zeros_like(water), balance_kernel.Cell(*cells), numbers(still, pressure, 1800.0)
    )
    plain = convection.exchange(water, cover, relation, activity=activity, pressure=pressure)
    np.testing.assert_allclose(flow.convected, plain.convected, rtol=5e-5, atol=1e-9)
    # two-point Gauss against the logarithm in the Stefan factor
    np.testing.assert_allclose(flow.evaporated, plain.evaporated, rtol=4e-3, atol=0.02)


@pytest.mark.parametrize("at", [(60.0, 45.0), (30.0, 20.0), (20.0, 28.0)])
def test_slopes_of_the_kernel_are_derivatives(at):
    still = Still("plain", (Panel(1.0, 15.0),))
    cell = balance_kernel.Cell(*cell_rows(still, 1800.0, 1, salinity=30.0, pressure=np.asarray(101325.0))[:, 0])
    k = numbers(still, 101325.0, 1800.0)
    step = 1e-4

    def total(water: float, cover: float) -> float:
        f = balance_kernel.flow(water, cover, 0.0, cell, k)
        return float(f.convected + f.evaporated + f.radiated)

    f = balance_kernel.flow(*at, 0.0, cell, k)
    slope_w = (total(at[0] + step, at[1]) - total(at[0] - step, at[1])) / (2.0 * step)
    slope_g = (total(at[0], at[1] + step) - total(at[0], at[1] - step)) / (2.0 * step)
    assert f.convected_w + f.evaporated_w + f.radiated_w == pytest.approx(slope_w, rel=2e-4)
    assert f.convected_g + f.evaporated_g + f.radiated_g == pytest.approx(slope_g, rel=2e-4)
