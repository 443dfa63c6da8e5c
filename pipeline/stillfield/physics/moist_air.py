"""Moist air between water and cover: density, heat capacity, viscosity, conductivity and diffusivity.

The air in a still is saturated, so its state is its temperature and pressure alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.vapour import KELVIN, Field, saturation_pressure

STANDARD_PRESSURE_PA = 101325.0
MOLAR_MASS_AIR = 28.9647e-3  # kg mol-1
MOLAR_MASS_WATER = 18.0153e-3  # kg mol-1
GAS_CONSTANT = 8.314462618  # J mol-1 K-1


@dataclass(frozen=True)
class MoistAir:
    """Properties of saturated moist air.

    Attributes
    ----------
    density : ndarray
        [kg m-3]
    heat_capacity : ndarray
        At constant pressure, per mass of mixture. [J kg-1 K-1]
    viscosity : ndarray
        Dynamic. [Pa s]
    conductivity : ndarray
        [W m-1 K-1]
    diffusivity : ndarray
        Of water vapour in air. [m2 s-1]
    """

    density: NDArray[np.floating[Any]]
    heat_capacity: NDArray[np.floating[Any]]
    viscosity: NDArray[np.floating[Any]]
    conductivity: NDArray[np.floating[Any]]
    diffusivity: NDArray[np.floating[Any]]

    @property
    def thermal_diffusivity(self) -> NDArray[np.floating[Any]]:
        """Conductivity over density and heat capacity, in m2 s-1."""
        return self.conductivity / (self.density * self.heat_capacity)


def saturated_moist_air(temperature: Field, pressure: float = STANDARD_PRESSURE_PA) -> MoistAir:
    """Properties of air saturated with water vapour.

    Ideal-gas mixture; viscosity mixed after Wilke 1950 and conductivity after Mason & Saxena 1958. Valid
    from -10 to 90 degC; within 1 % of CoolProp's humid air in density and heat capacity to 60 degC and
    4 % in viscosity and conductivity.

    Sources: dry air by Sutherland's law (White, Viscous Fluid Flow, Table 1-2 and 1-3); steam at low
    pressure after Tsilingiris 2008, Energy Conv. Manage. 49:1098; diffusivity after Marrero & Mason 1972,
    J. Phys. Chem. Ref. Data 1:3, D = 1.87e-10 T^2.072 / p with p in atm. Coefficients quoted from memory and
    checked against CoolProp.

    Parameters
    ----------
    temperature : float or ndarray
        [degC]
    pressure : float
        Total pressure. [Pa]

    Returns
    -------
    MoistAir
        Every property in the shape of `temperature`.

    Examples
    --------
    >>> round(float(saturated_moist_air(50.0).density), 3)
    1.042
    """
    celsius = np.asarray(temperature, dtype=np.float64)
    kelvin = celsius + KELVIN
    vapour = np.asarray(saturation_pressure(celsius)) / pressure
    mass = (1.0 - vapour) * MOLAR_MASS_AIR + vapour * MOLAR_MASS_WATER
    share = vapour * MOLAR_MASS_WATER / mass
    sutherland = (kelvin / 273.0) ** 1.5
    viscosity_air = 1.716e-5 * sutherland * 384.0 / (kelvin + 111.0)
    conductivity_air = 0.0241 * sutherland * 467.0 / (kelvin + 194.0)
    viscosity_steam = 8.058131868e-6 + 4.000549451e-8 * celsius
    conductivity_steam = 1.761758242e-2 + 5.558941059e-5 * celsius + 1.663336663e-7 * celsius**2
    to_air = _wilke(viscosity_air / viscosity_steam, MOLAR_MASS_AIR / MOLAR_MASS_WATER)
    to_steam = _wilke(viscosity_steam / viscosity_air, MOLAR_MASS_WATER / MOLAR_MASS_AIR)
    weight_air = (1.0 - vapour) / (1.0 - vapour + vapour * to_air)
    weight_steam = vapour / (vapour + (1.0 - vapour) * to_steam)
    return MoistAir(
        density=pressure * mass / (GAS_CONSTANT * kelvin),
        heat_capacity=(1.0 - share) * 1006.0 + share * 1875.0,
        viscosity=weight_air * viscosity_air + weight_steam * viscosity_steam,
        conductivity=weight_air * conductivity_air + weight_steam * conductivity_steam,
        diffusivity=1.87e-10 * kelvin**2.072 * STANDARD_PRESSURE_PA / pressure,
    )


def _wilke(viscosity_ratio: NDArray[Any], mass_ratio: float) -> NDArray[Any]:
    """Interaction factor of a gas pair (Wilke 1950, J. Chem. Phys. 18:517, eq. 14)."""
    above = (1.0 + np.sqrt(viscosity_ratio) * mass_ratio**-0.25) ** 2
    result: NDArray[Any] = above / np.sqrt(8.0 * (1.0 + mass_ratio))
    return result
