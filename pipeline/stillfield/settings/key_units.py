"""Units of the keys of run and still files, as the schema tells them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from functools import cache
from typing import Any, Literal

from stillfield.settings.load import json_schema

_BRACKET = re.compile(r"\[([^\[\],]+)\]")


def unit_of_key(path: Sequence[str], kind: Literal["run", "still"] = "run") -> str:
    """Unit of a key, from the brackets in its description.

    Parameters
    ----------
    path : sequence of str
        Names from the top of the file down; numbers stand for members of a list.
    kind : {'run', 'still'}
        Which file the key stands in.

    Returns
    -------
    str
        Empty for text, for numbers without a unit, and for keys that the schema does not know.

    Examples
    --------
    >>> unit_of_key(["need", "litres_per_person_day"]), unit_of_key(["weather", "box", "south"])
    ('L day-1', 'deg north')
    >>> unit_of_key(["panels", "0", "tilt_deg"], "still"), unit_of_key(["rule", "efficiency"])
    ('deg', '')
    """
    schema = _schema(kind)
    unit = _find(schema, list(path), schema.get("$defs", {})) or ""
    return "" if unit == "1" else unit


@cache
def _schema(kind: Literal["run", "still"]) -> Mapping[str, Any]:
    return json_schema(kind)


def _find(node: Mapping[str, Any], path: list[str], known: Mapping[str, Any]) -> str | None:
    if not path:
        bracket = _BRACKET.search(str(node.get("description", "")))
        return bracket[1] if bracket else None
    for choice in _choices(node, known):
        inside = choice.get("properties", {}).get(path[0]) or (choice.get("items") if path[0].isdigit() else None)
        found = _find(inside, path[1:], known) if isinstance(inside, Mapping) else None
        if found is not None:
            return found
    return None


def _choices(node: Mapping[str, Any], known: Mapping[str, Any]) -> Iterator[Mapping[str, Any]]:
    """The node and whatever it may be instead, references followed."""
    yield node
    if "$ref" in node:
        yield from _choices(known[str(node["$ref"]).rpartition("/")[2]], known)
    for way in ("anyOf", "oneOf", "allOf"):
        for choice in node.get(way, ()):
            yield from _choices(choice, known)
