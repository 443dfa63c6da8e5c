"""The text of run files and still files: YAML 1.2 as written, and one plain fault for what is no YAML.

What a plain word means is checked against the YAML 1.2.2 specification, section 10.3.2 (core schema).
"""

from __future__ import annotations

import math

import pytest

from stillfield.errors import RunFileError
from stillfield.settings.text import MAX_BYTES, parse_text, plain_word, read_text


@pytest.mark.parametrize(
    ("word", "meaning"),
    [
        ("no", "no"), ("yes", "yes"), ("on", "on"), ("off", "off"), ("NO", "NO"), ("n", "n"),
        ("12:30", "12:30"), ("1:2:3", "1:2:3"), ("2020-01-01", "2020-01-01"), ("1_000", "1_000"),
        ("0b11", "0b11"), ("5,0", "5,0"), ("1e-3", 1e-3), ("1E5", 1e5), ("010", 10), ("0o10", 8),
        ("0x1F", 31), ("-12", -12), ("+.5", 0.5), ("3.", 3.0), ("true", True), ("False", False),
        ("tRUE", "tRUE"), ("null", None), ("~", None), ("Null", None), (".inf", math.inf), ("-.INF", -math.inf),
        ("9" * 5000, "9" * 5000),
    ],
)  # fmt: skip
def test_plain_words_mean_what_yaml_1_2_2_says(word, meaning):
    assert plain_word(word) == meaning
    assert type(plain_word(word)) is type(meaning)
    assert parse_text(f"key: {word}\n").data == {"key": meaning}


def test_quotes_and_the_text_tag_keep_text():
    document = parse_text("a: '5'\nb: \"no\"\nc: !!str 010\nd: |\n  x\n")
    assert document.data == {"a": "5", "b": "no", "c": "010", "d": "x\n"}


def test_a_yaml_1_1_directive_does_not_bring_its_meanings_back():
    assert parse_text("%YAML 1.1\n---\na: no\nb: 010\n").data == {"a": "no", "b": 10}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("a: 1\nb:\n\tc: 2\n", "line 3: is not YAML: a tab stands where only spaces may indent; replace it by spaces"),
        ("a: 1\nb: [1, 2\nc: 3\n",
         "line 2: is not YAML: the bracket opened here is not closed, or a comma is missing"),
        ("a: 1\nb: {c: 2\n", "line 2: is not YAML: the bracket opened here is not closed, or a comma is missing"),
        ("a: 'x\nb: 1\n", "line 1: is not YAML: the quotation mark opened here is not closed"),
        ("a: 1\nb: c: d\n", "line 2: is not YAML: a second ': ' on the line, or wrong indentation; "
                            "put text that holds ': ' in quotes"),
        ("a:\n  b: 1\n c: 2\n", "line 3: is not YAML: the indentation does not fit the lines above"),
        ("a: *b\n", "line 1: is not YAML: '*' begins an alias that was never set; put the text in quotes"),
        ("a: 1\n---\nb: 2\n", "line 2: holds a second document ('---'); one file is one document"),
        ("a: 1\nb: \x07\n", "line 2: holds a control character (code 7)"),
        ("a: &x [1, *x]\n", "line 1: is an alias inside its own anchor, which never ends"),
        ("- a\n- b\n", "line 1: should be a list of 'key: value' lines"),
        ("just words\n", "line 1: should be a list of 'key: value' lines"),
        ("", "is empty"),
        ("# nothing\n", "is empty"),
        ("a: 1\nb: " + "[" * 200_000, "line 2: is nested more than 40 levels deep"),
        ("- " * 5000, "line 1: is nested more than 40 levels deep"),
        ("a: [" + "1, " * 10_001 + "\n" + "1, " * 10_001, "line 2: stands for more than 10000 values"),
    ],
)
def test_text_that_is_no_yaml_gives_one_plain_fault(text, expected):
    with pytest.raises(RunFileError) as caught:
        parse_text(text)
    assert [str(fault) for fault in caught.value.faults] == [expected]


def test_aliases_that_grow_without_bound_are_refused_at_once():
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 10)}]" for n in range(1, 12)]
    with pytest.raises(RunFileError, match="more than 10000 values once its aliases are followed"):
        parse_text("\n".join(lines))


def test_a_few_aliases_are_followed():
    assert parse_text("a: &x [1, 2]\nb: *x\n").data == {"a": [1, 2], "b": [1, 2]}


def test_merge_keys_are_told_and_not_silently_merged():
    document = parse_text("a: &x {b: 1}\nc:\n  <<: *x\n")
    assert document.data["c"] == {}
    assert [str(fault) for fault in document.faults] == [
        "line 3, c: '<<' is not known in YAML 1.2; write the keys out"
    ]


def test_duplicate_keys_deep_inside_name_both_lines():
    document = parse_text("a:\n  - b: 1\n    c: 2\n    b: 3\n")
    assert [str(fault) for fault in document.faults] == ["line 4, a (item 1).b: duplicate key (first on line 2)"]


def test_bytes_that_are_no_utf8_give_their_line(tmp_path):
    (tmp_path / "run.yaml").write_bytes(b"name: a\n# caf\xe9\n")
    with pytest.raises(RunFileError, match=r"line 2: is not UTF-8 text \(byte 0xe9\); save it as UTF-8"):
        read_text(tmp_path / "run.yaml")


def test_a_file_that_is_far_too_long_is_refused_unread(tmp_path):
    (tmp_path / "run.yaml").write_bytes(b"#" * (MAX_BYTES + 1))
    with pytest.raises(RunFileError, match="is larger than 256 KiB"):
        read_text(tmp_path / "run.yaml")
