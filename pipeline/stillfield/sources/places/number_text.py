"""Numbers as people type them: decimal comma or point, thousands set apart, and nothing guessed."""

from __future__ import annotations

import re
from collections.abc import Iterable

#: What stands for 'not known' in a column of numbers; in a column of names it is a name.
MISSING = frozenset({"", "na", "n/a", "n.a.", "nan", "none", "null", "nil", "-", "--", "–", "—", "?", ".", "unknown",
                     "nd", "n.d.", "#n/a", "..", "s/d", "s.d."})

#: No number is longer, and patterns need not be tried on what is.
_LONGEST = 100

_SIGNS = str.maketrans({"−": "-", "٫": ".", "٬": ",", "،": ",", "\u00a0": " ", "\u202f": " ", "\u2009": " ",
                        "’": "'", "\u200e": None, "\u200f": None})
_SET_APART = re.compile(r"([+-]?\d{1,3})(?:[ '](\d{3}))+(?=$|[.,])", re.ASCII)
_NUMBER = re.compile(r"([+-]?)([\d.,]*\d[\d.,]*)(e[+-]?\d{1,3})?", re.ASCII | re.IGNORECASE)


def plain(text: str) -> str:
    """Text of a number with usual signs and digits, thousands set apart by blanks or apostrophes closed up.

    Examples
    --------
    >>> plain(" −12 345,5 "), plain("1'200"), plain("١٢٣")
    ('-12345,5', '1200', '123')
    """
    text = text.strip().translate(_SIGNS)
    text = "".join(str(int(sign)) if sign.isdecimal() and not sign.isascii() else sign for sign in text)
    found = _SET_APART.match(text)
    return re.sub("[ ']", "", found[0]) + text[found.end():] if found else text


def is_missing(text: str) -> bool:
    """Whether a cell of a column of numbers says that the number is not known."""
    return text.strip().casefold() in MISSING


def decimal_mark(texts: Iterable[str], *, degrees: bool = False) -> str | None:
    """Mark that is surely the decimal mark of these numbers, or None where they show none or both.

    Parameters
    ----------
    texts : iterable of str
        Cells; what is no number tells nothing.
    degrees : bool
        Whether they are coordinates, which have no thousands.

    Returns
    -------
    str or None

    Examples
    --------
    >>> decimal_mark(["8.400", "1.234,5"]), decimal_mark(["8.400"]), decimal_mark(["8.400"], degrees=True)
    (',', None, '.')
    """
    marks = set()
    for text in texts:
        if "." not in text and "," not in text and text.isascii():
            continue
        found = _NUMBER.fullmatch(plain(text)) if len(text) <= _LONGEST else None
        mark = _shown_mark(found[2], degrees=degrees) if found else None
        if mark:
            marks.add(mark)
    return marks.pop() if len(marks) == 1 else None


def _shown_mark(digits: str, *, degrees: bool) -> str | None:
    points, commas = digits.count("."), digits.count(",")
    if points and commas:
        return max(".,", key=digits.rfind)
    if points + commas > 1:
        return "," if points else "."
    if points + commas == 0 or (_looks_like_thousands(digits) and not degrees):
        return None
    return "." if points else ","


def _looks_like_thousands(digits: str) -> bool:
    return re.fullmatch(r"[1-9]\d{0,2}[.,]\d{3}", digits) is not None


def number_of(text: str, mark: str | None) -> float:
    """Read one number.

    Parameters
    ----------
    text : str
        The cell.
    mark : str or None
        Decimal mark of its column, where it is known.

    Returns
    -------
    float

    Raises
    ------
    ValueError
        With the rest of a sentence that begins with the column's name.

    Examples
    --------
    >>> number_of("1 250,5", None), number_of("1.250", ","), number_of("1.250", ".")
    (1250.5, 1250.0, 1.25)
    >>> number_of("1.250", None)
    Traceback (most recent call last):
    ValueError: could be 1250 or 1.250 (got '1.250'); write it without a mark between the thousands
    """
    if text.isascii() and text.isdigit() and len(text) <= _LONGEST:
        return float(text)
    found = _NUMBER.fullmatch(plain(text)) if len(text) <= _LONGEST else None
    if found is None:
        raise ValueError("should be a number")
    sign, digits, power = found[1], found[2], found[3] or ""
    points, commas = digits.count("."), digits.count(",")
    if points and commas:
        mark = max(".,", key=digits.rfind)
    elif points + commas > 1:
        mark = "," if points else "."
    elif points + commas == 1 and not _looks_like_thousands(digits):
        mark = "." if points else ","
    elif points + commas == 1 and mark is None:
        whole, _, rest = re.split(r"([.,])", digits)
        raise ValueError(
            f"could be {whole}{rest} or {whole}.{rest} (got {text.strip()!r}); write it without a mark between the "
            "thousands"
        )
    whole, *rest = digits.split(mark) if mark else [digits]
    thousands = "." if mark == "," else ","
    if len(rest) > 1 or any(thousands in part for part in rest) or not _grouped(whole, thousands):
        raise ValueError("should be a number")
    return float(f"{sign}{whole.replace(thousands, '') or 0}.{rest[0] if rest else 0}{power}")


def _grouped(whole: str, thousands: str) -> bool:
    """Whether digits before the decimal mark stand in threes, or unbroken."""
    first, *groups = whole.split(thousands)
    return not groups or (1 <= len(first) <= 3 and all(len(group) == 3 for group in groups))
