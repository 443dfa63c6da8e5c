"""Invented climates on which the daily correlation of a still is fitted to its hourly balance.

The set must cover what a planner may meet, not resemble any one place: latitudes to 60 degrees, daily
irradiation from below 5 to above 30 MJ m-2, daily means from -5 to 40 degC, calm to windy, humid to desert,
steady to broken skies. Parameters of the climates fill their ranges evenly (Latin hypercube); days follow
each other with the persistence of weather; hours of a day sum to the day exactly. No climate is taken from a
weather file, so that every real typical year is one the fit never saw.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from stillfield.physics.sun import extraterrestrial_irradiation, sun_over_steps

Array = NDArray[np.float64]
AnyArray = NDArray[np.floating[Any]]

HOURS = 24
DAYS = 365
SECONDS_PER_HOUR = 3600.0

#: Ranges the climates fill evenly, in the order in which they are drawn.
RANGES: dict[str, tuple[float, float]] = {
    "latitude": (-60.0, 60.0),  # [deg north]
    "clearness": (0.28, 0.70),  # mean daily clearness index over the year [1]
    "clearness_swing": (-0.12, 0.12),  # half the difference between summer and winter [1]
    "temperature": (3.0, 33.0),  # mean of the year [degC]
    "temperature_swing": (0.0, 9.0),  # half the difference between summer and winter [K]
    "dryness": (0.0, 1.0),  # 0 humid coast, 1 desert; mixed with the clearness below [1]
    "wind": (0.3, 6.5),  # mean wind speed at 2 m [m s-1]
    "breeze": (0.0, 0.7),  # daily swing of the wind over its mean, strongest in the afternoon [1]
    "persistence": (0.1, 0.7),  # correlation of one day's weather with the day before [1]
    "brokenness": (0.4, 2.0),  # how much the sky of a half-clear day varies from hour to hour [1]
}

LOWEST_CLEARNESS, HIGHEST_CLEARNESS = 0.05, 0.79
HIGHEST_HOURLY_CLEARNESS = 0.84
_SCALINGS = 12


@dataclass(frozen=True)
class ClimateSet:
    """Hourly weather of invented climates; the hours of a day are local mean solar time.

    Attributes
    ----------
    latitude : ndarray, shape (climate,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 365.
    ghi : ndarray, shape (day * 24, climate)
        Global horizontal irradiance. [W m-2]
    temp_air, temp_dew : ndarray, same shape
        [degC]
    wind_speed : ndarray, same shape
        At 2 m. [m s-1]
    """

    latitude: Array
    day_of_year: NDArray[np.int64]
    ghi: Array
    temp_air: Array
    temp_dew: Array
    wind_speed: Array


@lru_cache(maxsize=2)
def invented_climates(count: int = 96, seed: int = 20) -> ClimateSet:
    """Make the set: the same numbers for the same arguments.

    Parameters
    ----------
    count : int
        Climates.
    seed : int
        Seed of the generator.

    Returns
    -------
    ClimateSet

    Examples
    --------
    >>> climates = invented_climates(8, seed=1)
    >>> climates.ghi.shape, bool((climates.ghi >= 0).all())
    ((8760, 8), True)
    """
    random = np.random.default_rng(seed)
    from scipy.stats import qmc

    draws = qmc.LatinHypercube(d=len(RANGES), rng=random).random(count)
    traits = {
        name: low + draws[:, column] * (high - low) for column, (name, (low, high)) in enumerate(RANGES.items())
    }
    traits["dryness"] = 0.4 * traits["dryness"] + 0.6 * draws[:, list(RANGES).index("clearness")]
    days = np.arange(1, DAYS + 1)
    summer = np.cos(2.0 * np.pi * (days[:, None] - 196.0) / 365.0) * np.sign(traits["latitude"])
    clearness = _daily_clearness(traits, summer, random)
    irradiation = clearness * extraterrestrial_irradiation(traits["latitude"], days)
    ghi = hours_of_broken_sky(
        traits["latitude"], days, irradiation, brokenness=traits["brokenness"], random=random
    )
    temp_air, temp_dew = _hours_of_air(traits, clearness, summer, random)
    wind = _hours_of_wind(traits, random)
    return ClimateSet(traits["latitude"], days, ghi, temp_air, temp_dew, wind)


def _persistent(random: np.random.Generator, persistence: Array | float, shape: tuple[int, ...]) -> Array:
    """Unit normal series along axis 0 in which each value remembers the one before."""
    noise = random.standard_normal(shape)
    for step in range(1, shape[0]):
        noise[step] = persistence * noise[step - 1] + np.sqrt(1.0 - np.square(persistence)) * noise[step]
    return noise


def _daily_clearness(traits: dict[str, Array], summer: Array, random: np.random.Generator) -> Array:
    """Clearness index of every day: skewed towards clear days in clear climates, dull in dull ones."""
    mean = np.clip(traits["clearness"] + traits["clearness_swing"] * summer, 0.15, 0.74)
    rank = ndtr(_persistent(random, traits["persistence"], summer.shape))
    place = (mean - LOWEST_CLEARNESS) / (HIGHEST_CLEARNESS - LOWEST_CLEARNESS)
    # rank**gamma has the mean 1/(1 + gamma).
    return np.asarray(LOWEST_CLEARNESS + (HIGHEST_CLEARNESS - LOWEST_CLEARNESS) * rank ** ((1.0 - place) / place))


def hours_of_broken_sky(
    latitude: AnyArray, day_of_year: NDArray[Any], irradiation: AnyArray, *, brokenness: AnyArray | float,
    random: np.random.Generator, clock_to_solar_hours: AnyArray | float = 0.0,
) -> Array:
    """Share each day's irradiation over its hours: low sun sees more air, half-clear skies are broken.

    A smooth course would make too little of a half-clear day: clouds leave the same energy in fewer hours, and
    yield grows faster than sunshine.

    Parameters
    ----------
    latitude : ndarray, shape (cell,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.
    irradiation : ndarray, shape (day, cell)
        [MJ m-2]
    brokenness : float or ndarray, shape (cell,)
        How much the sky of a half-clear day varies from hour to hour; 1.2 is usual. [1]
    random : Generator
        Source of the clouds.
    clock_to_solar_hours : float or ndarray, shape (cell,)
        Hours from the clock to local mean solar time. [h]

    Returns
    -------
    ndarray, shape (day * 24, cell)
        Global horizontal irradiance; a day's sum is its irradiation unless the clearest sky cannot give it.
        [W m-2]
    """
    sun = sun_over_steps(latitude, day_of_year, HOURS, clock_to_solar_hours)
    outside = sun.normal_outside * sun.step_mean_cos_zenith
    airy = np.maximum(sun.cos_zenith, 0.03) ** 0.25
    above = np.maximum(extraterrestrial_irradiation(latitude, day_of_year), 1e-6)
    clearness = np.clip(irradiation / above / HIGHEST_CLEARNESS, 0.0, 1.0)
    roughness = np.repeat(4.0 * clearness * (1.0 - clearness), HOURS, axis=0)
    noise = _persistent(random, 0.55, outside.shape)
    shape = airy * np.exp(0.55 * brokenness * roughness * noise)
    return _scaled_to_day(outside, shape, irradiation * 1e6 / SECONDS_PER_HOUR)


def _scaled_to_day(outside: Array, shape: Array, wanted: AnyArray) -> Array:
    """Scale hours to the day's sum, holding every hour below the clearest sky."""
    ceiling = outside * HIGHEST_HOURLY_CLEARNESS
    hours = outside * shape
    for _ in range(_SCALINGS):
        day = hours.reshape(-1, HOURS, hours.shape[1]).sum(axis=1)
        factor = np.where(day > 0.0, wanted / np.maximum(day, 1e-9), 0.0)
        hours = np.minimum(hours * np.repeat(factor, HOURS, axis=0), ceiling)
    return hours


def _hours_of_air(
    traits: dict[str, Array], clearness: Array, summer: Array, random: np.random.Generator
) -> tuple[Array, Array]:
    """Air and dew-point temperature: clear dry days swing widely, humid dull ones hardly."""
    spells = 2.2 * _persistent(random, 0.75, summer.shape)
    mean = np.clip(traits["temperature"] + traits["temperature_swing"] * summer + spells, -8.0, 42.0)
    swing = (4.0 + 13.0 * traits["dryness"]) * (0.35 + 0.65 * clearness / 0.6)
    depression = (1.5 + 17.0 * traits["dryness"] ** 1.5) * (0.5 + 0.5 * clearness / 0.5)
    depression = np.maximum(depression + 1.5 * _persistent(random, 0.6, summer.shape), 0.5)
    hour = (np.arange(HOURS) + 0.5)[:, None]
    # Warmest at 15:00 solar, coldest near sunrise: a day wave and a little of its second harmonic.
    wave = np.cos(2.0 * np.pi * (hour - 15.0) / 24.0) + 0.15 * np.cos(4.0 * np.pi * (hour - 14.0) / 24.0)
    air = np.repeat(mean, HOURS, axis=0) + np.repeat(swing, HOURS, axis=0) / 2.0 * np.tile(wave, (DAYS, 1))
    dew = np.minimum(np.repeat(mean - depression, HOURS, axis=0), air - 0.2)
    return air, dew


def _hours_of_wind(traits: dict[str, Array], random: np.random.Generator) -> Array:
    spells = np.exp(0.4 * _persistent(random, 0.5, (DAYS, traits["wind"].size)) - 0.08)
    hour = (np.arange(HOURS) + 0.5)[:, None]
    breeze = 1.0 + traits["breeze"] * np.cos(2.0 * np.pi * (hour - 15.0) / 24.0)
    gusts = np.exp(0.25 * random.standard_normal((DAYS * HOURS, traits["wind"].size)) - 0.03)
    return np.asarray(traits["wind"] * np.repeat(spells, HOURS, axis=0) * np.tile(breeze, (DAYS, 1)) * gusts)
