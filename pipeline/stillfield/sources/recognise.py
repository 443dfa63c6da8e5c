"""Which variable of a gridded file is which quantity: by the run file, then by CF, then by public custom.

Units never follow from a name. A name only proposes a variable; its units attribute, or the run file, says
what its numbers are.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import xarray as xr

from stillfield.errors import WeatherError

#: What the sunshine of a file may mean.
MEANINGS = (
    "daily-total",
    "daily-mean",
    "daylight-mean",
    "step-mean",
    "hour-ending accumulation",
    "hour-starting accumulation",
    "since-00-UTC",
    "monthly-total",
)
STAMPS = ("start", "middle", "end")

#: Roles a variable can play. 'sun' is `irradiation` in daily and `ghi` in sub-daily weather.
ROLES = ("sun", "dni", "dhi", "temp_air", "temp_air_min", "temp_air_max", "temp_dew", "relative_humidity",
         "specific_humidity", "vapour_pressure", "wind_speed", "wind_u", "wind_v")
_SUN_KEYS = {"irradiation", "ghi", "sun"}

_STANDARD_NAMES = {
    "surface_downwelling_shortwave_flux_in_air": "sun",
    "surface_downwelling_shortwave_flux": "sun",
    "surface_incoming_shortwave_flux": "sun",
    "integral_wrt_time_of_surface_downwelling_shortwave_flux_in_air": "sun",
    "air_temperature": "temp_air",
    "2-meter_air_temperature": "temp_air",
    "dew_point_temperature": "temp_dew",
    "relative_humidity": "relative_humidity",
    "specific_humidity": "specific_humidity",
    "water_vapor_partial_pressure_in_air": "vapour_pressure",
    "wind_speed": "wind_speed",
    "eastward_wind": "wind_u",
    "northward_wind": "wind_v",
}

#: Short names of public data sets: ECMWF, CMIP, MERRA-2, NASA POWER, E-OBS, CM SAF.
_ALIASES = {
    **dict.fromkeys(["ssrd", "rsds", "swgdn", "allsky_sfc_sw_dwn", "sis", "qq", "msdwswrf", "avg_sdswrf", "ghi",
                     "irradiation"], "sun"),
    **dict.fromkeys(["t2m", "2t", "tas", "tg", "temp_air"], "temp_air"),
    **dict.fromkeys(["tasmin", "tn", "t2m_min", "t2mmin", "mn2t", "temp_air_min"], "temp_air_min"),
    **dict.fromkeys(["tasmax", "tx", "t2m_max", "t2mmax", "mx2t", "temp_air_max"], "temp_air_max"),
    **dict.fromkeys(["d2m", "2d", "tdps", "t2mdew", "temp_dew"], "temp_dew"),
    **dict.fromkeys(["hurs", "rh2m", "hu", "relative_humidity"], "relative_humidity"),
    **dict.fromkeys(["huss", "qv2m", "spfh2m", "sh2", "specific_humidity"], "specific_humidity"),
    **dict.fromkeys(["vap", "vp", "vapour_pressure", "vapor_pressure"], "vapour_pressure"),
    **dict.fromkeys(["sfcwind", "ws10", "si10", "10si", "ws10m", "ws2m", "fg", "wind_speed"], "wind_speed"),
    **dict.fromkeys(["u10", "10u", "uas", "u10m", "u2m"], "wind_u"),
    **dict.fromkeys(["v10", "10v", "vas", "v10m", "v2m"], "wind_v"),
    "dni": "dni",
    "dhi": "dhi",
}

#: Height of the wind [m] where the short name carries it.
_WIND_HEIGHTS = {**dict.fromkeys(["sfcwind", "ws10", "si10", "10si", "ws10m", "fg", "u10", "10u", "uas", "u10m",
                                  "v10", "10v", "vas", "v10m"], 10.0),
                 **dict.fromkeys(["ws2m", "u2m", "v2m"], 2.0)}

#: Sub-daily ECMWF mean rates are means of the period that ends at the stamp (ERA5 documentation, "Mean rates/fluxes").
END_STAMPED = frozenset({"msdwswrf", "avg_sdswrf"})


@dataclass(frozen=True)
class Choice:
    """What a run file says of one variable; None where it says nothing. An optional one need not be there."""

    name: str
    units: str | None = None
    means: str | None = None
    stamp: str | None = None
    height_m: float | None = None
    optional: bool = False


@dataclass(frozen=True)
class Found:
    """One variable of a file, its role and how it is to be understood."""

    role: str
    name: str
    units: str | None
    means: str | None
    stamp: str | None
    height_m: float | None
    cell_methods: str
    how: str

    def told(self, *, daily: bool) -> str:
        """What was recognised, as text of a JSON object, for the attribute ``recognised`` of a source."""
        sun = "irradiation" if daily else "ghi"
        return json.dumps({"name": self.name, "quantity": sun if self.role == "sun" else self.role,
                           "units": self.units, "how": self.how})


def read_mapping(mapping: Mapping[str, str | Mapping[str, Any]] | None) -> dict[str, Choice]:
    """Check a mapping of quantities to variables and put it into records.

    Parameters
    ----------
    mapping : mapping or None
        Vocabulary name (or ``wind_u``, ``wind_v``) to the name of a variable, or to a mapping with ``name``
        and any of ``units``, ``means``, ``stamp``, ``height_m`` and ``optional``.

    Returns
    -------
    dict of str to Choice
        By role.

    Raises
    ------
    WeatherError
        If a key or a value is not one of the possible ones.

    Examples
    --------
    >>> read_mapping({"irradiation": {"name": "ssrd", "means": "since-00-UTC"}})["sun"].means
    'since-00-UTC'
    """
    choices: dict[str, Choice] = {}
    allowed = ("name", "units", "means", "stamp", "height_m", "optional")
    for key, value in (mapping or {}).items():
        where = f"variables.{key}"
        role = "sun" if key in _SUN_KEYS else key
        if role not in ROLES:
            raise WeatherError("unknown quantity", where=where, got=key,
                               wanted=", ".join(["irradiation", "ghi", *ROLES[1:]]))
        entry: Mapping[str, Any] = {"name": value} if isinstance(value, str) else value
        for name in entry:
            if name not in allowed:
                raise WeatherError("unknown key", where=f"{where}.{name}", got=name, wanted=", ".join(allowed))
        for name, possible in (("means", MEANINGS), ("stamp", STAMPS)):
            if entry.get(name) is not None and entry[name] not in possible:
                raise WeatherError(f"`{name}` is not one of the possible ones", where=f"{where}.{name}",
                                   got=entry[name], wanted=", ".join(f"'{one}'" for one in possible))
        choices[role] = Choice(**{"name": "", **entry})
    return choices


def recognise(weather: xr.Dataset, choices: Mapping[str, Choice], usable: frozenset[str], *, where: str) -> list[Found]:
    """Variables of a file by role.

    Parameters
    ----------
    weather : xarray.Dataset
        The open file.
    choices : mapping of str to Choice
        From `read_mapping`.
    usable : frozenset of str
        Variables that lie on the axes of the file and on nothing else.
    where : str
        File, for errors.

    Returns
    -------
    list of Found
        At most one for each role.

    Raises
    ------
    WeatherError
        If two variables claim one role and no choice was made.
    """
    claims: dict[str, list[tuple[str, str]]] = {}
    for name in (str(one) for one in weather.data_vars if str(one) in usable):
        by_custom = _ALIASES.get(name.lower())
        by_standard = _by_standard_name(weather[name])
        role, how = (by_custom, "its usual name") if by_custom else (by_standard, "its standard_name")
        if role is not None:
            claims.setdefault(role, []).append((name, how))
    found = []
    for role in ROLES:
        choice = choices.get(role)
        if choice is not None and choice.name and choice.name in weather.variables:
            if choice.name not in usable:
                dims = ", ".join(f"{dim} ({size})" for dim, size in weather[choice.name].sizes.items())
                raise WeatherError(f"variable '{choice.name}' does not lie on time, latitude and longitude only",
                                   where=where, got=dims, cure="Select one level or member beforehand.")
            found.append(_describe(weather, role, choice.name, choice, "the run file"))
        elif (choice is None or not choice.name or choice.optional) and role in claims:
            name, how = _only(role, claims[role], where=where)
            found.append(_describe(weather, role, name, choice, how))
    return found


def _only(role: str, claims: list[tuple[str, str]], *, where: str) -> tuple[str, str]:
    usual = [claim for claim in claims if claim[1] == "its usual name"]
    best = usual or claims
    if len(best) > 1:
        key = "irradiation" if role == "sun" else role
        raise WeatherError(
            f"several variables could be {key}", where=where, got=", ".join(name for name, _ in best),
            cure=f"Choose one under `variables.{key}.name` in the run file.",
        )
    return best[0]


def _by_standard_name(variable: xr.DataArray) -> str | None:
    role = _STANDARD_NAMES.get(str(variable.attrs.get("standard_name", "")).lower())
    methods = str(variable.attrs.get("cell_methods", ""))
    if role == "temp_air" and (extreme := re.search(r"time:\s*(minimum|maximum)", methods)):
        return "temp_air_min" if extreme.group(1) == "minimum" else "temp_air_max"
    return role


def _describe(weather: xr.Dataset, role: str, name: str, choice: Choice | None, how: str) -> Found:
    variable = weather[name]
    said = choice or Choice(name)
    height = said.height_m if said.height_m is not None else _wind_height(weather, name)
    methods = str(variable.attrs.get("cell_methods", variable.attrs.get("cell_method", "")))
    units = said.units if said.units is not None else variable.attrs.get("units")
    return Found(role, name, None if units is None else str(units), said.means, said.stamp,
                 height if role.startswith("wind") else None, methods, how)


def _wind_height(weather: xr.Dataset, name: str) -> float | None:
    """Height of a wind variable [m], from its short name, a height coordinate or its long name."""
    if name.lower() in _WIND_HEIGHTS:
        return _WIND_HEIGHTS[name.lower()]
    variable = weather[name]
    for coordinate in variable.coords.values():
        if coordinate.attrs.get("standard_name") == "height" and coordinate.size == 1:
            return float(coordinate.values.ravel()[0])
    stated = re.search(r"(\d+(?:\.\d+)?)[\s-]*(?:m|metres?|meters?)\b", str(variable.attrs.get("long_name", "")))
    return float(stated.group(1)) if stated else None
