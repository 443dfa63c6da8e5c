"""A small photovoltaic panel for what a modification draws, sized from the sunshine that also drives the still."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from stillfield.decisions.cost import Array, require

#: Share of the panel's nominal energy that arrives, dust, heat, wiring and storage included (common practice: 0.6 to
#: 0.8, no source). [1]
USUAL_SYSTEM_EFFICIENCY = 0.7


@dataclass(frozen=True)
class PanelSupply:
    """A small photovoltaic panel: price with its mounting and storage [money Wp-1], life [a], efficiency [1]."""

    price_per_wp: float
    life_years: float
    system_efficiency: float = USUAL_SYSTEM_EFFICIENCY

    def __post_init__(self) -> None:
        """Refuse impossible numbers."""
        require(self.price_per_wp >= 0.0, "price of the panel", self.price_per_wp, "0 or more")
        require(self.life_years > 0.0, "life of the panel", self.life_years, "above 0")
        require(0.0 < self.system_efficiency <= 1.0, "efficiency of the panel", self.system_efficiency, "above 0 to 1")


def peak_sun_hours(irradiation_mj_m2: ArrayLike) -> Array:
    """Hours at 1 kW m-2 that carry the energy of a day: irradiation / 3.6.

    Parameters
    ----------
    irradiation_mj_m2 : float or ndarray
        Irradiation of a day. [MJ m-2 d-1]

    Returns
    -------
    ndarray, shape of `irradiation_mj_m2`
        [h d-1]

    Examples
    --------
    >>> float(peak_sun_hours(18.0))
    5.0
    """
    return np.asarray(irradiation_mj_m2, np.float64) / 3.6


def panel_size(
    wh_day: ArrayLike, irradiation_mj_m2: ArrayLike, system_efficiency: float = USUAL_SYSTEM_EFFICIENCY
) -> Array:
    """Nominal power of a panel that meets a daily load in the month of least sun.

    Wp = Wh per day / (peak sun hours x efficiency); common practice, no source. The irradiation is horizontal: a panel
    tilted to the sizing month may be smaller.

    Parameters
    ----------
    wh_day : float or ndarray
        Load of a day. [W h d-1]
    irradiation_mj_m2 : ndarray, (12, ...) or (1, ...)
        Irradiation of the mean day of each month, or of the sizing month alone. [MJ m-2 d-1]
    system_efficiency : float
        Share of the nominal energy that arrives. [1]

    Returns
    -------
    ndarray, shape of a month
        Infinite in polar night, NaN where a month is not known. [Wp]

    Examples
    --------
    >>> float(panel_size(35.0, [10.8, 18.0, 25.2], 0.7).round(2))
    16.67
    """
    hours = peak_sun_hours(irradiation_mj_m2).min(axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        size: Array = np.asarray(wh_day, np.float64) / (hours * system_efficiency)
    return np.where(np.asarray(wh_day) == 0.0, 0.0, size)
