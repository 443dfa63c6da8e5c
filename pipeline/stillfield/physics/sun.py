"""Where the sun stands, and what would arrive if there were no air.

Days are local days and steps are counted from their start. Declination, equation of time and distance come
from the Fourier series of Spencer 1971 as pvlib has them, one value a day. FAO-56 eq. 24 is not used: its
declination is up to 1.5 deg off (September to November), which moves the daily irradiation above the
atmosphere by 2 % at 20 deg and 4.5 % at 40 deg of latitude.

Everything that varies within a day is kept as a vector to the sun (east, north, up), because the projection
on any plane is then one scalar product and no angle has to be worked out for millions of cell-hours.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.floating[Any]]

#: Solar constant; pvlib's default, in keeping with the 1367 W m-2 of the correlations used here. [W m-2]
SOLAR_CONSTANT = 1366.1

_SECONDS_A_DAY = 86400.0
#: Spencer's series counts from 0 h of 1 January of a leap year. Half a day brings it to noon, 3/8 of a day to
#: the middle of the leap cycle: the declination is then within 0.17 deg of the ephemeris in every year,
#: against 0.5 deg without.
_SERIES_OFFSET_DAYS = 0.875
#: Steps of more than this are too coarse for one position of the sun. [h]
LONGEST_STEP_HOURS = 6.0


def _series_day(day_of_year: ArrayLike) -> Array:
    return np.asarray(day_of_year, dtype=float) + _SERIES_OFFSET_DAYS


def declination(day_of_year: ArrayLike) -> Array:
    """Declination of the sun.

    Parameters
    ----------
    day_of_year : array_like, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray, shape (day,)
        At local noon; within 0.2 deg of the ephemeris in any year of the leap cycle. [rad]

    References
    ----------
    Spencer 1971, Search 2:172, through `pvlib.solarposition.declination_spencer71`.

    Examples
    --------
    >>> round(float(np.degrees(declination(172))), 1)
    23.5
    """
    from pvlib.solarposition import declination_spencer71

    return np.asarray(declination_spencer71(_series_day(day_of_year)))


def equation_of_time(day_of_year: ArrayLike) -> Array:
    """Apparent minus mean solar time, in hours.

    Parameters
    ----------
    day_of_year : array_like, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray, shape (day,)
        Positive when the sun is ahead of the clock. [h]

    References
    ----------
    Spencer 1971, Search 2:172, through `pvlib.solarposition.equation_of_time_spencer71`.

    Examples
    --------
    >>> round(60 * float(equation_of_time(307)), 1)  # early November, the largest of the year [min]
    16.3
    """
    from pvlib.solarposition import equation_of_time_spencer71

    return np.asarray(equation_of_time_spencer71(_series_day(day_of_year))) / 60.0


def normal_irradiance_outside(day_of_year: ArrayLike) -> Array:
    """Irradiance above the atmosphere on a plane facing the sun, E0n.

    Parameters
    ----------
    day_of_year : array_like, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray, shape (day,)
        [W m-2]

    References
    ----------
    Spencer 1971, Search 2:172, through `pvlib.irradiance.get_extra_radiation`.

    Examples
    --------
    >>> [round(float(value)) for value in normal_irradiance_outside([3, 185])]
    [1414, 1320]
    """
    from pvlib.irradiance import get_extra_radiation

    return np.asarray(get_extra_radiation(_series_day(day_of_year), SOLAR_CONSTANT))


def sunset_hour_angle(latitude: ArrayLike, declination: ArrayLike) -> Array:
    """Hour angle of sunset on a flat horizon: 0 in polar night, pi in polar day.

    Parameters
    ----------
    latitude : array_like
        [deg north]
    declination : array_like
        Broadcast against `latitude`. [rad]

    Returns
    -------
    ndarray
        Equation cos(ws) = -tan(lat) tan(dec). [rad]

    References
    ----------
    FAO-56 (Allen et al. 1998) eq. 25.

    Examples
    --------
    >>> round(float(sunset_hour_angle(-20.0, 0.120)), 3)  # FAO-56, Example 8
    1.527
    """
    slope = -np.tan(np.radians(latitude)) * np.tan(declination)
    return np.asarray(np.arccos(np.clip(slope, -1.0, 1.0)))


def day_length(latitude: ArrayLike, day_of_year: ArrayLike) -> Array:
    """Hours between sunrise and sunset of the sun's centre, without refraction (FAO-56 eq. 34).

    Parameters
    ----------
    latitude : array_like, shape (cell,)
        [deg north]
    day_of_year : array_like, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray, shape (day, cell)
        [h]

    Examples
    --------
    >>> day_length([0.0], [80]).round(2)
    array([[12.]])
    """
    delta = declination(np.atleast_1d(day_of_year))[:, None]
    return 24.0 / np.pi * sunset_hour_angle(np.atleast_1d(latitude), delta)


def horizontal_irradiation(
    latitude: ArrayLike, declination: ArrayLike, normal_irradiance: ArrayLike
) -> Array:
    """Integrate a constant beam over a day on a horizontal plane.

    Parameters
    ----------
    latitude : array_like
        [deg north]
    declination : array_like
        Broadcast against `latitude`. [rad]
    normal_irradiance : array_like
        Irradiance on a plane facing the sun. [W m-2]

    Returns
    -------
    ndarray
        [MJ m-2]

    References
    ----------
    FAO-56 eq. 21; Duffie & Beckman eq. 1.10.3.

    Examples
    --------
    FAO-56, Example 8 (20 S, 3 September), with its own declination, distance factor and solar constant:

    >>> round(float(horizontal_irradiation(-20.0, 0.120, 0.985 * 0.0820e6 / 60)), 1)
    32.2
    """
    phi = np.radians(latitude)
    sunset = sunset_hour_angle(latitude, declination)
    share = sunset * np.sin(phi) * np.sin(declination) + np.cos(phi) * np.cos(declination) * np.sin(sunset)
    # In polar night both terms cancel to rounding, never below zero.
    return np.asarray(_SECONDS_A_DAY * 1e-6 / np.pi * np.asarray(normal_irradiance) * np.maximum(share, 0.0))


def extraterrestrial_irradiation(latitude: ArrayLike, day_of_year: ArrayLike) -> Array:
    """Daily irradiation above the atmosphere on a horizontal plane, H0.

    It depends on day and latitude only: make it for the distinct latitudes of a grid, not for every cell.

    Parameters
    ----------
    latitude : array_like, shape (cell,)
        [deg north]
    day_of_year : array_like, shape (day,)
        1 to 366.

    Returns
    -------
    ndarray, shape (day, cell)
        [MJ m-2]

    Examples
    --------
    >>> extraterrestrial_irradiation([0.0, 40.0], [172]).round(1)
    array([[33.3, 41.9]])
    """
    day = np.atleast_1d(day_of_year)
    normal = normal_irradiance_outside(day)[:, None]
    return horizontal_irradiation(np.atleast_1d(latitude), declination(day)[:, None], normal)


@dataclass(frozen=True)
class SunSteps:
    """The sun over every step of some days.

    The direction is the mean vector to the sun over the sunlit part of the step, so that its scalar product
    with the normal of a plane is the exact mean projection while the plane stays sunlit. It is a little
    shorter than 1 (0.997 for hourly steps); divide by `length` to get the cosine of an angle.

    Attributes
    ----------
    east, north, up : ndarray, shape (day * steps_per_day, cell)
        Mean vector to the sun over the sunlit part; 0 in steps without sun. `up` is the mean cosine of the
        zenith angle over the sunlit part. [1]
    sunlit : ndarray, same shape
        Share of the step with the sun above the horizon. [1]
    normal_outside : ndarray, shape (day * steps_per_day, 1)
        Irradiance above the atmosphere on a plane facing the sun. [W m-2]
    """

    east: Array
    north: Array
    up: Array
    sunlit: Array
    normal_outside: Array

    @property
    def length(self) -> Array:
        """Length of the mean vector; 1 where there is no sun."""
        length = np.sqrt(self.east**2 + self.north**2 + self.up**2)
        return np.where(self.sunlit > 0.0, length, 1.0)

    @property
    def cos_zenith(self) -> Array:
        """Cosine of the zenith angle of the mean direction; 0 without sun."""
        return np.asarray(self.up / self.length)

    @property
    def step_mean_cos_zenith(self) -> Array:
        """Mean over the whole step of the cosine of the zenith angle, 0 while the sun is down."""
        return np.asarray(self.up * self.sunlit)

    @property
    def azimuth_deg(self) -> Array:
        """Compass direction of the sun in degrees, clockwise from north."""
        return np.asarray(np.degrees(np.arctan2(self.east, self.north)) % 360.0)

    def take(self, steps: NDArray[np.integer[Any]]) -> SunSteps:
        """Return the steps of the given numbers."""
        parts = (self.east, self.north, self.up, self.sunlit, self.normal_outside)
        east, north, up, sunlit, outside = (part[steps] for part in parts)
        return SunSteps(east, north, up, sunlit, outside)


def sun_over_steps(
    latitude: ArrayLike,
    day_of_year: ArrayLike,
    steps_per_day: int = 24,
    clock_to_solar_hours: ArrayLike = 0.0,
) -> SunSteps:
    """Place the sun in every step of some local days.

    Steps in which the sun rises or sets are treated over their sunlit part only, by analytic integration of
    the direction over the hour angle, so that neither the first nor the last light of a day is misplaced.

    Parameters
    ----------
    latitude : array_like, shape (cell,)
        [deg north]
    day_of_year : array_like of int, shape (day,)
        1 to 366, of the local day.
    steps_per_day : int
        Equal steps of a day, the first starting at midnight of the clock; 4 or more.
    clock_to_solar_hours : array_like, shape (cell,) or ()
        Hours to add to the clock to get local mean solar time. [h]

    Returns
    -------
    SunSteps
        Arrays of shape (day * steps_per_day, cell).

    Raises
    ------
    ValueError
        With fewer than 4 steps a day.

    References
    ----------
    Direction cosines: Duffie & Beckman eqs. 1.6.5 and 1.6.6, as a vector.

    Examples
    --------
    >>> sun = sun_over_steps([0.0], [80])
    >>> sun.up.shape, round(float(sun.up.max()), 2), int((sun.sunlit > 0).sum())
    ((24, 1), 0.99, 13)
    """
    if steps_per_day * LONGEST_STEP_HOURS < 24:
        raise ValueError(f"steps_per_day is {steps_per_day}; a step may last {LONGEST_STEP_HOURS} h at most")
    day = np.atleast_1d(day_of_year)
    phi = np.radians(np.atleast_1d(np.asarray(latitude, dtype=float)))
    delta = declination(day)[:, None, None]
    middle, half, sunlit = _sunlit_part(
        np.degrees(phi), delta, steps_per_day,
        np.asarray(clock_to_solar_hours, dtype=float) + equation_of_time(day)[:, None, None],
    )
    # Mean of sin and cos of the hour angle over an interval: the value at its middle times sin(h) / h; the
    # series is good to 1e-6 for the half of a 6 h step.
    half *= half  # the square from here on
    shrink = half * (-1.0 / 42.0)
    for divisor in (20.0, 6.0):
        shrink += 1.0
        shrink *= half
        shrink *= -1.0 / divisor
    shrink += 1.0
    shrink *= sunlit > 0.0
    mean_cos = np.cos(middle)
    mean_cos *= shrink
    east = np.sin(middle, out=middle)
    east *= shrink
    east *= -np.cos(delta)
    lit = shrink > 0.0
    up = mean_cos * (np.cos(phi) * np.cos(delta))
    up += np.sin(phi) * np.sin(delta)
    np.maximum(up, 0.0, out=up)
    up *= lit
    north = mean_cos
    north *= -np.sin(phi) * np.cos(delta)
    north += np.cos(phi) * np.sin(delta)
    north *= lit
    shape = (len(day) * steps_per_day, len(phi))
    outside = np.repeat(normal_irradiance_outside(day), steps_per_day)[:, None]
    east, north, up, sunlit = (part.reshape(shape) for part in (east, north, up, sunlit))
    return SunSteps(east, north, up, sunlit, outside)


def _sunlit_part(
    latitude: Array, delta: Array, steps_per_day: int, shift_hours: Array
) -> tuple[Array, Array, Array]:
    """Middle and half width [rad] of the sunlit part of each step in hour angle, and its share of the step.

    All three have shape (day, step, cell).
    """
    width = 2.0 * np.pi / steps_per_day
    clock = (np.arange(steps_per_day) + 0.5) * (24.0 / steps_per_day)
    angle = (clock[:, None] + shift_hours - 12.0) * (np.pi / 12.0)
    # A clock far from solar time may push a step beyond midnight: bring it back to -pi..pi.
    if np.abs(angle).max() > np.pi:
        angle = angle - 2.0 * np.pi * np.round(angle / (2.0 * np.pi))
    sunset = sunset_hour_angle(latitude, delta)
    first = np.maximum(angle - width / 2.0, -sunset)
    last = np.minimum(angle + width / 2.0, sunset)
    half = last - first
    np.maximum(half, 0.0, out=half)
    half *= 0.5
    last += first
    last *= 0.5
    return last, half, half * (2.0 / width)
