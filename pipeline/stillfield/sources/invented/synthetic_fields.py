"""Numbers from which invented weather is made: clear-sky sunshine, wandering noise, seasons and relief.

Plain arrays in, plain arrays out. Nothing here knows a file, a label or a date; `synthetic_climate` turns
these numbers into the weather of a dry coast, and `synthetic` puts labels on it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.floating[Any]]

SECONDS_PER_DAY = 86_400.0
MJ_PER_J = 1e-6
DAYS_PER_YEAR = 365.25

#: Linke turbidities at which the clear sky is integrated: clean desert air, hazy, thick dust.
TURBIDITY_NODES = (2.0, 5.0, 9.0)


@dataclass(frozen=True)
class Season:
    """A part of the year with weather of its own.

    Attributes
    ----------
    peak_day : float
        Day of the year in its middle. [d]
    spread_days : float
        Standard deviation of its bell. [d]
    """

    peak_day: float
    spread_days: float


def season_weight(day_of_year: NDArray[np.integer] | Floats, season: Season) -> Floats:
    """Share of a season in each day: 1 at its peak, falling off as a bell, the same across New Year.

    Parameters
    ----------
    day_of_year : ndarray, shape (days,)
        Days counted from 1 at 1 January. [d]
    season : Season
        Peak and spread.

    Returns
    -------
    ndarray, shape (days,)
        Weight in (0, 1]. [1]

    Examples
    --------
    >>> season_weight(np.array([10, 40]), Season(peak_day=10, spread_days=30)).round(3).tolist()
    [1.0, 0.6069999933242798]
    """
    half = DAYS_PER_YEAR / 2.0
    away = (np.asarray(day_of_year) - season.peak_day + half) % DAYS_PER_YEAR - half
    return np.exp(-0.5 * (away / season.spread_days) ** 2).astype(np.float32)


def season_wave(day_of_year: NDArray[np.integer] | Floats, peak_day: float) -> Floats:
    """Smooth yearly wave, +1 on its peak day and -1 half a year away.

    Parameters
    ----------
    day_of_year : ndarray, shape (days,)
        Days counted from 1 at 1 January. [d]
    peak_day : float
        Day of the year of the maximum. [d]

    Returns
    -------
    ndarray, shape (days,)
        Value in [-1, 1]. [1]

    Examples
    --------
    >>> season_wave(np.array([200]), peak_day=200).tolist()
    [1.0]
    """
    angle = 2.0 * np.pi * (np.asarray(day_of_year) - peak_day) / DAYS_PER_YEAR
    return np.cos(angle).astype(np.float32)


def clear_sky_irradiation(latitude: Floats, day_of_year: Floats, linke_turbidity: float) -> Floats:
    """Global horizontal irradiation of a cloudless day at sea level.

    The irradiance of Ineichen and Perez (2002), as pvlib has it, is integrated from sunrise to sunset by
    Gauss-Legendre quadrature over the hour angle. Depends on latitude and date only, so a region needs one
    small table and never an integration per cell.

    Parameters
    ----------
    latitude : ndarray, shape (rows,)
        Geographic latitude, between the polar circles. [degree]
    day_of_year : ndarray, shape (days,)
        Days counted from 1 at 1 January. [d]
    linke_turbidity : float
        Linke turbidity of the air, for an air mass of 2. [1]

    Returns
    -------
    ndarray, shape (days, rows)
        Irradiation of the day. [MJ m-2]

    References
    ----------
    P. Ineichen and R. Perez, "A new airmass independent formulation for the Linke turbidity coefficient",
    Solar Energy 73:151-157, 2002.

    Examples
    --------
    >>> june = clear_sky_irradiation(np.array([20.0]), np.array([172.0]), 3.0)
    >>> bool(26.0 < june[0, 0] < 31.0)
    True
    """
    from pvlib import atmosphere, clearsky, irradiance, solarposition

    phi = np.radians(latitude)[None, :, None]
    declination = np.asarray(solarposition.declination_spencer71(day_of_year))[:, None, None]
    sunset = np.arccos(-np.tan(phi) * np.tan(declination))
    nodes, weights = np.polynomial.legendre.leggauss(12)
    hour_angle = sunset * (nodes + 1.0) / 2.0
    cos_zenith = np.sin(phi) * np.sin(declination) + np.cos(phi) * np.cos(declination) * np.cos(hour_angle)
    zenith = np.degrees(np.arccos(cos_zenith))
    extra = np.asarray(irradiance.get_extra_radiation(day_of_year, method="spencer"))[:, None, None]
    airmass = atmosphere.get_relative_airmass(zenith, model="kastenyoung1989")
    ghi = clearsky.ineichen(zenith, airmass, linke_turbidity, altitude=0.0, dni_extra=extra)["ghi"]
    seconds = sunset[..., 0] * SECONDS_PER_DAY / (2.0 * np.pi)
    irradiation: Floats = MJ_PER_J * seconds * (ghi * weights).sum(axis=-1)
    return irradiation


def clear_sky_parabolas(latitude: Floats, day_of_year: Floats) -> Floats:
    """Logarithm of clear-sky irradiation as a parabola in turbidity, one for each day and row.

    Turbidity changes from cell to cell and day to day, the sun does not; the parabola through
    `TURBIDITY_NODES` lets a cell-day cost two multiplications and an exponential. Attenuation is nearly
    exponential in turbidity, so between the outer nodes the parabola stays within 0.1 % of the integral in
    the tropics and 0.3 % at 60 degrees in winter.

    Parameters
    ----------
    latitude : ndarray, shape (rows,)
        Geographic latitude. [degree]
    day_of_year : ndarray, shape (days,)
        Days counted from 1 at 1 January. [d]

    Returns
    -------
    ndarray, shape (3, days, rows)
        Coefficients of turbidity to the power 0, 1 and 2; they give the logarithm of MJ m-2. [1]

    Examples
    --------
    >>> clear_sky_parabolas(np.array([17.0, 23.0]), np.array([80.0])).shape
    (3, 1, 2)
    """
    values = np.stack([clear_sky_irradiation(latitude, day_of_year, node) for node in TURBIDITY_NODES])
    logarithms = np.log(values)
    powers = np.vander(TURBIDITY_NODES, 3, increasing=True)
    parabolas: Floats = np.einsum("pn,ndr->pdr", np.linalg.inv(powers), logarithms).astype(np.float32)
    return parabolas


def random_waves(generator: np.random.Generator, *, count: int, length_km: float) -> Floats:
    """Wave vectors whose waves add up to a field with a Gaussian-shaped spatial correlation.

    Parameters
    ----------
    generator : numpy.random.Generator
        Source of chance; the same state gives the same waves.
    count : int
        Number of waves; the correlation of one draw strays from its law by about ``1 / sqrt(2 count)``.
    length_km : float
        Length scale L: the correlation at distance r is exp(-r^2 / (2 L^2)). [km]

    Returns
    -------
    ndarray, shape (2, count)
        East and north components. [rad km-1]

    Examples
    --------
    >>> random_waves(np.random.default_rng(1), count=8, length_km=100.0).shape
    (2, 8)
    """
    return generator.standard_normal((2, count)) / length_km


def wave_basis(waves: Floats, east_km: Floats, north_km: Floats) -> Floats:
    """Cosine and sine of every wave at every cell, scaled for a field of unit variance.

    The value at a cell depends on its position only, so a finer or a smaller grid sees the same weather.

    Parameters
    ----------
    waves : ndarray, shape (2, count)
        Wave vectors of `random_waves`. [rad km-1]
    east_km, north_km : ndarray, shape (cells,)
        Position of the cells. [km]

    Returns
    -------
    ndarray, shape (2 * count, cells)
        Factors by which independent amplitudes of unit variance are multiplied and summed. [1]

    Examples
    --------
    >>> basis = wave_basis(np.array([[0.01], [0.0]]), np.array([0.0]), np.array([0.0]))
    >>> basis.ravel().tolist()
    [1.0, 0.0]
    """
    phase = waves[0][:, None] * east_km + waves[1][:, None] * north_km
    scale = 1.0 / np.sqrt(waves.shape[1])
    basis: Floats = (scale * np.concatenate([np.cos(phase), np.sin(phase)])).astype(np.float32)
    return basis


def red_noise(generator: np.random.Generator, *, days: int, columns: int, persistence: float) -> Floats:
    """Independent first-order autoregressive series of zero mean and unit variance.

    ``x[t] = p x[t-1] + sqrt(1 - p^2) e[t]`` with standard normal e and the first day drawn from the
    stationary law. A longer series begins with the shorter one of the same generator state.

    Parameters
    ----------
    generator : numpy.random.Generator
        Source of chance.
    days, columns : int
        Length and number of the series.
    persistence : float
        Correlation p of a day with the day before, in [0, 1). [1]

    Returns
    -------
    ndarray, shape (days, columns)
        The series. [1]

    Examples
    --------
    >>> red_noise(np.random.default_rng(1), days=3, columns=2, persistence=0.5).shape
    (3, 2)
    """
    from scipy.signal import lfilter

    shocks = generator.standard_normal((days, columns))
    shocks[1:] *= np.sqrt(1.0 - persistence**2)
    series = lfilter([1.0], [1.0, -persistence], shocks, axis=0)
    return np.asarray(series, dtype=np.float32)


def relief_elevation(east_km: Floats, north_km: Floats, coast_km: Floats) -> Floats:
    """Height of an invented land that climbs from the shore to rolling uplands.

    A fixed formula, not a draw: the height of a place changes with neither seed nor grid.

    Parameters
    ----------
    east_km, north_km : ndarray
        Position. [km]
    coast_km : ndarray
        Distance to the shore. [km]

    Returns
    -------
    ndarray
        Height above the sea, 2 m at the shore and below 1010 m. [m]

    Examples
    --------
    >>> float(relief_elevation(np.array(0.0), np.array(0.0), np.array(0.0)))
    2.0
    """
    ranges = np.cos(east_km / 38.0 + 0.7 * np.sin(north_km / 55.0) + 0.4)
    hills = np.cos(north_km / 27.0 - east_km / 61.0 + 1.1)
    rise = -np.expm1(-((coast_km / 80.0) ** 1.25))
    height: Floats = 2.0 + 1000.0 * rise * (0.62 + 0.26 * ranges + 0.12 * hills)
    return height
