"""Water vapour over fresh water and brine: saturation pressure, humidity and latent heat.

`saturation_pressure` is the reference. `saturation_pressure_fast` is the form the heat balance uses: the
eighth root of the pressure is so smooth that a polynomial of degree 6 follows it to 7e-6, it needs no
exponential, and its slope comes almost for free.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

Field = float | NDArray[np.floating[Any]]

KELVIN = 273.15
#: Critical temperature [K] and pressure [Pa] of water (Wagner & Pruss 1993).
CRITICAL_TEMPERATURE_K = 647.096
CRITICAL_PRESSURE_PA = 22.064e6
#: Coefficients and exponents of Wagner & Pruss 1993, eq. 1.
WAGNER_PRUSS = (
    (-7.85951783, 1.0),
    (1.84408259, 1.5),
    (-11.7866497, 3.0),
    (22.6807411, 3.5),
    (-15.9618719, 4.0),
    (1.80122502, 7.5),
)

#: L = LATENT_BASE - LATENT_SLOPE T. [J kg-1], [J kg-1 K-1]
LATENT_BASE = 2.501e6
LATENT_SLOPE = 2361.0
#: 1/L as a cubic of the temperature in degC, within 3e-6 from -20 to 100 degC. [kg J-1]
LATENT_RECIPROCAL = (3.99840527e-7, 3.77460902e-10, 3.53953807e-13, 3.93196756e-16)

#: Range in which `ROOT_POLYNOMIAL` was fitted; colder or hotter is held at the end. [degC]
ROOT_RANGE_C = (-40.0, 105.0)
#: Coefficients of P**(1/8) in Pa**(1/8) as a polynomial of the temperature in degC, lowest power first.
#: Least squares in relative terms against `saturation_pressure` on 4001 Chebyshev-spaced temperatures.
ROOT_POLYNOMIAL = (
    2.22984098677,
    2.02511608926e-2,
    8.73441080069e-6,
    -1.61750523873e-7,
    4.77308087925e-10,
    -2.20118235979e-13,
    -1.68464036793e-15,
)


def saturation_pressure(temperature: Field) -> Field:
    """Saturation pressure of water vapour over liquid water, reference form.

    ln(P/Pc) = (Tc/T)(a1 τ + a2 τ^1.5 + a3 τ^3 + a4 τ^3.5 + a5 τ^4 + a6 τ^7.5), τ = 1 - T/Tc.

    Valid from 0 to 374 degC; below 0 degC it continues smoothly over supercooled water, where it is used
    for covers colder than freezing.

    Source: Wagner & Pruss 1993, J. Phys. Chem. Ref. Data 22:783, eq. 1 (IAPWS SR1-86(1992)).

    Parameters
    ----------
    temperature : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray, shape of `temperature`
        [Pa]

    Examples
    --------
    >>> round(float(saturation_pressure(60.0)), -1)
    19950.0
    """
    kelvin = np.asarray(temperature) + KELVIN
    tau = 1.0 - kelvin / CRITICAL_TEMPERATURE_K
    series = sum(a * tau**power for a, power in WAGNER_PRUSS)
    pressure: Field = CRITICAL_PRESSURE_PA * np.exp(CRITICAL_TEMPERATURE_K / kelvin * series)
    return pressure


def saturation_pressure_fast(temperature: Field) -> Field:
    """Saturation pressure of water vapour in the form the heat balance uses: q(T)^8.

    Within 7e-6 (relative) of `saturation_pressure` from -40 to 105 degC, held constant outside.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray, shape of `temperature`
        [Pa]

    Examples
    --------
    >>> round(float(saturation_pressure_fast(60.0)), -1)
    19950.0
    """
    held = np.clip(temperature, *ROOT_RANGE_C)
    root = np.polynomial.polynomial.polyval(held, np.asarray(ROOT_POLYNOMIAL))
    pressure: Field = root**8
    return pressure


def saturation_pressure_fao56(temperature: Field) -> Field:
    """Saturation pressure of water vapour as agronomists and weather services compute it.

    Source: FAO Irrigation and Drainage Paper 56 (Allen et al. 1998), eq. 11; its Annex 2 Table 2.3 lists
    the values for 1 to 48.5 degC. It is used for humidity, where data were made with it; within 0.2 % of
    `saturation_pressure` from 0 to 50 degC.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray, shape of `temperature`
        [Pa]

    Examples
    --------
    >>> round(float(saturation_pressure_fao56(24.5)) / 1000.0, 3)
    3.075
    """
    celsius = np.asarray(temperature)
    pressure: Field = 610.8 * np.exp(17.27 * celsius / (celsius + 237.3))
    return pressure


def latent_heat(temperature: Field) -> Field:
    """Heat that evaporates a kilogram of water, L = 2501 - 2.361 T kJ/kg.

    Within 1.7 kJ/kg of CoolProp from 0 to 60 degC, within 6.1 kJ/kg (0.3 %) to 90 degC.

    Source: FAO-56, eq. 3-1 of its Annex 3 (after Harrison 1963), in kJ.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray, shape of `temperature`
        [J kg-1]

    Examples
    --------
    >>> round(float(latent_heat(20.0)) / 1e6, 2)
    2.45
    """
    heat: Field = LATENT_BASE - LATENT_SLOPE * np.asarray(temperature)
    return heat


def dew_point(temperature: Field, relative_humidity: Field) -> Field:
    """Dew point of moist air, by inverting FAO-56 eq. 11 at the actual vapour pressure.

    Source: FAO-56, eq. 11 and 54 (actual vapour pressure from relative humidity). Humidity below 1 % is
    taken as 1 %, above 100 % as 100 %.

    Parameters
    ----------
    temperature : float or ndarray
        Air temperature. [degC]
    relative_humidity : float or ndarray
        [%]

    Returns
    -------
    float or ndarray, broadcast of both
        [degC]

    Examples
    --------
    >>> round(float(dew_point(25.0, 50.0)), 1)
    13.9
    """
    share = np.clip(relative_humidity, 1.0, 100.0) / 100.0
    dew: Field = dew_point_at_pressure(share * saturation_pressure_fao56(temperature))
    return dew


def dew_point_at_pressure(vapour_pressure: Field) -> Field:
    """Dew point of air with a given vapour pressure, by inverting FAO-56 eq. 11.

    Source: FAO-56, eq. 11 (Annex 2, Table 2.3 is the same relation tabulated).

    Parameters
    ----------
    vapour_pressure : float or ndarray
        Above 0. [Pa]

    Returns
    -------
    float or ndarray, shape of `vapour_pressure`
        [degC]

    Examples
    --------
    FAO-56, Table 2.3: air saturated at 20 degC holds 2.338 kPa.

    >>> round(float(dew_point_at_pressure(2338.0)), 2)
    20.0
    """
    exponent = np.log(np.asarray(vapour_pressure) / 610.8)
    dew: Field = 237.3 * exponent / (17.27 - exponent)
    return dew


def vapour_pressure_of_specific_humidity(specific_humidity: Field, pressure: Field = 101325.0) -> Field:
    """Vapour pressure of air from its specific humidity: e = q p / (0.622 + 0.378 q).

    Source: definition of specific humidity with the ratio of molar masses 0.622 (WMO Guide to Instruments and
    Methods of Observation, WMO-No. 8, Annex 4.A, quoted from memory).

    Parameters
    ----------
    specific_humidity : float or ndarray
        Water vapour per moist air. [kg kg-1]
    pressure : float or ndarray
        Air pressure. [Pa]

    Returns
    -------
    float or ndarray, broadcast of both
        [Pa]

    Examples
    --------
    >>> round(float(vapour_pressure_of_specific_humidity(0.010)))
    1619
    """
    humidity = np.asarray(specific_humidity)
    pressure_of_vapour: Field = humidity * pressure / (0.622 + 0.378 * humidity)
    return pressure_of_vapour


def relative_humidity(temperature: Field, temp_dew: Field) -> Field:
    """Relative humidity from dew point: the inverse of `dew_point`, at most 100 %.

    Source: FAO-56, eq. 11 and 14.

    Parameters
    ----------
    temperature, temp_dew : float or ndarray
        Air temperature and dew point. [degC]

    Returns
    -------
    float or ndarray, broadcast of both
        [%]

    Examples
    --------
    >>> round(float(relative_humidity(25.0, dew_point(25.0, 50.0))), 6)
    50.0
    """
    ratio = saturation_pressure_fao56(temp_dew) / saturation_pressure_fao56(temperature)
    humidity: Field = np.minimum(100.0 * ratio, 100.0)
    return humidity
