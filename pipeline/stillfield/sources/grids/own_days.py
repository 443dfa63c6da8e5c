"""The days of daily weather: where they begin, which date they carry, and by whose clock they were cut.

Daily values cannot be moved to other days. So the days are kept as the files have them, what is known of them
is said, and where they cut the sunshine of a solar day in two that is warned of.
"""

from __future__ import annotations

import re

import numpy as np
import pandas as pd
import xarray as xr

from stillfield.errors import WeatherError

#: Days cut this far from solar midnight lose no sunshine to their neighbours: measured on hourly weather, UTC
#: days cost nothing up to 100 degrees from Greenwich. [h]
HARMLESS_HOURS = 100.0 / 15.0
_HOURS = re.compile(r"UTC(?:([+-]\d{1,2})(?::(\d{2}))?)?", re.IGNORECASE)


def clock_hours(day_clock: str | None) -> float | None:
    """Clock by which days were cut, in hours ahead of UTC; None for local days.

    Parameters
    ----------
    day_clock : str or None
        'local', 'UTC', or an offset such as 'UTC+8' or 'UTC-3:30'; None is taken as UTC, the usual clock.

    Returns
    -------
    float or None
        [h]

    Raises
    ------
    WeatherError
        If it is none of these.

    Examples
    --------
    >>> clock_hours("UTC+5:30"), clock_hours("local"), clock_hours(None)
    (5.5, None, 0.0)
    """
    if day_clock is None:
        return 0.0
    if day_clock.lower() == "local":
        return None
    found = _HOURS.fullmatch(day_clock.replace("−", "-"))
    if not found:
        raise WeatherError("unknown clock of the days", where="weather.day_clock", got=day_clock,
                           wanted="'local', 'UTC', or an offset such as 'UTC+8'")
    whole, minutes = float(found[1] or 0), float(found[2] or 0)
    return whole + (-minutes if str(found[1]).startswith("-") else minutes) / 60.0


def dated(values: xr.DataArray, *, bounds: bool, stamped_at_end: bool) -> xr.DataArray:
    """Daily values with midnight of their date as time.

    Parameters
    ----------
    values : DataArray
        Daily; stamps as in the file, or lower time bounds.
    bounds : bool
        Whether the stamps are lower bounds. A day carries the date of its middle.
    stamped_at_end : bool
        Whether the stamps mark the end of the day.

    Returns
    -------
    DataArray
    """
    index = values.indexes["time"]
    move = pd.Timedelta(hours=12) if bounds else pd.Timedelta(seconds=-1 if stamped_at_end else 0)
    return values.assign_coords(time=(index + move).floor("D"))


def describe_days(values: xr.DataArray, *, bounds: bool, day_clock: str | None) -> list[str]:
    """Say which days these are.

    Parameters
    ----------
    values : DataArray
        Daily sunshine; stamps as in the file, or lower time bounds; coordinate ``longitude``.
    bounds : bool
        Whether the stamps are lower bounds.
    day_clock : str or None
        What the run file says.

    Returns
    -------
    list of str
    """
    index = values.indexes["time"]
    hour = (index[0] - index[0:1].floor("D")[0]).total_seconds() / 3600.0
    clock = clock_hours(day_clock)
    by = "local clocks" if clock is None else f"UTC{clock:+g} h" if clock else \
        "UTC" if day_clock else "the clock of the files, taken to be UTC (set weather.day_clock if it is not)"
    start = f"{int(hour):02d}:{round(hour % 1 * 60):02d}"
    if bounds and hour:
        told = [f"Days are the source's own: from {start} to {start} by {by}, with the date of their middle."]
    else:
        told = [f"Days are the source's own: calendar days by {by}."]
    if not bounds and hour not in {0.0, 12.0}:
        told.append(f"WARNING: daily values are stamped at {start} without time bounds; each is taken to be of the "
                    "calendar day that holds its stamp.")
    if clock is None:
        return told
    longitude = values["longitude"].values
    from_midnight = longitude / 15.0 - clock + (hour if bounds else 0.0)
    off = np.abs((from_midnight + 12.0) % 24.0 - 12.0)
    cut = int((off > HARMLESS_HOURS).sum())
    if cut:
        places = f"{cut} of {longitude.size} {'sites' if 'site' in values.dims else 'columns'}"
        told.append(f"WARNING: at {places} such a day begins and ends while the sun is up, which makes poor days look "
                    "10 to 22 % too sunny there. Take hourly weather, or set weather.day_clock if the days are local.")
    return told
