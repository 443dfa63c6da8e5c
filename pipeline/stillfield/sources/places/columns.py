"""Which column of a village table is which quantity: by the run file, else by the names people give them.

The lists of names are here: English, French, Spanish, Portuguese, and Arabic in both scripts. A name is compared
without case, accents, blanks and signs. A unit stands in brackets or at the end of a heading and is converted.
"""

from __future__ import annotations

import difflib
import re
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache

#: Total dissolved solids of one uS/cm [mg/L]. Common practice for natural waters (0.55 to 0.75); US Salinity
#: Laboratory, Agriculture Handbook 60 (1954): mg/L = 640 x dS/m, quoted from memory.
TDS_PER_CONDUCTIVITY = 0.64

#: A litre is taken for a kilogram: 3 % high for sea water, nothing for a well.
_SALINITY_G_KG = {
    **dict.fromkeys(["g_kg", "g_kg_1", "gkg", "ppt", "permille", "psu", "g_l", "g_l_1", "gl", "g_lt", "g_litre",
                     "g_liter", "kg_m3"], 1.0),
    **dict.fromkeys(["mg_l", "mg_l_1", "mgl", "mg_lt", "mg_litre", "mg_liter", "ppm", "mg_kg", "g_m3"], 1e-3),
}
_CONDUCTIVITY = {
    **dict.fromkeys(["us_cm", "us_cm_1", "uscm", "micros_cm", "micro_s_cm", "umhos_cm", "umho_cm"],
                    TDS_PER_CONDUCTIVITY * 1e-3),
    **dict.fromkeys(["ms_cm", "ms_cm_1", "mscm", "ds_m", "ds_m_1", "dsm", "mmhos_cm", "mmho_cm"],
                    TDS_PER_CONDUCTIVITY),
    **dict.fromkeys(["ms_m", "ms_m_1"], TDS_PER_CONDUCTIVITY * 1e-2),
}
_METRES = {
    **dict.fromkeys(["m", "metre", "metres", "meter", "meters", "metros", "mts", "masl", "m_asl", "m_a_s_l", "amsl",
                     "m_amsl", "msnm", "m_s_n_m"], 1.0),
    **dict.fromkeys(["ft", "feet", "foot", "pieds", "pies"], 0.3048),
}
_KILOMETRES = {
    **dict.fromkeys(["km", "kms", "kilometre", "kilometres", "kilometer", "kilometers", "kilometros"], 1.0),
    **dict.fromkeys(["m", "metre", "metres", "meter", "meters", "metros", "mts"], 1e-3),
    **dict.fromkeys(["mi", "mile", "miles"], 1.609344),
}


@dataclass(frozen=True)
class Spellings:
    """Names of one column that are equally good.

    Attributes
    ----------
    names : tuple of str
        As people write them.
    units : mapping of str to float, optional
        Folded unit to the factor that brings values into the column's own unit.
    needs_unit : bool
        Whether a heading without a unit is refused, because two are usual.
    """

    names: tuple[str, ...]
    units: Mapping[str, float] | None = None
    needs_unit: bool = False


@dataclass(frozen=True)
class Column:
    """One column: its spellings, best first, and its bounds.

    Attributes
    ----------
    name : str
        stillfield's name, and the key of the run file.
    spellings : tuple of Spellings
        The first that the table has is taken.
    low, high : float or None
        Gross-error bounds, in the column's own unit; None for text.
    count : bool
        Whether it counts people or houses, so that three digits after a mark are thousands.
    """

    name: str
    spellings: tuple[Spellings, ...]
    low: float | None = None
    high: float | None = None
    count: bool = False


