"""Units of weather files: the spellings real files use, turned into one factor and one offset.

A unit comes from the file's units attribute or from the run file, never from a variable's name or the
size of its numbers. The registry of cf-xarray does the arithmetic; what stands before it here is needed
because that registry answers some everyday spellings with a plausible wrong number ('deg C' becomes an
angle times a coulomb) and does not know others ('W/M2', '(0 - 1)').
"""

from __future__ import annotations

import re
from functools import lru_cache
from typing import TYPE_CHECKING, Any, Literal

from stillfield.errors import UnitsError

if TYPE_CHECKING:
    from pint import UnitRegistry

IrradiationKind = Literal["energy", "power", "energy-per-day"]

#: Spellings accepted in any case, after `_tidy`; the value is what the registry is asked for.
_ALIASES: dict[str, str] = {
    **dict.fromkeys(
        ["c", "°c", "degc", "deg c", "deg_c", "celsius", "degree c", "degree_c", "degrees c", "degrees_c",
         "degreec", "degreesc", "degree celsius", "degrees celsius", "degree_celsius", "degrees_celsius",
         "deg celsius"], "degC"),
    **dict.fromkeys(["k", "degk", "deg k", "deg_k", "kelvin", "degree k", "degree_k", "degrees k", "degrees_k",
                     "degree kelvin", "degrees kelvin", "degree_kelvin", "degrees_kelvin"], "K"),
    **dict.fromkeys(["f", "°f", "degf", "deg f", "deg_f", "fahrenheit", "degree f", "degree_f", "degrees f",
                     "degree_fahrenheit", "degrees fahrenheit"], "degF"),
    **dict.fromkeys(["w m-2", "w/m2", "w/m/m", "watt m-2", "watts m-2", "watt/m2", "watts/m2"], "W m-2"),
    **dict.fromkeys(["kw m-2", "kw/m2"], "kW m-2"),
    **dict.fromkeys(["j m-2", "j/m2", "joule m-2", "joules m-2", "joule/m2", "joules/m2"], "J m-2"),
    **dict.fromkeys(["kj m-2", "kj/m2"], "kJ m-2"),
    **dict.fromkeys(["wh m-2", "wh/m2", "w h m-2", "w hr m-2", "w-h/m2", "w h/m2", "w-hr/m2", "w hr/m2"], "Wh m-2"),
    **dict.fromkeys(["kwh m-2", "kwh/m2", "kw h m-2", "kw-hr/m2", "kw-h/m2", "kw h/m2", "kw hr m-2"], "kWh m-2"),
    **dict.fromkeys(["kj m-2 day-1", "kj m-2 d-1", "kj/m2/day", "kj/m2/d", "kj/m2 day-1"], "kJ m-2 day-1"),
    **dict.fromkeys(["wh m-2 day-1", "wh m-2 d-1", "wh/m2/day", "wh/m2/d"], "Wh m-2 day-1"),
    **dict.fromkeys(["kwh m-2 day-1", "kwh m-2 d-1", "kwh/m2/day", "kwh/m2/d", "kw-hr/m2/day", "kw-hr/m2/d"],
                    "kWh m-2 day-1"),
    **dict.fromkeys(["m s-1", "m/s", "meter/s", "meters/s", "meter s-1", "meters s-1", "metre/s", "metres/s",
                     "meters per second", "metres per second", "m/sec", "m sec-1"], "m s-1"),
    **dict.fromkeys(["km h-1", "km/h", "kmh", "km/hr", "kph"], "km h-1"),
    **dict.fromkeys(["knot", "knots", "kt", "kts"], "knot"),
    **dict.fromkeys(["%", "percent", "pct"], "percent"),
    **dict.fromkeys(["g/kg", "gr/kg", "g kg-1", "gm/kg"], "g kg-1"),
    **dict.fromkeys(["kg/kg", "kg kg-1"], "1"),
    **dict.fromkeys(["hpa", "mb", "mbar", "millibar", "millibars"], "hPa"),
    **dict.fromkeys(["kpa"], "kPa"),
    **dict.fromkeys(["1", "", "(0-1)", "(0 - 1)", "0-1", "fraction", "dimensionless", "unitless"], "1"),
}

