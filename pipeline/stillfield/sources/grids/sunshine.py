"""What the numbers of a sunshine variable mean, and the one factor and shift that follow from it.

The same unit string stands for the energy of an hour that ends or starts at the stamp, for the energy since
midnight, or for the energy of a day. The meaning is taken from the run file, or from unit, step and time
bounds where these leave only one; otherwise it is refused with the choices.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.sources.recognise import END_STAMPED, Found
from stillfield.sources.units import conversion, irradiation_kind

_ACCUMULATIONS = {"hour-ending accumulation", "hour-starting accumulation", "since-00-UTC"}
_HOURLY_CHOICES = "'hour-ending accumulation', 'hour-starting accumulation' or 'since-00-UTC'"


@dataclass(frozen=True)
class Meaning:
    """How to turn a sunshine variable into irradiation of a day or mean irradiance of a step.

    Attributes
    ----------
    factor : float
        Multiplies the numbers, after taking differences where `accumulates`.
    shift_steps : int
        Steps by which stamps move to become starts: -1 where they mark the end.
    accumulates : bool
        The numbers grow from 00 UTC on and differences have to be taken.
    sentence : str
        For the conventions.
    of_daylight : bool
        The result is energy per hour of daylight [MJ m-2 h-1] and still has to be multiplied by the day's length.
    """

    factor: float
    shift_steps: int
    accumulates: bool
    sentence: str
    of_daylight: bool = False


def settle_meaning(found: Found, *, step_hours: float, placed: str | None, grows: bool | None, where: str) -> Meaning:
    """Decide what a sunshine variable means.

    Parameters
    ----------
    found : Found
        The variable.
    step_hours : float
        Time step of the file; 24 for daily. [h]
    placed : {'bounds', 'middle', None}
        Why the stamps are already known to be starts: time bounds, or stamps in the middle of the step that
        were moved. None when the file does not tell.
    grows : bool or None
        Whether a sample grows from 00 UTC to the end of the day; None when not looked at or too dark to tell.
    where : str
        File, for errors.

    Returns
    -------
    Meaning

    Raises
    ------
    UnitsError
        If the unit is none of sunshine.
    WeatherError
        If unit, step and stated meaning contradict each other, or leave more than one reading.
    """
    place = f"{found.name} in {where}"
    kind = irradiation_kind(found.units, where=place)
    settle = _daily if step_hours >= 24.0 else _hourly
    return settle(found, kind, step_hours=step_hours, placed=placed, grows=grows, place=place)


def _contradiction(found: Found, kind: str, step_hours: float, place: str) -> WeatherError:
    step = "daily" if step_hours >= 24.0 else f"{step_hours:g}-hourly"
    return WeatherError(
        f"`means: '{found.means}'` does not go with units '{found.units}' at a {step} step",
        where=place,
        wanted="'daily-total' for an energy of a day, 'daily-mean' or 'daylight-mean' for a rate" if step_hours >= 24.0
        else "'step-mean' for a rate, " + _HOURLY_CHOICES + " for an energy",
        cure="Correct `variables.irradiation.means` or `.units` in the run file.",
    )


def _daily(
    found: Found, kind: str, *, step_hours: float, placed: str | None, grows: bool | None, place: str
) -> Meaning:
    del grows
    means = found.means
    if means is None and kind == "power":
        if "time: mean" not in found.cell_methods.replace(":  ", ": "):
            raise WeatherError(
                f"irradiation has units '{found.units}'; a daily total needs energy ('J m-2', 'MJ m-2', 'kWh m-2') "
                "or a stated averaging period",
                where=place,
                cure="Set variables.irradiation.means: 'daily-mean' in the run file if it is the mean of 24 hours, "
                "'daylight-mean' if it is the mean from sunrise to sunset, or correct the file.",
            )
        means = "daily-mean"
    means = means or "daily-total"
    if means in {"daily-mean", "step-mean"} and kind == "power":
        factor = conversion(found.units, "W m-2", where=place)[0] * 0.0864
        return Meaning(factor, 0, False, f"{found.name} is the mean irradiance of the whole day (24 hours).")
    if means == "daylight-mean" and kind == "power":
        factor = conversion(found.units, "W m-2", where=place)[0] * 0.0036
        return Meaning(factor, 0, False, f"{found.name} is the mean irradiance from sunrise to sunset; the day's "
                       "length is that of FAO-56 equation 34.", of_daylight=True)
    if means == "daily-total" and kind != "power":
        wanted = "MJ m-2" if kind == "energy" else "MJ m-2 day-1"
        return Meaning(conversion(found.units, wanted, where=place)[0], 0, False,
                       f"{found.name} is the energy of the whole day.")
    if means == "since-00-UTC" and kind == "energy":
        return Meaning(conversion(found.units, "MJ m-2", where=place)[0], 0 if placed == "bounds" else -1, False,
                       f"{found.name} at 00 UTC is the energy of the day before.")
    raise _contradiction(found, kind, step_hours, place)


def _hourly(
    found: Found, kind: str, *, step_hours: float, placed: str | None, grows: bool | None, place: str
) -> Meaning:
    means = found.means
    if kind != "energy":
        if means not in {None, "step-mean"}:
            raise _contradiction(found, kind, step_hours, place)
        factor = conversion(found.units, "W m-2", where=place)[0]
        return _rate(found, factor, placed)
    if means is None and grows:
        means = "since-00-UTC"
    if means is None and placed is not None:
        means = "hour-starting accumulation"
    if means is None:
        raise WeatherError(
            f"the units '{found.units}' at a {step_hours:g}-hourly step do not say of which period the energy is",
            where=place, wanted=_HOURLY_CHOICES,
            cure="Set variables.irradiation.means in the run file; the provider's documentation tells.",
        )
    if means not in _ACCUMULATIONS or (means == "since-00-UTC" and placed is not None):
        raise _contradiction(found, kind, step_hours, place)
    if grows is not None and grows != (means == "since-00-UTC"):
        raise WeatherError(
            f"`means: '{means}'` contradicts the numbers, which {'grow' if grows else 'do not grow'} from 00 UTC on",
            where=place, wanted=_HOURLY_CHOICES, cure="Correct variables.irradiation.means in the run file.",
        )
    factor = conversion(found.units, "MJ m-2", where=place)[0] * 1e6 / (step_hours * 3600.0)
    if means == "since-00-UTC":
        return Meaning(factor, -1, True, f"{found.name} accumulates from 00 UTC; differences were taken.")
    ends = means == "hour-ending accumulation" and placed is None
    sentence = f"{found.name} is the energy of the step that {'ends' if ends else 'starts'} at its stamp."
    return Meaning(factor, -1 if ends else 0, False, sentence)


def _rate(found: Found, factor: float, placed: str | None) -> Meaning:
    if placed == "bounds":
        return Meaning(factor, 0, False, f"{found.name} is a mean over the time bounds of the file.")
    if placed == "middle":
        return Meaning(factor, 0, False, f"{found.name} is stamped in the middle of its step.")
    if found.stamp == "end" or (found.stamp is None and found.name.lower() in END_STAMPED):
        return Meaning(factor, -1, False, f"{found.name} is the mean of the step that ends at its stamp.")
    if found.stamp == "start":
        return Meaning(factor, 0, False, f"{found.name} is the mean of the step that starts at its stamp.")
    return Meaning(factor, 0, False,
                   f"{found.name} is assumed to be the mean of the step that starts at its stamp; set `stamp` if not.")


def grows_from_midnight(sample: xr.DataArray, step_hours: float) -> bool | None:
    """Whether sunshine numbers only grow from 00 UTC to the end of the UTC day.

    Parameters
    ----------
    sample : DataArray, dims (time, cell)
        A few days of a few cells, stamps as in the file, computed.
    step_hours : float
        Step of the file. [h]

    Returns
    -------
    bool or None
        None when the sample is too short or too dark to tell.
    """
    values = np.asarray(sample.values, dtype=float)
    bright = np.nanmax(np.where(np.isfinite(values), values, 0.0), axis=0) > 0.0
    if values.shape[0] * step_hours < 36.0 or not bright.any():
        return None
    change = np.diff(values[:, bright], axis=0)
    hour = sample["time"].dt.hour.values[1:] + sample["time"].dt.minute.values[1:] / 60.0
    restarts = np.isclose(hour, step_hours)
    slack = 0.002 * np.nanmax(values[:, bright], axis=0)
    return bool(np.all(~(change[~restarts] < -slack))) and bool(np.any(change[restarts] < -slack))


def differences(accumulated: xr.DataArray, step_hours: float) -> xr.DataArray:
    """Energy of each step from energy that accumulates from 00 UTC.

    The value stamped 00 UTC closes the day before. A step after a gap is missing.

    Parameters
    ----------
    accumulated : DataArray, with dim time
        Stamps mark the end of the step.
    step_hours : float
        [h]

    Returns
    -------
    DataArray
        Same unit and stamps.
    """
    index = accumulated.indexes["time"]
    hour = accumulated["time"].dt.hour + accumulated["time"].dt.minute / 60.0
    opens_day = xr.DataArray(np.isclose(hour.values, step_hours), dims="time")
    gap = (index[1:] - index[:-1]).total_seconds() / 3600.0
    follows = xr.DataArray(np.concatenate([[False], np.isclose(gap, step_hours)]), dims="time")
    before = accumulated.shift(time=1)
    return (accumulated - before).where(follows).where(~opens_day, accumulated)
