"""From what the checks of a model say to faults with line, key, expectation, value and a suggestion.

The JSON Schema of a model is the one description from which editors complete and from which messages
here take their bounds, choices and neighbouring keys.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from stillfield.errors import Fault
from stillfield.settings.text import Document, KeyPath, harmless, show_path

Schema = Mapping[str, Any]
Model = TypeVar("Model", bound=BaseModel)


@dataclass(frozen=True)
class _Place:
    """Where an error of the model lies in the text, and what the schema says of that place."""

    path: KeyPath
    expected: Schema
    group: Schema


def check(model: type[Model], document: Document, context: Mapping[str, Any]) -> tuple[Model | None, list[Fault]]:
    """Build `model` from the data of `document`.

    Parameters
    ----------
    model : type of BaseModel
        What the data should be.
    document : Document
        The text, read.
    context : mapping
        Handed to the validators: ``folder`` from which paths count.

    Returns
    -------
    built : BaseModel or None
        None when there is any fault.
    faults : list of Fault
        Every fault of text and values, in the order of their lines.
    """
    try:
        built = model.model_validate(document.data, context=dict(context))
    except ValidationError as error:
        found = _translate(error, model, document)
        return None, in_order([*document.faults, *found])
    faults = in_order(document.faults)
    return (None if faults else built), faults


def in_order(faults: Iterable[Fault]) -> list[Fault]:
    """Sort faults by line, those of the whole file first."""
    return sorted(faults, key=lambda fault: fault.line or 0)


def _translate(error: ValidationError, model: type[BaseModel], document: Document) -> list[Fault]:
    schema = model.model_json_schema()
    faults: list[Fault] = []
    for details in map(_at_the_kind, error.errors(include_url=False)):
        if _follows_from_items(details):
            continue
        place = _find(details["loc"], schema, document.data)
        parts = details.get("ctx", {}).get("faults")
        messages = parts if parts is not None else [_sentence(details, place, schema)]
        line, key = document.line_of(place.path), show_path(place.path)
        faults.extend(Fault(line, key, message) for message in messages)
    return list(dict.fromkeys(faults))


def _at_the_kind(details: ErrorDetails) -> ErrorDetails:
    """Move a missing or unknown kind from the group that has kinds to the key that names the kind."""
    if not details["type"].startswith("union_tag"):
        return details
    value, key = details["input"], details["ctx"]["discriminator"].strip("'")
    if not isinstance(value, dict):
        return {**details, "type": "dict_type"}
    kinds = re.findall(r"'([^']+)'", details["ctx"].get("expected_tags", ""))
    said = not_a_choice(value[key], kinds) if key in value else f"is missing: the kind of {details['loc'][-1]}"
    return {**details, "type": "stillfield", "loc": (*details["loc"], key), "input": value.get(key), "msg": said}


def _follows_from_items(details: ErrorDetails) -> bool:
    """Whether a list is called too short only because some of its items were refused."""
    value, least = details["input"], details.get("ctx", {}).get("min_length", 0)
    return details["type"] == "too_short" and isinstance(value, list) and len(value) >= least


def _find(loc: tuple[str | int, ...], root: Schema, data: Any) -> _Place:
    """Follow an error's location through schema and data; the tag of a chosen kind is no key."""
    node: Schema = root
    group: Schema = root
    path: list[str | int] = []
    for position, step in enumerate(loc):
        kinds = node.get("discriminator", {}).get("mapping", {})
        if step in kinds and not (isinstance(data, dict) and step in data):
            node = group = _resolve({"$ref": kinds[step]}, root)
            continue
        if isinstance(step, int) and isinstance(data, list) and step >= len(data):
            break  # an item that a list of fixed length lacks: the list is at fault
        known = isinstance(data, dict) and (step in data or (position == len(loc) - 1 and step != _KEY_ITSELF))
        if known or (isinstance(step, int) and isinstance(data, list)):
            path.append(step)
            group = _branch(node, "array" if isinstance(step, int) else "object", root)
            data = data.get(step) if isinstance(data, dict) else data[int(step)]
        if step != _KEY_ITSELF:
            node = _child(node, step, root)
    return _Place(tuple(path), node, group)


#: How pydantic marks that a key of a mapping is at fault, not its value.
_KEY_ITSELF = "[key]"


