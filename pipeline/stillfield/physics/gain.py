"""From weather to S, the sunshine a still catches: hour by hour, or from a day's irradiation alone.

With hourly weather S is summed up step by step (`gain_over_steps`). With daily irradiation H only, S = g H,
and the gain g of a design depends on latitude, day of year and clearness k_T. It need not be integrated for
every cell and day: with the shapes of Collares-Pereira & Rabl and of Liu & Jordan the beam and the diffuse
light of every hour are polynomials in the daily diffuse fraction, so all geometry and optics of a day
collapse into four numbers (`DayMoments`) and g follows in closed form. A table of g over k_T made from them, in
`stillfield.physics.gain_table`, then costs a cell-day one look-up.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.basin import GROUND_ALBEDO, BasinGain, basin_gain, beam_gain, diffuse_gain
from stillfield.physics.irradiance import (
    complete_irradiance,
    daily_diffuse_fraction,
    diffuse_shape_weight,
    global_over_diffuse_shape,
)
from stillfield.physics.still import Still
from stillfield.physics.sun import (
    SunSteps,
    declination,
    sun_over_steps,
    sunset_hour_angle,
)

Array = NDArray[np.floating[Any]]

# Values of a working array that still fit the cache of a core.
_CACHE_VALUES = 32_768
# 24 points leave 0.03 % below 45 deg and 0.07 % at 60 deg of latitude (against 400 points).
_QUADRATURE_POINTS = 24


@dataclass(frozen=True)
class DayMoments:
    """All that the daily gain needs to know of the geometry and optics of a day.

    With mu the share of a day's extraterrestrial irradiation, f the shape of the global over that of the
    diffuse light and r what the still catches of a unit of horizontal beam, all along the hour angle.

    Attributes
    ----------
    beam : ndarray, shape (3, day, latitude)
        Mean over mu of r, f r and f**2 r. [1]
    shape : ndarray, shape (day, latitude)
        Mean over mu of f**2; the mean of f is 1. [1]
    sunset : ndarray, shape (day, latitude)
        Sunset hour angle. [rad]
    """

    beam: Array
    shape: Array
    sunset: Array


def day_moments(still: Still, latitude: ArrayLike, day_of_year: ArrayLike) -> DayMoments:
    """Integrate the geometry and optics of a still over days.

    Gauss-Legendre quadrature over the hour angle from sunrise to sunset, in solar time.

    Parameters
    ----------
    still : Still
        The design.
    latitude : array_like, shape (latitude,)
        Within the polar circles. [deg north]
    day_of_year : array_like of int, shape (day,)
        1 to 366.

    Returns
    -------
    DayMoments
        The condition of the still does not enter.

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> moments = day_moments(Still("flat", (Panel(1.0, 0.0),)), [0.0], [80])
    >>> moments.beam[:, 0, 0].round(2)
    array([0.86, 0.87, 0.88])
    """
    point, weight = _quadrature()
    place = np.atleast_1d(np.asarray(latitude, dtype=float))
    phi = np.radians(place)
    delta = declination(np.atleast_1d(day_of_year))[:, None]
    sunset = sunset_hour_angle(place, delta)
    size = sunset.size
    beam = np.zeros((3, size))
    shape = np.zeros(size)
    for start in range(0, size, max(1, _CACHE_VALUES // _QUADRATURE_POINTS)):
        some = slice(start, start + max(1, _CACHE_VALUES // _QUADRATURE_POINTS))
        last = np.maximum(sunset.ravel()[some], 1e-3)
        angle = point[:, None] * last
        day_phi = np.broadcast_to(phi, sunset.shape).ravel()[some]
        day_delta = np.broadcast_to(delta, sunset.shape).ravel()[some]
        share = weight[:, None] * (np.cos(angle) - np.cos(last))
        share /= share.sum(axis=0)
        bulge = global_over_diffuse_shape(angle, last)
        bulge /= (share * bulge).sum(axis=0)
        sun = _sun_at(angle, day_phi, day_delta)
        caught = beam_gain(still, sun, np.degrees(day_phi))[0] / np.maximum(sun.up, 1e-9)
        for power in range(3):
            beam[power, some] = (share * caught).sum(axis=0)
            share *= bulge
            if power == 1:
                shape[some] = share.sum(axis=0)
    return DayMoments(beam.reshape(3, *sunset.shape), shape.reshape(sunset.shape), sunset)


@lru_cache(maxsize=1)
def _quadrature() -> tuple[Array, Array]:
    """Points and weights of Gauss and Legendre."""
    return np.polynomial.legendre.leggauss(_QUADRATURE_POINTS)


def _sun_at(hour_angle: Array, phi: Array, delta: Array) -> SunSteps:
    """The sun at instants; the irradiance outside is left at 1."""
    up = np.sin(phi) * np.sin(delta) + np.cos(phi) * np.cos(delta) * np.cos(hour_angle)
    north = np.cos(phi) * np.sin(delta) - np.sin(phi) * np.cos(delta) * np.cos(hour_angle)
    east = -np.cos(delta) * np.sin(hour_angle)
    lit = np.ones_like(up)
    return SunSteps(east, north, np.maximum(up, 1e-9), lit, lit)


def daily_gain(
    still: Still,
    moments: DayMoments,
    clearness: Array,
    *,
    diffuse_fraction: Array | None = None,
    albedo: float = GROUND_ALBEDO,
) -> Array:
    """Gain g = S / H of days, in closed form.

    With K the daily diffuse fraction and w its weight of shapes, the diffuse light has the shape
    d = K (1 - w + w f) and the beam x = f - d, both over the shape of the extraterrestrial irradiance; the
    anisotropy of Hay & Davies is k_T x. Then g = mean of x r + d D + k_T x d (r - D), plus the ground's share,
    with D the gain from an even sky.

    Parameters
    ----------
    still : Still
        The design.
    moments : DayMoments
        Of the days and latitudes.
    clearness : ndarray, broadcast against shape (day, latitude)
        k_T. [1]
    diffuse_fraction : ndarray, optional
        Where it is known; otherwise Erbs et al. 1982. [1]
    albedo : float
        Reflectance of the ground. [1]

    Returns
    -------
    ndarray
        Transmitted and counted, per irradiation on the horizontal. [1]

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> still = Still("flat", (Panel(1.0, 0.0),))
    >>> daily_gain(still, day_moments(still, [0.0], [80]), np.array([[0.7]])).round(2)
    array([[0.87]])
    """
    even = diffuse_gain(still, albedo)
    fraction = diffuse_fraction
    if fraction is None:
        fraction = daily_diffuse_fraction(clearness, moments.sunset)
    weight = diffuse_shape_weight(fraction)
    flat, curved = fraction * (1.0 - weight), fraction * weight  # d = flat + curved f
    beam = 1.0 - curved  # x = beam f - flat
    first, second, third = moments.beam
    straight = beam * second - flat * first
    circumsolar = (
        beam * curved * (third - even.sky * moments.shape)
        + (beam * flat - flat * curved) * (second - even.sky)
        - flat * flat * (first - even.sky)
    )
    return np.asarray(straight + fraction * even.sky + clearness * circumsolar + even.ground)


def gain_over_steps(
    still: Still,
    latitude: ArrayLike,
    day_of_year: NDArray[np.integer[Any]],
    *,
    ghi: Array,
    dni: Array | None = None,
    dhi: Array | None = None,
    clock_to_solar_hours: ArrayLike = 0.0,
    albedo: float = GROUND_ALBEDO,
) -> BasinGain:
    """Sunshine caught in every step of some days, from the weather station to the basin.

    Missing components are made by closure or by Erbs et al. 1982. The days are worked through in pieces that
    fit the cache, so memory stays with input and output.

    Parameters
    ----------
    still : Still
        The design.
    latitude : array_like, shape (cell,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.
    ghi : ndarray, shape (day * steps_per_day, cell)
        Global horizontal irradiance, mean of the step. [W m-2]
    dni, dhi : ndarray, same shape, optional
        Direct normal and diffuse horizontal irradiance. [W m-2]
    clock_to_solar_hours : array_like, shape (cell,) or ()
        Hours to add to the clock to get local mean solar time. [h]
    albedo : float
        Reflectance of the ground. [1]

    Returns
    -------
    BasinGain
        Arrays of the shape of `ghi`. [W m-2 of basin]

    Examples
    --------
    >>> from stillfield.physics.still import Panel
    >>> noon = np.where(np.arange(24)[:, None] == 12, 900.0, 0.0)
    >>> still = Still("flat", (Panel(1.0, 0.0),))
    >>> gain_over_steps(still, [10.0], np.array([80]), ghi=noon).transmitted.max().round()
    np.float64(802.0)
    """
    place = np.atleast_1d(np.asarray(latitude, dtype=float))
    days = len(day_of_year)
    steps = len(ghi) // days
    transmitted = np.empty(ghi.shape)
    absorbed = np.empty(ghi.shape)
    stride = max(1, _CACHE_VALUES // (steps * len(place)))
    for start in range(0, days, stride):
        sun = sun_over_steps(place, day_of_year[start : start + stride], steps, clock_to_solar_hours)
        some = slice(start * steps, start * steps + len(sun.up))
        beam, diffuse = complete_irradiance(
            sun, ghi[some], None if dni is None else dni[some], None if dhi is None else dhi[some]
        )
        part = basin_gain(still, sun, place, ghi=ghi[some], dni=beam, dhi=diffuse, albedo=albedo)
        transmitted[some] = part.transmitted
        absorbed[some] = part.cover_absorbed
    return BasinGain(transmitted, absorbed)


def daily_transmitted_from_hours(transmitted: Array, steps_per_day: int = 24) -> Array:
    """Daily S from the S of steps.

    Parameters
    ----------
    transmitted : ndarray, shape (day * steps_per_day, cell)
        [W m-2 of basin]
    steps_per_day : int
        Steps of a day.

    Returns
    -------
    ndarray, shape (day, cell)
        [MJ m-2 of basin]

    Examples
    --------
    >>> daily_transmitted_from_hours(np.full((24, 1), 100.0))
    array([[8.64]])
    """
    means = transmitted.reshape(-1, steps_per_day, transmitted.shape[-1]).mean(axis=1)
    return np.asarray(means * 0.0864)
