"""Which column of a station table is what: by the run file, then by the headings people give them."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from stillfield.errors import Fault, WeatherError
from stillfield.sources.recognise import Choice
from stillfield.sources.stations.station_rows import Rows

#: Headings of quantities, in small letters and underscores.
_QUANTITIES = {
    "sun": ("irradiation", "ghi", "radiation", "solar_radiation", "global_radiation", "global_irradiation", "rad",
            "srad", "rs", "rg", "globrad", "glorad", "irrad", "ssrd", "rsds", "allsky_sfc_sw_dwn", "insolation",
            "solar", "sis"),
    "dni": ("dni",),
    "dhi": ("dhi",),
    "temp_air": ("temp_air", "temperature", "air_temperature", "temp", "tair", "t_air", "ta", "tmean", "t_mean", "tavg",
                 "temperature_mean", "temperature_avg", "tas", "t2m", "tg"),
    "temp_air_min": ("temp_air_min", "tmin", "t_min", "temperature_min", "mintemp", "min_temp", "temp_min", "tn",
                     "tasmin", "t2m_min", "minimum_temperature"),
    "temp_air_max": ("temp_air_max", "tmax", "t_max", "temperature_max", "maxtemp", "max_temp", "temp_max", "tx",
                     "tasmax", "t2m_max", "maximum_temperature"),
    "temp_dew": ("temp_dew", "tdew", "t_dew", "dew_point", "dewpoint", "dew", "td", "t2mdew", "dew_point_temperature"),
    "relative_humidity": ("relative_humidity", "rh", "rh2m", "hurs", "rhmean", "rh_mean", "humidity"),
    "specific_humidity": ("specific_humidity", "qv2m", "huss"),
    "vapour_pressure": ("vapour_pressure", "vapor_pressure", "vapourpressure", "vap", "vp", "ea"),
    "wind_speed": ("wind_speed", "windspeed", "wind", "ws", "wspd", "u", "wind_mean", "sfcwind"),
}
#: Headings of what places a row in space and time.
_PLACES = {
    "site": ("site", "station", "station_id", "station_number", "station_name", "id", "stn", "site_id", "wmo"),
    "name": ("name", "place", "station_name"),
    "latitude": ("latitude", "lat", "y"),
    "longitude": ("longitude", "lon", "long", "lng", "x"),
    "elevation": ("elevation", "elev", "altitude", "alt", "height", "z"),
    "utc_offset_hours": ("utc_offset_hours", "utc_offset", "time_zone", "timezone", "tz"),
    "date": ("date", "datetime", "timestamp", "date_time", "valid_time", "time", "day"),
    "time": ("time", "hour_minute", "clock"),
    "year": ("year", "yr", "yyyy", "yy"),
    "month": ("month", "mon", "mo", "mm"),
    "day": ("day", "dd", "dy", "day_of_month"),
    "day_of_year": ("day_of_year", "doy", "jday", "julian_day", "yday"),
    "hour": ("hour", "hr", "hh"),
}
PLACES = tuple(_PLACES)
#: Cells that hold no number.
_EMPTY = {"", "na", "n/a", "nan", "null", "none", "nd", "-", "--", "---", "*", "."}
#: Numbers that stand for "missing" without being declared; no such weather exists in any unit.
_SENTINELS = (-99.0, -99.9, -99.99, -999.0, -999.9, -9999.0, -9999.9)
_FAULTS_SHOWN = 20


@dataclass(frozen=True)
class Column:
    """One quantity of a table: where it stands and what is known of it."""

    heading: str
    units: str | None
    height_m: float | None
    how: str


def find_quantities(rows: Rows, choices: Mapping[str, Choice]) -> dict[str, Column]:
    """Columns of quantities by role.

    Parameters
    ----------
    rows : Rows
        One table.
    choices : mapping of str to Choice
        What the run file says.

    Returns
    -------
    dict of str to Column

    Raises
    ------
    WeatherError
        If two columns could be one quantity.
    """
    found = {}
    for role, aliases in _QUANTITIES.items():
        choice = choices.get(role)
        if choice is not None and choice.name:
            heading = choice.name if choice.name in rows.cells else rows.keys.get(choice.name.lower())
            candidates, how = ([] if heading is None else [(heading, _height(role, heading)[1])]), "the run file"
        else:
            candidates, how = _by_alias(rows, role, aliases), "its heading"
        if len(candidates) > 1:
            key = "irradiation" if role == "sun" else role
            raise WeatherError(f"several columns could be {key}", where=str(rows.path),
                               got=", ".join(heading for heading, _ in candidates),
                               cure=f"Choose one under `variables.{key}.name` in the run file.")
        if candidates:
            heading, height = candidates[0]
            found[role] = Column(heading, rows.units.get(heading), height, how)
    return found


def _by_alias(rows: Rows, role: str, aliases: Iterable[str]) -> list[tuple[str, float | None]]:
    """Headings that mean a quantity, the most usual one alone where several do, with the height of a wind."""
    order = {alias: rank for rank, alias in enumerate(aliases)}
    found = []
    for key, heading in rows.keys.items():
        base, height = _height(role, key)
        if key in order or base in order:
            found.append((order.get(key, order.get(base, 0)), heading, height))
    exact = [entry for entry in found if entry[0] == 0] or found
    return [(heading, height) for _, heading, height in exact]


def _height(role: str, key: str) -> tuple[str, float | None]:
    """A wind's heading without its height, and the height [m].

    Examples
    --------
    >>> _height("wind_speed", "windspeed_10m"), _height("wind_speed", "u2"), _height("temp_air", "t2m")
    (('windspeed', 10.0), ('u', 2.0), ('t2m', None))
    """
    match = re.fullmatch(r"(.*?[a-z])_?(\d{1,2})_?m?", key.lower()) if role.startswith("wind") else None
    return (match[1], float(match[2])) if match else (key, None)


def find_places(rows: Rows, stated: Mapping[str, str]) -> dict[str, str]:
    """Columns that place a row in space and time: stillfield's word to the heading.

    Parameters
    ----------
    rows : Rows
        One table.
    stated : mapping of str to str
        From the run file; wins over the usual headings.

    Returns
    -------
    dict of str to str

    Raises
    ------
    WeatherError
        If a stated column is not there.
    """
    found = {}
    for word, aliases in _PLACES.items():
        if word in stated:
            if stated[word] not in rows.cells:
                raise WeatherError(f"no column '{stated[word]}'", where=f"{rows.path}, table.columns.{word}",
                                   wanted=f"one of {', '.join(rows.headings)}", cure="Correct the run file.")
            found[word] = stated[word]
            continue
        heading = next((rows.keys[alias] for alias in aliases if alias in rows.keys), None)
        if heading is not None:
            found[word] = heading
    taken = {stated[word] for word in stated}
    return {word: heading for word, heading in found.items() if word in stated or heading not in taken}


def numbers(rows: Rows, heading: str, missing: Iterable[float], faults: list[Fault]) -> NDArray[np.float64]:
    """Numbers of a column; what is no number is missing or a fault.

    Parameters
    ----------
    rows : Rows
        One table.
    heading : str
        Its column.
    missing : iterable of float
        Further numbers that stand for "missing".
    faults : list of Fault
        Grows by each cell that is no number.

    Returns
    -------
    ndarray of float, shape (row,)
    """
    text = rows.cells[heading]
    if rows.decimal_comma:
        text = text.str.replace(",", ".", regex=False)
    values = pd.to_numeric(text, errors="coerce").to_numpy(dtype=float, copy=True)
    odd = np.isnan(values) & ~text.str.lower().isin(_EMPTY).to_numpy()
    faults += [Fault(int(line), heading, f"should be a number (got '{text.loc[line]}')")
               for line in rows.cells.index[odd][:_FAULTS_SHOWN]]
    values[np.isin(values, [*_SENTINELS, *missing]) | ~np.isfinite(values)] = np.nan
    return values


def refuse_faults(path: Any, faults: list[Fault]) -> None:
    """Tell all faults of a table at once.

    Raises
    ------
    WeatherError
        If there is any.
    """
    if faults:
        shown = "".join(f"\n  {fault}" for fault in faults[:_FAULTS_SHOWN])
        raise WeatherError(f"{path} has {len(faults)} or more faults:{shown}")
