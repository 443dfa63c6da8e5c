"""Typical-year file formats: what tells each apart, and its columns in vocabulary units.

pvlib parses the files. What stands here is what pvlib leaves as the file has it: units in tenths, numbers
that stand for "missing", hours labelled by their end or their start, and clocks.
"""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from stillfield.errors import WeatherError
from stillfield.sources.units import conversion
from stillfield.vocabulary import STEP_WEATHER

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.floating[Any]]
Integers = NDArray[np.integer[Any]]

#: Formats by the name used in run files.
FORMATS = ("epw", "tmy2", "tmy3", "pvgis-csv", "pvgis-json", "nsrdb")


@dataclass(frozen=True)
class YearRows:
    """Rows of one file, as they stand in it, in vocabulary units.

    Attributes
    ----------
    format : str
        One of `FORMATS`.
    name : str
        The place, as the file calls it.
    latitude, longitude, elevation : float
        [deg north, deg east, m]
    utc_offset_hours : float or None
        Local standard time minus UTC; None when the file does not state one. [h]
    row_clock_hours : float
        Clock of the rows minus UTC. [h]
    month, day, minutes : ndarray of int, shape (row,)
        Date, and start of the interval after midnight. [min]
    values : mapping of str to ndarray, shape (row,)
        Vocabulary names and units, except that wind is at `wind_height_m`. NaN where missing.
    wind_height_m : float
        [m]
    notes : tuple of str
        Assumptions made so far, one sentence each.
    stated_sun_offset_minutes : float or None
        Minutes after the row's start at which its irradiance holds, where the file says so. [min]
    """

    format: str
    name: str
    latitude: float
    longitude: float
    elevation: float
    utc_offset_hours: float | None
    row_clock_hours: float
    month: Integers
    day: Integers
    minutes: Integers
    values: Mapping[str, Array]
    wind_height_m: float
    notes: tuple[str, ...] = ()
    stated_sun_offset_minutes: float | None = None


_SIGNS: tuple[tuple[str, str], ...] = (
    ("epw", r"^LOCATION,"),
    ("pvgis-csv", r"^Latitude \(decimal degrees\):"),
    ("pvgis-json", r"^\s*\{[\s\S]*\"(inputs|outputs)\""),
    ("nsrdb", r"^Source,Location ID,"),
    ("tmy3", r"^[^\n]*\n\"?Date \(MM/DD/YYYY\)\"?,\"?Time \(HH:MM\)\"?,"),
    ("tmy2", r"^ ?\d{5} [^\n]+ [A-Z]{2}\s+-?\d+ [NS]\s+\d+\s+\d+ [EW]\s+\d+\s+\d+\s+-?\d+"),
)

_FOREIGN: tuple[tuple[bytes, str], ...] = (
    (b"\x89HDF", "a NetCDF-4 or HDF5 file; use the source kind 'netcdf'"),
    (b"CDF", "a NetCDF file; use the source kind 'netcdf'"),
    (b"GRIB", "a GRIB file; its kind is 'grib'"),
    (b"PK", "a ZIP archive; unpack it"),
    (b"\x1f\x8b", "a gzip archive; unpack it"),
    (b"time(UTC)", "a PVGIS table whose head with latitude and longitude was cut off; get it again whole"),
)


def recognise(head: bytes, *, where: str) -> str:
    """Format of a typical-year file, told from its first bytes.

    Parameters
    ----------
    head : bytes
        The first few kilobytes.
    where : str
        File, for the error.

    Returns
    -------
    str
        One of `FORMATS`.

    Raises
    ------
    WeatherError
        If nothing fits; web pages, NetCDF, GRIB and archives are named as such.

    Examples
    --------
    >>> recognise(b"LOCATION,Somewhere,-,-,-,0,10.0,20.0,1.5,3.0", where="x")
    'epw'
    """
    text = decoded(head).replace("\r\n", "\n")
    for name, sign in _SIGNS:
        if re.search(sign, text):
            return name
    foreign = next((what for magic, what in _FOREIGN if head.startswith(magic)), None)
    if foreign is None and re.match(r"\s*<(!doctype|html|\?xml)", text, re.IGNORECASE):
        foreign = "a web page or an error message saved as a file; download the data again"
    raise WeatherError(
        f"this is {foreign}" if foreign else "not a typical-year file of a known format",
        where=where,
        got=None if foreign else repr(text[:60]),
        wanted=None if foreign else ", ".join(FORMATS),
        cure=None if foreign else "State `format` in the run file if you know it.",
    )


def decoded(data: bytes) -> str:
    """Text of a file in UTF-8, with or without byte-order mark, or else in Windows-1252.

    Parameters
    ----------
    data : bytes
        Content.

    Returns
    -------
    str
    """
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        return data.decode("cp1252", errors="replace")


