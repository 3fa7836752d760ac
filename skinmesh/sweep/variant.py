"""The work on one variant: it needs texts and the base mesh, and no file of the user's."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory
from time import perf_counter
from typing import Any

from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.read import load_blade
from skinmesh.errors import InputError, LayoutChanged, MeshError, Problem, SkinmeshError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.sweep.metrics import measure_beam, measure_checks, measure_mesh, measure_trial
from skinmesh.sweep.plan import BladeTexts, Order
from skinmesh.write.files import write

OK, FAILED = "ok", "failed"
KEPT, FRESH = "kept", "fresh"


@dataclass(frozen=True)
class Outcome:
    """What became of a variant.

    Attributes
    ----------
    status : str
        OK or FAILED.
    reason : str
        Why it failed.
    is_final : bool
        Whether another try would say the same; False where the machine failed and not the blade.
    seconds : float
    metrics : mapping of str to value
    files : mapping of str to bytes
        Of the mesh that is to be kept, by name.
    """

    status: str
    reason: str = ""
    is_final: bool = True
    seconds: float = 0.0
    metrics: Mapping[str, Any] = field(default_factory=dict)
    files: Mapping[str, bytes] = field(default_factory=dict)


def build_base(texts: BladeTexts) -> ShellMesh | str:
    """Build the mesh whose numbers the variants keep.

    Parameters
    ----------
    texts : BladeTexts

    Returns
    -------
    ShellMesh or str
        The reason where it cannot be built.
    """
    with TemporaryDirectory(prefix="skinmesh-sweep-") as folder:
        try:
            return build_mesh(load_blade(put_files(texts, Path(folder))))
        except (InputError, MeshError) as error:
            return reason_of(error)


def run_variant(texts: BladeTexts, base: ShellMesh | None, order: Order, fresh_because: str) -> Outcome:
    """Build a variant and measure it.

    Parameters
    ----------
    texts : BladeTexts
    base : ShellMesh, optional
        Whose numbers to keep.
    order : Order
    fresh_because : str
        Why no numbers are kept, where that is known before.

    Returns
    -------
    Outcome
    """
    start = perf_counter()
    with TemporaryDirectory(prefix="skinmesh-sweep-") as folder:
        try:
            metrics, files = _measured(texts, Path(folder), base, order, fresh_because)
        except (InputError, MeshError) as error:
            return Outcome(FAILED, reason_of(error), seconds=_since(start))
        except SkinmeshError as error:
            return Outcome(FAILED, reason_of(error), is_final=False, seconds=_since(start))
    return Outcome(OK, seconds=_since(start), metrics=metrics, files=files)


def _measured(
    texts: BladeTexts, folder: Path, base: ShellMesh | None, order: Order, fresh_because: str
) -> tuple[dict[str, Any], dict[str, bytes]]:
    path = put_files(texts, folder)
    blade = load_blade(path)
    mesh, metrics = _built(blade, base, fresh_because)
    metrics |= measure_mesh(mesh)
    metrics |= measure_beam(blade, mesh, order)
    formats = dict.fromkeys((*order.formats, *["vtu"] * (order.checks or order.trial), *["inp"] * order.trial))
    if not formats:
        return metrics, {}
    place = folder / "mesh"
    write(mesh, place, formats=formats)
    if order.checks:
        metrics |= measure_checks(place)
    if order.trial:
        metrics |= measure_trial(place, path)
    extra = {f"{mesh.stem}.{name}" for name in formats if name not in order.formats}
    return metrics, {**_read_files(place, extra), **_read_files(folder, {"mesh"})} if order.formats else {}


def _built(blade: BladeDefinition, base: ShellMesh | None, fresh_because: str) -> tuple[ShellMesh, dict[str, Any]]:
    """The mesh under the numbers of the base, or a new one where that cannot be."""
    if base is not None:
        try:
            return build_mesh(blade, keep=base), {"numbering": KEPT, "numbering_note": ""}
        except LayoutChanged as error:
            fresh_because = "; ".join(error.changes)
    return build_mesh(blade), {"numbering": FRESH, "numbering_note": fresh_because}


def put_files(texts: BladeTexts, folder: Path) -> Path:
    """Write the files of a blade into an empty folder.

    Parameters
    ----------
    texts : BladeTexts
    folder : Path

    Returns
    -------
    Path
        Of the blade file.
    """
    for name, text in texts.files.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")
    return folder / texts.blade_file


def reason_of(error: Exception) -> str:
    """An error in one line, without the folder of the work.

    Examples
    --------
    >>> reason_of(InputError([Problem("/tmp/a/blade.yaml", 44, "plies[5].thickness", "must be > 0, got -0.0012")]))
    'plies[5].thickness: must be > 0, got -0.0012'
    """
    if isinstance(error, InputError):
        return "; ".join(_told(error.problems))
    return " ".join(str(error).split())


def _told(problems: Iterable[Problem]) -> list[str]:
    told = []
    for problem in problems:
        # the lines of the blade file are those of a written-out variant; those of the table are the user's
        is_blade = problem.file.endswith((".yaml", ".yml"))
        place = [] if is_blade else [problem.file, f"line {problem.line}" if problem.line else ""]
        place = [part for part in (*place, problem.field) if part]
        told.append(f"{', '.join(place)}: {problem.text}" if place else problem.text)
    return told


def _read_files(folder: Path, left_out: set[str]) -> dict[str, bytes]:
    found = {path.relative_to(folder): path for path in sorted(folder.rglob("*")) if path.is_file()}
    return {name.as_posix(): path.read_bytes() for name, path in found.items() if name.parts[0] not in left_out}


def _since(start: float) -> float:
    return round(perf_counter() - start, 3)
