"""Whatever stands in a settings file, reading it ends in plain data or in one readable fault."""

from __future__ import annotations

import io
import re

from hypothesis import assume, given, settings
from hypothesis import strategies as st
from ruamel.yaml import YAML

from stillfield.errors import RunFileError
from stillfield.settings.text import harmless, parse_text

#: Signs of which YAML makes something.
YAML_SIGNS = st.text(alphabet=list("ab:-[]{}&*!|>'\"%@`#,?. \n\t~<0"), max_size=60)

#: Without control signs: ruamel.yaml reads U+0085 as the end of a line, which it no longer is in YAML 1.2.
TEXTS = st.text(st.characters(exclude_categories=("Cc", "Cs", "Zl", "Zp")), max_size=20)
WORDS = st.text(alphabet="abcxyz_-", min_size=1, max_size=8)
LEAVES = st.none() | st.booleans() | st.integers(-(10**9), 10**9) | TEXTS | st.floats(
    allow_nan=False, allow_infinity=False
)
DATA = st.dictionaries(
    WORDS, st.recursive(LEAVES, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(WORDS, inner, max_size=3),
                        max_leaves=8), min_size=1, max_size=4,
)  # fmt: skip


@settings(max_examples=200, deadline=None)
@given(YAML_SIGNS | st.text(max_size=40))
def test_any_text_is_read_or_refused_in_one_line(text):
    try:
        data = parse_text(text).data
    except RunFileError as error:
        (fault,) = error.faults
        assert str(fault).isprintable()
    else:
        assert isinstance(data, dict)


@settings(max_examples=100, deadline=None)
@given(DATA)
def test_what_a_yaml_1_2_writer_wrote_comes_back(data):
    stream = io.StringIO()
    YAML(typ="safe", pure=True).dump(data, stream)
    # Between brackets the writer leaves a text such as ?0 without quotes, which its own reader then refuses.
    assume(not re.search(r"[\[{,:] *\?", stream.getvalue()))
    assert parse_text(stream.getvalue()).data == data


@given(st.text(max_size=300))
def test_shown_text_stays_on_one_line(text):
    assert harmless(text).isprintable()
