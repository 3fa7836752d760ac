"""Every check of a built mesh, from its files alone."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import Any

import numpy as np

from skinmesh.check.axes import check_axes
from skinmesh.check.bulk_deck import check_bulk_deck
from skinmesh.check.drops import check_drops
from skinmesh.check.finding import FAIL, VERDICTS, WARN, Finding, not_made
from skinmesh.check.inputs import check_inputs, find_blade
from skinmesh.check.joints import check_joints, check_normals
from skinmesh.check.keyword_deck import check_keyword_deck
from skinmesh.check.laminates import check_laminates
from skinmesh.check.limits import Limit, set_limits
from skinmesh.check.msh_file import check_msh_file
from skinmesh.check.notches import check_notches
from skinmesh.check.overlap import check_overlap
from skinmesh.check.plies import check_plies
from skinmesh.check.reading import BuiltMesh, read_built_mesh
from skinmesh.check.sections import check_sections
from skinmesh.check.shape import check_density, check_fidelity, check_quality
from skinmesh.check.slender import check_slenderness
from skinmesh.check.solver import check_solver
from skinmesh.check.spantable import span_table
from skinmesh.check.thick import check_folding, check_radius
from skinmesh.check.totals import check_build_warnings, check_files, check_mass
from skinmesh.check.webs import check_web_ends
from skinmesh.wording import CAUTION, counted
from skinmesh.write.deck_text import number_lines, safe_names
from skinmesh.write.files import CHECK_SETS_FILE, CHECKS_FILE
from skinmesh.write.placing import new_file

Progress = Callable[[str, float], None]

MOST_LISTED = 100
"""Elements of one line in the JSON file; the file of sets has them all."""


@dataclass(frozen=True, eq=False)
class CheckReport:
    """What the checks of one mesh said.

    Attributes
    ----------
    built : BuiltMesh
    findings : tuple of Finding
    """

    built: BuiltMesh
    findings: tuple[Finding, ...]

    @property
    def has_failed(self) -> bool:
        """Whether any line failed."""
        return any(finding.verdict == FAIL for finding in self.findings)

    @property
    def counts(self) -> dict[str, int]:
        """Lines by verdict."""
        found = Counter(finding.verdict for finding in self.findings)
        return {verdict: found[verdict] for verdict in VERDICTS}

    @property
    def set_names(self) -> dict[int, str]:
        """Deck name of the set of elements of every line that has one, by the line's index."""
        numbers: Counter[str] = Counter()
        names = {}
        for i, finding in enumerate(self.findings):
            if finding.verdict in (WARN, FAIL) and len(finding.elements):
                numbers[finding.check] += 1
                names[i] = f"check {finding.check} {numbers[finding.check]}"
        safe = safe_names(names.values(), taken=("ALL",))
        return {i: safe[name] for i, name in names.items()}


def check_directory(
    directory: str | PathLike[str],
    *,
    limits: Mapping[str, Iterable[float]] | None = None,
    input_folders: Iterable[Path] = (),
    progress: Progress | None = None,
) -> CheckReport:
    """Check a built mesh from its files alone.

    Parameters
    ----------
    directory : path
        What ``skinmesh build`` wrote: ``stem.vtu``, ``stem.stacks.csv``, ``stem.summary.json``, and the decks where
        they are.
    limits : mapping of str to (float, float), optional
        Warning and failure in place of a default, by the names in ``skinmesh.check.limits.DEFAULT_LIMITS``.
    input_folders : iterable of Path
        Where else to look for the input files: in these folders, and down to two below. The directory and its parent
        are always looked at.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    CheckReport

    Raises
    ------
    InputError
        The files are missing or cannot be read, or there is no such limit.
    """
    chosen = set_limits(limits)
    tell = progress or _silent
    tell("reading", 0.0)
    built = read_built_mesh(Path(directory))
    mesh = built.mesh
    table = span_table(mesh)
    home = built.directory.resolve()
    folders = [*input_folders, home, home.parent]
    stages: list[tuple[str, Callable[[], list[Finding]]]] = [
        ("joints", lambda: check_joints(mesh)),
        ("normals", lambda: check_normals(mesh)),
        ("axes", lambda: check_axes(mesh)),
        ("plies", lambda: check_plies(mesh, table, limits=chosen)),
        ("ply drops", lambda: check_drops(mesh, table, limits=chosen)),
        ("gaps and laps", lambda: check_notches(mesh, table, limits=chosen)),
        ("laminates", lambda: check_laminates(mesh, table, limits=chosen)),
        ("slender panels", lambda: check_slenderness(mesh, table, limits=chosen)),
        ("web ends", lambda: check_web_ends(mesh, limits=chosen)),
        ("build warnings", lambda: check_build_warnings(built)),
        ("quality", lambda: check_quality(mesh, limits=chosen)),
        ("density", lambda: check_density(mesh, table, limits=chosen)),
        ("fidelity", lambda: check_fidelity(mesh, has_mid_nodes=built.has_mid_nodes, limits=chosen)),
        ("sections", lambda: _check_sections(built, folders, chosen)),
        ("inner face", lambda: check_folding(mesh, has_mid_nodes=built.has_mid_nodes, limits=chosen)),
        ("radius", lambda: check_radius(mesh, limits=chosen)),
        ("overlap", lambda: check_overlap(mesh, limits=chosen)),
        ("solver", lambda: check_solver(mesh, limits=chosen)),
        ("totals", lambda: [*check_files(built), *check_mass(built)]),
        ("decks", lambda: _check_decks(built)),
        ("inputs", lambda: check_inputs(built, folders=folders)),
    ]
    findings: list[Finding] = []
    # An element that has collapsed divides by nothing; the check of its quality is there to say so.
    with np.errstate(divide="ignore", invalid="ignore"):
        for i, (name, make) in enumerate(stages):
            tell(name, 0.1 + 0.9 * i / len(stages))
            findings += make()
    tell("done", 1.0)
    return CheckReport(built, tuple(findings))


