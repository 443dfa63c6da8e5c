"""Typical-year files: each becomes one site with the 8760 hours of a nominal year in local standard time."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.physics.vapour import dew_point
from stillfield.physics.wind import wind_speed_at_2m
from stillfield.sources.gates import gate
from stillfield.sources.locate import locate
from stillfield.sources.typical.alignment import SunFit, measure_sun_offset, whole_hours_off
from stillfield.sources.typical.nominal_year import HOURS, YEAR, place
from stillfield.sources.typical.year_formats import YearRows, read_rows
from stillfield.vocabulary import STEP_WEATHER

Array = NDArray[np.floating[Any]]

_DAY_OF_YEAR = np.arange(1.0, 366.0)
_NEEDED = ("ghi", "temp_air")
#: A clock found this close to the offset a file states is taken to be the stated one. [min]
_AGREES_MINUTES = 15.0


@dataclass(frozen=True)
class _Site:
    """One file, ready to stand beside others."""

    rows: YearRows
    utc_offset_hours: float
    sun_offset_minutes: float
    values: Mapping[str, Array]
    conventions: tuple[str, ...]


def open_typical_year(
    files: Sequence[str], *, format: str | None = None, wind_height_m: float | None = None
) -> xr.Dataset:
    """Read typical-year files into one hourly dataset of sites.

    Formats: EPW, TMY2, TMY3, PVGIS TMY (CSV, JSON, EPW) and NSRDB. The time axis is the year 2001 in the
    local standard time of each site, hours marked by their start. For every site the place of the sun within
    the hour is measured; a file whose clock is off by 45 minutes or more is moved by whole hours.

    Parameters
    ----------
    files : sequence of str
        Paths, patterns, or ``package:path``.
    format : str, optional
        Format of all files, when their content does not tell.
    wind_height_m : float, optional
        Height of the wind speed in all files, when it is not the format's own. [m]

    Returns
    -------
    xarray.Dataset
        Dimensions ``time`` (8760) and ``site``; variables ``ghi``, ``temp_air`` and those of ``dni``, ``dhi``,
        ``temp_dew``, ``relative_humidity``, ``wind_speed`` (at 2 m) that every file has; site coordinates
        ``latitude``, ``longitude``, ``elevation``, ``utc_offset_hours``, ``sun_offset_minutes``, ``name``.

    Raises
    ------
    WeatherError
        If a file is missing, truncated, of another kind or holds impossible weather.

    Examples
    --------
    >>> miami = open_typical_year(["pvlib:data/12839.tm2"])
    >>> float(miami.temp_air.mean().round(1)), miami.sizes["time"], miami.attrs["record"]
    (24.3, 8760, 'typical-year')
    """
    paths = locate(files)
    sites = [_read_site(path, format=format, wind_height_m=wind_height_m) for path in paths]
    return _assemble(_unique_ids(paths), sites, paths)


def _read_site(path: Path, *, format: str | None, wind_height_m: float | None) -> _Site:
    rows = read_rows(path, format=format, wind_height_m=wind_height_m)
    lacking = [name for name in _NEEDED if name not in rows.values]
    if lacking:
        raise WeatherError(f"no values of {' and '.join(lacking)}", where=str(path), cure="Use another file.")
    hours = place(rows.month, rows.day, rows.minutes, rows.values, where=str(path))
    offset = rows.utc_offset_hours
    notes = [*rows.notes, *hours.notes]
    if offset is None:
        offset = float(round(rows.longitude / 15.0))
        notes.append(f"The zone of the site is not in the file; UTC{offset:+g} h, nearest to its longitude, is used.")
    clock, fit = _clock_of_rows(rows, hours.values["ghi"])
    whole = round(offset - clock)
    if clock != rows.row_clock_hours:
        notes.append(
            f"WARNING: the file says UTC{rows.row_clock_hours:+g} h but its rows follow the sun in UTC{clock:+g} h; "
            "they are read as that."
        )
    # What is left when a zone of half hours is reached in whole ones goes into the place of the sun.
    sun, shift, said = _settle_sun(rows, fit, rest_minutes=60.0 * (whole - (offset - clock)))
    values = {name: np.roll(column, whole + shift) for name, column in hours.values.items()}
    notes += said
    if rows.wind_height_m != 2.0 and "wind_speed" in values:
        values["wind_speed"] = wind_speed_at_2m(values["wind_speed"], rows.wind_height_m)  # type: ignore[assignment]
        notes.append(f"Wind was brought from {rows.wind_height_m:g} m to 2 m (FAO-56 equation 47).")
    if "temp_dew" not in values and "relative_humidity" in values:
        values["temp_dew"] = np.asarray(dew_point(values["temp_air"], values["relative_humidity"]))
        notes.append("Dew point was derived from air temperature and relative humidity.")
    return _Site(rows, offset, sun, values, tuple(notes))


def _measure(rows: YearRows, ghi: Array, clock: float) -> SunFit | None:
    return measure_sun_offset(
        ghi,
        latitude=rows.latitude,
        longitude=rows.longitude,
        clock_offset_hours=clock,
        day_of_year=_DAY_OF_YEAR,
    )


def _clock_of_rows(rows: YearRows, ghi: Array) -> tuple[float, SunFit | None]:
    """Clock of the rows minus UTC, by the sun where the file itself says when within a row it was seen.

    PVGIS states that moment. Its EPW form also states a zone, yet holds its UTC rows unshifted.
    """
    fit = _measure(rows, ghi, rows.row_clock_hours)
    stated = rows.stated_sun_offset_minutes
    if fit is None or stated is None or rows.row_clock_hours == 0.0:
        return rows.row_clock_hours, fit
    in_utc = _measure(rows, ghi, 0.0)
    if in_utc is None or abs(in_utc.offset_minutes - stated) > _AGREES_MINUTES:
        return rows.row_clock_hours, fit
    return 0.0, in_utc


def _settle_sun(rows: YearRows, fit: SunFit | None, *, rest_minutes: float) -> tuple[float, int, list[str]]:
    """Sun offset of the site, whole hours to move its rows by, and what to say about it."""
    if fit is None:
        stated = 30.0 if rows.stated_sun_offset_minutes is None else rows.stated_sun_offset_minutes
        return stated - rest_minutes, 0, [
            "WARNING: the sunshine of this file does not follow the sun well enough to check its clock; the sun is "
            f"taken {stated - rest_minutes:.0f} minutes after the start of each hour."
        ]
    found = fit.offset_minutes - rest_minutes
    shift = whole_hours_off(found)
    sun = round(found - 60.0 * shift, 1)
    notes = [
        f"Sunshine follows the sun {found:.0f} minutes after the start of the hour (30 is ideal; measured on the "
        f"{fit.days} clearest days)."
    ]
    if shift:
        notes.append(
            f"WARNING: the clock of this file is {found - 30.0:+.0f} minutes off the middle of the hour; all rows "
            f"were moved by {shift:+d} h, which leaves {sun - 30.0:+.0f} minutes."
        )
    return sun, shift, notes


def _unique_ids(paths: Sequence[Path]) -> list[str]:
    seen: dict[str, int] = {}
    ids = []
    for path in paths:
        stem = path.stem
        seen[stem.casefold()] = seen.get(stem.casefold(), 0) + 1
        count = seen[stem.casefold()]
        ids.append(stem if count == 1 else f"{stem}-{count}")
    return ids


def _assemble(ids: Sequence[str], sites: Sequence[_Site], paths: Sequence[Path]) -> xr.Dataset:
    shared = [name for name in STEP_WEATHER if all(name in site.values for site in sites)]
    conventions = [f"{name}: {note}" for name, site in zip(ids, sites, strict=True) for note in site.conventions]
    partial = sorted({name for site in sites for name in site.values} - set(shared))
    if partial:
        conventions.append(f"{', '.join(partial)} left out: not in every file.")
    time = np.datetime64(f"{YEAR}-01-01T00", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
    weather = xr.Dataset(
        {
            name: (
                ("time", "site"),
                np.stack([site.values[name] for site in sites], axis=1),
                {"units": STEP_WEATHER[name].unit, "long_name": STEP_WEATHER[name].meaning},
            )
            for name in shared
        },
        coords={
            "time": time,
            "site": list(ids),
            "latitude": ("site", [site.rows.latitude for site in sites], {"units": "degrees_north"}),
            "longitude": ("site", [site.rows.longitude for site in sites], {"units": "degrees_east"}),
            "elevation": ("site", [float(site.rows.elevation) for site in sites], {"units": "m"}),
            "utc_offset_hours": ("site", [float(site.utc_offset_hours) for site in sites], {"units": "h"}),
            "sun_offset_minutes": ("site", [site.sun_offset_minutes for site in sites], {"units": "min"}),
            "name": ("site", [
                i if site.rows.name in {"", "-", "unknown"} else site.rows.name
                for i, site in zip(ids, sites, strict=True)
            ]),
        },
        attrs={
            "record": "typical-year",
            "step_hours": 1.0,
            "clock": "local-standard",
            "origin": f"Typical years read from {', '.join(path.name for path in paths)}.",
            "recognised": _recognised(shared, sites),
        },
    )
    weather, counts = gate(weather, where=", ".join(path.name for path in paths))
    weather.attrs["conventions"] = conventions + counts.sentences()
    return weather


def _recognised(shared: Sequence[str], sites: Sequence[_Site]) -> list[str]:
    """What every file gives; the columns and units are those of its format."""
    formats = ", ".join(sorted({site.rows.format for site in sites}))
    return [json.dumps({"name": None, "quantity": name, "units": None, "how": f"the format ({formats})"})
            for name in shared]