COLUMNS = (
    Column("name", (
        Spellings(("name", "place", "place name", "village", "village name", "name of village", "settlement",
                   "settlement name", "site name", "nom", "nom du village", "nom village", "localité", "nom localité",
                   "nom de la localité", "lieu", "nombre", "nombre del pueblo", "pueblo", "aldea", "localidad",
                   "poblado", "caserío", "nome", "nome da aldeia", "aldeia", "povoado", "localidade", "povoação", "ism",
                   "ism al qarya", "qarya", "qaryah", "اسم", "الاسم", "القرية", "قرية", "اسم القرية")),
        Spellings(("site", "town", "locality", "community", "communauté", "comunidad", "comunidade", "vila", "label",
                   "hameau")),
    )),
    Column("id", (
        Spellings(("id", "place id", "village id", "site id", "code", "place code", "village code", "pcode", "p code",
                   "identifier", "identifiant", "code village", "code localité", "identificador", "código", "ramz",
                   "الرمز", "رمز")),
        Spellings(("fid", "gid", "objectid", "uid", "uuid")),
    )),
    Column("latitude", (
        Spellings(("latitude", "lat", "latitude deg", "lat deg", "latitude dd", "lat dd", "latitude wgs84", "lat wgs84",
                   "gps lat", "gps latitude", "location latitude", "latitude n", "lat n", "latitud", "khatt al ard",
                   "خط العرض", "دائرة العرض", "العرض")),
        Spellings(("y", "y coord", "coord y", "ycoord", "y wgs84")),
    ), -90.0, 90.0),
    Column("longitude", (
        Spellings(("longitude", "lon", "long", "lng", "longitude deg", "lon deg", "long deg", "longitude dd", "lon dd",
                   "long dd", "longitude wgs84", "lon wgs84", "long wgs84", "gps lon", "gps long", "gps longitude",
                   "location longitude", "longitude e", "lon e", "long e", "longitud", "khatt al tul", "خط الطول",
                   "الطول")),
        Spellings(("x", "x coord", "coord x", "xcoord", "x wgs84")),
    ), -180.0, 360.0),
    Column("position", (
        Spellings(("position", "coordinates", "coordinate", "coords", "gps", "gps coordinates", "gps position",
                   "lat lon", "latlon", "lat long", "latlong", "lat lng", "latlng", "latitude longitude", "lon lat",
                   "lonlat", "long lat", "longlat", "lng lat", "longitude latitude", "geopoint", "coordonnées",
                   "coordonnées gps", "coordenadas", "coordenadas gps", "ihdathiyat", "الإحداثيات", "احداثيات")),
        Spellings(("location", "point", "wkt", "ubicación", "localização", "emplacement")),
    )),
    Column("population", (
        Spellings(("population", "people", "inhabitants", "persons", "pop", "total population", "population total",
                   "population totale", "pop total", "habitants", "nombre d habitants", "población", "habitantes",
                   "personas", "população", "moradores", "pessoas", "sukkan", "السكان", "عدد السكان")),
    ), 0.0, 5e7, count=True),
    Column("households", (
        Spellings(("households", "household", "houses", "families", "number of households", "hh", "ménages", "ménage",
                   "nombre de ménages", "foyers", "hogares", "viviendas", "familias", "famílias", "agregados",
                   "agregados familiares", "domicílios", "usar", "الأسر", "عدد الأسر")),
    ), 0.0, 1e7, count=True),
    Column("feed_salinity_g_kg", (
        Spellings(("feed salinity", "salinity", "water salinity", "salinité", "salinidad", "salinidade", "muluha",
                   "الملوحة"), _SALINITY_G_KG),
        Spellings(("tds", "total dissolved solids", "feed tds", "water tds", "std", "sdt", "mtd", "résidu sec"),
                  _SALINITY_G_KG, needs_unit=True),
        Spellings(("ec", "conductivity", "electrical conductivity", "electric conductivity", "conductivité", "ce",
                   "conductivité électrique", "conductividad", "conductividad eléctrica", "condutividade",
                   "condutividade elétrica", "salinity ec", "feed ec"), _CONDUCTIVITY, needs_unit=True),
    ), 0.0, 350.0),
    Column("distance_to_feed_km", (
        Spellings(("distance to feed", "distance to water", "distance", "distance to source", "distance to sea",
                   "distance to well", "distance eau", "distance à l eau", "distance au point d eau", "distancia",
                   "distancia al agua", "distância", "distância à água", "masafa", "المسافة"),
                  _KILOMETRES, needs_unit=True),
    ), 0.0, 500.0),
    Column("elevation_m", (
        Spellings(("elevation", "altitude", "elev", "alt", "height", "gps altitude", "location altitude", "élévation",
                   "altitud", "altura", "elevación", "elevação", "irtifa", "الارتفاع"), _METRES),
    ), -500.0, 6000.0),
    Column("note", (Spellings(("note", "notes", "remark", "remarks", "comment", "comments", "remarque", "remarques",
                               "commentaire", "nota", "notas", "observación", "observaciones", "observação",
                               "observações", "mulahazat", "ملاحظات")),)),
)

