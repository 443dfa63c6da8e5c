"""Litres of single made days through the whole chain: sun, cover, sky, hourly balance."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from stillfield.physics.forcing import step_forcing
from stillfield.physics.heat_balance import Forcing, Record, simulate
from stillfield.physics.irradiance import disaggregate_day
from stillfield.physics.still import CoverMaterial, Panel, Still

Array = NDArray[np.floating[Any]]

#: Wind at 2 m and depression of the dew point taken where a source tells neither: fair-weather values, common
#: practice, no source. [m s-1], [K]
USUAL_WIND_M_S = 2.0
USUAL_DEW_DEPRESSION_K = 10.0
#: Latent heat by which efficiencies are worked out, of water at 43 degC. [MJ kg-1]
LATENT_MJ = 2.40


def household_still(condition: str = "maintained", *, depth_m: float = 0.02, tilt_deg: float = 15.0) -> Still:
    """One pane of ordinary glass over fresh water, the still most measurements were made with.

    Parameters
    ----------
    condition : str
        Central condition.
    depth_m : float
        Depth of the water. [m]
    tilt_deg : float
        Tilt of the cover. [deg]

    Returns
    -------
    Still
    """
    glass = CoverMaterial(extinction_per_m=22.0)
    return Still("household", (Panel(1.0, tilt_deg),), cover=glass, brine_depth_m=depth_m, condition=condition)


@dataclass(frozen=True)
class MadeDay:
    """A day that comes back the same every day, one or several cells.

    Attributes
    ----------
    litres : ndarray, shape (cell,)
        From 6 to 6 o'clock. [L m-2]
    record : Record
        What went on in every hour.
    temp_air : ndarray, shape (24, cell)
        [degC]
    ghi : ndarray, shape (24, cell)
        [W m-2]
    """

    litres: Array
    record: Record
    temp_air: Array
    ghi: Array

    def share_of_hours(self, first: int, last: int) -> Array:
        """Share of the day's litres made from hour `first` to hour `last` of solar time. [1]."""
        hourly = self.record.distillate
        return np.asarray(hourly[first:last].sum(axis=0) / hourly.sum(axis=0))


def made_day(
    still: Still,
    irradiation: ArrayLike,
    *,
    temp_air: ArrayLike = 25.0,
    wind_speed: ArrayLike = USUAL_WIND_M_S,
    latitude: float = 25.0,
    day_of_year: int = 80,
) -> MadeDay:
    """Run the hourly balance on a smooth day until it repeats itself.

    Parameters
    ----------
    still : Still
        Design in its central condition.
    irradiation, temp_air, wind_speed : array_like, shape (cell,) or ()
        Of the day. [MJ m-2], [degC], [m s-1]
    latitude : float
        [deg north]
    day_of_year : int
        1 to 365.

    Returns
    -------
    MadeDay

    Examples
    --------
    >>> still = household_still()
    >>> bool(np.diff(made_day(still, [15.0, 20.0]).litres)[0] > 0.0)
    True
    """
    forcing, temp_air_steps, ghi = _day_forcing(still, irradiation, temp_air, wind_speed, (latitude, day_of_year))
    return _periodic(forcing, still, temp_air_steps, ghi)


def scaled_days(still: Still, irradiation: float, factors: ArrayLike) -> MadeDay:
    """The made day of 25 °C and `USUAL_WIND_M_S` with its sunshine alone scaled; the sky and the air stay.

    Parameters
    ----------
    still : Still
        Design in its central condition.
    irradiation : float
        Of the day that is scaled. [MJ m-2]
    factors : array_like, shape (cell,)
        [1]

    Returns
    -------
    MadeDay
    """
    base, temp_air, ghi = _day_forcing(still, irradiation, 25.0, USUAL_WIND_M_S, (25.0, 80))
    scale = np.atleast_1d(np.asarray(factors, dtype=float))
    forcing = replace(base, absorbed=base.absorbed * scale, cover_absorbed=base.cover_absorbed * scale)
    return _periodic(forcing, still, temp_air, ghi * scale)


def _day_forcing(
    still: Still, irradiation: ArrayLike, temp_air: ArrayLike, wind_speed: ArrayLike, where_and_when: tuple[float, int]
) -> tuple[Forcing, Array, Array]:
    """What drives the balance, with the temperature and irradiance behind it."""
    latitude, day_of_year = where_and_when
    sun, air, wind = (
        np.array(field, dtype=float)[None, :] for field in np.broadcast_arrays(
            np.atleast_1d(irradiation), np.atleast_1d(temp_air), np.atleast_1d(wind_speed))
    )
    place = np.full(sun.shape[1], latitude)
    day = np.array([day_of_year])
    steps = disaggregate_day(sun, place, day, temp_air=air, wind_speed=wind)
    dew = np.minimum(np.repeat(air - USUAL_DEW_DEPRESSION_K, 24, axis=0), steps.temp_air)
    weather = {
        "ghi": steps.ghi, "dni": steps.dni, "dhi": steps.dhi, "temp_air": steps.temp_air, "temp_dew": dew,
        "wind_speed": steps.wind_speed,
    }
    forcing, _ = step_forcing(weather, still, latitude=place, day_of_year=day, steps_per_day=24)
    return forcing, steps.temp_air, steps.ghi


def _periodic(forcing: Forcing, still: Still, temp_air: Array, ghi: Array) -> MadeDay:
    result = simulate(forcing, still, cyclic=True, engine="numpy", record=True)
    assert result.record is not None
    return MadeDay(result.daily_yield[0], result.record, temp_air, ghi)
