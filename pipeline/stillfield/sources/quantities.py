"""Weather in vocabulary names and units, made of what a file's variables mean.

A quantity may be there as it is, or follow from others: wind from its components, the mean temperature from
the extremes, the dew point from the vapour pressure, and, when asked for, sunshine from the temperature range.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import xarray as xr

from stillfield.errors import WeatherError
from stillfield.physics.sun import day_length, extraterrestrial_irradiation
from stillfield.physics.temperature_range import irradiation_from_temperature
from stillfield.physics.vapour import dew_point_at_pressure, vapour_pressure_of_specific_humidity
from stillfield.physics.wind import wind_speed_at_2m
from stillfield.sources.calendars import solar_day_of_year
from stillfield.sources.grids.own_days import dated, describe_days
from stillfield.sources.grids.sunshine import Meaning, differences, grows_from_midnight, settle_meaning
from stillfield.sources.recognise import Found
from stillfield.sources.typical.alignment import TOLERANCE_MINUTES, measure_sun_offset
from stillfield.sources.units import conversion, irradiation_kind
from stillfield.vocabulary import DAY_WEATHER, STEP_WEATHER

_LONGEST_COMPONENT_STEP_HOURS = 6.0
#: The clock is checked on this many days, at steps up to this long.
_CLOCK_DAYS = 12
_LONGEST_CHECKED_STEP_HOURS = 3.0


@dataclass(frozen=True)
class Joined:
    """One role over all files, stamps as in the files; counts of what joining them changed, by cell."""

    found: Found
    placed: str | None
    values: xr.DataArray
    where: str
    counts: Mapping[str, xr.DataArray | int] = field(default_factory=dict)


def estimated_sun(joined: dict[str, Joined], settings: Mapping[str, float] | None) -> list[str]:
    """Put sunshine estimated from the temperature range beside variables that lack it, if that is asked for."""
    if settings is None:
        return []
    low, high = joined.get("temp_air_min"), joined.get("temp_air_max")
    if "sun" in joined or low is None or high is None:
        raise WeatherError(
            "radiation_from_temperature has no use here", where=next(iter(joined.values())).where if joined else None,
            got="measured sunshine" if "sun" in joined else "no minimum and maximum of the air temperature",
            cure="Leave radiation_from_temperature out.",
        )
    if step_hours_of(low) < 24.0:
        raise WeatherError("radiation_from_temperature takes daily extremes", where=low.where,
                           got=f"a step of {step_hours_of(low):g} h")
    k_rs = float(settings["k_rs"])
    coldest, warmest = (_converted(_placed(one, 24.0), "degC") for one in (low, high))
    coldest, warmest = xr.align(coldest, warmest, join="inner")
    cells = coldest["latitude"].dims[0]
    outside = xr.DataArray(
        extraterrestrial_irradiation(coldest["latitude"].values, solar_day_of_year(coldest["time"])),
        dims=("time", cells), coords={"time": coldest["time"], cells: coldest[cells]},
    )
    above_sea = coldest["elevation"].fillna(0.0) if "elevation" in coldest.coords else xr.DataArray(0.0)
    sun = xr.apply_ufunc(
        lambda cold, warm, out, height: irradiation_from_temperature(cold, warm, out, k_rs=k_rs, elevation=height),
        coldest, warmest, outside, above_sea, dask="parallelized", output_dtypes=[float],
    ).transpose(*coldest.dims)
    found = Found("sun", "irradiation", "MJ m-2", "daily-total", None, None, "", "estimate")
    joined["sun"] = Joined(found, None, sun, low.where)
    return [f"WARNING: sunshine was not measured: it is estimated from the temperature range with k_rs {k_rs:g} "
            "(Hargreaves & Samani, FAO-56 equation 50). Monthly means may be 10 to 20 % off, single days far more."]


def step_hours_of(joined: Joined) -> float:
    """Step of a time axis in hours; gaps are allowed, uneven steps and months are not."""
    index = joined.values.indexes["time"]
    if len(index) < 2:
        if joined.placed == "bounds":
            return _of_bounds(joined)
        raise WeatherError("one time alone does not tell the time step", where=joined.where,
                           wanted="two times, or time bounds", cure="Give all files of the series together.")
    steps = np.asarray((index[1:] - index[:-1]).total_seconds()) / 3600.0
    least = float(steps.min())
    where = joined.where
    if least > 24.0 * 27:
        raise WeatherError("this is monthly weather", where=where, got=f"steps of {least / 24:g} days",
                           wanted="daily or hourly steps",
                           cure="The yield of a mean day is not the mean yield: kind 'monthly-means' makes days.")
    whole = steps / least
    if least <= 0.0 or not np.allclose(whole, np.round(whole), atol=1e-3) or not _divides_day(least):
        odd = int(np.argmax(np.abs(whole - np.round(whole))))
        raise WeatherError("the time steps are uneven", where=where,
                           got=f"{steps[odd]:g} h after {str(index[odd])[:16]}, elsewhere {least:g} h",
                           wanted="steps of 24 h or a whole part of it")
    if joined.placed == "bounds" and not np.isclose(_of_bounds(joined), least):
        raise WeatherError("a value stands for another span than the time step", where=joined.where,
                           got=f"time bounds of {_of_bounds(joined):g} h every {least:g} h", wanted="bounds that meet",
                           cure="Take a file of plain daily or hourly values, not running means or samples.")
    return least


def _of_bounds(joined: Joined) -> float:
    hours = float(joined.values.attrs["bounds_hours"])
    if not _divides_day(hours):
        raise WeatherError("this is neither daily nor hourly weather", where=joined.where,
                           got=f"time bounds {hours / 24.0:g} days apart", wanted="daily or hourly steps",
                           cure="The yield of a mean day is not the mean yield: kind 'monthly-means' makes days.")
    return hours


def _divides_day(hours: float) -> bool:
    return hours <= 24.0 and bool(np.isclose(24.0 / hours, round(24.0 / hours)))


def _shifted(values: xr.DataArray, hours: float) -> xr.DataArray:
    import pandas as pd

    return values if not hours else values.assign_coords(
        time=values.indexes["time"] + pd.Timedelta(seconds=round(hours * 3600)))


def _kind(joined: Joined) -> str:
    return irradiation_kind(joined.found.units, where=f"{joined.found.name} in {joined.where}")


def _placed(joined: Joined, step_hours: float) -> Joined:
    """Bring daily stamps to the start of their day and mid-step stamps to the start of the step."""
    index = joined.values.indexes["time"]
    if step_hours >= 24.0:
        days = dated(joined.values, bounds=joined.placed == "bounds", stamped_at_end=joined.found.stamp == "end")
        return Joined(joined.found, joined.placed, days, joined.where)
    if joined.placed == "bounds":
        return joined
    seconds = (index - index.floor("D")).total_seconds()
    phase = float(seconds[0]) / 3600.0 % step_hours
    middle = joined.found.stamp == "middle" or (joined.found.stamp is None and np.isclose(phase, step_hours / 2.0))
    if not middle:
        return joined
    return Joined(joined.found, "middle", _shifted(joined.values, -step_hours / 2.0), joined.where)


def sun_meaning(joined: Joined, step_hours: float) -> Meaning:
    """What the sunshine of the files means; a few days of a few cells are looked at where their unit leaves it open.

    Raises
    ------
    WeatherError
        If unit, step and stated meaning contradict each other.
    """
    grows = None
    if step_hours < 24.0 and _kind(joined) == "energy":
        grows = grows_from_midnight(_sample(joined.values, step_hours), step_hours)
    return settle_meaning(joined.found, step_hours=step_hours, placed=_placed(joined, step_hours).placed, grows=grows,
                          where=joined.where)


def sunshine(
    joined: Joined, meaning: Meaning, step_hours: float, day_clock: str | None = None
) -> tuple[xr.DataArray, list[str]]:
    """Irradiation of days [MJ m-2] or irradiance of steps [W m-2] and what was assumed.

    Parameters
    ----------
    joined : Joined
        The sunshine as the files have it.
    meaning : Meaning
        From `sun_meaning`.
    step_hours : float
        [h]
    day_clock : str, optional
        Clock of the days of daily files (`own_days.clock_hours`).
    """
    placed = _placed(joined, step_hours)
    values = differences(placed.values, step_hours) if meaning.accumulates else placed.values
    sun = _shifted(_scaled(values, meaning), meaning.shift_steps * step_hours)
    if meaning.of_daylight:
        sun = sun * _day_length(sun)
    if step_hours >= 24.0:
        said = describe_days(joined.values, bounds=joined.placed == "bounds", day_clock=day_clock)
        return sun, [meaning.sentence, *said]
    return sun, [meaning.sentence, *_check_clock(sun, step_hours)]


def _day_length(sun: xr.DataArray) -> xr.DataArray:
    """Hours of daylight of every day and row or site (FAO-56 equation 34)."""
    cells = sun["latitude"].dims[0]
    hours = day_length(sun["latitude"].values, solar_day_of_year(sun["time"]))
    return xr.DataArray(hours, dims=("time", cells)).astype(sun.dtype)


def _check_clock(sun: xr.DataArray, step_hours: float) -> list[str]:
    """Hold a few days of a few cells against the sun, so that a stamp read at the wrong end is noticed."""
    if step_hours > _LONGEST_CHECKED_STEP_HOURS:
        return []
    index = sun.indexes["time"]
    midnights = np.flatnonzero(index == index.floor("D"))
    first = int(midnights[0]) if midnights.size else len(index)
    steps = round(24.0 / step_hours)
    days = min((len(index) - first) // steps, _CLOCK_DAYS)
    part = sun.isel(time=slice(first, first + days * steps))
    stamps = part.indexes["time"]
    if days == 0 or not np.isclose((stamps[-1] - stamps[0]).total_seconds() / 3600.0, 24.0 * days - step_hours):
        return []
    sample = _sample(part, step_hours, days=days)
    day_of_year = np.asarray(solar_day_of_year(sample["time"])[::steps], dtype=float)
    fits = [
        measure_sun_offset(values, latitude=float(cell["latitude"]), longitude=float(cell["longitude"]),
                           clock_offset_hours=float(cell.coords.get("utc_offset_hours", 0.0)), day_of_year=day_of_year)
        for cell, values in ((sample.isel(cell=i), sample.values[:, i]) for i in range(sample.sizes["cell"]))
    ]
    offsets = [fit.offset_minutes for fit in fits if fit is not None]
    if not offsets:
        return []
    found, ideal = float(np.median(offsets)), 30.0 * step_hours
    told = f"Sunshine follows the sun {found:.0f} minutes after the start of the step ({ideal:.0f} is ideal)."
    if abs(found - ideal) < TOLERANCE_MINUTES:
        return [told]
    return [f"WARNING: {told} The stamps may mark another end of the step; check `means` and `stamp`."]


def _scaled(values: xr.DataArray, meaning: Meaning) -> xr.DataArray:
    return values if meaning.factor == 1.0 else values * meaning.factor


def _sample(values: xr.DataArray, step_hours: float, *, days: int = 3) -> xr.DataArray:
    """First days of up to nine cells, computed, as (time, cell)."""
    part = values.isel(time=slice(0, round(24.0 * days / step_hours) + 1))
    space = [dim for dim in values.dims if dim != "time"]
    picks = {dim: np.unique(np.linspace(0, values.sizes[dim] - 1, 5).astype(int)[1:4]) for dim in space}
    return part.isel(picks).stack(cell=space).transpose("time", "cell").compute()


def plain(joined: Mapping[str, Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Roles that need one conversion: temperatures, humidity, beam and diffuse."""
    table = DAY_WEATHER if step_hours >= 24.0 else STEP_WEATHER
    built, notes = {}, []
    for role, one in joined.items():
        if role in {"wind_u", "wind_v", "wind_speed", "vapour_pressure", "specific_humidity"}:
            continue
        if role not in table:
            notes.append(f"{one.found.name} ({role}) is not used at this time step.")
            continue
        built[role] = _converted(_placed(one, step_hours), table[role].unit)
    return built, notes


