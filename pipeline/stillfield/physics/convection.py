"""Heat and vapour carried from the water to the cover by the moist air between them.

Both relations have one form, so that one kernel serves both:

    X = ΔT + ΔP (T_w + 273.15) / (2.654 p - P_w)         buoyancy of warm, moist air   [K]
    h = k_h X^(1/3)                                       convection                    [W m-2 K-1]
    q_c = h ΔT,   q_e = k_e F h ΔP                        heat, heat with the vapour    [W m-2]

`dunkle` has constant k_h and k_e and F = 1. `moist-air` takes k_h and k_e from the properties of saturated
air at the mean temperature and F from the flow of vapour away from the water (Stefan flow).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.moist_air import (
    GAS_CONSTANT,
    MOLAR_MASS_WATER,
    STANDARD_PRESSURE_PA,
    saturated_moist_air,
)
from stillfield.physics.still import HeatTransfer
from stillfield.physics.vapour import KELVIN, Field, latent_heat, saturation_pressure

#: Dunkle's k_h [W m-2 K-4/3] and k_e [K Pa-1] at standard pressure.
DUNKLE_CONVECTION = 0.884
DUNKLE_EVAPORATION = 0.016273
#: Dunkle's 268 900 Pa over standard pressure: p M_a / (M_a - M_w). [1]
BUOYANCY_PRESSURE_RATIO = 268900.0 / STANDARD_PRESSURE_PA
#: Turbulent convection over a warm plate: Nu = 0.075 Ra^(1/3), the law behind Dunkle's k_h. [1]
NUSSELT_FACTOR = 0.075
GRAVITY = 9.80665  # m s-2
#: Floor of the buoyancy X, so that h never falls under 0.2 W m-2 K-1: conduction through some 13 cm of still
#: air. [K]
BUOYANCY_FLOOR = (0.2 / DUNKLE_CONVECTION) ** 3
#: Mean temperatures over which the moist-air numbers are fitted; beyond it they are held. [degC]
MEAN_RANGE_C = (-10.0, 90.0)


@dataclass(frozen=True)
class Transfer:
    """Numbers of a relation at one pressure.

    Attributes
    ----------
    convection : tuple of 4 floats
        k_h as a cubic of the mean temperature in degC, lowest power first. [W m-2 K-4/3]
    evaporation : tuple of 4 floats
        k_e likewise. [K Pa-1]
    stefan : bool
        Whether the vapour flow factor F is applied.
    """

    convection: tuple[float, float, float, float]
    evaporation: tuple[float, float, float, float]
    stefan: bool


def transfer(relation: HeatTransfer, pressure: float = STANDARD_PRESSURE_PA) -> Transfer:
    """Numbers of a relation between water and cover at a pressure.

    With pressure, k_h goes as p^(2/3) and k_e as 1/p (density in the Rayleigh number and in the analogy).

    Sources: 'dunkle': Dunkle 1961, Int. Developments in Heat Transfer V:895. 'moist-air': Chilton-Colburn
    analogy (Chilton & Colburn 1934, Ind. Eng. Chem. 26:1183) with mixture properties as proposed by
    Tsilingiris 2009, Desalination 249:1017.

    Parameters
    ----------
    relation : {'dunkle', 'moist-air'}
        Which relation.
    pressure : float
        Air pressure. [Pa]

    Returns
    -------
    Transfer

    Examples
    --------
    >>> transfer("dunkle").convection[0]
    0.884
    >>> round(transfer("moist-air").convection[0], 2)
    0.95
    """
    ratio = pressure / STANDARD_PRESSURE_PA
    if relation == "dunkle":
        h, e = DUNKLE_CONVECTION * ratio ** (2.0 / 3.0), DUNKLE_EVAPORATION / ratio
        return Transfer((h, 0.0, 0.0, 0.0), (e, 0.0, 0.0, 0.0), stefan=False)
    nodes = 40.0 + 50.0 * np.cos(np.linspace(0.0, np.pi, 201))
    convection, evaporation = moist_air_numbers(nodes, pressure)
    return Transfer(_cubic(nodes, convection), _cubic(nodes, evaporation), stefan=True)


def _cubic(nodes: NDArray[Any], values: NDArray[Any]) -> tuple[float, float, float, float]:
    """Relative least-squares cubic through `values`."""
    fit = np.polynomial.Polynomial.fit(nodes, values, 3, w=1.0 / values).convert().coef
    return float(fit[0]), float(fit[1]), float(fit[2]), float(fit[3])


def moist_air_numbers(mean_temperature: Field, pressure: float) -> tuple[NDArray[Any], NDArray[Any]]:
    """Exact k_h and k_e of the 'moist-air' relation, which `transfer` follows with a cubic.

    k_h = 0.075 k (g / (T ν a))^(1/3);  k_e = L / (R_v T ρ c_p Le^(2/3)),  Le = a / D.

    Parameters
    ----------
    mean_temperature : float or ndarray
        Mean of water and cover. [degC]
    pressure : float
        Air pressure. [Pa]

    Returns
    -------
    tuple of ndarray
        k_h [W m-2 K-4/3] and k_e [K Pa-1].

    Examples
    --------
    >>> [round(float(number), 4) for number in moist_air_numbers(50.0, 101325.0)]
    [0.843, 0.0163]
    """
    air = saturated_moist_air(mean_temperature, pressure)
    kelvin = np.asarray(mean_temperature) + KELVIN
    kinematic = air.viscosity / air.density
    lewis = air.thermal_diffusivity / air.diffusivity
    convection = NUSSELT_FACTOR * air.conductivity * np.cbrt(
        GRAVITY / (kelvin * kinematic * air.thermal_diffusivity)
    )
    vapour_gas = GAS_CONSTANT / MOLAR_MASS_WATER * kelvin
    evaporation = latent_heat(mean_temperature) / (
        vapour_gas * air.density * air.heat_capacity * np.cbrt(lewis) ** 2
    )
    return convection, np.asarray(evaporation)


@dataclass(frozen=True)
class Exchange:
    """What passes from water to cover by the air between them.

    Attributes
    ----------
    coefficient : ndarray
        h of the convection. [W m-2 K-1]
    convected, evaporated : ndarray
        Heat carried as such and with the vapour. [W m-2]
    """

    coefficient: NDArray[Any]
    convected: NDArray[Any]
    evaporated: NDArray[Any]


def exchange(
    temp_water: Field,
    temp_cover: Field,
    relation: HeatTransfer = "dunkle",
    *,
    activity: Field = 1.0,
    pressure: float = STANDARD_PRESSURE_PA,
) -> Exchange:
    """Heat and vapour from water to cover: the plain form, against which the fast kernel is tested.

    Dunkle's relation is known to over-predict when hot (Shawaqfeh & Farid 1995, Solar Energy 55:527). No
    evaporation where the vapour pressure of the brine is not above that at the cover.

    Parameters
    ----------
    temp_water, temp_cover : float or ndarray
        [degC]
    relation : {'dunkle', 'moist-air'}
        Which relation.
    activity : float or ndarray
        Water activity of the brine. [1]
    pressure : float
        Air pressure. [Pa]

    Returns
    -------
    Exchange
        Broadcast of the temperatures.

    Examples
    --------
    >>> round(float(exchange(60.0, 50.0).evaporated), 0)
    297.0
    """
    water, cover = np.asarray(temp_water), np.asarray(temp_cover)
    over_water = np.asarray(activity) * saturation_pressure(water)
    over_cover = np.asarray(saturation_pressure(cover))
    difference = over_water - over_cover
    buoyancy = water - cover + difference * (water + KELVIN) / (
        BUOYANCY_PRESSURE_RATIO * pressure - over_water
    )
    numbers = transfer(relation, pressure)
    mean = np.clip(0.5 * (water + cover), *MEAN_RANGE_C)
    k_h = np.polynomial.polynomial.polyval(mean, np.asarray(numbers.convection))
    k_e = np.polynomial.polynomial.polyval(mean, np.asarray(numbers.evaporation))
    if numbers.stefan:
        k_e = k_e * pressure / log_mean(pressure - over_water, pressure - over_cover)
    h = k_h * np.cbrt(np.maximum(buoyancy, BUOYANCY_FLOOR))
    evaporated = k_e * h * np.maximum(difference, 0.0)
    return Exchange(h, np.asarray(h * (water - cover)), np.asarray(evaporated))


def log_mean(first: NDArray[Any], second: NDArray[Any]) -> NDArray[Any]:
    """Logarithmic mean of two positive numbers; their own value where they are equal.

    Parameters
    ----------
    first, second : ndarray
        Positive numbers.

    Returns
    -------
    ndarray

    Examples
    --------
    >>> round(float(log_mean(np.array(1.0), np.array(np.e))), 6)
    1.718282
    """
    ratio = first / second
    near = np.abs(ratio - 1.0) < 1e-6
    safe = np.where(near, 2.0, ratio)
    result: NDArray[Any] = np.where(near, 0.5 * (first + second), second * (safe - 1.0) / np.log(safe))
    return result
