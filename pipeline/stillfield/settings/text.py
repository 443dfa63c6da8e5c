"""YAML text to plain data, with the line of every key, and with nothing reinterpreted.

The text is parsed by ruamel.yaml; what a plain word means is decided here by the short table of the YAML
1.2.2 core schema (section 10.3.2), and by nothing else: ``no`` and ``12:30`` stay text, ``1e-3`` is a
number, ``010`` is ten, a date stays text. No tag can make anything but text, numbers, truth values, lists
and mappings.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.events import CollectionEndEvent, CollectionStartEvent
from ruamel.yaml.nodes import MappingNode, Node, ScalarNode, SequenceNode
from ruamel.yaml.reader import ReaderError

from stillfield.errors import Fault, RunFileError, StillfieldError

#: A key path: texts for keys, whole numbers (from 0) for list items.
KeyPath = tuple[str | int, ...]

#: A run file is a page of text; anything much longer is not one.
MAX_BYTES = 262_144
#: Values after aliases are followed; repeated aliases would otherwise grow without bound.
MAX_VALUES = 10_000
#: Groups within groups; run files need five.
MAX_DEPTH = 40

_NULL = re.compile(r"null|Null|NULL|~|")
_TRUE = re.compile(r"true|True|TRUE")
_FALSE = re.compile(r"false|False|FALSE")
_INT = re.compile(r"[-+]?[0-9]+")
_OCTAL = re.compile(r"0o[0-7]+")
_HEX = re.compile(r"0x[0-9a-fA-F]+")
_FLOAT = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")
_INFINITE = re.compile(r"([-+]?)\.(inf|Inf|INF)")
_NAN = re.compile(r"\.(nan|NaN|NAN)")
#: Python refuses longer digit strings with an error of its own.
_LONGEST_NUMBER = 300
_LONGEST_SHOWN = 80


@dataclass
class Document:
    """What a YAML text says.

    Attributes
    ----------
    source : str
        Name of the text in messages: its path as given.
    data : dict
        Plain data: dict, list, str, int, float, bool, None.
    lines : dict of KeyPath to int
        Line (from 1) of every key and list item.
    faults : list of Fault
        Faults of the text that still left it readable, such as duplicate keys.
    """

    source: str
    data: dict[str, Any]
    lines: dict[KeyPath, int] = field(default_factory=dict)
    faults: list[Fault] = field(default_factory=list)

    def line_of(self, path: KeyPath) -> int | None:
        """Line of `path`, or of the nearest key above it that has one."""
        for length in range(len(path), 0, -1):
            if path[:length] in self.lines:
                return self.lines[path[:length]]
        return None


class _UnusableError(Exception):
    """Ends the reading of a text at once, with the fault that ends it."""

    def __init__(self, line: int | None, message: str) -> None:
        self.fault = Fault(line, "", message)
        super().__init__(message)


def read_text(path: Path, given: str | None = None) -> Document:
    """Read the YAML file at `path`.

    Parameters
    ----------
    path : Path
        File to read.
    given : str, optional
        Name for messages, as the user wrote it; the default is `path` itself.

    Returns
    -------
    Document

    Raises
    ------
    StillfieldError
        When the file cannot be read.
    RunFileError
        When it is too large, not UTF-8, not YAML or no mapping of keys.
    """
    source = given if given is not None else str(path)
    try:
        with path.open("rb") as stream:
            raw = stream.read(MAX_BYTES + 1)
    except OSError as error:
        raise StillfieldError("cannot be read", where=source, got=error.strerror) from None
    if len(raw) > MAX_BYTES:
        message = f"is larger than {MAX_BYTES // 1024} KiB; tables belong in files of their own"
        raise RunFileError(source, [Fault(None, "", message)])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        fault = Fault(line, "", f"is not UTF-8 text (byte 0x{raw[error.start]:02x}); save it as UTF-8")
        raise RunFileError(source, [fault]) from None
    return parse_text(text, source)


def parse_text(text: str, source: str = "text") -> Document:
    r"""Read YAML 1.2 text whose top level is a mapping of keys.

    Parameters
    ----------
    text : str
        The YAML text.
    source : str
        Name for messages.

    Returns
    -------
    Document

    Raises
    ------
    RunFileError
        With one fault, when the text cannot be read as YAML at all.

    Examples
    --------
    >>> document = parse_text("country: no\nstart: 12:30\nshare: 1e-3\nrows: 010\n")
    >>> document.data
    {'country': 'no', 'start': '12:30', 'share': 0.001, 'rows': 10}
    >>> document.lines[("share",)]
    3
    """
    try:
        root = _compose(text)
        if root is None:
            raise _UnusableError(None, "is empty")
        if not isinstance(root, MappingNode):
            raise _UnusableError(_line(root), "should be a list of 'key: value' lines")
        document = Document(source, {})
        document.data = _Builder(document).mapping(root, ())
    except _UnusableError as stop:
        raise RunFileError(source, [stop.fault]) from None
    return document


def _compose(text: str) -> Node | None:
    """Parse `text` into nodes with their lines; every syntax fault becomes one plain sentence."""
    try:
        _refuse_excess(text)
        root: Node | None = YAML(typ="safe", pure=True).compose(text)
    except ReaderError as error:
        line = text.count("\n", 0, error.position) + 1
        raise _UnusableError(line, f"holds a control character (code {error.character})") from None
    except MarkedYAMLError as error:
        raise _UnusableError(*_plain_syntax_fault(error)) from None
    except YAMLError as error:
        raise _UnusableError(None, f"is not YAML: {str(error).splitlines()[0]}") from None
    return root


def _refuse_excess(text: str) -> None:
    """Walk through `text` once without building anything, and stop where it is too deep or too long.

    The parser's time grows with the square of the depth, so depth is stopped before it is parsed to its end.
    """
    depth = 0
    for count, event in enumerate(YAML(typ="safe", pure=True).parse(text)):
        depth += isinstance(event, CollectionStartEvent) - isinstance(event, CollectionEndEvent)
        if depth > MAX_DEPTH:
            raise _UnusableError(int(event.start_mark.line) + 1, f"is nested more than {MAX_DEPTH} levels deep")
        if count > 2 * MAX_VALUES:
            raise _UnusableError(int(event.start_mark.line) + 1, f"stands for more than {MAX_VALUES} values")


def _plain_syntax_fault(error: MarkedYAMLError) -> tuple[int | None, str]:
    """Line and sentence for what the parser stumbled over."""
    problem, context = str(error.problem or ""), str(error.context or "")
    line = error.problem_mark.line + 1 if error.problem_mark else None
    for in_problem, in_context, at_opening, sentence in _SYNTAX_FAULTS:
        if in_problem in problem and in_context in context:
            opening = error.context_mark if at_opening else None
            return (opening.line + 1 if opening else line), sentence
    return line, f"is not YAML: {problem or context}"


#: What the parser says (problem, context), whether its opening line is the one to show, and plain words.
_SYNTAX_FAULTS = (
    ("'\\t'", "", False, "is not YAML: a tab stands where only spaces may indent; replace it by spaces"),
    ("another document", "", False, "holds a second document ('---'); one file is one document"),
    ("undefined alias", "", False, "is not YAML: '*' begins an alias that was never set; put the text in quotes"),
    ("", "flow", True, "is not YAML: the bracket opened here is not closed, or a comma is missing"),
    ("", "quoted scalar", True, "is not YAML: the quotation mark opened here is not closed"),
    ("mapping values are not allowed", "", False,
     "is not YAML: a second ': ' on the line, or wrong indentation; put text that holds ': ' in quotes"),
    ("", "block", False, "is not YAML: the indentation does not fit the lines above"),
)


def _line(node: Node) -> int:
    return int(node.start_mark.line) + 1


class _Builder:
    """Turns nodes into plain data and fills in lines and faults of the document."""

    def __init__(self, document: Document) -> None:
        self.document = document
        self.open_nodes: set[int] = set()
        self.values = 0

    def value(self, node: Node, path: KeyPath) -> Any:
        self.values += 1
        if self.values > MAX_VALUES:
            raise _UnusableError(None, f"stands for more than {MAX_VALUES} values once its aliases are followed")
        self._check_tag(node, path)
        if isinstance(node, ScalarNode):
            return node.value if node.style or _is_tagged_text(node) else plain_word(node.value)
        if id(node) in self.open_nodes:
            raise _UnusableError(_line(node), "is an alias inside its own anchor, which never ends")
        self.open_nodes.add(id(node))
        built = self.mapping(node, path) if isinstance(node, MappingNode) else self._sequence(node, path)
        self.open_nodes.discard(id(node))
        return built

    def mapping(self, node: MappingNode, path: KeyPath) -> dict[str, Any]:
        built: dict[str, Any] = {}
        for key, key_node, value_node in self._keys(node, path):
            child = (*path, key)
            if key in built:
                self._fault(key_node, child, f"duplicate key (first on line {self.document.lines[child]})")
                continue
            self.document.lines[child] = _line(key_node)
            built[key] = self.value(value_node, child)
        return built

    def _keys(self, node: MappingNode, path: KeyPath) -> Iterator[tuple[str, Node, Node]]:
        for key_node, value_node in node.value:
            if not isinstance(key_node, ScalarNode):
                self._fault(key_node, path, "a key should be a word, not a list or a group of keys")
            elif key_node.value == "<<" and not key_node.style:
                self._fault(key_node, path, "'<<' is not known in YAML 1.2; write the keys out")
            else:
                yield key_node.value, key_node, value_node

    def _sequence(self, node: Node, path: KeyPath) -> list[Any]:
        if not isinstance(node, SequenceNode):
            raise _UnusableError(_line(node), "is not YAML that can be read")
        built = []
        for index, item in enumerate(node.value):
            self.document.lines[(*path, index)] = _line(item)
            built.append(self.value(item, (*path, index)))
        return built

    def _check_tag(self, node: Node, path: KeyPath) -> None:
        tag = str(node.tag)
        known = tag.startswith("tag:yaml.org,2002:") and tag.rpartition(":")[2] in _RESOLVED_TAGS
        if isinstance(node, ScalarNode) and node.style:
            known = known and tag.endswith(":str")
        if not known:
            self._fault(node, path, f"the tag '{harmless(tag.replace('tag:yaml.org,2002:', '!!'))}' is not accepted; "
                                    "write the value without it")

    def _fault(self, node: Node, path: KeyPath, message: str) -> None:
        self.document.faults.append(Fault(_line(node), show_path(path), message))


#: Tags the parser gives by itself; a timestamp is kept as text.
_RESOLVED_TAGS = frozenset(
    {"str", "int", "float", "bool", "null", "timestamp", "merge", "value", "map", "seq"}
)


def _is_tagged_text(node: ScalarNode) -> bool:
    """Whether a plain word was marked as text with ``!!str`` although it looks like something else."""
    return str(node.tag).endswith(":str") and not isinstance(plain_word(node.value), str)


def plain_word(word: str) -> Any:
    """Meaning of an unquoted word by the YAML 1.2.2 core schema (section 10.3.2).

    Examples
    --------
    >>> [plain_word(word) for word in ("yes", "0x1F", "-.5", "1_000", "2020-01-01", "~")]
    ['yes', 31, -0.5, '1_000', '2020-01-01', None]
    """
    if len(word) > _LONGEST_NUMBER:
        return word
    if _NULL.fullmatch(word):
        return None
    if _TRUE.fullmatch(word) or _FALSE.fullmatch(word):
        return word[0] in "tT"
    return _number(word)


def _number(word: str) -> int | float | str:
    if _INT.fullmatch(word):
        return int(word)
    if _OCTAL.fullmatch(word) or _HEX.fullmatch(word):
        return int(word, 0)
    infinite = _INFINITE.fullmatch(word)
    if infinite:
        return float(f"{infinite[1]}inf")
    if _NAN.fullmatch(word):
        return float("nan")
    return float(word) if _FLOAT.fullmatch(word) else word


def show_path(path: KeyPath) -> str:
    """Key path as people read it; list items count from 1.

    Examples
    --------
    >>> show_path(("panels", 1, "tilt_deg"))
    'panels (item 2).tilt_deg'
    """
    shown = ""
    for step in path:
        if isinstance(step, int):
            shown += f" (item {step + 1})"
        else:
            key = harmless(step)
            shown += f".{key}" if shown else key
    return shown


def harmless(text: str) -> str:
    r"""`text` of a file as a message may show it: on one line, without control characters, not too long.

    Examples
    --------
    >>> harmless("villages.csv"), harmless("a\x1b[2Jb"), len(harmless("x" * 1000))
    ('villages.csv', 'a\\x1b[2Jb', 83)
    """
    plain = "".join(sign if sign.isprintable() else repr(sign)[1:-1] for sign in text[:_LONGEST_SHOWN])
    return plain if len(text) <= _LONGEST_SHOWN else plain + "..."