def read_rows(path: Path, *, format: str | None = None, wind_height_m: float | None = None) -> YearRows:
    """Read one typical-year file.

    Parameters
    ----------
    path : Path
        The file.
    format : str, optional
        One of `FORMATS`; told from the content when absent.
    wind_height_m : float, optional
        Height of the wind speed, when it is not the format's own. [m]

    Returns
    -------
    YearRows

    Raises
    ------
    WeatherError
        If the file is empty, of another kind, or broken.
    """
    data = path.read_bytes()
    where = str(path)
    if not data.strip():
        raise WeatherError("the file is empty", where=where, cure="Get it again.")
    if format is not None and format not in FORMATS:
        raise WeatherError("unknown format", where=where, got=format, wanted=", ".join(FORMATS))
    kind = format or recognise(data[:4000], where=where)
    try:
        rows = _READERS[kind](path, data)
    except WeatherError:
        raise
    except Exception as fault:  # the parsers raise whatever the broken text makes them stumble over
        raise WeatherError(
            f"broken {kind} file",
            where=where,
            got=f"{type(fault).__name__}: {' '.join(str(fault).split())[:120]}",
            cure="The file is truncated or edited; get it again, or state another `format`.",
        ) from fault
    if wind_height_m is None:
        return rows
    from dataclasses import replace

    return replace(rows, wind_height_m=wind_height_m, notes=tuple(n for n in rows.notes if "wind height" not in n))


def _columns(
    table: pd.DataFrame, names: Mapping[str, str], *, missing: Mapping[str, float] | float | None = None
) -> tuple[dict[str, Array], tuple[str, ...]]:
    """Columns by vocabulary name, sentinels masked and counted; a column that is all missing is left out."""
    values: dict[str, Array] = {}
    notes: list[str] = []
    for name, column in names.items():
        if column not in table.columns:
            continue
        array = table[column].to_numpy(dtype=float)
        sentinel = missing.get(name) if isinstance(missing, Mapping) else missing
        if sentinel is not None:
            array = np.where(np.isclose(array, sentinel, rtol=1e-6), np.nan, array)
        absent = int(np.isnan(array).sum())
        if absent == array.size:
            notes.append(f"{name} is missing throughout and left out.")
            continue
        if absent:
            notes.append(f"{absent} values of {name} are marked missing.")
        values[name] = array
    return values, tuple(notes)


_OWN_NAMES = {name: name for name in STEP_WEATHER}

#: EnergyPlus Auxiliary Programs documentation, EPW data dictionary: the number that stands for missing.
_EPW_MISSING = {"ghi": 9999.0, "dni": 9999.0, "dhi": 9999.0, "temp_air": 99.9, "temp_dew": 99.9,
                "relative_humidity": 999.0, "wind_speed": 999.0}


