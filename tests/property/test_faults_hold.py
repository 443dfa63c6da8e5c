"""Whatever is changed in a sound settings file, it loads or gives faults that can be read."""

from __future__ import annotations

import copy
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stillfield.settings.faults import check
from stillfield.settings.model import RunSettings
from stillfield.settings.still_file import StillKeys
from stillfield.settings.text import Document, read_text

CONFIG = Path(__file__).parents[2] / "config"
FILES = [
    (RunSettings, CONFIG / "demo.yaml"), (RunSettings, CONFIG / "typical-years.yaml"),
    (StillKeys, CONFIG / "stills" / "double-slope-glass.yaml"),
]  # fmt: skip

WORDS = st.sampled_from(["kind", "netcdf", "name", "seed", "share", "[key]", "no", "", "1", "*", "new"])
VALUES = st.recursive(
    st.none() | st.booleans() | st.integers(-3, 2000) | st.floats() | WORDS | st.text(max_size=5),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(WORDS, inner, max_size=3), max_leaves=5,
)  # fmt: skip


def places_in(data: Any, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    """Paths of every key and item."""
    steps = data if isinstance(data, dict) else range(len(data)) if isinstance(data, list) else ()
    return [found for step in steps for found in ((*path, step), *places_in(data[step], (*path, step)))]


@pytest.mark.parametrize(("model", "path"), FILES, ids=lambda value: getattr(value, "stem", None))
@settings(max_examples=60, deadline=None)
@given(choices=st.data())
def test_any_change_is_accepted_or_told(model, path, choices):
    sound = read_text(path)
    data = copy.deepcopy(sound.data)
    for _ in range(choices.draw(st.integers(1, 3))):
        *above, last = choices.draw(st.sampled_from(places_in(data)))
        group = data
        for step in above:
            group = group[step]
        action = choices.draw(st.sampled_from(["replace", "remove", "add"]))
        if action == "replace":
            group[last] = choices.draw(VALUES)
        elif action == "remove":
            del group[last]
        elif isinstance(group, dict):
            group[choices.draw(WORDS)] = choices.draw(VALUES)
        if not places_in(data):
            break
    built, faults = check(model, Document(path.name, data, sound.lines), {"folder": path.parent})
    assert (built is None) == bool(faults)
    for fault in faults:
        assert str(fault).isprintable()
        assert fault.message.strip()
        assert fault.line is None or fault.line >= 1
