"""The errors that skinmesh raises on purpose, and the form in which they name a place."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Problem:
    """One mistake in one place of the user's input.

    Attributes
    ----------
    file : str
        Name of the file as the user wrote it.
    line : int
        One-based line, 0 where the mistake belongs to the file as a whole.
    field : str
        The field in the user's words: ``plies[2].covers``, ``chord_m``, ``row 7 (z_m = 16.0)``.
    text : str
        The rule, the value got and the remedy.
    """

    file: str
    line: int
    field: str
    text: str


class SkinmeshError(Exception):
    """Base of every error that the library raises on purpose."""


class InputError(SkinmeshError):
    """The input is wrong. Carries every mistake found, of every file.

    Parameters
    ----------
    problems : iterable of Problem

    Examples
    --------
    >>> print(InputError([Problem("blade.yaml", 44, "plies[5].thickness", "must be > 0, got -0.0012")]))
    blade.yaml: 1 problem
      line 44, plies[5].thickness: must be > 0, got -0.0012
    """

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__(self._table())

    def _table(self) -> str:
        files = dict.fromkeys(problem.file for problem in self.problems)
        lines: list[str] = []
        for file in files:
            own = sorted(problem for problem in self.problems if problem.file == file)
            lines.append(f"{file}: {len(own)} problem{'s' if len(own) > 1 else ''}")
            for problem in own:
                place = ", ".join(
                    part for part in (f"line {problem.line}" if problem.line else "", problem.field) if part
                )
                lines.append(f"  {place}: {problem.text}" if place else f"  {problem.text}")
        return "\n".join(lines)


class LayoutChanged(InputError):
    """The layout is not that of the mesh whose numbers are to stay; a new mesh could be made.

    Parameters
    ----------
    problems : iterable of Problem
    changes : iterable of str
        What changed, in short.
    """

    def __init__(self, problems: Iterable[Problem], *, changes: Iterable[str]) -> None:
        super().__init__(problems)
        self.changes = tuple(changes)


class MeshError(SkinmeshError):
    """The mesh kernel did something other than what it was asked."""


class OutputError(SkinmeshError):
    """A file or a directory cannot be written."""


class MissingExtra(SkinmeshError):
    """A library of an optional extra is not installed; the message carries the install line."""