def _check_sections(built: BuiltMesh, folders: list[Path], limits: Mapping[str, Limit]) -> list[Finding]:
    blade, reason = find_blade(built, folders=folders)
    if blade is None:
        return [not_made("fidelity", f"sections against station table and profiles: {reason}")]
    return check_sections(built.mesh, blade, has_mid_nodes=built.has_mid_nodes, limits=limits)


def _check_decks(built: BuiltMesh) -> list[Finding]:
    findings = []
    for ending, name, check in (
        ("inp", "keyword deck", check_keyword_deck),
        ("bdf", "bulk data", check_bulk_deck),
    ):
        path = built.file(ending)
        findings += check(built, path) if path.is_file() else [not_made(name, f"there is no {path.name}")]
    mesh_file = built.file("msh")
    if mesh_file.is_file():
        findings += check_msh_file(built, mesh_file)
    return findings


def checks_json(report: CheckReport) -> str:
    """The report as JSON.

    Parameters
    ----------
    report : CheckReport

    Returns
    -------
    str
        The same bytes for the same files.
    """
    mesh = report.built.mesh
    sets = report.set_names
    content: dict[str, Any] = {
        "title": mesh.title,
        "caution": " ".join(CAUTION),
        "passed": not report.has_failed,
        "counts": report.counts,
        "element_set_file": f"{mesh.stem}.{CHECK_SETS_FILE}",
        "findings": [
            {
                "check": finding.check,
                "verdict": finding.verdict,
                "measured": finding.measured,
                "limit": finding.limit,
                "source": finding.source,
                "where": finding.where,
                "n_elements": len(finding.elements),
                "worst_elements": mesh.element_number[finding.elements[:MOST_LISTED]].tolist(),
                "element_set": sets.get(i),
                "details": dict(finding.details),
            }
            for i, finding in enumerate(report.findings)
        ],
    }
    return json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def sets_text(report: CheckReport) -> str:
    """The elements that are beyond a limit as named sets, in the keyword deck's form.

    Parameters
    ----------
    report : CheckReport

    Returns
    -------
    str
    """
    mesh = report.built.mesh
    parts = ["** Elements that a check named; include this file after the deck's elements.\n"]
    for i, name in report.set_names.items():
        finding = report.findings[i]
        verdict = "failed" if finding.verdict == FAIL else "warned"
        parts.append(
            f"** {finding.check}: {verdict}, {counted(len(finding.elements), 'element')}\n*ELSET,ELSET={name}\n"
        )
        parts.append(number_lines(mesh.element_number[np.sort(finding.elements)]))
    return "".join(parts)


def write_checks(report: CheckReport) -> tuple[Path, Path]:
    """Write ``stem.checks.json`` and ``stem.checks.inp`` beside the mesh.

    Parameters
    ----------
    report : CheckReport

    Returns
    -------
    tuple of Path

    Raises
    ------
    OutputError
        A file cannot be written; what was there before is there still.
    """
    paths = report.built.file(CHECKS_FILE), report.built.file(CHECK_SETS_FILE)
    for path, text in zip(paths, (checks_json(report), sets_text(report)), strict=True):
        with new_file(path) as unfinished:
            unfinished.write_text(text, encoding="utf-8", newline="\n")
    return paths


def _silent(stage: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