#: In brackets behind a coordinate's heading: its numbers would have the other sign.
_AGAINST = frozenset({"s", "south", "sud", "sur", "sul", "w", "west", "o", "ouest", "oeste"})

NAMES = tuple(column.name for column in COLUMNS)
_BY_NAME = {column.name: column for column in COLUMNS}


@dataclass(frozen=True)
class Match:
    """A column of the table taken for a quantity.

    Attributes
    ----------
    column : Column
        The quantity.
    position : int
        Index of the table's column.
    label : str
        Its heading.
    factor : float
        From the table's unit to the quantity's.
    """

    column: Column
    position: int
    label: str
    factor: float = 1.0

    @property
    def longitude_first(self) -> bool:
        """Whether the heading of a combined position says that longitude comes first."""
        return fold(self.label).startswith(("lon", "lng"))


@lru_cache(maxsize=4096)
def fold(text: str) -> str:
    """Heading or unit without case, accents, blanks and signs.

    Examples
    --------
    >>> fold(" Nom de la Localité "), fold("µS/cm"), fold("_GPS_latitude"), fold("g kg-1")
    ('nom_de_la_localite', 'us_cm', 'gps_latitude', 'g_kg_1')
    """
    plain = unicodedata.normalize("NFKD", text.replace("‰", " permille ").replace("³", "3"))
    plain = "".join(sign for sign in plain if not unicodedata.combining(sign)).casefold().replace("μ", "u")
    return re.sub(r"[\W_]+", "_", plain).strip("_")


@lru_cache(maxsize=64)
def _folded(names: tuple[str, ...]) -> frozenset[str]:
    return frozenset(fold(name) for name in names)


@lru_cache(maxsize=4096)
def _bracket(text: str) -> tuple[str, str | None]:
    """Heading without, and text within, the brackets at its end."""
    found = re.fullmatch(r"([^(\[]*)[(\[]([^)\]]*)[)\]]\W*", text)
    return (fold(found[1]), fold(found[2])) if found else (fold(text), None)


def _factor(text: str, spellings: Spellings) -> float | str | None:
    """Factor of a heading that is one of the spellings, a complaint about its unit, or None."""
    names, units = _folded(spellings.names), spellings.units
    key, inside = _bracket(text)
    if units is None:
        key = re.sub(r"_(19|20)\d\d$", "", key)
        return 1.0 if key in names else None
    choices = ", ".join(_usual(units))
    if key not in names:
        ends = [unit for unit in units if key.endswith(f"_{unit}") and key[: -len(unit) - 1] in names]
        return units[max(ends, key=len)] if ends else None
    if inside is not None:
        return units.get(inside) or f"says '{inside}' for its unit, which is not known; name one of {choices}"
    if spellings.needs_unit:
        return f"says no unit; name it in the heading, one of {choices}, or map the column under places.columns"
    return 1.0


def _usual(units: Mapping[str, float]) -> list[str]:
    """First spelling of every different unit."""
    first: dict[float, str] = {}
    for unit, factor in units.items():
        first.setdefault(factor, unit)
    return list(first.values())


