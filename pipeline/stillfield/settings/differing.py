"""Keys in which two resolved run files, or the stills of two runs, differ."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

from stillfield.settings.key_units import unit_of_key

#: Groups of keys that move no figure: names, folders, the use of the machine, the look of maps.
WITHOUT_EFFECT = ("name", "output", "compute", "map")

#: Stands before the name of a member of a list inside paths.
_MEMBER = "\0"


@dataclass(frozen=True)
class KeyDifference:
    """A key that two runs set differently.

    Attributes
    ----------
    key : str
        Path of the key, its parts joined by points; members of lists by their name, or counted from 0.
    unit : str
        Unit of its values; empty where it has none or its name tells it.
    a, b : object
        Values; None where a run has no such key or leaves it open.
    moves_figures : bool
        Whether results can depend on the key.
    """

    key: str
    unit: str
    a: Any
    b: Any
    moves_figures: bool = True


def differing_keys(
    a: Mapping[str, Any], b: Mapping[str, Any], *, kind: Literal["run", "still"] = "run"
) -> list[KeyDifference]:
    """Compare resolved keys.

    Parameters
    ----------
    a, b : mapping
        As they stand in manifests: groups, lists, texts, numbers, None.
    kind : {'run', 'still'}
        Which schema tells the units.

    Returns
    -------
    list of KeyDifference
        In the order of the keys' names.

    Examples
    --------
    >>> a = {"need": {"litres_per_person_day": 5.0, "share": 1.0}, "region": None, "name": "one"}
    >>> b = {"need": {"litres_per_person_day": 3.0, "share": 1.0}, "region": {"south": 1.0}, "name": "two"}
    >>> for found in differing_keys(a, b):
    ...     print(found.key, f"[{found.unit}]", found.a, found.b, found.moves_figures)
    name [] one two False
    need.litres_per_person_day [L day-1] 5.0 3.0 True
    region.south [deg north] None 1.0 True
    """
    leaves_a, leaves_b = dict(_leaves(a)), dict(_leaves(b))
    members = _members(leaves_a), _members(leaves_b)
    for leaves, other in ((leaves_a, members[1]), (leaves_b, members[0])):
        _gather(leaves, other)
    found = []
    for path in sorted(leaves_a.keys() | leaves_b.keys()):
        first, second = leaves_a.get(path), leaves_b.get(path)
        if first != second:
            key = ".".join(part.removeprefix(_MEMBER) for part in path)
            found.append(KeyDifference(key, unit_of_key(path, kind), first, second,
                                       kind == "still" or path[0] not in WITHOUT_EFFECT))
    return found


def _members(leaves: Mapping[tuple[str, ...], Any]) -> set[tuple[str, ...]]:
    """Paths of the named members of lists."""
    return {path[:depth + 1] for path in leaves for depth, part in enumerate(path) if part.startswith(_MEMBER)}


def _gather(leaves: dict[tuple[str, ...], Any], other: set[tuple[str, ...]]) -> None:
    """Put the keys of a named member that the other run has not at all together in one."""
    for member in _members(leaves) - other:
        inside = [path for path in leaves if path[:len(member)] == member]
        leaves[member] = [f"{path[-1]} {leaves[path]}" for path in inside if leaves[path] is not None]
        for path in inside:
            del leaves[path]


def _leaves(value: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Any]]:
    """Every key that is no group, with its path; an empty group or list is a value of its own."""
    inside: dict[str, Any] | None = None
    if isinstance(value, Mapping) and value:
        inside = {str(key): item for key, item in value.items()}
    elif isinstance(value, list) and value and all(isinstance(item, Mapping) for item in value):
        names = [str(item.get("name")) for item in value]
        if len(set(names)) == len(names) and "None" not in names:
            inside = {f"{_MEMBER}{name}": {key: part for key, part in item.items() if key != "name"}
                      for name, item in zip(names, value, strict=True)}
        else:
            inside = dict(zip(map(str, range(len(value))), value, strict=True))
    if inside is None:
        yield path, value
        return
    for key, item in inside.items():
        yield from _leaves(item, (*path, key))
