"""Wind: brought to 2 m above ground, and what it takes off the cover."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError

Field = float | NDArray[np.floating[Any]]

#: Lowest height the log law of FAO-56 is used from; below it the logarithm soon turns negative. [m]
LOWEST_HEIGHT_M = 0.5
#: h_w = WIND_BASE + WIND_SLOPE v (Watmuff et al. 1977). [W m-2 K-1], [W s m-3 K-1]
WIND_BASE = 2.8
WIND_SLOPE = 3.0


def wind_speed_at_2m(speed: Field, height_m: float) -> Field:
    r"""Wind speed at 2 m from that at another height, by the log law over short grass.

    u2 = u_z · 4.87 / ln(67.8 z - 5.42).

    Source: FAO-56 (Allen et al. 1998), eq. 47; its Example 14 brings 3.2 m/s at 10 m to 2.4 m/s.

    Parameters
    ----------
    speed : float or ndarray
        Wind speed at `height_m`. [m s-1]
    height_m : float
        Height above ground at which `speed` was measured. [m]

    Returns
    -------
    float or ndarray, shape of `speed`
        [m s-1]

    Raises
    ------
    WeatherError
        Where `height_m` is below 0.5 m.

    Examples
    --------
    >>> round(float(wind_speed_at_2m(3.2, 10.0)), 1)
    2.4
    """
    if not height_m >= LOWEST_HEIGHT_M:
        raise WeatherError(
            "height of the wind measurement is too low for the log law",
            got=f"{height_m:g} m",
            wanted=f"at least {LOWEST_HEIGHT_M:g} m",
            cure="State the height of the anemometer above ground in metres.",
        )
    if height_m == 2.0:  # the rounded constants of the formula give 1.0002 here
        return speed
    factor = 4.87 / np.log(67.8 * height_m - 5.42)
    brought: Field = np.asarray(speed) * factor
    return brought


def wind_coefficient(speed: Field) -> Field:
    """Convective heat transfer coefficient of wind over the cover, without radiation.

    h_w = 2.8 + 3.0 v. The older 5.7 + 3.8 v already holds the radiation to the sky and must never be used
    with a sky term of its own, as the heat balance has.

    Source: Watmuff, Charters & Proctor 1977, COMPLES 2:56; valid to about 7 m/s, used above it too.

    Parameters
    ----------
    speed : float or ndarray
        Wind speed at the cover. [m s-1]

    Returns
    -------
    float or ndarray, shape of `speed`
        [W m-2 K-1]

    Examples
    --------
    >>> round(float(wind_coefficient(2.0)), 3)
    8.8
    """
    coefficient: Field = WIND_BASE + WIND_SLOPE * np.asarray(speed)
    return coefficient
