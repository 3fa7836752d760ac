"""Write the page of a built mesh beside it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from skinmesh.check.finding import Finding
from skinmesh.check.reading import read_built_mesh
from skinmesh.check.run import check_directory
from skinmesh.errors import InputError, Problem
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.page.document import page_html
from skinmesh.page.gather import finding_words, fresh_checks, gather_arrays, gather_words, read_trial
from skinmesh.page.packing import pack_arrays
from skinmesh.write.files import CHECKS_FILE
from skinmesh.write.placing import new_file

Progress = Callable[[str, float], None]

PAGE_FILE = "page.html"


def write_page(directory: Path, *, progress: Progress | None = None) -> Path:
    """Write ``stem.page.html`` into the folder of a built mesh.

    The checks are read from ``stem.checks.json`` where that is no older than the mesh, and made otherwise.

    Parameters
    ----------
    directory : Path
        What ``skinmesh build`` wrote.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    Path

    Raises
    ------
    InputError
        The files of the mesh are missing or cannot be read.
    OutputError
        The page cannot be written; what was there before is there still.
    """
    tell = progress or _silent
    tell("reading", 0.0)
    built = read_built_mesh(Path(directory))
    checks = built.file(CHECKS_FILE)
    try:
        findings = fresh_checks(built, checks)
        trial = read_trial(built)
    except (OSError, ValueError, KeyError, TypeError) as error:
        text = f"checks or trial beside it cannot be read: {error}; make them again, or remove them"
        raise InputError([Problem(str(directory), 0, "", text)]) from error
    if findings is None:
        tell("checks", 0.1)
        report = check_directory(directory, input_folders=[Path.cwd()])
        findings = [_as_dict(finding, built.mesh) for finding in report.findings]
    tell("numbers along the span", 0.6)
    words = gather_words(built, findings=[finding_words(finding) for finding in findings], trial=trial)
    tell("page", 0.8)
    html = page_html(words, pack_arrays(gather_arrays(built.mesh)))
    path = built.file(PAGE_FILE)
    with new_file(path) as unfinished:
        unfinished.write_text(html, encoding="utf-8", newline="\n")
    return path


def _as_dict(finding: Finding, mesh: ShellMesh) -> dict[str, object]:
    return {
        "check": finding.check,
        "verdict": finding.verdict,
        "measured": finding.measured,
        "limit": finding.limit,
        "source": finding.source,
        "where": finding.where,
        "n_elements": len(finding.elements),
        "worst_elements": mesh.element_number[finding.elements[:100]].tolist(),
    }


def _silent(stage: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
