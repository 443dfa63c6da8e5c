"""Coordinates as people write them: decimal degrees, degrees with minutes and seconds, one cell or two.

Letters of the sky are English, French, Spanish, Portuguese and Arabic; O is west (Ouest, Oeste).
"""

from __future__ import annotations

import re
from dataclasses import dataclass

#: More than any longitude: metres of a projection.
_FULL_TURN = 360.0

_AXIS = {"N": "latitude", "S": "latitude", "E": "longitude", "W": "longitude", "O": "longitude"}
_WORDS = {
    **dict.fromkeys(["n", "north", "nord", "norte", "ش", "شمال", "شمالا"], "N"),
    **dict.fromkeys(["s", "south", "sud", "sur", "sul", "ج", "جنوب", "جنوبا"], "S"),
    **dict.fromkeys(["e", "east", "est", "este", "leste", "ق", "شرق", "شرقا"], "E"),
    **dict.fromkeys(["w", "west", "ouest", "oeste", "غ", "غرب", "غربا"], "W"),
    "o": "O",
}
_MARKS = str.maketrans({
    **dict.fromkeys("º˚", "°"), **dict.fromkeys("′’‘´`ʹ", "'"), **dict.fromkeys("″”“ʺ", '"'), "−": "-", "–": "-",
    "٫": ".", "،": ",", "\u200e": None, "\u200f": None,
})
_PART = r"(\d+(?:[.,]\d*)?|[.,]\d+)"
_SEXAGESIMAL = re.compile(
    rf"([+-]?) ?{_PART} ?[°d: -]? ?(?:{_PART} ?['m: -]? ?(?:{_PART} ?[\"s]?)?)?", re.ASCII | re.IGNORECASE
)
_DECIMAL = re.compile(r"[+-]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:e[+-]?\d{1,2})? ?°?", re.ASCII | re.IGNORECASE)
_WKT = re.compile(r"POINT ?Z? ?\( ?([^\s()]+) ([^\s()]+)(?: [^\s()]+)? ?\)", re.IGNORECASE)
#: Capital D, M, S and one S: seconds, or south?
_ONE_S = re.compile(r".*\d ?([dD]).*\d ?([mM]).*\d ?([sS])")

#: What nearly all coordinates are; the rest takes longer.
_PLAIN = re.compile(r"-?\d+(?:\.\d+)?", re.ASCII)
#: No coordinate is longer, and patterns need not be tried on what is.
_LONGEST = 100

WANTED = "should be degrees such as -12.345 or 12°20'42\" S"


@dataclass(frozen=True)
class Angle:
    """A coordinate: its value, east and north positive [deg], and the letter that stood with it."""

    degrees: float
    letter: str = ""

    @property
    def axis(self) -> str:
        """The axis its letter belongs to, or nothing."""
        return _AXIS.get(self.letter, "")


def tidy(text: str) -> str:
    """One spelling for the signs of an angle, single blanks, Western digits."""
    text = re.sub(r"\s+", " ", text.translate(_MARKS).strip()).replace("''", '"')
    text = "".join(str(int(sign)) if sign.isdecimal() and not sign.isascii() else sign for sign in text)
    text = re.sub(r"(?<=[\d ])(?:degrees?|degrés?|degres?|grados?|graus?|deg)(?![a-z])", "°", text, flags=re.IGNORECASE)
    text = re.sub(r"(?<=[\d ])(?:minutes?|minutos?|min)(?![a-z])", "'", text, flags=re.IGNORECASE)
    return re.sub(r"(?<=[\d ])(?:seconds?|secondes?|segundos?|sec)(?![a-z])", '"', text, flags=re.IGNORECASE)


def _not_endless(text: str) -> str:
    if len(text) > _LONGEST:
        raise ValueError(WANTED)
    return text


def check_angle(value: float, axis: str) -> None:
    """Refuse a number that is no coordinate of this axis.

    Raises
    ------
    ValueError
        With the rest of a sentence that begins with the column's name.
    """
    if not abs(value) <= _FULL_TURN:
        raise ValueError(
            "looks like metres of a projection (UTM or a national grid); give degrees of latitude and longitude "
            "(WGS 84)"
        )
    low, high = (-90, 90) if axis == "latitude" else (-180, 360)
    if not low <= value <= high:
        hint = "; are latitude and longitude swapped?" if axis == "latitude" else ""
        raise ValueError(f"should be between {low} and {high} (got {value:g}{hint})")


def parse_angle(text: str, axis: str = "") -> Angle:
    r"""Read one coordinate.

    Parameters
    ----------
    text : str
        Such as ``-12.345``, ``12,345``, ``12°34'56" N``, ``12 34 56 S``, ``12d34m``, ``W 40:30``.
    axis : str
        'latitude', 'longitude', or nothing where the letter tells.

    Returns
    -------
    Angle

    Raises
    ------
    ValueError
        With the rest of a sentence that begins with the column's name.

    Examples
    --------
    >>> parse_angle("12 30 36 S"), parse_angle("40d30mO"), parse_angle("-3,25")
    (Angle(degrees=-12.51, letter='S'), Angle(degrees=-40.5, letter='O'), Angle(degrees=-3.25, letter=''))
    """
    if _PLAIN.fullmatch(text):
        body, letter = text, ""
    else:
        body, letter = _letter_of(tidy(_not_endless(text)))
    if axis and _AXIS.get(letter, axis) != axis:
        raise ValueError(f"says {letter}, which is a {_AXIS[letter]}; are latitude and longitude swapped?")
    value = _degrees(body)
    if letter and body.startswith(("-", "+")):
        raise ValueError(f"has a sign and the letter {letter}; leave one out")
    value = -value if letter in ("S", "W", "O") else value
    if axis or letter:
        check_angle(value, axis or _AXIS[letter])
    return Angle(value + 0.0, letter)