def _child(node: Schema, step: str | int, root: Schema) -> Schema:
    """Schema of the key or item `step` of `node`; empty when the schema knows none."""
    node = _branch(node, "array" if isinstance(step, int) else "object", root)
    if isinstance(step, int):
        fixed = node.get("prefixItems", [])
        found = fixed[step] if step < len(fixed) else node.get("items", {})
    else:
        found = node.get("properties", {}).get(step) or node.get("additionalProperties") or {}
    return _resolve(found, root) if isinstance(found, dict) else {}


def _resolve(node: Schema, root: Schema) -> Schema:
    """`node` with its reference followed and, where it may be absent, without the 'null' branch."""
    while "$ref" in node:
        kept = {key: value for key, value in node.items() if key != "$ref"}
        node = {**root["$defs"][node["$ref"].rpartition("/")[2]], **kept}
    if "anyOf" not in node:
        return node
    branches = [_resolve(branch, root) for branch in node["anyOf"] if branch.get("type") != "null"]
    kept = {key: value for key, value in node.items() if key != "anyOf"}
    return {**branches[0], **kept} if len(branches) == 1 else {**kept, "anyOf": branches}


def _branch(node: Schema, kind: str, root: Schema) -> Schema:
    """The branch of `node` that is an array or object, if it offers several forms."""
    branches = (_resolve(branch, root) for branch in node.get("anyOf", []))
    return next((branch for branch in branches if branch.get("type") == kind), node)


def _sentence(details: ErrorDetails, place: _Place, root: Schema) -> str:
    kind, value = details["type"], details["input"]
    if details["loc"][-1:] == (_KEY_ITSELF,):
        return f"unknown key{_known_name(str(value), place)}"
    if kind == "missing" and isinstance(value, dict):
        return f"is missing{_meaning(place.expected)}"
    if kind == "extra_forbidden":
        return f"unknown key{_known_key(place, root)}"
    if kind == "stillfield":
        return details["msg"]
    if "enum" in place.expected:
        return not_a_choice(value, place.expected["enum"])
    got = _count(value) if kind in _WRONG_LENGTH else show_value(value)
    return f"should be {_expectation(place.expected, details)} (got {got}{_cure(value, place.expected)})"


#: Errors about the number of items in a list.
_WRONG_LENGTH = ("too_short", "too_long", "missing")


def _count(items: Any) -> str:
    return f"{len(items)} item{'' if len(items) == 1 else 's'}"


def _meaning(expected: Schema) -> str:
    """': what the key is' from its description, or nothing."""
    description = str(expected.get("description", "")).partition(". ")[0].rstrip(".")
    return f": {description}" if description else ""


def _known_key(place: _Place, root: Schema) -> str:
    """' (did you mean ...?)' from the keys of the same group, else of the whole file, else all of the group."""
    key, here = str(place.path[-1]), list(place.group.get("properties", {}))
    close = closest(key, here)
    if close:
        return f" (did you mean '{close}'?)"
    elsewhere = dict(_all_keys(root, root, ()))
    close = closest(key, list(elsewhere), cutoff=0.85)
    if close and elsewhere[close] != show_path(place.path):
        return f" here (did you mean '{elsewhere[close]}'?)"
    kind = place.group.get("properties", {}).get("kind", {}).get("const")
    where = f" for kind '{kind}'" if kind else ""
    return f"{where} (known here: {', '.join(here)})" if here else where


def _known_name(name: str, place: _Place) -> str:
    """' (did you mean ...?)' for a name among those a mapping may have."""
    names = place.group.get("propertyNames", {}).get("enum", [])
    close = closest(name, names)
    return f" (did you mean '{close}'?)" if close else f" (known here: {', '.join(names)})"


def _all_keys(node: Schema, root: Schema, above: tuple[str, ...]) -> Iterable[tuple[str, str]]:
    """Every key of the schema with its path."""
    node = _resolve(node, root)
    for branch in (*node.get("oneOf", []), *([node["items"]] if node.get("items") else [])):
        yield from _all_keys(branch, root, above)
    for key, child in node.get("properties", {}).items():
        yield key, ".".join((*above, key))
        yield from _all_keys(child, root, (*above, key))


