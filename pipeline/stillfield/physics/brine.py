"""Brine in the basin: water activity, freezing point, density and heat capacity against salinity.

Salinity always means that of the brine in the basin (feed times concentration factor), not of the feed.
All relations hold for sea salt and are near enough for sodium chloride up to 200 g/kg.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import MethodError
from stillfield.physics.vapour import KELVIN, Field

#: Highest salinity the relations are used for; sodium chloride saturates at 264 g/kg. [g kg-1]
MAX_SALINITY_G_KG = 200.0
#: Temperature at which the heat capacity of the basin is taken: a still's daily swing lies around it. [degC]
REFERENCE_TEMP_C = 40.0
#: Heat of fusion of ice at 0 degC. [J kg-1] (IAPWS R10-06: 333.4 kJ/kg)
FUSION_HEAT_J_KG = 333.4e3
#: Specific gas constant of water vapour. [J kg-1 K-1]
GAS_CONSTANT_VAPOUR = 461.526


def checked_salinity(salinity: Field) -> NDArray[np.float64]:
    """Return `salinity` as an array, or refuse what the relations do not cover.

    Parameters
    ----------
    salinity : float or ndarray
        Salinity of the brine in the basin. [g kg-1]

    Returns
    -------
    ndarray
        [g kg-1]

    Raises
    ------
    MethodError
        Where it is not within 0 to `MAX_SALINITY_G_KG`.

    Examples
    --------
    >>> float(checked_salinity(35.0))
    35.0
    """
    values = np.asarray(salinity, dtype=np.float64)
    inside = (values >= 0.0) & (values <= MAX_SALINITY_G_KG)
    if not inside.all():
        raise MethodError(
            "salinity of the brine in the basin is outside the range of the brine properties",
            got=f"{values[~inside].flat[0]:g} g kg-1",
            wanted=f"0 to {MAX_SALINITY_G_KG:g} g kg-1",
            cure="Lower the feed salinity or the concentration factor (flush the basin more often).",
        )
    return values


def water_activity(salinity: Field) -> Field:
    """Vapour pressure over brine as a share of that over pure water.

    ln a_w = -4.5818e-4 S - 2.0443e-6 S².

    Valid for sea salt from 0 to 180 g/kg; against gsw within 0.1 % to 40 g/kg and 0.6 % to 120 g/kg,
    against sodium chloride (Robinson & Stokes) within 0.5 % at 200 g/kg. It does not depend on
    temperature (measured change 10 to 60 degC: 0.2 % at 120 g/kg).

    Source: Nayar, Sharqawy, Banchik & Lienhard 2016, Desalination 390:1, vapour pressure of seawater.

    Parameters
    ----------
    salinity : float or ndarray
        Salinity of the brine in the basin. [g kg-1]

    Returns
    -------
    float or ndarray, shape of `salinity`
        [1]

    Raises
    ------
    MethodError
        Outside 0 to 200 g/kg.

    Examples
    --------
    >>> round(float(water_activity(35.0)), 4)
    0.9816
    """
    s = checked_salinity(salinity)
    activity: Field = np.exp(-4.5818e-4 * s - 2.0443e-6 * s**2)
    return activity


def freezing_point(salinity: Field) -> Field:
    """Temperature at which ice forms in brine: where ice and brine have the same vapour pressure.

    ln a_w = (L_f / R_v)(1/T0 - 1/T), with the heat of fusion held constant; within 0.8 K of gsw to 120 g/kg
    and 0.5 K of sodium chloride at 200 g/kg.

    Source: the cryoscopic equation of physical chemistry, with `water_activity`.

    Parameters
    ----------
    salinity : float or ndarray
        Salinity of the brine in the basin. [g kg-1]

    Returns
    -------
    float or ndarray, shape of `salinity`
        [degC]

    Examples
    --------
    >>> round(float(freezing_point(35.0)), 1)
    -1.9
    """
    inverse = 1.0 / KELVIN - np.log(water_activity(salinity)) * GAS_CONSTANT_VAPOUR / FUSION_HEAT_J_KG
    point: Field = 1.0 / inverse - KELVIN
    return point


def density(temperature: Field, salinity: Field) -> Field:
    """Density of brine.

    Valid from 0 to 180 degC and 0 to 160 g/kg, 0.1 %; used to 200 g/kg.

    Source: Sharqawy, Lienhard & Zubair 2010, Desalination and Water Treatment 16:354, eq. 8.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]
    salinity : float or ndarray
        [g kg-1]

    Returns
    -------
    float or ndarray, broadcast of both
        [kg m-3]

    Examples
    --------
    >>> round(float(density(25.0, 35.0)), 1)
    1023.6
    """
    t, s = np.asarray(temperature), checked_salinity(salinity) / 1000.0
    pure = 9.999e2 + 2.034e-2 * t - 6.162e-3 * t**2 + 2.261e-5 * t**3 - 4.657e-8 * t**4
    salt = s * (8.020e2 - 2.001 * t + 1.677e-2 * t**2 - 3.060e-5 * t**3 - 1.613e-5 * t**2 * s)
    result: Field = pure + salt
    return result


def heat_capacity(temperature: Field, salinity: Field) -> Field:
    """Specific heat capacity of brine at constant pressure.

    Valid from 0 to 180 degC and 0 to 180 g/kg, 0.3 %; used to 200 g/kg.

    Source: Jamieson, Tudhope, Morris & Cartwright 1969, Desalination 7:23, as given by Sharqawy et al. 2010,
    eq. 9.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]
    salinity : float or ndarray
        [g kg-1]

    Returns
    -------
    float or ndarray, broadcast of both
        [J kg-1 K-1]

    Examples
    --------
    >>> round(float(heat_capacity(40.0, 35.0)))
    4006
    """
    kelvin, s = np.asarray(temperature) + KELVIN, checked_salinity(salinity)
    a = 5.328 - 9.76e-2 * s + 4.04e-4 * s**2
    b = -6.913e-3 + 7.351e-4 * s - 3.15e-6 * s**2
    c = 9.6e-6 - 1.927e-6 * s + 8.23e-9 * s**2
    d = 2.5e-9 + 1.666e-9 * s - 7.125e-12 * s**2
    result: Field = 1000.0 * (a + b * kelvin + c * kelvin**2 + d * kelvin**3)
    return result


def basin_heat_capacity(depth: float, salinity: Field, liner: float) -> Field:
    """Heat capacity of brine and liner per basin area, taken at 40 degC and held.

    Parameters
    ----------
    depth : float
        Depth of the brine. [m]
    salinity : float or ndarray
        Salinity of the brine in the basin. [g kg-1]
    liner : float
        Heat capacity of liner and basin that follows the water. [J m-2 K-1]

    Returns
    -------
    float or ndarray, shape of `salinity`
        [J m-2 K-1]

    Examples
    --------
    >>> round(float(basin_heat_capacity(0.02, 0.0, 8000.0)), -3)
    91000.0
    """
    volumetric = density(REFERENCE_TEMP_C, salinity) * heat_capacity(REFERENCE_TEMP_C, salinity)
    return volumetric * depth + liner
