"""Radiative temperature of the sky, which the cover sees."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.vapour import KELVIN, Field

#: Clearness of a day whose sky is taken as cloudless: the upper end of the daily clearness of clear dry
#: places (Duffie & Beckman, fig. 2.9.2, quoted from memory). [1]
CLOUDLESS_CLEARNESS = 0.75


def clear_sky_emissivity(temp_dew: Field, solar_hour: Field) -> Field:
    """Emissivity of the clear sky from dew point and hour of the day.

    ε0 = 0.711 + 0.0056 T_dp + 7.3e-5 T_dp² + 0.013 cos(2π t / 24), t counted from solar midnight.

    Source: Berdahl & Martin 1984, Solar Energy 32:663; fitted for dew points from -20 to 30 degC. Colder
    dew points are taken as -38 degC, where the parabola has its lowest point (0.604).

    Parameters
    ----------
    temp_dew : float or ndarray
        Dew point near the ground. [degC]
    solar_hour : float or ndarray
        Solar time. [h]

    Returns
    -------
    float or ndarray, broadcast of both
        At most 1. [1]

    Examples
    --------
    >>> round(float(clear_sky_emissivity(0.0, 6.0)), 3)
    0.711
    """
    dew = np.maximum(temp_dew, -0.0056 / (2.0 * 7.3e-5))
    daily = 0.013 * np.cos(np.pi / 12.0 * np.asarray(solar_hour))
    emissivity = 0.711 + 0.0056 * dew + 7.3e-5 * dew**2 + daily
    result: Field = np.minimum(emissivity, 1.0)
    return result


def cloudy_sky_emissivity(emissivity: Field, clear_sky_index: Field) -> Field:
    """Emissivity of a sky with clouds, from how much of the clear-sky irradiation came through.

    ε = (1 - s) + s ε0: the share of the sky that holds sunshine back radiates as a black body at the
    temperature of the air.

    Source: Crawford & Duchon 1999, J. Appl. Meteorol. 38:474 (cloud fraction term clf = 1 - s).

    Parameters
    ----------
    emissivity : float or ndarray
        Emissivity of the clear sky. [1]
    clear_sky_index : float or ndarray
        Irradiation over that under a clear sky, of the hour or, at night, of the day; held to 0 to 1. [1]

    Returns
    -------
    float or ndarray, broadcast of both
        [1]

    Examples
    --------
    >>> round(float(cloudy_sky_emissivity(0.75, 0.6)), 3)
    0.85
    """
    s = np.clip(clear_sky_index, 0.0, 1.0)
    cloudy: Field = (1.0 - s) + s * np.asarray(emissivity)
    return cloudy


def sky_temperature(temp_air: Field, emissivity: Field) -> Field:
    """Temperature of the black body that radiates as much as the sky: T_a ε^(1/4), never above the air.

    Parameters
    ----------
    temp_air : float or ndarray
        [degC]
    emissivity : float or ndarray
        Of the sky. [1]

    Returns
    -------
    float or ndarray, broadcast of both
        [degC]

    Examples
    --------
    >>> round(float(sky_temperature(25.0, 0.8)), 1)
    8.8
    """
    kelvin = np.asarray(temp_air) + KELVIN
    root = np.sqrt(np.sqrt(np.minimum(emissivity, 1.0)))
    sky: Field = np.minimum(kelvin * root - KELVIN, np.asarray(temp_air))
    return sky


def sky_temperature_berdahl_martin(temp_air: Field, temp_dew: Field, solar_hour: Field) -> Field:
    """Sky temperature under a clear sky from air temperature, dew point and hour.

    Source: Berdahl & Martin 1984, Solar Energy 32:663.

    Parameters
    ----------
    temp_air, temp_dew : float or ndarray
        Air temperature and dew point. [degC]
    solar_hour : float or ndarray
        Solar time. [h]

    Returns
    -------
    float or ndarray, broadcast
        [degC]

    Examples
    --------
    >>> round(float(sky_temperature_berdahl_martin(25.0, 10.0, 12.0)), 1)
    5.3
    """
    return sky_temperature(temp_air, clear_sky_emissivity(temp_dew, solar_hour))


def sky_temperature_swinbank(temp_air: Field) -> Field:
    """Sky temperature under a clear sky from air temperature alone: 0.0552 T_a^1.5, in kelvin.

    Source: Swinbank 1963, Q. J. R. Meteorol. Soc. 89:339. For weather without humidity. Never above the
    air, which the formula would be beyond 55 degC.

    Parameters
    ----------
    temp_air : float or ndarray
        [degC]

    Returns
    -------
    float or ndarray, shape of `temp_air`
        [degC]

    Examples
    --------
    >>> round(float(sky_temperature_swinbank(26.85)), 1)
    13.7
    """
    kelvin = np.asarray(temp_air) + KELVIN
    raw: NDArray[Any] = 0.0552 * kelvin * np.sqrt(kelvin) - KELVIN
    sky: Field = np.minimum(raw, np.asarray(temp_air))
    return sky
