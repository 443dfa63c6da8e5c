"""Irradiation estimated from the daily range of air temperature, where no sunshine was measured."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.floating[Any]]

#: Coefficient of the relation far from the sea and on a coast (FAO-56, text to eq. 50). [K-0.5]
K_RS_INTERIOR, K_RS_COAST = 0.16, 0.19


def clear_sky_share(elevation: ArrayLike = 0.0) -> Array:
    """Share of the extraterrestrial irradiation that a clear sky lets through.

    Source: FAO-56, eq. 37.

    Parameters
    ----------
    elevation : array_like
        Above sea. [m]

    Returns
    -------
    ndarray
        [1]

    Examples
    --------
    >>> round(float(clear_sky_share(1000.0)), 2)
    0.77
    """
    return np.asarray(0.75 + 2e-5 * np.asarray(elevation, dtype=float))


def irradiation_from_temperature(
    temp_min: Array, temp_max: Array, outside: Array, *, k_rs: float, elevation: ArrayLike = 0.0
) -> Array:
    """Irradiation from the temperature range: k_rs times its root times the extraterrestrial irradiation.

    A clear sky bounds it from above. The relation is good for means of a week or a month; single days scatter
    widely, and islands and windy coasts fall outside it (FAO-56, chapter 3).

    Source: Hargreaves & Samani 1982, J. Irrig. Drain. Div. 108:225; FAO-56, eq. 50, limit by eq. 37.

    Parameters
    ----------
    temp_min, temp_max : ndarray, shape (day, cell)
        Lowest and highest air temperature of the day. [degC]
    outside : ndarray, shape (day, cell)
        Extraterrestrial irradiation. [MJ m-2]
    k_rs : float
        0.16 in the interior, 0.19 on coasts. [K-0.5]
    elevation : array_like, shape (cell,) or ()
        Above sea. [m]

    Returns
    -------
    ndarray, shape (day, cell)
        NaN where a temperature is, or where the lowest exceeds the highest. [MJ m-2]

    Examples
    --------
    FAO-56, Example 15: Lyon in July, 14.8 and 26.6 degC, 40.6 MJ m-2 above the atmosphere, gives 22.3.

    >>> round(float(irradiation_from_temperature(14.8, 26.6, 40.6, k_rs=0.16)), 1)
    22.3
    """
    span = np.asarray(temp_max) - np.asarray(temp_min)
    root = np.sqrt(np.where(span >= 0.0, span, np.nan))
    return np.asarray(np.minimum(k_rs * root, clear_sky_share(elevation)) * outside)
