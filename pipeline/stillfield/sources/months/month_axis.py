"""The time axis of monthly means: every spelling of "twelve months" and of months in a row, as month starts.

Files state a calendar (``days since 1850-01-01``), months (``months since 1958-1-1``, ``Month``), a year 0 or
1 that means no year at all, or nothing. A monthly file is believed to hold months because the run file says so;
what is checked is that it can.
"""

from __future__ import annotations

import re
from typing import Any

import cftime
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from stillfield.errors import WeatherError

MONTHS = 12
#: Year whose months a climatology is laid on; it has no 29 February.
NOMINAL_YEAR = 2001
#: Years up to this in a file mean that it holds a climatology.
_NO_YEAR = 1
_WITHOUT_YEAR_ZERO = ("standard", "gregorian", "julian")


def with_months(weather: xr.Dataset, *, where: str) -> tuple[xr.Dataset, list[str]]:
    """Replace the time axis of an undecoded dataset by the starts of its months, called ``time``.

    Parameters
    ----------
    weather : xarray.Dataset
        Opened without decoding times.
    where : str
        File, for errors.

    Returns
    -------
    weather : xarray.Dataset
        Time as datetime64; a climatology lies on the year 2001.
    notes : list of str

    Raises
    ------
    WeatherError
        If there is no time axis, or it does not hold months, each once.
    """
    name = _time_name(weather, where=where)
    dim = str(weather[name].dims[0])
    years, months = _calendar_months(weather, name, where=where)
    climatology = bool((years <= _NO_YEAR).all()) or "climatology" in weather[name].attrs
    if climatology and years.size != MONTHS:
        raise WeatherError("this climatology has not twelve months", where=where, got=f"{years.size} times")
    if climatology:
        years = np.full(MONTHS, NOMINAL_YEAR)
    key = years * MONTHS + months
    if np.unique(key).size != key.size:
        raise WeatherError("this is no monthly weather: a month comes more than once", where=where,
                           got=f"{key.size} times in {np.unique(key).size} months",
                           wanted="one value a month", cure="Daily and hourly weather is of kind 'netcdf'.")
    stamps = np.array([np.datetime64(f"{y:04d}-{m:02d}-01", "ns") for y, m in zip(years, months, strict=True)])
    bounds = [str(weather[name].attrs.get(key)) for key in ("bounds", "climatology") if key in weather[name].attrs]
    clean = weather.drop_vars([one for one in {*bounds, *_others(weather, dim, name)} if one in weather.variables])
    clean = clean.drop_vars(name, errors="ignore").rename({dim: "time"} if dim != "time" else {})
    told = f"months from {stamps.min()!s:.7} to {stamps.max()!s:.7}"
    told = "a climatology of twelve months" if climatology else told
    return clean.assign_coords(time=("time", stamps)), [f"Time is read as {told}."]


def _others(weather: xr.Dataset, dim: str, name: str) -> list[str]:
    """Variables that would stand in the way of an axis called time."""
    return [one for one in ("time", "valid_time") if one in weather.variables and one not in (name, dim)]


def _time_name(weather: xr.Dataset, *, where: str) -> str:
    def looks_like_time(name: str) -> bool:
        attrs = weather[name].attrs
        units = str(attrs.get("units", "")).lower()
        return (name.lower() in {"time", "valid_time", "month", "months", "t"} or attrs.get("axis") == "T"
                or attrs.get("standard_name") == "time" or " since " in units or units.startswith("month"))

    found = [str(name) for name in weather.variables if weather[name].ndim == 1 and looks_like_time(str(name))
             and (str(name) in weather.dims or weather[name].dims[0] not in weather.variables)]
    if not found:
        found = [str(dim) for dim, size in weather.sizes.items() if size == MONTHS and dim not in weather.variables]
    if len(found) != 1:
        raise WeatherError("no axis of months was found" if not found else "several axes could be the months",
                           where=where, got=", ".join(found) or ", ".join(map(str, weather.dims)),
                           wanted="one time axis")
    return found[0]


def _calendar_months(weather: xr.Dataset, name: str, *, where: str) -> tuple[NDArray[Any], NDArray[Any]]:
    """Year and month of every time; year 0 where there is none."""
    time = weather[name]
    values, units = np.asarray(time.values, dtype=float), str(time.attrs.get("units", ""))
    bounds = weather.get(str(time.attrs.get("bounds", "")))
    if bounds is not None and bounds.shape == (values.size, 2) and "climatology" not in time.attrs:
        values = np.asarray(bounds.values, dtype=float).mean(axis=1)
    if " since " in units:
        return _since(values, units, str(time.attrs.get("calendar", "standard")), where=where)
    if values.size == MONTHS and (name not in weather.variables or np.array_equal(np.round(values), np.arange(1, 13))
                                  or np.array_equal(np.round(values), np.arange(12))):
        return np.zeros(MONTHS, dtype=int), np.arange(1, 13)
    raise WeatherError("the time axis does not tell its months", where=where,
                       got=f"{values.size} values of {name} from {values[0]:g} in units '{units or 'none'}'",
                       wanted="dates ('days since 1990-01-01'), or the months 1 to 12")


def _since(values: NDArray[Any], units: str, calendar: str, *, where: str) -> tuple[NDArray[Any], NDArray[Any]]:
    monthly = re.fullmatch(r"\s*months?\s+since\s+(\d{1,4})-(\d{1,2}).*", units, flags=re.IGNORECASE)
    if monthly:
        count = int(monthly[1]) * MONTHS + int(monthly[2]) - 1 + np.floor(values + 1e-6).astype(int)
        return count // MONTHS, count % MONTHS + 1
    from_year_zero = re.search(r"since\s+0{1,4}-", units) is not None
    calendar = "proleptic_gregorian" if from_year_zero and calendar in _WITHOUT_YEAR_ZERO else calendar
    try:
        dates = cftime.num2date(values, units, calendar.lower(), only_use_cftime_datetimes=True)
    except (ValueError, OverflowError, TypeError) as fault:
        raise WeatherError("the time axis cannot be read", where=where, got=f"'{units}', calendar '{calendar}'",
                           wanted="CF time such as 'days since 1990-01-01'") from fault
    return np.array([date.year for date in dates]), np.array([date.month for date in dates])