def _letter_of(text: str) -> tuple[str, str]:
    """Angle without its letter, and the letter."""
    front = re.match(r"([^\W\d_]+)\.? ?(?=[-+\d.,])", text)
    if front and front[1].casefold() in _WORDS:
        return text[front.end():], _WORDS[front[1].casefold()]
    back = re.search(r"(?<=[\d°'\"., dmsDMS])([^\W\d_]+)\.?$", text)
    word = back[1].casefold() if back else ""
    # "12d34mN": the unit and the letter have run together.
    cut = 1 if word[:1] in ("d", "m", "s") and word[1:] in _WORDS else 0
    if back is None or word[cut:] not in _WORDS:
        return text, ""
    marked = _ONE_S.fullmatch(text)
    if marked and not cut:
        cases = [sign.isupper() for sign in marked.groups()]
        if not any(cases):
            return text, ""
        if cases[0] or cases[1]:
            raise ValueError("ends in S, which may be seconds or south; write 12°34'56\" S or -12.582")
    return text[: back.start(1) + cut].rstrip(" .,"), _WORDS[word[cut:]]


def _degrees(text: str) -> float:
    """Value [deg] of an angle without its letter."""
    if _DECIMAL.fullmatch(text):
        return float(text.rstrip("° ").replace(",", "."))
    found = _SEXAGESIMAL.fullmatch(text)
    if found is None:
        raise ValueError(WANTED)
    sign, *texts = found.groups()
    parts = [float(part.replace(",", ".")) for part in texts if part is not None]
    if parts[0] > _FULL_TURN:
        check_angle(parts[0], "longitude")
    if any(part != int(part) for part in parts[:-1]):
        raise ValueError(WANTED)
    for part, unit in zip(parts[1:], ("minutes", "seconds"), strict=False):
        if part >= 60.0:
            raise ValueError(f"has {part:g} {unit}; they should be below 60")
    value = sum(part / scale for part, scale in zip(parts, (1.0, 60.0, 3600.0), strict=False))
    return -value if sign == "-" else value


def parse_position(text: str, *, longitude_first: bool = False) -> tuple[Angle, Angle]:
    """Read latitude and longitude from one cell.

    Parameters
    ----------
    text : str
        Such as ``12.5, -40.3``, ``12,5; -40,3``, ``12°30'N 40°18'W``, ``POINT (-40.3 12.5)``, or latitude, longitude,
        height and accuracy as field forms write them.
    longitude_first : bool
        Order where no letter tells.

    Returns
    -------
    latitude, longitude : Angle

    Raises
    ------
    ValueError
        With the rest of a sentence that begins with the column's name.

    Examples
    --------
    >>> [angle.degrees for angle in parse_position("12,5; -40,25")]
    [12.5, -40.25]
    """
    plain = tidy(_not_endless(text))
    wkt = _WKT.fullmatch(plain)
    if wkt:
        halves, longitude_first = (wkt[1], wkt[2]), True
    else:
        halves = _halves(plain.strip("()[]{} "))
    first, second = (parse_angle(half) for half in halves)
    if bool(first.axis) != bool(second.axis) or (first.axis and first.axis == second.axis):
        raise ValueError("should have one latitude and one longitude, both with a letter or both without")
    if first.axis == "longitude" or (not first.axis and longitude_first):
        first, second = second, first
    check_angle(first.degrees, "latitude")
    check_angle(second.degrees, "longitude")
    return first, second


def _halves(text: str) -> tuple[str, str]:
    """Cut a position in two."""
    for mark in (";", "|", "/", ", "):
        if text.count(mark) == 1:
            first, second = text.split(mark)
            return first.strip(), second.strip()
    decimal_comma = text.count(" ") == 1 and re.search(r"\d,\d", text)  # "12,5 40"
    if text.count(",") == 1 and not decimal_comma:
        first, second = text.split(",")
        return first.strip(), second.strip()
    lettered = re.fullmatch(r"(.*\d.*?[NSns])[ ,]*((?:[^NSns]*\d[^NSns]*)[EWOewo])", text) or re.fullmatch(
        r"(.*\d.*?[EWOewo])[ ,]*((?:[^EWOewo]*\d[^EWOewo]*)[NSns])", text) or re.fullmatch(
        r"([NSns][^EWO]*\d[^EWO]*?)[ ,]*([EWOewo].*\d.*)", text)
    if lettered:
        return lettered[1].strip(), lettered[2].strip()
    return _unmarked_halves(text)


def _unmarked_halves(text: str) -> tuple[str, str]:
    """Cut a position in two that only blanks or decimal commas hold apart."""
    words = text.split(" ")
    if any(len(re.sub(r"\D", "", re.split(r"[.,]", word)[0])) > 3 for word in words):
        check_angle(float("inf"), "latitude")  # 37N 412345 8123456
    if len(words) == 2:
        return words[0], words[1]
    if len(words) in (3, 4) and all(re.fullmatch(r"[+-]?\d+[.,]\d+", word) for word in words[:2]):
        return words[0], words[1]
    if len(words) == 6:
        return " ".join(words[:3]), " ".join(words[3:])
    if text.count(",") == 3 and len(words) == 1:
        parts = text.split(",")
        return ",".join(parts[:2]), ",".join(parts[2:])
    raise ValueError("should be a latitude and a longitude such as '12.5, -40.3'")