def not_a_choice(value: Any, choices: Iterable[Any]) -> str:
    """Sentence for a value that is not among the choices.

    Examples
    --------
    >>> not_a_choice("ruel", ["fitted", "rule"])
    "should be one of 'fitted', 'rule' (got 'ruel'; did you mean 'rule'?)"
    """
    names = list(choices)
    close = closest(value, names) if isinstance(value, str) else None
    hint = f"; did you mean '{close}'?" if close else ""
    got = f"'{harmless(value)}'" if isinstance(value, str) else show_value(value)
    listed = ", ".join(f"'{name}'" for name in names)
    return f"should be {'one of ' if len(names) > 1 else ''}{listed} (got {got}{hint})"


def closest(word: str, known: list[str], cutoff: float = 0.6) -> str | None:
    """Most similar known word, capitals and the choice of - or _ aside."""
    def plain(text: str) -> str:
        return text.lower().replace("_", "-").strip()

    by_plain = {plain(other): other for other in known}
    close = get_close_matches(plain(word), list(by_plain), n=1, cutoff=cutoff)
    return by_plain[close[0]] if close else None


_NOUNS = {
    "number": "a number", "integer": "a whole number", "string": "text", "boolean": "true or false",
    "array": "a list", "object": "a group of keys",
}


def _expectation(expected: Schema, details: ErrorDetails) -> str:
    """Say what the schema wants: 'between 0 and 80', 'a list of 2', 'text'."""
    kind = expected.get("type", "")
    if kind in ("number", "integer"):
        return _bounds(expected, _NOUNS[kind], details["input"])
    if details["type"] in _WRONG_LENGTH:
        expected = _branch(expected, "array", {})
        return f"a list of {_span(expected.get('minItems', 0), expected.get('maxItems'))}"
    if details["type"].startswith("string_too"):
        return f"{_span(expected.get('minLength', 0), expected.get('maxLength'))} characters of text"
    if "anyOf" in expected:
        return " or ".join(_NOUNS.get(branch.get("type", ""), "") for branch in expected["anyOf"])
    return "a group of keys" if "oneOf" in expected else _NOUNS.get(kind, details["msg"].lower())


def _span(least: int, most: int | None) -> str:
    if most is None:
        return f"{least} or more"
    return f"{least}" if least == most else f"{least} to {most}"


def _bounds(expected: Schema, noun: str, value: Any) -> str:
    """Bounds of a number; the noun stands in front unless the value is such a number already."""
    low, above = expected.get("minimum"), expected.get("exclusiveMinimum")
    high, below = expected.get("maximum"), expected.get("exclusiveMaximum")
    if low is not None and high is not None:
        words = f"between {_plain(low)} and {_plain(high)}"
    else:
        ends = [f"{word} {_plain(bound)}" for word, bound in
                (("at least", low), ("above", above), ("at most", high), ("below", below)) if bound is not None]
        words = " and ".join(ends)
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    if is_number and words and (noun == "a number" or float(value).is_integer()):
        return words
    return f"{noun} {words}".strip()


def _plain(number: float) -> str:
    return f"{int(number)}" if float(number).is_integer() else f"{number:g}"


def show_value(value: Any) -> str:
    """A value as a message shows it, kind included where it would mislead otherwise.

    Examples
    --------
    >>> show_value("5,0"), show_value(95), show_value(None), show_value([1, 2])
    ("the text '5,0'", '95', 'nothing', 'a list')
    """
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f"the text '{harmless(value)}'"
    if isinstance(value, int | float):
        return f"{value}"
    return "a list" if isinstance(value, list | tuple) else "a group of keys"


def _cure(value: Any, expected: Schema) -> str:
    """Name a way out that is obvious from the value: a decimal comma, a unit, quotation marks."""
    kind = expected.get("type")
    if kind == "string" and isinstance(value, int | float):
        return f"; put it in quotes: '{value}'"
    if kind not in ("number", "integer") or not isinstance(value, str):
        return ""
    if _is_number(value):
        return f"; write {value.strip()} without quotation marks"
    if _is_number(value.replace(",", ".", 1)):
        return f"; write {value.replace(',', '.', 1)}"
    begins = re.match(r"[-+]?[0-9.,]+", value)
    return "; write the number alone, in the unit of the key" if begins else ""


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
