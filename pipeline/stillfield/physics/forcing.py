"""From the weather of steps to what drives the heat balance of a still: optics, wind and sky."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.basin import absorbed
from stillfield.physics.compiling import Engine, is_compiled
from stillfield.physics.gain import gain_over_steps
from stillfield.physics.heat_balance import Forcing
from stillfield.physics.irradiance import clearness_index
from stillfield.physics.sky import (
    CLOUDLESS_CLEARNESS,
    clear_sky_emissivity,
    cloudy_sky_emissivity,
    sky_temperature,
    sky_temperature_swinbank,
)
from stillfield.physics.step_optics import MJ_PER_WH, compiled_forcing, step_optics
from stillfield.physics.still import Still
from stillfield.physics.sun import extraterrestrial_irradiation
from stillfield.physics.vapour import KELVIN, dew_point

Array = NDArray[np.floating[Any]]


def step_forcing(
    weather: Mapping[str, Array],
    still: Still,
    *,
    latitude: Array,
    day_of_year: NDArray[np.integer[Any]],
    steps_per_day: int,
    clock_to_solar_hours: Array | float = 0.0,
    engine: Engine = "auto",
) -> tuple[Forcing, Array]:
    """Bring the weather of steps to the still.

    In single precision it is compiled where numba is installed, see `step_optics`: a step is then within 0.04 W m-2
    and 0.002 K of the exact path that double precision takes.

    Parameters
    ----------
    weather : mapping of str to ndarray, shape (day * steps_per_day, cell)
        ``ghi``, ``temp_air``, ``wind_speed`` in `vocabulary.STEP_WEATHER` units, and where known ``dni``,
        ``dhi``, ``temp_dew`` or ``relative_humidity``.
    still : Still
        Design in its central condition.
    latitude : ndarray, shape (cell,)
        [deg north]
    day_of_year : ndarray of int, shape (day,)
        1 to 366.
    steps_per_day : int
        Steps in a day.
    clock_to_solar_hours : ndarray, shape (cell,)
        Hours from the clock to local mean solar time. [h]
    engine : {'auto', 'compiled', 'numpy'}
        'numpy' is the exact path in either precision, 'compiled' the quick one, whose results are in single
        precision.

    Returns
    -------
    forcing : Forcing
        What `heat_balance.simulate` takes.
    transmitted : ndarray, shape (day, cell)
        S, the sunshine transmitted to the basin. [MJ m-2 of basin]
    """
    ghi = weather["ghi"]
    temp_air, wind_speed = weather["temp_air"], weather["wind_speed"]
    if is_compiled(engine, "the optics of steps") and (engine == "compiled" or ghi.dtype == np.float32):
        optics = step_optics(
            still, latitude, steps_per_day=steps_per_day, clock_to_solar_hours=clock_to_solar_hours
        )
        in_basin, in_cover, above, daily = compiled_forcing(weather, optics, day_of_year)
        return Forcing(in_basin, in_cover, temp_air, wind_speed, above), daily
    gain = gain_over_steps(
        still, latitude, day_of_year, ghi=ghi, dni=weather.get("dni"), dhi=weather.get("dhi"),
        clock_to_solar_hours=clock_to_solar_hours,
    )
    sky = sky_over_steps(
        weather, latitude=latitude, day_of_year=day_of_year, steps_per_day=steps_per_day,
        clock_to_solar_hours=clock_to_solar_hours,
    )
    dtype = ghi.dtype
    forcing = Forcing(
        absorbed=absorbed(gain.transmitted, still).astype(dtype, copy=False),
        cover_absorbed=gain.cover_absorbed.astype(dtype, copy=False),
        temp_air=temp_air,
        wind_speed=wind_speed,
        temp_sky=sky.astype(dtype, copy=False),
    )
    daily = gain.transmitted.reshape(-1, steps_per_day, gain.transmitted.shape[1]).sum(axis=1)
    return forcing, daily * (24.0 / steps_per_day) * MJ_PER_WH


def sky_over_steps(
    weather: Mapping[str, Array],
    *,
    latitude: Array,
    day_of_year: NDArray[np.integer[Any]],
    steps_per_day: int,
    clock_to_solar_hours: Array | float = 0.0,
) -> Array:
    """Sky temperature of steps: Berdahl & Martin where humidity is known, Swinbank where not, clouds added.

    How much sky the clouds hide is taken from the clearness of the day, by night too.

    Parameters
    ----------
    weather, latitude, day_of_year, steps_per_day, clock_to_solar_hours
        As in `step_forcing`.

    Returns
    -------
    ndarray, shape (day * steps_per_day, cell)
        [degC]
    """
    temp_air = weather["temp_air"]
    if "temp_dew" in weather:
        dew: Any = weather["temp_dew"]
    elif "relative_humidity" in weather:
        dew = dew_point(temp_air, weather["relative_humidity"])
    else:
        dew = None
    days = len(day_of_year)
    if dew is None:
        clear: Any = ((sky_temperature_swinbank(temp_air) + KELVIN) / (temp_air + KELVIN)) ** 4
    else:
        hour = np.tile((np.arange(steps_per_day) + 0.5) * (24.0 / steps_per_day), days)[:, None]
        clear = clear_sky_emissivity(dew, hour + clock_to_solar_hours)
    irradiation = weather["ghi"].reshape(days, steps_per_day, -1).sum(axis=1) * (24.0 / steps_per_day) * MJ_PER_WH
    clearness = clearness_index(irradiation, extraterrestrial_irradiation(latitude, day_of_year))
    index = np.repeat(clearness / CLOUDLESS_CLEARNESS, steps_per_day, axis=0)
    return np.asarray(sky_temperature(temp_air, cloudy_sky_emissivity(clear, index)))
