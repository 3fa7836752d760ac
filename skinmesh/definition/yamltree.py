"""The blade file as plain values, each with its line. Nothing in a file can run code: only core tags are known."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from yaml import MarkedYAMLError, YAMLError
from yaml.composer import Composer, ComposerError
from yaml.error import Mark
from yaml.nodes import MappingNode, Node, ScalarNode, SequenceNode
from yaml.parser import Parser
from yaml.reader import Reader, ReaderError
from yaml.resolver import BaseResolver
from yaml.scanner import Scanner

from skinmesh.definition.filetext import InputText
from skinmesh.definition.problems import FieldPath, FieldReport, Findings, field_name

DEEPEST = 40  # levels of nesting; a blade file needs six
MOST_VALUES = 100_000  # after aliases are written out
_LONGEST_INTEGER = 18  # digits; longer ones become floats
_CORE = "tag:yaml.org,2002:"
_TEXT_TAG, _LIST_TAG, _MAP_TAG = f"{_CORE}str", f"{_CORE}seq", f"{_CORE}map"


class _Core(Reader, Scanner, Parser, Composer, BaseResolver):
    """PyYAML's node graph with the core schema of YAML 1.2 and a limit on the depth."""

    def __init__(self, text: str) -> None:
        Reader.__init__(self, text)
        Scanner.__init__(self)
        Parser.__init__(self)
        Composer.__init__(self)
        BaseResolver.__init__(self)
        self._depth = 0

    def compose_node(self, parent: Node | None, index: Any) -> Node | None:
        self._depth += 1
        if self._depth > DEEPEST:
            raise ComposerError(
                None,
                None,
                f"the file is nested more than {DEEPEST} levels deep",
                self.peek_event().start_mark,  # type: ignore[no-untyped-call]
            )
        node = super().compose_node(parent, index)
        self._depth -= 1
        return node


# YAML 1.2.2, section 10.3.2 (Core Schema, tag resolution)
_PATTERNS = {
    "null": (re.compile(r"(null|Null|NULL|~|)\Z"), ["n", "N", "~", ""]),
    "bool": (re.compile(r"(true|True|TRUE|false|False|FALSE)\Z"), list("tTfF")),
    "int": (re.compile(r"([-+]?[0-9]+|0o[0-7]+|0x[0-9a-fA-F]+)\Z"), list("-+0123456789")),
    "float": (
        re.compile(r"([-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?|[-+]?\.(inf|Inf|INF)|\.(nan|NaN|NAN))\Z"),
        list("-+.0123456789"),
    ),
}
for _kind, (_pattern, _first) in _PATTERNS.items():
    _Core.add_implicit_resolver(_CORE + _kind, _pattern, _first)

# PyYAML's words → what a user can do about it
_ADVICE = (
    ("found character '\\t'", "a tab cannot indent or begin a value; use spaces"),
    (
        "mapping values are not allowed",
        "a ':' stands where no field can begin; indent with the lines above, or put a text with a colon in quotes",
    ),
    ("could not find expected ':'", "a field needs a ':' and a space behind its name"),
    ("expected <block end>", "the indentation does not match the lines above"),
    ("expected ',' or '}'", "a '{' is not closed, or a ',' is missing between two fields"),
    ("expected ',' or ']'", "a '[' is not closed, or a ',' is missing between two values"),
    ("found unexpected end of stream", "a quote is opened and not closed"),
    ("found another document", "the file holds several documents; remove all '---' lines but the first"),
    ("found undefined alias", "an alias (*name) stands before its anchor (&name)"),
    ("found character", "a value cannot begin with this character; put it in quotes"),
)


@dataclass(frozen=True)
class Document:
    """A YAML file as plain values.

    Attributes
    ----------
    data : dict
        Values by key; entries without a value are left out.
    lines : mapping of str to int
        One-based line of every field by its path.
    written : mapping of str to str
        Text of every single value as it stands in the file.
    """

    data: dict[str, Any]
    lines: Mapping[str, int]
    written: Mapping[str, str]


def read_document(source: InputText, findings: Findings, *, kind: str = "blade file") -> Document | None:
    """Read a YAML file by the core schema of YAML 1.2.

    ``1e-3``, ``41e9`` and ``0o17`` are numbers; ``no``, ``on`` and ``1_000`` are words. A repeated key, a tag outside
    the core schema and aliases that would swell without bound are mistakes.

    Parameters
    ----------
    source : InputText
    findings : Findings
    kind : str
        What the file is, in the user's words.

    Returns
    -------
    Document or None
        None where the file is no YAML, or not a group of fields.
    """
    try:
        root = _Core(source.text).get_single_node()
    except ReaderError as error:
        line = source.text.count("\n", 0, error.position) + 1
        findings.add(source.file, f"holds a character that plain text cannot have (code {error.character})", line=line)
        return None
    except MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        findings.add(source.file, _in_plain_words(error), line=_line(mark))
        return None
    except (YAMLError, ValueError) as error:
        findings.add(source.file, f"is not YAML: {error}")
        return None
    if not isinstance(root, MappingNode):
        line = root.start_mark.line + 1 if root else 0
        findings.add(source.file, f"the {kind} must be a group of fields, such as 'title: my blade'", line=line)
        return None
    build = _Build(FieldReport(source.file, {}, findings))
    try:
        data = build.value(root, ())
    except _TooManyValuesError:
        findings.add(source.file, f"aliases (*name) make more than {MOST_VALUES} values of this file; write it plainly")
        return None
    return Document(data, build.lines, build.written)


