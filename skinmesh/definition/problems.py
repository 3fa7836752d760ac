"""Collecting every mistake before saying any, and the phrases that all messages share."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches

from skinmesh.errors import Problem

FieldPath = tuple[str | int, ...]
MOST_NAMES = 16  # of the known names that one message lists
LONGEST_VALUE = 60  # characters of a user's value that a message repeats


@dataclass
class Findings:
    """The mistakes found so far, of all files.

    Attributes
    ----------
    problems : dict with Problem as keys
        In the order in which they were found, each once.
    """

    problems: dict[Problem, None] = field(default_factory=dict)

    def add(self, file: str, text: str, *, place: str = "", line: int = 0) -> None:
        """Note one mistake, once."""
        self.problems[Problem(file, line, place, text)] = None


@dataclass(frozen=True)
class FieldReport:
    """Notes mistakes in the fields of one file, with their lines.

    Attributes
    ----------
    file : str
        As the user wrote it.
    lines : mapping of str to int
        Line of every field.
    findings : Findings
    """

    file: str
    lines: Mapping[str, int]
    findings: Findings

    def add(self, path: FieldPath, text: str) -> None:
        """Note a mistake in a field; a field that is not there has the line of what should hold it."""
        self.findings.add(self.file, text, place=field_name(path), line=self.line(path))

    def line(self, path: FieldPath) -> int:
        """Line of a field or of the nearest part that holds it."""
        for n in range(len(path), 0, -1):
            if (line := self.lines.get(field_name(path[:n]))) is not None:
                return line
        return 0

    def has(self, path: FieldPath) -> bool:
        """Whether a mistake was noted in a field or in a part of it."""
        name = field_name(path)
        return any(
            problem.file == self.file and (problem.field == name or problem.field.startswith((f"{name}.", f"{name}[")))
            for problem in self.findings.problems
        )

    def is_whole(self, part: str, *, depth: int = 0) -> bool:
        """Whether a top-level part was read under its own name, so that what it does not hold is truly not there.

        Parameters
        ----------
        part : str
        depth : int
            1 where a mistake in a field of the part, too, may have taken names away.
        """
        own = [problem.field for problem in self.findings.problems if problem.file == self.file]
        lost = [name for name in own if name.count(".") <= depth and (name == part or name.startswith(f"{part}."))]
        misspelt = [name for name in own if "." not in name and name != part and nearest(name, [part])]
        return not lost and not misspelt


def field_name(path: FieldPath) -> str:
    """Write the path of a field as messages name it.

    Examples
    --------
    >>> field_name(("plies", 2, "covers"))
    'plies[2].covers'
    """
    text = ""
    for part in path:
        text += f"[{part}]" if isinstance(part, int) else f".{part}" if text else part
    return text


def no_such(kind: str, name: str, known: Iterable[str]) -> str:
    """Say that a name is not known, what is known, and which known name is nearest.

    Examples
    --------
    >>> no_such("region", "spar cap", ["leading panel", "main cap"])
    "no region 'spar cap'; known: leading panel, main cap — did you mean 'main cap'?"
    """
    names = list(dict.fromkeys(known))
    near = nearest(name, names)
    hint = f" — did you mean '{near}'?" if near else ""
    return f"no {kind} {shown(name)}; {known_names(names)}{hint}"


def known_names(names: list[str]) -> str:
    """List the names that would have been understood."""
    if not names:
        return "none is defined"
    more = ", …" if len(names) > MOST_NAMES else ""
    return f"known: {', '.join(names[:MOST_NAMES])}{more}"


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name that is most like a given one, None where none is.

    Examples
    --------
    >>> nearest("Thick_40", ["root ring", "thick 40"])
    'thick 40'
    """
    plain = {_plain(each): each for each in known}
    found = get_close_matches(_plain(name), plain, n=1, cutoff=0.6)
    return plain[found[0]] if found else None


def _plain(name: str) -> str:
    return " ".join(name.lower().replace("_", " ").replace("-", " ").split())


def shown(value: object) -> str:
    """Repeat a value of the user's as a message shows it.

    Examples
    --------
    >>> shown("main cap"), shown(True), shown({"a": 1}), shown(-0.0012)
    ("'main cap'", 'true', 'a group of fields', '-0.0012')
    """
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        line = " ".join(value.split())
        return f"'{line[:LONGEST_VALUE]}…'" if len(line) > LONGEST_VALUE else f"'{line}'"
    if isinstance(value, Mapping):
        return "a group of fields"
    if isinstance(value, list):
        text = f"[{', '.join(shown(each) for each in value[:4])}{', …' if len(value) > 4 else ''}]"
        return text if len(text) <= LONGEST_VALUE else f"a list of {len(value)}"
    return f"{value:.10g}" if isinstance(value, float) else str(value)


def number_hint(text: str) -> str:
    """What is probably wrong with a text that should be a number.

    Examples
    --------
    >>> number_hint("1,5")
    '; write decimals with a point: 1.5'
    >>> number_hint("12 mm")
    '; leave the unit out: metres, kilograms, seconds, pascals and degrees are meant'
    """
    bare = text.strip()
    if is_number(bare.replace(",", ".", 1)) and bare.count(",") == 1:
        return f"; write decimals with a point: {bare.replace(',', '.')}"
    if is_number(bare.replace("_", "")) or is_number(bare.replace(",", "")) or is_number(bare.replace(" ", "")):
        return "; write the digits of a number without anything between them"
    if bare.endswith("%") and is_number(bare[:-1]):
        return "; write a fraction: 25 % is 0.25"
    head = bare.rstrip("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ°µ³²/ ")
    if head and head != bare and is_number(head):
        return "; leave the unit out: metres, kilograms, seconds, pascals and degrees are meant"
    return ""


def is_number(text: str) -> bool:
    """Whether a text is a plain decimal number."""
    try:
        float(text)
    except ValueError:
        return False
    return text.isascii() and text.strip() == text and not set(text.lower()) - set("0123456789.+-e")