def _read_epw(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_epw

    text = decoded(data)
    head = text[:20000]
    # Only month, day and hour are used; a leap year lets any date pass.
    table, meta = read_epw(io.StringIO(text), coerce_year=2000)
    values, notes = _columns(table, _OWN_NAMES, missing=_EPW_MISSING)
    periods = re.search(r"^DATA PERIODS,\s*\d+\s*,\s*(\d+)", head, re.MULTILINE)
    per_hour = int(periods.group(1)) if periods else 1
    minutes = (table["hour"].to_numpy(int) - 1) * 60
    if per_hour > 1:
        stamp = table["minute"].to_numpy(int)
        minutes = minutes + np.where(stamp == 0, 60, stamp) - 60 // per_hour
    offset = re.search(r"Irradiance Time Offset \(h\):\s*(-?[\d.]+)", head)
    return YearRows(
        "epw", str(meta["city"]), meta["latitude"], meta["longitude"], meta["altitude"], meta["TZ"], meta["TZ"],
        table["month"].to_numpy(int), table["day"].to_numpy(int), minutes, values, 10.0,
        (*notes, "EPW hours 1 to 24 are labelled by their end; the row's start is one hour earlier."),
        None if offset is None else (float(offset.group(1)) + 1.0) * 60.0,
    )


def _read_tmy2(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_tmy2

    table, meta = read_tmy2(str(path))
    names = {"ghi": "GHI", "dni": "DNI", "dhi": "DHI", "temp_air": "DryBulb", "temp_dew": "DewPoint",
             "relative_humidity": "RHum", "wind_speed": "Wspd"}
    missing = {"ghi": 9999.0, "dni": 9999.0, "dhi": 9999.0, "temp_air": 9999.0, "temp_dew": 9999.0,
               "relative_humidity": 999.0, "wind_speed": 999.0}
    values, notes = _columns(table, names, missing=missing)
    for name in ("temp_air", "temp_dew", "wind_speed"):  # User's Manual for TMY2s, table 3-2: tenths
        if name in values:
            values[name] = values[name] / 10.0
    return YearRows(
        "tmy2", str(meta["City"]), meta["latitude"], meta["longitude"], meta["altitude"], float(meta["TZ"]),
        float(meta["TZ"]), table["month"].to_numpy(int), table["day"].to_numpy(int),
        (table["hour"].to_numpy(int) - 1) * 60, values, 10.0,
        (*notes, "TMY2 hours 1 to 24 are labelled by their end; temperature and wind are stored in tenths."),
    )


def _read_tmy3(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_tmy3

    table, meta = read_tmy3(io.StringIO(decoded(data)))
    values, notes = _columns(table, _OWN_NAMES, missing=-9900.0)
    date = table["Date (MM/DD/YYYY)"].str.split("/")
    clock = table["Time (HH:MM)"].str.split(":")
    minutes = clock.str[0].astype(int) * 60 + clock.str[1].astype(int) - 60
    return YearRows(
        "tmy3", str(meta["Name"]).strip('" '), meta["latitude"], meta["longitude"], meta["altitude"], meta["TZ"],
        meta["TZ"], date.str[0].astype(int).to_numpy(), date.str[1].astype(int).to_numpy(),
        minutes.to_numpy(int), values, 10.0,
        (*notes, "TMY3 hours are labelled by their end; the row's start is one hour earlier."),
    )


def _pvgis_rows(kind: str, table: pd.DataFrame, place: Mapping[str, Any], offset_hours: float | None) -> YearRows:
    import pandas as pd

    values, notes = _columns(table, _OWN_NAMES)
    index = pd.DatetimeIndex(table.index)
    return YearRows(
        kind, "", float(place["latitude"]), float(place["longitude"]), float(place["elevation"]), None, 0.0,
        np.asarray(index.month), np.asarray(index.day), np.asarray(index.hour * 60 + index.minute),
        values, 10.0, (*notes, "PVGIS rows are instants in UTC."),
        None if offset_hours is None else offset_hours * 60.0,
    )


def _read_pvgis_csv(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_pvgis_tmy

    rows = len(re.findall(rb"^\d{8}:\d{4},", data, re.MULTILINE))
    if rows != 8760:
        raise WeatherError("the file does not hold a whole year", where=str(path), got=f"{rows} rows",
                           wanted="8760", cure="The file is truncated or is a PVGIS series; get the TMY file again.")
    table, meta = read_pvgis_tmy(io.BytesIO(data), pvgis_format="csv")
    place = meta["inputs"]
    return _pvgis_rows("pvgis-csv", table, place, place.get("irradiance time offset"))


def _read_pvgis_json(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_pvgis_tmy

    if b'"tmy_hourly"' not in data:
        raise WeatherError("no typical year in this JSON file", where=str(path), wanted="PVGIS 'tmy_hourly'",
                           cure="Download the TMY product of PVGIS, or use its CSV or EPW form.")
    table, meta = read_pvgis_tmy(io.StringIO(decoded(data)), pvgis_format="json")
    place = meta["inputs"]["location"]
    return _pvgis_rows("pvgis-json", table, place, place.get("irradiance_time_offset"))


def _read_nsrdb(path: Path, data: bytes) -> YearRows:
    from pvlib.iotools import read_nsrdb_psm4

    table, meta = read_nsrdb_psm4(io.StringIO(decoded(data)))
    values, notes = _columns(table, _OWN_NAMES)
    units = {"ghi": "GHI", "dni": "DNI", "dhi": "DHI", "temp_air": "Temperature", "temp_dew": "Dew Point",
             "relative_humidity": "Relative Humidity", "wind_speed": "Wind Speed"}
    for name, column in units.items():
        stated = meta.get(f"{column} Units")
        if name in values and stated:
            factor, offset = conversion(stated, STEP_WEATHER[name].unit, where=f"{column} in {path}")
            values[name] = values[name] * factor + offset
    zone = float(meta["Time Zone"])
    city = str(meta.get("City", "-"))
    return YearRows(
        "nsrdb", "" if city == "-" else city, meta["latitude"], meta["longitude"], float(meta["altitude"]),
        float(meta["Local Time Zone"]), zone, table["Month"].to_numpy(int), table["Day"].to_numpy(int),
        (table["Hour"] * 60 + table["Minute"]).to_numpy(int), values, 2.0,
        (*notes, "NSRDB files state no wind height; 2 m is assumed, set `wind_height_m` if it is another."),
    )


_READERS: dict[str, Callable[[Path, bytes], YearRows]] = {
    "epw": _read_epw,
    "tmy2": _read_tmy2,
    "tmy3": _read_tmy3,
    "pvgis-csv": _read_pvgis_csv,
    "pvgis-json": _read_pvgis_json,
    "nsrdb": _read_nsrdb,
}