class _TooManyValuesError(Exception):
    """The aliases of a file swell beyond the limit."""


@dataclass
class _Build:
    report: FieldReport
    lines: dict[str, int] = field(default_factory=dict)
    written: dict[str, str] = field(default_factory=dict)
    n_values: int = 0
    open_nodes: set[int] = field(default_factory=set)

    def value(self, node: Node, path: FieldPath) -> Any:
        self.n_values += 1
        if self.n_values > MOST_VALUES:
            raise _TooManyValuesError
        if id(node) in self.open_nodes:
            self._tell(node, path, "an alias (*name) stands inside its own anchor (&name)")
            return None
        self.open_nodes.add(id(node))
        try:
            if isinstance(node, MappingNode):
                return self._mapping(node, path)
            if isinstance(node, SequenceNode):
                return self._sequence(node, path)
            return self._scalar(node, path)
        finally:
            self.open_nodes.discard(id(node))

    def _mapping(self, node: MappingNode, path: FieldPath) -> dict[str, Any] | None:
        if node.tag != _MAP_TAG:
            self._refuse_tag(node, path)
            return None
        first: dict[str, int] = {}
        data: dict[str, Any] = {}
        for key, child in node.value:
            line = key.start_mark.line + 1
            if not isinstance(key, ScalarNode):
                self._tell(key, path, "the name of a field must be a word, not a list or a group")
                continue
            name = key.value
            if not name or not _is_writable(name) or "\n" in name:
                self._tell(key, path, "the name of a field must be one line of visible characters")
                continue
            if name in first:
                self._tell(key, (*path, name), f"is given twice: in line {first[name]} and in line {line}; keep one")
                continue
            first[name] = line
            self.lines[field_name((*path, name))] = line
            value = self.value(child, (*path, name))
            if value is not None:
                data[name] = value
        return data

    def _sequence(self, node: SequenceNode, path: FieldPath) -> list[Any] | None:
        if node.tag != _LIST_TAG:
            self._refuse_tag(node, path)
            return None
        values = []
        for i, child in enumerate(node.value):
            self.lines[field_name((*path, i))] = child.start_mark.line + 1
            values.append(self.value(child, (*path, i)))
        return values

    def _scalar(self, node: Node, path: FieldPath) -> Any:
        text, kind = node.value, node.tag.removeprefix(_CORE)
        self.written[field_name(path)] = text
        if node.tag == _TEXT_TAG:
            if not _is_writable(text):
                self._tell(node, path, "holds a character that cannot be shown; remove it")
                return None
            return text
        if not node.tag.startswith(_CORE) or kind not in _PATTERNS:
            self._refuse_tag(node, path)
            return None
        if not _PATTERNS[kind][0].match(text):
            self._tell(node, path, f"'{text}' does not suit its tag !!{kind}; leave the tag out")
            return None
        if kind == "null":
            return None
        if kind == "bool":
            return text.lower() == "true"
        return _integer(text) if kind == "int" else _real(text)

    def _refuse_tag(self, node: Node, path: FieldPath) -> None:
        tag = node.tag.replace(_CORE, "!!")
        self._tell(node, path, f"the tag {tag} is not understood here; leave it out")

    def _tell(self, node: Node, path: FieldPath, text: str) -> None:
        self.report.findings.add(self.report.file, text, place=field_name(path), line=_line(node.start_mark))


def _integer(text: str) -> int | float:
    base = {"0o": 8, "0x": 16}.get(text[:2], 10)
    if len(text) > _LONGEST_INTEGER:
        return float(text) if base == 10 else float("inf")
    return int(text, base)


def _real(text: str) -> float:
    lower = text.lower()
    return float(lower.replace(".", "") if lower.endswith(("inf", "nan")) else lower)


def _is_writable(text: str) -> bool:
    return all(mark in "\n\t" or unicodedata.category(mark) not in ("Cc", "Cs", "Cn") for mark in text)


def _in_plain_words(error: MarkedYAMLError) -> str:
    words = error.problem or "cannot be read"
    advice = next((text for start, text in _ADVICE if start in words), "")
    if words.startswith("the file is nested"):
        return f"{words}; a blade file needs no more than six"
    # an unclosed bracket is noticed only where something else begins: say where it was opened
    opened = f" (opened in line {error.context_mark.line + 1})" if _is_bracket(error) and error.context_mark else ""
    return f"is not YAML: {advice or words}{opened}"


def _is_bracket(error: MarkedYAMLError) -> bool:
    return "flow" in (error.context or "") or "quoted" in (error.context or "")


def _line(mark: Mark | None) -> int:
    return mark.line + 1 if mark else 0
