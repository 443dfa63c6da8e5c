"""Published regressions of daily still yield, as records with their range: for comparison only.

Each fit belongs to the stills and the climate it was measured on. Outside its range a result is flagged,
never silently clipped.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]

WH_PER_MJ = 1e6 / 3600.0


@dataclass(frozen=True)
class LinearDailyFit:
    """Daily yield linear in irradiation, air temperature, wind and cover tilt.

    M = intercept + per_wh·H + per_degc·T + per_m_s·V + per_deg·φ, in kg m-2 of basin and day.

    Attributes
    ----------
    name : str
        Name of the method that offers the fit.
    intercept : float
        [kg m-2]
    per_wh : float
        Per daily global irradiation in W h m-2. [kg m-2 per W h m-2]
    per_degc : float
        Per mean air temperature. [kg m-2 per degC]
    per_m_s : float
        Per wind speed. [kg m-2 per m s-1]
    per_deg : float
        Per cover tilt. [kg m-2 per deg]
    irradiation_range, temp_air_range, wind_speed_range, tilt_range : tuple of float
        Range the fit is trusted in. [MJ m-2], [degC], [m s-1], [deg]
    citation, locator, transcribed : str
        Where it was printed, where in it, and how the numbers came here.
    """

    name: str
    intercept: float
    per_wh: float
    per_degc: float
    per_m_s: float
    per_deg: float
    irradiation_range: tuple[float, float]
    temp_air_range: tuple[float, float]
    wind_speed_range: tuple[float, float]
    tilt_range: tuple[float, float]
    citation: str
    locator: str
    transcribed: str

    def litres(self, irradiation: Array, temp_air: Array, wind_speed: Array, tilt_deg: float) -> Array:
        """Daily yield by the printed line; negative where the line goes below zero.

        Parameters
        ----------
        irradiation : ndarray
            Daily global horizontal irradiation. [MJ m-2]
        temp_air : ndarray
            Daily mean air temperature. [degC]
        wind_speed : ndarray
            Daily mean wind speed. [m s-1]
        tilt_deg : float
            Cover tilt. [deg]

        Returns
        -------
        ndarray
            [L m-2]
        """
        return np.asarray(
            self.intercept
            + self.per_wh * WH_PER_MJ * irradiation
            + self.per_degc * temp_air
            + self.per_m_s * wind_speed
            + self.per_deg * tilt_deg
        )

    def outside(
        self, irradiation: Array, temp_air: Array, wind_speed: Array, tilt_deg: float
    ) -> NDArray[np.bool_]:
        """Tell which days lie outside the range of the fit; arguments as in `litres`."""
        flags = np.zeros(np.shape(irradiation), dtype=bool)
        for values, (low, high) in (
            (irradiation, self.irradiation_range),
            (temp_air, self.temp_air_range),
            (wind_speed, self.wind_speed_range),
            (np.asarray(tilt_deg), self.tilt_range),
        ):
            flags |= (values < low) | (values > high)
        return flags


NAFEY_2000 = LinearDailyFit(
    name="nafey-2000",
    intercept=-1.39,
    per_wh=0.894e-3,
    per_degc=0.033,
    per_m_s=-0.017,
    per_deg=-0.017,
    irradiation_range=(10.0, 30.0),
    temp_air_range=(10.0, 40.0),
    wind_speed_range=(0.0, 8.0),
    tilt_range=(10.0, 50.0),
    citation="Nafey, Abdelkader, Abdelmotalip, Mabrouk (2000), Energy Conversion and Management 41:1797",
    locator="regression for 0.25 m2 single-slope stills on the Suez Gulf; the brine-depth term is left out",
    transcribed="coefficients quoted from memory; range estimated from the site's climate, not printed",
)