#: Spellings where the case carries the meaning (mega or milli), tried before the any-case table.
_EXACT: dict[str, str] = {
    **dict.fromkeys(["MJ m-2", "MJ/m2", "MJ/M2", "MJ M-2"], "MJ m-2"),
    **dict.fromkeys(["MJ m-2 day-1", "MJ m-2 d-1", "MJ/m2/day", "MJ/m2/d", "MJ/M2/DAY", "MJ/m2 day-1"],
                    "MJ m-2 day-1"),
}

#: What the sentence of an error offers for each wanted unit.
_CHOICES: dict[str, str] = {
    "degC": "'degC', 'K' or 'degF'",
    "m s-1": "'m s-1', 'km h-1' or 'knot'",
    "%": "'%' or '1' for a fraction",
    "1": "'kg kg-1' or 'g kg-1'",
    "Pa": "'Pa', 'hPa' or 'kPa'",
    "W m-2": "'W m-2' or 'kW m-2'",
    "MJ m-2": "'J m-2', 'kJ m-2', 'MJ m-2', 'Wh m-2' or 'kWh m-2'",
}

#: Temperatures are few and must be exact, so they do not pass through floating differences.
_TEMPERATURES: dict[tuple[str, str], tuple[float, float]] = {
    ("degC", "degC"): (1.0, 0.0),
    ("K", "degC"): (1.0, -273.15),
    ("degF", "degC"): (5.0 / 9.0, -160.0 / 9.0),
}


#: Conversions of everyday weather files, the numbers of the registry: it takes a third of a second to load.
EVERYDAY: dict[tuple[str, str], float] = {
    **{(unit, unit): 1.0 for unit in ("W m-2", "MJ m-2", "MJ m-2 day-1", "m s-1", "Pa", "1")},
    ("percent", "%"): 1.0, ("1", "%"): 100.0, ("g kg-1", "1"): 1e-3, ("hPa", "Pa"): 100.0, ("kPa", "Pa"): 1000.0,
    ("kW m-2", "W m-2"): 1000.0, ("J m-2", "MJ m-2"): 1e-6, ("kJ m-2", "MJ m-2"): 1e-3, ("Wh m-2", "MJ m-2"): 3.6e-3,
    ("kWh m-2", "MJ m-2"): 3.6,
}
#: Kinds of the everyday units of sunshine.
EVERYDAY_KINDS: dict[str, IrradiationKind] = {
    **dict.fromkeys(("W m-2", "kW m-2"), "power"),
    **dict.fromkeys(("J m-2", "kJ m-2", "MJ m-2", "Wh m-2", "kWh m-2"), "energy"),
    **dict.fromkeys(("kJ m-2 day-1", "MJ m-2 day-1", "Wh m-2 day-1", "kWh m-2 day-1"), "energy-per-day"),
}


@lru_cache(maxsize=1)
def _registry() -> UnitRegistry[Any]:
    from cf_xarray.units import units as registry

    return registry


def _tidy(units: str) -> str:
    """One spelling for powers, products and blanks."""
    text = units.strip().replace("²", "2").replace("⁻", "-").replace("¹", "1").replace("−", "-").replace("º", "°")
    text = re.sub(r"\*\*|\^", "", text)
    text = re.sub(r"[·*]|(?<=[A-Za-z])\.(?=[A-Za-z])|(?<=[0-9])\.(?=[A-Za-z])", " ", text)
    text = re.sub(r"\(\s*(-?\d)\s*\)", r"\1", text)
    text = re.sub(r"\s*/\s*", "/", text)
    return re.sub(r"\s+", " ", text)


def canonical(units: str | None) -> str | None:
    """Registry spelling of a unit, or None when it is not known.

    Parameters
    ----------
    units : str or None
        As the file or the run file writes it.

    Returns
    -------
    str or None
        Canonical spelling.

    Examples
    --------
    >>> [canonical(text) for text in ("W m**-2", "DEG C", "M/S", "(0 - 1)", "sunny")]
    ['W m-2', 'degC', 'm s-1', '1', None]
    """
    if units is None:
        return None
    tidy = _tidy(str(units))
    known = _EXACT.get(tidy) or _ALIASES.get(tidy.lower())
    if known is not None:
        return known
    if not re.search(r"[A-Za-z%]", tidy) or re.match(r"^[-+]?\d", tidy):
        return None  # a scaled unit such as '0.01' or '10 m s-1' is the file's packing leaking out
    try:
        unit = _registry().Unit(tidy)
    except Exception:  # pint raises half a dozen kinds for an unknown string
        return None
    return tidy if str(unit) != "dimensionless" else "1"


