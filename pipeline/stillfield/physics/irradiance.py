"""Splitting sunshine: global into beam and diffuse, a day into its hours.

Files that give all three of ghi, dni and dhi are used as they are. What is missing is filled by the closure
ghi = dni cos(z) + dhi, and where only the global is known by the correlations of Erbs et al. 1982.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.sun import (
    SunSteps,
    declination,
    extraterrestrial_irradiation,
    sun_over_steps,
    sunset_hour_angle,
)

Array = NDArray[np.floating[Any]]

#: Below this cosine of the zenith angle (86.3 deg) clearness is measured against it, as pvlib does.
LEAST_COS_CLEARNESS = 0.065
#: Below this cosine of the zenith angle (87 deg) all light counts as diffuse, as pvlib has it.
LEAST_COS_BEAM = 0.0523

#: Sunset hour angle that parts the two seasons of the daily correlation: 81.4 deg. [rad]
_SEASON_SUNSET = np.radians(81.4)

# Hargreaves' coefficient between that of the interior (0.16) and of coasts (0.19), FAO-56 eq. 50. [K-0.5]
_RANGE_COEFFICIENT = 0.175
_RANGE_LIMITS_K = (2.0, 20.0)
_HOUR_OF_HIGHEST_TEMPERATURE = 15.0


@dataclass(frozen=True)
class StepWeather:
    """Weather of steps, made from days.

    Attributes
    ----------
    ghi, dni, dhi : ndarray, shape (day * steps_per_day, cell)
        Global horizontal, direct normal and diffuse horizontal irradiance. [W m-2]
    temp_air : ndarray, same shape
        [degC]
    wind_speed : ndarray, same shape
        [m s-1]
    """

    ghi: Array
    dni: Array
    dhi: Array
    temp_air: Array
    wind_speed: Array


def hourly_diffuse_fraction(clearness: ArrayLike) -> Array:
    """Diffuse share of the global irradiance of an hour.

    Parameters
    ----------
    clearness : array_like
        Global over extraterrestrial horizontal irradiance of the hour, k_t. [1]

    Returns
    -------
    ndarray, shape of `clearness`
        [1]

    References
    ----------
    Erbs, Klein & Duffie 1982, Solar Energy 28:293, eq. 1; Duffie & Beckman eq. 2.10.1.

    Examples
    --------
    >>> hourly_diffuse_fraction([0.1, 0.5, 0.9]).round(3)
    array([0.991, 0.659, 0.165])
    """
    k = np.asarray(clearness, dtype=float)
    middle = 0.9511 + k * (-0.1604 + k * (4.388 + k * (-16.638 + k * 12.336)))
    return np.where(k <= 0.22, 1.0 - 0.09 * k, np.where(k <= 0.8, middle, 0.165 + 0.0 * k))


def daily_diffuse_fraction(clearness: ArrayLike, sunset: ArrayLike) -> Array:
    """Diffuse share of the global irradiation of a day.

    Parameters
    ----------
    clearness : array_like
        Irradiation over extraterrestrial irradiation, k_T. [1]
    sunset : array_like
        Sunset hour angle, broadcast against `clearness`; 81.4 deg parts winter from the other seasons. [rad]

    Returns
    -------
    ndarray
        [1]

    References
    ----------
    Erbs, Klein & Duffie 1982, Solar Energy 28:293; Duffie & Beckman eq. 2.11.1.

    Examples
    --------
    >>> daily_diffuse_fraction([0.2, 0.5, 0.8], np.pi / 2).round(3)
    array([0.961, 0.608, 0.175])
    """
    k = np.asarray(clearness, dtype=float)
    short = 1.0 + k * (-0.2727 + k * (2.4495 + k * (-11.9514 + k * 9.3879)))
    long = 1.0 + k * (0.2832 + k * (-2.5557 + k * 0.8448))
    short = np.where(k < 0.715, short, 0.143 + 0.0 * k)
    long = np.where(k < 0.722, long, 0.175 + 0.0 * k)
    # The printed polynomial of the long days runs up to 1.008 below k_T = 0.11.
    return np.minimum(np.where(np.asarray(sunset) <= _SEASON_SUNSET, short, long), 1.0)


def global_over_diffuse_shape(hour_angle: ArrayLike, sunset: ArrayLike) -> Array:
    """Ratio r_t / r_d of the hourly shares of global and of diffuse irradiation, a + b cos(w).

    Parameters
    ----------
    hour_angle : array_like
        At the middle of the hour. [rad]
    sunset : array_like
        Sunset hour angle. [rad]

    Returns
    -------
    ndarray
        Before any normalisation. [1]

    References
    ----------
    Collares-Pereira & Rabl 1979, Solar Energy 22:155; Duffie & Beckman eq. 2.13.2.

    Examples
    --------
    >>> round(float(global_over_diffuse_shape(0.0, np.pi / 2)), 3)
    1.082
    """
    season = np.sin(np.asarray(sunset) - np.pi / 3.0)
    return np.asarray(0.409 + 0.5016 * season + (0.6609 - 0.4767 * season) * np.cos(hour_angle))


def hourly_diffuse_share(hour_angle: ArrayLike, sunset: ArrayLike) -> Array:
    """Share r_d of a day's diffuse irradiation that arrives in the hour around `hour_angle`.

    Parameters
    ----------
    hour_angle : array_like
        At the middle of the hour, between sunrise and sunset. [rad]
    sunset : array_like
        Sunset hour angle. [rad]

    Returns
    -------
    ndarray
        Its integral over the day is exactly 1 (the shape of extraterrestrial irradiance). [h-1]

    References
    ----------
    Liu & Jordan 1960, Solar Energy 4(3):1; Duffie & Beckman eq. 2.13.4.

    Examples
    --------
    >>> round(float(hourly_diffuse_share(0.0, np.pi / 2)), 3)
    0.131
    """
    below = np.cos(sunset)
    span = np.sin(sunset) - np.asarray(sunset) * below
    return np.asarray(np.pi / 24.0 * (np.cos(hour_angle) - below) / span)


def hourly_global_share(hour_angle: ArrayLike, sunset: ArrayLike) -> Array:
    """Share r_t of a day's global irradiation that arrives in the hour around `hour_angle`.

    Parameters
    ----------
    hour_angle : array_like
        At the middle of the hour, between sunrise and sunset. [rad]
    sunset : array_like
        Sunset hour angle. [rad]

    Returns
    -------
    ndarray
        Its integral over the day is within 1 % of 1 for days of 8 to 16 h. [h-1]

    References
    ----------
    Collares-Pereira & Rabl 1979, Solar Energy 22:155; Duffie & Beckman eq. 2.13.1.

    Examples
    --------
    Duffie & Beckman, Example 2.13.1 (quoted from memory): Melbourne in January, 8 to 9 h, 0.076.

    >>> sunset = sunset_hour_angle(-38.0, np.radians(-20.9))
    >>> round(float(hourly_global_share(np.radians(-52.5), sunset)), 3)
    0.076
    """
    return global_over_diffuse_shape(hour_angle, sunset) * hourly_diffuse_share(hour_angle, sunset)


def split_global(ghi: Array, sun: SunSteps) -> tuple[Array, Array]:
    """Direct normal and diffuse horizontal irradiance from the global one.

    In a step in which the sun rises or sets clearness is measured over the sunlit part.

    Parameters
    ----------
    ghi : ndarray, shape (time, cell)
        Global horizontal irradiance, mean of the step. [W m-2]
    sun : SunSteps
        The sun over the same steps.

    Returns
    -------
    dni, dhi : ndarray, shape (time, cell)
        With ghi = dni * sun.up + dhi exactly. [W m-2]

    References
    ----------
    Erbs et al. 1982 eq. 1; limits of zenith angle as in `pvlib.irradiance.erbs`.

    Examples
    --------
    >>> sun = sun_over_steps([0.0], [80])
    >>> dni, dhi = split_global(700.0 * sun.step_mean_cos_zenith, sun)
    >>> round(float(dhi[12, 0] / (700.0 * sun.up[12, 0])), 2)
    0.64
    """
    outside = sun.normal_outside * sun.sunlit * np.maximum(sun.up, LEAST_COS_CLEARNESS)
    clearness = np.clip(ghi / np.maximum(outside, 1e-6), 0.0, 1.0)
    beam = ghi - hourly_diffuse_fraction(clearness) * ghi
    low = (sun.up < LEAST_COS_BEAM) | (ghi < 0.0)
    dni = np.where(low, 0.0 * ghi, beam / np.maximum(sun.up, LEAST_COS_BEAM))
    return dni, ghi - dni * sun.up


def complete_irradiance(
    sun: SunSteps, ghi: Array, dni: Array | None = None, dhi: Array | None = None
) -> tuple[Array, Array]:
    """Direct normal and diffuse irradiance, taking what is given and making what is not.

    Parameters
    ----------
    sun : SunSteps
        The sun over the steps.
    ghi : ndarray, shape (time, cell)
        Global horizontal irradiance. [W m-2]
    dni, dhi : ndarray, shape (time, cell), optional
        Direct normal and diffuse horizontal irradiance where the file has them. [W m-2]

    Returns
    -------
    dni, dhi : ndarray, shape (time, cell)
        [W m-2]

    Examples
    --------
    >>> sun = sun_over_steps([0.0], [80])
    >>> dni, dhi = complete_irradiance(sun, np.full((24, 1), 500.0), dhi=np.full((24, 1), 100.0))
    >>> round(float(dni[12, 0] * sun.up[12, 0]))
    400
    """
    if dni is not None and dhi is not None:
        return dni, dhi
    if dni is not None:
        return dni, np.maximum(ghi - dni * sun.up, 0.0)
    if dhi is not None:
        high = sun.up >= LEAST_COS_BEAM
        beam = np.maximum(ghi - dhi, 0.0) / np.maximum(sun.up, LEAST_COS_BEAM)
        return np.where(high, beam, 0.0 * beam), dhi
    return split_global(ghi, sun)


def clearness_index(irradiation: Array, outside: Array) -> Array:
    """Clearness k_T of days, 0 where the sun does not rise.

    Parameters
    ----------
    irradiation, outside : ndarray, shape (day, cell)
        Irradiation at the ground and above the atmosphere. [MJ m-2]

    Returns
    -------
    ndarray, shape (day, cell)
        Within 0 to 1; NaN where the irradiation is. [1]

    Examples
    --------
    >>> clearness_index(np.array([20.0, 1.0]), np.array([40.0, 0.0]))
    array([0.5, 1. ])
    """
    return np.clip(irradiation / np.maximum(outside, 1e-6), 0.0, 1.0)


def diffuse_shape_weight(diffuse_fraction: Array) -> Array:
    """Weight of the global's shape in the diffuse light's shape over a day.

    Liu & Jordan give the diffuse light the shape of the extraterrestrial irradiance. Under a closed sky all
    light is diffuse, so its shape must be that of the global; the square of the diffuse fraction leads from
    one to the other and keeps the beam from going negative at both ends of dull days. Own choice: over 13
    typical years below 45 deg of latitude it lowers the rms of a day's S from 2.0 to 1.8 % (single slope,
    15 deg) and from 1.4 to 1.0 % (double slope), and takes 0.3 % off annual S on average.

    Parameters
    ----------
    diffuse_fraction : ndarray
        Of the day. [1]

    Returns
    -------
    ndarray
        0 for beam only, 1 for diffuse only. [1]
    """
    return np.asarray(diffuse_fraction**2)


def disaggregate_day(
    irradiation: Array,
    latitude: ArrayLike,
    day_of_year: ArrayLike,
    *,
    temp_air: Array,
    wind_speed: Array,
    temp_air_range: Array | None = None,
    steps_per_day: int = 24,
    clock_to_solar_hours: ArrayLike = 0.0,
) -> StepWeather:
    """Make steps out of days: mean courses that keep every daily value.

    Global irradiance follows Collares-Pereira & Rabl, diffuse follows Liu & Jordan under clear and the global
    under dull skies, air temperature a cosine with its top at 15 h solar time, and wind stays even.

    Parameters
    ----------
    irradiation : ndarray, shape (day, cell)
        Global horizontal irradiation. [MJ m-2]
    latitude : array_like, shape (cell,)
        [deg north]
    day_of_year : array_like of int, shape (day,)
        1 to 366.
    temp_air, wind_speed : ndarray, shape (day, cell)
        Means of the day. [degC], [m s-1]
    temp_air_range : ndarray, shape (day, cell), optional
        Highest minus lowest temperature of the day. Without it the range is (k_T / 0.175)**2 K within 2 to
        20 K: Hargreaves' relation (FAO-56 eq. 50) turned round. [K]
    steps_per_day : int
        4 or more.
    clock_to_solar_hours : array_like, shape (cell,) or ()
        Hours to add to the clock to get local mean solar time. [h]

    Returns
    -------
    StepWeather
        The mean of ghi over a day is its irradiation to rounding, the mean of temp_air its mean.

    Examples
    --------
    >>> day = np.array([[20.0]])
    >>> steps = disaggregate_day(day, [30.0], [100], temp_air=day, wind_speed=day / 10)
    >>> round(float(steps.ghi.sum() * 3600e-6), 6), round(float(steps.temp_air.mean()), 6)
    (20.0, 20.0)
    """
    sun = sun_over_steps(latitude, day_of_year, steps_per_day, clock_to_solar_hours)
    clearness = clearness_index(irradiation, extraterrestrial_irradiation(latitude, day_of_year))
    ghi, dhi, dni = _step_irradiance(irradiation, clearness, sun, np.atleast_1d(latitude), day_of_year)
    swing = temp_air_range
    if swing is None:
        swing = np.clip((clearness / _RANGE_COEFFICIENT) ** 2, *_RANGE_LIMITS_K)
    clock = (np.arange(steps_per_day) + 0.5)[:, None] * (24.0 / steps_per_day)
    hour = clock + np.asarray(clock_to_solar_hours, dtype=float)
    course = np.cos((hour - _HOUR_OF_HIGHEST_TEMPERATURE) * (np.pi / 12.0))
    temperature = temp_air[:, None, :] + 0.5 * swing[:, None, :] * course
    wind = np.repeat(wind_speed, steps_per_day, axis=0)
    return StepWeather(ghi, dni, dhi, temperature.reshape(ghi.shape), wind)


def _step_irradiance(
    irradiation: Array, clearness: Array, sun: SunSteps, latitude: Array, day_of_year: ArrayLike
) -> tuple[Array, Array, Array]:
    """Global, diffuse horizontal and direct normal irradiance of the steps, from irradiation and clearness."""
    delta = declination(np.atleast_1d(day_of_year))[:, None]
    sunset = sunset_hour_angle(latitude, delta)
    days, cells = clearness.shape

    def by_step(values: Array) -> Array:
        return values.reshape(days, -1, cells)

    phi = np.radians(latitude)
    lowest = (np.sin(phi) * np.sin(delta))[:, None, :]
    swing = np.maximum(np.cos(phi) * np.cos(delta), 1e-9)[:, None, :]
    # The cosine of the hour angle is what is left of the sun's height.
    cos_hour = np.clip((by_step(sun.up) - lowest) / swing, -1.0, 1.0)
    even = by_step(sun.step_mean_cos_zenith)
    even = even / np.maximum(even.sum(axis=1, keepdims=True), 1e-12)
    whole = even * global_over_diffuse_shape(np.arccos(cos_hour), sunset[:, None, :])
    whole = whole / np.maximum(whole.sum(axis=1, keepdims=True), 1e-12)
    fraction = daily_diffuse_fraction(clearness, sunset)
    weight = diffuse_shape_weight(fraction)[:, None, :]
    diffuse = fraction[:, None, :] * ((1.0 - weight) * even + weight * whole)
    power = irradiation[:, None, :] * (1e6 / 86400.0 * (even.shape[1]))
    ghi = (power * whole).reshape(sun.up.shape)
    dhi = np.minimum(power * diffuse, power * whole).reshape(sun.up.shape)
    dni = np.where(sun.up > 0.0, (ghi - dhi) / np.maximum(sun.up, 1e-3), 0.0 * ghi)
    return ghi, ghi - dni * sun.up, dni