def recognised(header: Sequence[str], mapping: Mapping[str, str]) -> set[str]:
    """Columns that headings name, units aside.

    Parameters
    ----------
    header : sequence of str
        Headings.
    mapping : mapping of str to str
        Columns named in the run file.

    Returns
    -------
    set of str

    Examples
    --------
    >>> sorted(recognised(["Village", "Lat.", "Long.", "TDS (mg/L)", "roof"], {}))
    ['feed_salinity_g_kg', 'latitude', 'longitude', 'name']
    """
    plain = {heading.strip() for heading in header}
    found = {name for name, label in mapping.items() if label.strip() in plain}
    for column in COLUMNS:
        if any(heading == column.name or _factor(heading, spellings) is not None
               for spellings in column.spellings for heading in plain):
            found.add(column.name)
    return found


def match_columns(header: Sequence[str], mapping: Mapping[str, str]) -> tuple[dict[str, Match], list[str]]:
    """Find the column of every quantity.

    stillfield's own name wins over every other spelling, a usual spelling over a makeshift one ('x'). Two that are
    equally good are refused.

    Parameters
    ----------
    header : sequence of str
        Headings, stripped.
    mapping : mapping of str to str
        Columns named in the run file: stillfield's name to the table's heading.

    Returns
    -------
    found : dict of str to Match
    complaints : list of str
        Sentences on what cannot be decided.
    """
    found: dict[str, Match] = {}
    complaints = [f"places.columns has no '{name}'; it knows {', '.join(NAMES)}" for name in mapping
                  if name not in _BY_NAME]
    taken = {label.strip() for label in mapping.values()}
    for column in COLUMNS:
        result = _mapped(header, column, mapping[column.name].strip()) if column.name in mapping else \
            _by_spelling(header, column, taken)
        if isinstance(result, str):
            complaints.append(result)
        elif result is not None:
            found[column.name] = result
    return found, complaints


def _mapped(header: Sequence[str], column: Column, label: str) -> Match | str:
    exact = [index for index, heading in enumerate(header) if heading == label]
    places = exact or [index for index, heading in enumerate(header) if fold(heading) == fold(label) != ""]
    if len(places) > 1:
        return f"places.columns.{column.name}: {len(places)} columns are called '{label}'; rename one"
    if not places:
        close = difflib.get_close_matches(label, [heading for heading in header if heading], 1)
        hint = f"did you mean '{close[0]}'?" if close else f"the table has {', '.join(h for h in header if h)}"
        return f"places.columns.{column.name}: no column '{label}' ({hint})"
    heading = header[places[0]]
    return Match(column, places[0], heading, _stated_factor(heading, column))


def _stated_factor(heading: str, column: Column) -> float:
    """Factor of the unit a mapped heading ends in; the key of the run file states it where there is none."""
    key, inside = _bracket(heading)
    for spellings in column.spellings:
        for unit, factor in (spellings.units or {}).items():
            # One letter at the end of a name ('well_m') is too little to be sure of a unit, save in brackets.
            if inside == unit or (inside is None and len(unit) > 1 and key.endswith(f"_{unit}")):
                return factor
    return 1.0


def _by_spelling(header: Sequence[str], column: Column, taken: set[str]) -> Match | str | None:
    free = [(index, heading) for index, heading in enumerate(header) if heading and heading not in taken]
    own = [Match(column, index, heading) for index, heading in free if heading.casefold() == column.name]
    if own:
        return own[0] if len(own) == 1 else _choice(column, own)
    for spellings in column.spellings:
        matches: list[Match] = []
        complaint = None
        for index, heading in free:
            factor = _factor(heading, spellings)
            if isinstance(factor, str):
                complaint = complaint or f"column '{heading}' {factor}"
            elif factor is not None and _bracket(heading)[1] in _AGAINST:
                complaint = complaint or (f"column '{heading}' counts to the {_bracket(heading)[1]}; write south and "
                                          f"west as negative numbers in a column '{column.name}'")
            elif factor is not None:
                matches.append(Match(column, index, heading, factor))
        if len(matches) > 1:
            return _choice(column, matches)
        if matches or complaint:
            return matches[0] if matches else complaint
    return None


def _choice(column: Column, matches: Sequence[Match]) -> str:
    names = " or ".join(f"'{match.label}'" for match in matches[:5])
    return f"'{column.name}' could be column {names}; name it under places.columns.{column.name}"