def _converted(one: Joined, unit: str) -> xr.DataArray:
    factor, offset = conversion(one.found.units, unit, where=f"{one.found.name} in {one.where}")
    values = one.values if factor == 1.0 else one.values * factor
    return values if offset == 0.0 else values + offset


def wind(joined: Mapping[str, Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Wind speed at 2 m, from the speed or its components.

    Raises
    ------
    WeatherError
        If the height is unknown, or the components are means over too long a step.
    """
    if "wind_speed" in joined:
        one = joined["wind_speed"]
        speed = _converted(_placed(one, step_hours), "m s-1")
    elif {"wind_u", "wind_v"} <= set(joined):
        one = joined["wind_u"]
        if step_hours > _LONGEST_COMPONENT_STEP_HOURS:
            raise WeatherError(
                "wind components averaged over a day do not give the wind speed", where=one.where,
                got=f"a step of {step_hours:g} h", wanted="components at steps of at most 6 h, or a wind speed",
                cure="Get the daily mean of the speed, or hourly components.",
            )
        u, v = (_converted(_placed(joined[role], step_hours), "m s-1") for role in ("wind_u", "wind_v"))
        u, v = xr.align(u, v, join="inner")
        speed = (u**2 + v**2) ** 0.5
    else:
        return {}, []
    height = one.found.height_m
    if height is None:
        raise WeatherError("the height of the wind is unknown", where=f"{one.found.name} in {one.where}",
                           wanted="metres above ground",
                           cure=f"Set variables.{one.found.role}.height_m in the run file.")
    # The conversion is one factor, so it is taken at unit speed and stays lazy.
    factor = float(wind_speed_at_2m(1.0, height))
    notes = [f"Wind was brought from {height:g} m to 2 m (FAO-56 equation 47)."] if height != 2.0 else []
    return {"wind_speed": speed if factor == 1.0 else speed * factor}, notes


def mean_temperature(joined: Mapping[str, Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Mean air temperature from the extremes of a day, where there is none."""
    extremes = ("temp_air_min", "temp_air_max")
    if "temp_air" in joined or step_hours < 24.0 or not set(extremes) <= set(joined):
        return {}, []
    low, high = (_converted(_placed(joined[role], step_hours), "degC") for role in extremes)
    low, high = xr.align(low, high, join="inner")
    return {"temp_air": 0.5 * (low + high)}, ["Mean air temperature is taken as the middle of minimum and maximum."]


def dew_point(joined: Mapping[str, Joined], step_hours: float) -> tuple[dict[str, xr.DataArray], list[str]]:
    """Dew point from vapour pressure or specific humidity, where neither it nor relative humidity is there."""
    role = next((role for role in ("vapour_pressure", "specific_humidity") if role in joined), None)
    if role is None or {"temp_dew", "relative_humidity"} & set(joined):
        return {}, []
    one = _placed(joined[role], step_hours)
    if role == "vapour_pressure":
        pressure, said = _converted(one, "Pa"), "vapour pressure"
    else:
        pressure = xr.apply_ufunc(vapour_pressure_of_specific_humidity, _converted(one, "1"), dask="parallelized",
                                  output_dtypes=[float])
        said = "specific humidity at sea-level pressure"
    # Less than 0.01 hPa is no humidity anyone measures near the ground, and has no logarithm at 0.
    dew = xr.apply_ufunc(dew_point_at_pressure, pressure.clip(min=1.0), dask="parallelized", output_dtypes=[float])
    return {"temp_dew": dew}, [f"Dew point was derived from {said} (FAO-56 equation 11)."]
