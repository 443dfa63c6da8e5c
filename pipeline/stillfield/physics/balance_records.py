"""What goes into the heat balance and what comes out of it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stillfield.physics.balance_kernel import Numbers
from stillfield.physics.vapour import KELVIN
from stillfield.physics.wind import wind_coefficient

Array = NDArray[np.floating[Any]]

#: Rows of the array behind `Record`.
CHANNELS = (
    "water_mean", "cover", "convected", "evaporated", "radiated", "emitted", "stored", "distillate", "water", "ice"
)


@dataclass(frozen=True)
class Forcing:
    """Weather and sunshine of every step and cell, means over the step.

    All arrays have shape (time, cell) with whole days, or broadcast to it. The run is computed in the
    precision of `absorbed`: single precision changes a day's yield by less than 1e-4 and halves the time.

    Attributes
    ----------
    absorbed : ndarray
        Sunshine absorbed in water and liner, per basin area. [W m-2]
    cover_absorbed : ndarray
        Sunshine absorbed in the cover, per basin area. [W m-2]
    temp_air : ndarray
        [degC]
    wind_speed : ndarray
        At 2 m. [m s-1]
    temp_sky : ndarray
        Radiative sky temperature. [degC]
    """

    absorbed: Array
    cover_absorbed: Array
    temp_air: Array
    wind_speed: Array
    temp_sky: Array


@dataclass(frozen=True)
class Record:
    """What went on in every step; means over the step unless it says otherwise. All (time, cell).

    Attributes
    ----------
    distillate : ndarray
        Of the step, after the leak. [kg m-2]
    water, ice : ndarray
        Water temperature [degC] and heat of fusion given off [J m-2], both at the end of the step.
    cover : ndarray
        Cover temperature. [degC]
    convected, evaporated, radiated : ndarray
        Heat from water to cover, per basin area. [W m-2]
    base_loss, cover_loss : ndarray
        Heat lost through base and sides, and from the cover to air and sky. [W m-2]
    stored : ndarray
        Heat taken up by water, liner and ice. [W m-2]
    residual : ndarray
        Sunshine absorbed less losses less heat stored: what the ledger does not explain. [W m-2]
    """

    distillate: Array
    water: Array
    ice: Array
    cover: Array
    convected: Array
    evaporated: Array
    radiated: Array
    base_loss: Array
    cover_loss: Array
    stored: Array
    residual: Array


@dataclass(frozen=True)
class BalanceResult:
    """Litres of every day and cell.

    Attributes
    ----------
    daily_yield : ndarray, shape (day, cell)
        Distillate per basin area, after the leak, from the start of the yield day to that of the next; NaN
        where weather is missing. [kg m-2]
    frost : ndarray of bool, shape (day, cell)
        Yield days on which there was ice in the basin at some time.
    record : Record or None
        Where it was asked for.
    """

    daily_yield: Array
    frost: NDArray[np.bool_]
    record: Record | None = None


def record_from(kept: Array, fields: tuple[Array, ...], k: Numbers, capacity: Array) -> Record:
    """Fluxes and residual of every step.

    Parameters
    ----------
    kept : ndarray, shape (10, time, cell)
        Rows of `CHANNELS`: means over the step, its distillate, and water and ice at its end.
    fields : tuple of 5 ndarray, shape (time, cell)
        Fields of the `Forcing`.
    k : Numbers
        Constants of the run.
    capacity : ndarray, shape (cell,)
        Heat capacity of water and liner. [J m-2 K-1]

    Returns
    -------
    Record
    """
    absorbed, cover_absorbed, temp_air, wind, temp_sky = fields
    log = dict(zip(CHANNELS, kept, strict=True))
    sky = k.radiation_outside * (temp_sky + KELVIN) ** 4
    cover_loss = k.area_ratio * wind_coefficient(wind) * (log["cover"] - temp_air) + log["emitted"] - sky
    base_loss = k.loss * (log["water_mean"] - temp_air)
    residual = k.absorbed_share * absorbed + cover_absorbed - base_loss - cover_loss - log["stored"]
    return Record(
        distillate=log["distillate"],
        water=log["water"],
        ice=log["ice"] * capacity,
        cover=log["cover"],
        convected=log["convected"],
        evaporated=log["evaporated"],
        radiated=log["radiated"],
        base_loss=base_loss,
        cover_loss=cover_loss,
        stored=log["stored"],
        residual=residual,
    )