def conversion(units: str | None, wanted: str, *, where: str | None = None) -> tuple[float, float]:
    """Factor and offset that bring values into the wanted unit.

    Parameters
    ----------
    units : str or None
        Unit of the values, as the file or the run file writes it.
    wanted : str
        Unit of the vocabulary: 'degC', 'm s-1', '%', 'W m-2', 'MJ m-2', ...
    where : str, optional
        Variable and file, for the error.

    Returns
    -------
    factor, offset : float
        ``wanted = factor * value + offset``.

    Raises
    ------
    UnitsError
        If the unit is missing, unknown or of another kind.

    Examples
    --------
    >>> conversion("deg C", "degC")
    (1.0, 0.0)
    >>> conversion("K", "degC")
    (1.0, -273.15)
    >>> conversion("km/h", "m s-1")
    (0.2777777777777778, 0.0)
    >>> conversion("J m**-2", "MJ m-2")
    (1e-06, 0.0)
    """
    choices = _CHOICES.get(wanted, f"'{wanted}'")
    spelling = canonical(units)
    if spelling is None or (spelling == "1" and wanted not in {"%", "1"}):
        missing = units is None or not str(units).strip()
        raise UnitsError(
            "the unit is missing" if missing else f"unit '{units}' is not known",
            where=where,
            wanted=choices,
            cure="State `units` for this variable in the run file, or correct the file.",
        )
    if (spelling, wanted) in _TEMPERATURES:
        return _TEMPERATURES[spelling, wanted]
    if (spelling, wanted) in EVERYDAY:
        return EVERYDAY[spelling, wanted], 0.0
    registry = _registry()
    try:
        factor = float(registry.Quantity(1.0, spelling).to("percent" if wanted == "%" else wanted).magnitude)
    except Exception as fault:
        raise UnitsError(
            f"unit '{units}' is of another kind",
            where=where,
            wanted=choices,
            cure="Map another variable, or state the right `units` in the run file.",
        ) from fault
    return factor, 0.0


def irradiation_kind(units: str | None, *, where: str | None = None) -> IrradiationKind:
    """Tell whether a unit of sunshine is a rate, an energy, or an energy of each day.

    Parameters
    ----------
    units : str or None
        As the file or the run file writes it.
    where : str, optional
        Variable and file, for the error.

    Returns
    -------
    {'power', 'energy', 'energy-per-day'}
        'W m-2' is 'power', 'J m-2' is 'energy', 'MJ m-2 day-1' is 'energy-per-day'.

    Raises
    ------
    UnitsError
        If the unit is missing, unknown or none of these.

    Examples
    --------
    >>> [irradiation_kind(text) for text in ("W/m2", "J m**-2", "kWh/m2/day")]
    ['power', 'energy', 'energy-per-day']
    """
    spelling = canonical(units)
    if spelling in EVERYDAY_KINDS:
        return EVERYDAY_KINDS[spelling]
    if spelling not in {None, "1"}:
        registry = _registry()
        dimension = registry.Unit(spelling).dimensionality
        if dimension == registry.Unit("J m-2").dimensionality:
            return "energy"
        if dimension == registry.Unit("W m-2").dimensionality:
            return "energy-per-day" if re.search(r"(day|\bd)-?1?$|day", str(spelling)) else "power"
    missing = units is None or not str(units).strip()
    raise UnitsError(
        "the unit of sunshine is missing" if missing else f"'{units}' is no unit of sunshine",
        where=where,
        wanted="'W m-2' for a rate, or 'J m-2', 'MJ m-2', 'kWh m-2' for an energy",
        cure="State `units` and `means` for this variable in the run file, or correct the file.",
    )
