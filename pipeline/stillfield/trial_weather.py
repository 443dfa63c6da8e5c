"""The weather of a trial at the place where the stills stood, and the litres the model makes of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.decisions.nearest import great_circle_km
from stillfield.engine.job import names_for
from stillfield.engine.labelled import on_local_days
from stillfield.errors import MethodError, WeatherError
from stillfield.methods import Block, Method, whole_record
from stillfield.methods.registry import get_method
from stillfield.physics.still import Still
from stillfield.physics.wind import wind_speed_at_2m
from stillfield.settings.trial_file import TrialSettings
from stillfield.settings.trial_log import WEATHER_QUANTITIES, LogRow
from stillfield.sources.calendars import solar_day_of_year
from stillfield.stages.prepare import space_of
from stillfield.stages.read import read_weather
from stillfield.vocabulary import STEP_HOURS_DAILY

Array = NDArray[np.float64]
Dates = NDArray[np.datetime64]

#: Days before the trial that are read, so that the basin has the heat of the days before.
DAYS_BEFORE = 30
#: Cells that are tried when the nearest has no weather.
MOST_CELLS_TRIED = 25
#: Kinds of weather that hold no real days, and why.
_NO_DAYS = {
    "typical-year": "a typical year is made of months of other years",
    "monthly-means": "days made from monthly means are none that ever were",
}


@dataclass(frozen=True)
class SiteDays:
    """Weather of one place on whole local days.

    Attributes
    ----------
    dates : ndarray of datetime64[D], shape (day,)
        Without gaps.
    irradiation : ndarray, shape (day,)
        [MJ m-2]
    block : Block
        What the method takes.
    method : Method
        Yield method.
    origin : tuple of str
        Sentences: where the weather comes from and what was assumed.
    """

    dates: Dates
    irradiation: Array
    block: Block
    method: Method
    origin: tuple[str, ...]

    def irradiation_on(self, dates: Dates, days_before: int) -> Array:
        """Most sunshine of each date and of some days before it; NaN where none is known. [MJ m-2]."""
        found = np.full(dates.size, np.nan)
        for back in range(days_before + 1):
            earlier = (dates - np.timedelta64(back, "D")).astype("datetime64[D]")
            found = np.fmax(found, _looked_up(self.dates, self.irradiation, earlier))
        return found


def modelled_litres(weather: SiteDays, still: Still, dates: Dates) -> Array:
    """Litres the model gives a still on some dates.

    Parameters
    ----------
    weather : SiteDays
        Of the place.
    still : Still
        In its central condition.
    dates : ndarray of datetime64[D], shape (day,)
        In any order.

    Returns
    -------
    ndarray, shape (day,)
        NaN where there is no weather. [L m-2]
    """
    found = whole_record(weather.method, weather.block, still, [still.condition])[0].litres[:, 0]
    return _looked_up(weather.dates, np.asarray(found, dtype=np.float64), dates)


def _looked_up(known: Dates, values: Array, dates: Dates) -> Array:
    place = (dates - known[0]).astype(np.int64)
    there = (place >= 0) & (place < known.size)
    return np.where(there, values[np.where(there, place, 0)], np.nan)


def site_days(settings: TrialSettings, rows: Sequence[LogRow]) -> SiteDays:
    """Open the weather of a trial.

    Parameters
    ----------
    settings : TrialSettings
        A checked trial.
    rows : sequence of LogRow
        Its log.

    Returns
    -------
    SiteDays

    Raises
    ------
    WeatherError, MethodError
        If the weather holds no real days, none at the place or in the time of the trial, or lacks what the method
        needs.
    """
    if settings.weather is None:
        return _from_log(settings, rows)
    if settings.weather.kind in _NO_DAYS:
        raise WeatherError(
            f"weather of kind '{settings.weather.kind}' has none of the days of a trial: "
            f"{_NO_DAYS[settings.weather.kind]}", where="weather", cure="Give the weather of the days themselves.",
        )
    weather = read_weather(settings.weather.kind, settings.weather.names, **settings.weather.options())
    return _at_the_site(_in_time(weather, rows), settings)


def _method(settings: TrialSettings, *, hourly: bool) -> Method:
    return get_method(settings.method, hourly=hourly, fits_folder=Path(settings.output.folder) / "fits")


def _from_log(settings: TrialSettings, rows: Sequence[LogRow]) -> SiteDays:
    method = _method(settings, hourly=False)
    if method.resolution == "hourly":
        raise MethodError(f"method '{method.name}' works on hours, and a log has days", where="method",
                          cure="Give hourly weather, or choose method 'fitted'.")
    written = np.array([row.date for row in rows], dtype="datetime64[D]")
    dates = np.arange(written.min(), written.max() + 1)
    values = {name: np.full((dates.size, 1), np.nan) for name in WEATHER_QUANTITIES}
    for row, place in zip(rows, (written - dates[0]).astype(np.int64), strict=True):
        for name, value in row.weather.items():
            values[name][place, 0] = value
    values["wind_speed"] = np.asarray(wind_speed_at_2m(values["wind_speed"], settings.log.wind_height_m))
    days = xr.DataArray(dates.astype("datetime64[ns]"), dims="time")
    block = Block(dict(values), np.array([settings.site.latitude_deg]), solar_day_of_year(days))
    origin = (f"Weather measured at the stills, from the log {settings.log.table.path.name}.",)
    return SiteDays(dates, values["irradiation"][:, 0], block, method, origin)


def _in_time(weather: xr.Dataset, rows: Sequence[LogRow]) -> xr.Dataset:
    """Cut to the time of the trial, with the days before that the basin remembers."""
    first, last = (np.datetime64(pick(row.date for row in rows), "D") for pick in (min, max))
    stamps = weather.indexes["time"]
    days = np.array([str(stamp)[:10] for stamp in stamps], dtype="datetime64[D]")
    near = np.flatnonzero((days >= first - np.timedelta64(DAYS_BEFORE, "D")) & (days <= last + np.timedelta64(1, "D")))
    if not ((days >= first - np.timedelta64(1, "D")) & (days <= last)).any():
        raise WeatherError(
            "the weather has no day of the trial", where="weather", got=f"{days.min()} to {days.max()}",
            wanted=f"{first} to {last}",
        )
    return weather.isel(time=slice(int(near[0]), int(near[-1]) + 1))


def _at_the_site(weather: xr.Dataset, settings: TrialSettings) -> SiteDays:
    hourly = float(weather.attrs["step_hours"]) < STEP_HOURS_DAILY
    method = _method(settings, hourly=hourly)
    names = list(names_for(method, weather))
    site, space = settings.site, space_of(weather)
    grid = xr.broadcast(weather["latitude"], weather["longitude"])
    latitude, longitude = (np.asarray(one.transpose(*space).to_numpy(), dtype=np.float64) for one in grid)
    away = great_circle_km(np.array(site.latitude_deg), np.array(site.longitude_deg), latitude, longitude)
    order = np.argsort(away, axis=None, kind="stable")[:MOST_CELLS_TRIED]
    for cell in order[away.ravel()[order] <= site.max_cell_distance_km].tolist():
        at = np.unravel_index(cell, away.shape)
        one = weather[names].isel({dim: [int(place)] for dim, place in zip(space, at, strict=True)})
        if bool(one[names[0]].notnull().any()):
            told = f"Weather {away[at]:.1f} km from the stills. {weather.attrs.get('origin', '')}"
            said = tuple(map(str, weather.attrs.get("conventions", [])))
            return _days_of(one.assign_attrs(weather.attrs), names, method, (told.strip(), *said))
    raise WeatherError(
        "no cell or station with weather near the stills", where="site",
        got=f"the nearest lies {away.min():.0f} km away", wanted=f"at most {site.max_cell_distance_km:g} km",
        cure="Correct site, or raise site.max_cell_distance_km.",
    )


def _days_of(one: xr.Dataset, names: Sequence[str], method: Method, origin: tuple[str, ...]) -> SiteDays:
    found = on_local_days(one)
    daily = found.daily
    dates = np.array([str(stamp)[:10] for stamp in daily.indexes["time"]], dtype="datetime64[D]")

    def flat(dataset: xr.Dataset, name: str) -> Any:
        return dataset[name].to_numpy().reshape(-1, 1)

    latitude = np.asarray(daily["latitude"].to_numpy(), dtype=np.float64).ravel()
    day_of_year = solar_day_of_year(daily["time"])
    if found.steps is None or method.resolution == "daily":
        block = Block({name: flat(daily, name) for name in names}, latitude, day_of_year)
    else:
        steps = found.steps
        block = Block({name: flat(steps, name) for name in names}, latitude, day_of_year, steps.sizes["step"],
                      np.asarray(daily["clock_to_solar_hours"].to_numpy(), dtype=np.float64).ravel())
    return SiteDays(dates, flat(daily, "irradiation")[:, 0].astype(np.float64), block, method, origin)
