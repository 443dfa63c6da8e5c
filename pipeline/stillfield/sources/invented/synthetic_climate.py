"""An invented climate: the daily weather of a dry, salty coast, from noise, season and distance to the sea.

Every constant here is invented so that the result looks like a low-latitude coastal desert: a foggy early
summer on the shore, a few weeks of late-summer cloud inland, a hazy spring and an odd winter front. None of
it is measured anywhere. Arrays are ``(days, cells)`` in single precision.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from stillfield.sources.invented.synthetic_fields import (
    TURBIDITY_NODES,
    Floats,
    Season,
    clear_sky_parabolas,
    random_waves,
    red_noise,
    season_wave,
    season_weight,
    wave_basis,
)

WAVES = 40

FOG = Season(peak_day=165.0, spread_days=32.0)
MONSOON = Season(peak_day=243.0, spread_days=21.0)
DUST = Season(peak_day=88.0, spread_days=26.0)
FRONTS = Season(peak_day=12.0, spread_days=28.0)
SPRING_WIND = Season(peak_day=118.0, spread_days=38.0)


@dataclass(frozen=True)
class Wander:
    """How one ingredient of the weather wanders: its reach in space and its memory in time.

    Attributes
    ----------
    length_km : float
        Length scale of the spatial correlation. [km]
    persistence : float
        Correlation of a day with the day before. [1]
    """

    length_km: float
    persistence: float


#: Ingredients in the order of their random streams; append only, or every invented year changes.
WANDERS = {
    "systems": Wander(260.0, 0.62),
    "local_cloud": Wander(48.0, 0.30),
    "marine": Wander(190.0, 0.72),
    "dust": Wander(320.0, 0.66),
    "warmth": Wander(380.0, 0.78),
    "wind": Wander(150.0, 0.45),
}
#: What differs from year to year, in units of its own spread.
YEARLY = ("cloud", "fog", "monsoon", "dust", "warmth")


@dataclass(frozen=True)
class Ground:
    """The places whose weather is made, one element per cell.

    Attributes
    ----------
    latitude : ndarray, shape (cells,)
        Geographic latitude. [degree]
    east_km, north_km : ndarray, shape (cells,)
        Position. [km]
    coast_km : ndarray, shape (cells,)
        Distance to the shore. [km]
    elevation_m : ndarray, shape (cells,)
        Height above the sea. [m]
    """

    latitude: Floats
    east_km: Floats
    north_km: Floats
    coast_km: Floats
    elevation_m: Floats

    def shore(self, reach_km: float) -> Floats:
        """Nearness to the sea: 1 at the shore, 1/e at `reach_km` inland."""
        nearness: Floats = np.exp(-self.coast_km / reach_km).astype(np.float32)
        return nearness


@dataclass(frozen=True)
class Chance:
    """All the chance of a run: amplitudes of the waves day by day, and the character of the years.

    Attributes
    ----------
    bases : dict of str to ndarray, shape (2 * WAVES, cells)
        Waves of each ingredient at the cells. [1]
    amplitudes : dict of str to ndarray, shape (days, 2 * WAVES)
        Daily amplitudes of each ingredient over the whole record. [1]
    years : dict of str to ndarray, shape (days,)
        Standard normal character of the year, running smoothly from one to the next. [1]
    """

    bases: dict[str, Floats]
    amplitudes: dict[str, Floats]
    years: dict[str, Floats]

    def field(self, name: str, days: slice) -> Floats:
        """Standard normal field of one ingredient, shape (days, cells)."""
        return self.amplitudes[name][days] @ self.bases[name]

    def year(self, name: str, days: slice) -> Floats:
        """Character of the year, shape (days, 1)."""
        return self.years[name][days, None]


def draw_chance(ground: Ground, *, seed: int, days: int, year_of_day: Floats) -> Chance:
    """Draw everything random at once.

    Each ingredient has its own PCG64 stream, spawned from the seed, so that one ingredient never shifts
    another and a longer record begins with the shorter one.

    Parameters
    ----------
    ground : Ground
        The places.
    seed : int
        Seed, 0 or above.
    days : int
        Length of the record. [d]
    year_of_day : ndarray, shape (days,)
        Years since the start of the record, with fraction. [year]

    Returns
    -------
    Chance
        Bases, amplitudes and years.
    """
    bases, amplitudes, years = {}, {}, {}
    for stream, (name, wander) in enumerate(WANDERS.items()):
        generator = _generator(seed, stream)
        waves = random_waves(generator, count=WAVES, length_km=wander.length_km)
        bases[name] = wave_basis(waves, ground.east_km, ground.north_km)
        amplitudes[name] = red_noise(generator, days=days, columns=2 * WAVES, persistence=wander.persistence)
    middles = np.arange(np.ceil(year_of_day[-1]) + 2.0) - 0.5
    for stream, name in enumerate(YEARLY, start=100):
        characters = _generator(seed, stream).standard_normal(middles.size)
        years[name] = np.interp(year_of_day, middles, characters).astype(np.float32)
    return Chance(bases, amplitudes, years)


def daily_weather(
    ground: Ground, chance: Chance, days: slice, day_of_year: Floats
) -> dict[str, Floats]:
    """Weather of a stretch of days at every cell.

    Parameters
    ----------
    ground : Ground
        The places.
    chance : Chance
        What `draw_chance` drew for the whole record.
    days : slice
        The stretch, as positions in the record.
    day_of_year : ndarray, shape (days,)
        Days of the stretch counted from 1 at 1 January. [d]

    Returns
    -------
    dict of str to ndarray, shape (days, cells)
        irradiation [MJ m-2]; temp_air, temp_air_min, temp_air_max, temp_dew [degC];
        wind_speed at 2 m [m s-1].
    """
    fog = fog_share(ground, chance, days, day_of_year)
    cloud = cloud_share(ground, chance, days, day_of_year)
    clearness = (1.0 - 0.74 * cloud) * (1.0 - 0.36 * fog)
    sunshine = clear_sky_of_cells(ground, turbidity(ground, chance, days, day_of_year), day_of_year)
    temperatures = air_temperatures(ground, chance, days, day_of_year, clearness=clearness)
    return {
        "irradiation": sunshine * clearness,
        **temperatures,
        "temp_dew": dew_point(
            ground, chance, days, day_of_year, cloud=cloud, temp_air_min=temperatures["temp_air_min"]
        ),
        "wind_speed": wind_speed(ground, chance, days, day_of_year, clearness=clearness),
    }


def cloud_share(ground: Ground, chance: Chance, days: slice, day_of_year: Floats) -> Floats:
    """Share of the day's sky under opaque cloud; most of it in late summer inland and in winter fronts.

    Parameters and shapes as in `daily_weather`; the result is in (0, 1). [1]
    """
    inland = 1.0 - ground.shore(70.0)
    high = (ground.elevation_m / (ground.elevation_m + 500.0)).astype(np.float32)
    monsoon = season_weight(day_of_year, MONSOON)[:, None] * np.exp(0.45 * chance.year("monsoon", days) - 0.1)
    fronts = season_weight(day_of_year, FRONTS)[:, None]
    driver = 0.77 * chance.field("systems", days) + 0.64 * chance.field("local_cloud", days)
    driver += monsoon * (0.35 + 0.5 * inland + 0.6 * high) + 0.65 * fronts + 0.25 * chance.year("cloud", days)
    return _logistic((driver - 1.75) / 0.42)


def fog_share(ground: Ground, chance: Chance, days: slice, day_of_year: Floats) -> Floats:
    """Share of the morning under fog or low stratus that the sea sends ashore, most from the south-west.

    Parameters and shapes as in `daily_weather`; the result is in [0, 1). [1]
    """
    reach = ground.shore(24.0) * np.exp(-ground.elevation_m / 300.0).astype(np.float32)
    reach *= 0.4 + 0.6 * _logistic((-(ground.east_km + 1.2 * ground.north_km) / 80.0).astype(np.float32))
    season = season_weight(day_of_year, FOG)[:, None]
    driver = chance.field("marine", days) + 2.3 * season + 0.45 * season * chance.year("fog", days)
    share: Floats = reach * _logistic((driver - 1.7) / 0.5)
    return share


def turbidity(ground: Ground, chance: Chance, days: slice, day_of_year: Floats) -> Floats:
    """Linke turbidity: sea salt and damp near the shore, dust in spring, cleaner air with height.

    Parameters and shapes as in `daily_weather`; the result stays between the outer `TURBIDITY_NODES`. [1]
    """
    thinning = np.exp(-ground.elevation_m / 2500.0).astype(np.float32)
    base = 2.7 + 0.8 * ground.shore(45.0) + 0.5 * season_wave(day_of_year, 215.0)[:, None]
    episodes = np.exp(0.6 * chance.field("dust", days) + 0.25 * chance.year("dust", days) - 0.2)
    dust = (0.25 + 2.3 * season_weight(day_of_year, DUST)[:, None]) * episodes
    dust = dust * (1.0 - 0.4 * ground.shore(60.0))
    linke: Floats = np.clip(1.0 + (base + dust - 1.0) * thinning, TURBIDITY_NODES[0], TURBIDITY_NODES[-1])
    return linke


def clear_sky_of_cells(ground: Ground, linke_turbidity: Floats, day_of_year: Floats) -> Floats:
    """Clear-sky irradiation of each cell and day, from one table over latitude and date.

    Parameters
    ----------
    ground : Ground
        The places.
    linke_turbidity : ndarray, shape (days, cells)
        Turbidity between the outer `TURBIDITY_NODES`. [1]
    day_of_year : ndarray, shape (days,)
        Days counted from 1 at 1 January. [d]

    Returns
    -------
    ndarray, shape (days, cells)
        Irradiation of the cloudless day. [MJ m-2]
    """
    rows, row_of_cell = np.unique(ground.latitude, return_inverse=True)
    level, slope, bend = clear_sky_parabolas(rows, day_of_year)[:, :, row_of_cell]
    irradiation: Floats = np.exp(level + linke_turbidity * (slope + linke_turbidity * bend))
    return irradiation


def air_temperatures(
    ground: Ground, chance: Chance, days: slice, day_of_year: Floats, *, clearness: Floats
) -> dict[str, Floats]:
    """Mean, lowest and highest air temperature: mild and late at the shore, sharp and early inland.

    Parameters and shapes as in `daily_weather`; `clearness` is the clear-sky index. [degC]
    """
    inland = 1.0 - ground.shore(90.0)
    height = (ground.elevation_m * 0.0055 + 0.35 * (ground.latitude - 20.0)).astype(np.float32)
    sea_air = 25.6 + 4.2 * season_wave(day_of_year, 230.0)[:, None]
    land_air = 30.2 + 7.2 * season_wave(day_of_year, 198.0)[:, None]
    mean = sea_air + inland * (land_air - sea_air) - height
    mean += (0.8 + 1.3 * inland) * chance.field("warmth", days) + 0.35 * chance.year("warmth", days)
    mean -= 3.0 * (1.0 - clearness)
    swing = (6.5 + 9.5 * inland) * (0.5 + 0.5 * clearness)
    return {"temp_air": mean, "temp_air_min": mean - 0.47 * swing, "temp_air_max": mean + 0.53 * swing}


def dew_point(
    ground: Ground, chance: Chance, days: slice, day_of_year: Floats, *, cloud: Floats, temp_air_min: Floats
) -> Floats:
    """Dew point: high at the shore, low inland until the late-summer clouds arrive; never above dawn's cold.

    Parameters and shapes as in `daily_weather`; `cloud` as `cloud_share` gives it. [degC]
    """
    shore = ground.shore(65.0)
    late = season_wave(day_of_year, 232.0)[:, None]
    monsoon = season_weight(day_of_year, MONSOON)[:, None] * np.exp(0.3 * chance.year("monsoon", days) - 0.05)
    inland_dew = 4.5 + 3.0 * late + 8.5 * monsoon - (0.003 * ground.elevation_m).astype(np.float32)
    dew = inland_dew + shore * (17.8 + 4.0 * late - inland_dew)
    dew += (2.2 - 0.9 * shore) * chance.field("marine", days) + 4.0 * cloud * (1.0 - shore)
    capped: Floats = np.minimum(dew, temp_air_min - 0.2)
    return capped


def wind_speed(
    ground: Ground, chance: Chance, days: slice, day_of_year: Floats, *, clearness: Floats
) -> Floats:
    """Wind at 2 m: a sea breeze fed by sunshine near the shore, and a windier spring everywhere.

    Parameters and shapes as in `daily_weather`; `clearness` is the clear-sky index. [m s-1]
    """
    background = 1.7 + 0.7 * season_weight(day_of_year, SPRING_WIND)[:, None]
    background = background + (0.0005 * ground.elevation_m).astype(np.float32)
    summer = 1.0 + 0.2 * season_wave(day_of_year, 180.0)[:, None]
    breeze = 2.2 * ground.shore(32.0) * (0.4 + 0.6 * clearness) * summer
    gusts = np.exp(0.60 * np.tanh(0.5 * chance.field("wind", days)) - 0.035)
    speed: Floats = (background + breeze) * gusts
    return speed


def _generator(seed: int, stream: int) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=(stream,))))


def _logistic(driver: Floats) -> Floats:
    return 1.0 / (1.0 + np.exp(-driver))
