"""What a trial run says: verdicts, sentences on what makes a difference and where, and the JSON file."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from math import isfinite, isnan
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.stack import Stack
from skinmesh.mesh.inner_face import node_normals
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.trial.beamside import ALL, COUPLED, MESH, SHEARED
from skinmesh.trial.compare import ModeCase, StaticCase
from skinmesh.trial.form import FormPart, form_parts, parting_by_form, place_of_parting
from skinmesh.trial.run import Trial
from skinmesh.version import __version__
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]

MOST_IMBALANCE = 5e-3
MOST_MASS_DIFFERENCE = 5e-3
LOOK = 0.05
"""Differences from theory beyond this share are marked, and deserve an explanation."""
SOFT = 0.1  # of the largest in-plane shear modulus of a stack
NOTABLE_DISTORTION = 0.01
NOTABLE_LEFT = 0.02
NOTABLE_SHARE = 1e-3
_DIGITS = 7


def failures(trial: Trial) -> tuple[str, ...]:
    """What must not be: the solver's root does not carry the load, or its mass is not the mesh's.

    Parameters
    ----------
    trial : Trial

    Returns
    -------
    tuple of str
        One sentence each; empty where all is well.
    """
    runs = {"": trial.statics, ", sections kept in form": trial.held.statics if trial.held else ()}
    told = [
        f"{case.name}{words}: the reactions differ from the load by {case.imbalance:.2%} (limit {MOST_IMBALANCE:.1%})"
        for words, cases in runs.items()
        for case in cases
        if not case.imbalance <= MOST_IMBALANCE
    ]
    if abs(mass_difference(trial)) > MOST_MASS_DIFFERENCE:
        told.append(
            f"mass: {trial.mass_solver:.6g} kg in the solver, {trial.mass_mesh:.6g} kg in the mesh, "
            f"{mass_difference(trial):+.2%} (limit {MOST_MASS_DIFFERENCE:.1%})"
        )
    return tuple(told)


def mass_difference(trial: Trial) -> float:
    """Solver's mass against the mesh's, as a share; NaN where the solver prints none."""
    return trial.mass_solver / trial.mass_mesh - 1.0


def parts_of_difference(case: StaticCase | ModeCase) -> Mapping[str, float]:
    """What each refinement of the beam theory alone makes different, and what is left of all together.

    Parameters
    ----------
    case : StaticCase or ModeCase

    Returns
    -------
    mapping of str to float
        'shear', 'coupling', 'mesh', as shares of the theory's value, and 'left': the solver against the theory that
        has all of them. Empty of a shell mode.
    """
    if not case.variants:
        return {}
    return {
        "shear": case.variants[SHEARED] / case.theory - 1.0,
        "coupling": case.variants[COUPLED] / case.theory - 1.0,
        "mesh": case.variants[MESH] / case.theory - 1.0,
        "left": case.solver / case.variants[ALL] - 1.0,
    }


def remarks(trial: Trial) -> tuple[str, ...]:
    """What makes solver and theory different, and where.

    Parameters
    ----------
    trial : Trial

    Returns
    -------
    tuple of str
    """
    cases: tuple[StaticCase | ModeCase, ...] = (*trial.statics, *trial.modes)
    parts = form_parts(trial) or (None,) * len(cases)
    told = []
    for k, (case, part) in enumerate(zip(cases, parts, strict=True)):
        if _is_notable(case):
            told.append(" ".join([_case_remark(case, trial.rings.z), *_form_remark(trial, k, case, part)]))
    if told and trial.held is None:
        told.append(
            "How much of that is the sections' change of form, a second run with sections kept in form tells"
            " (--hold-shape)."
        )
    told += [*_distortion_remarks(trial)]
    shells = [f"{mode.solver:.3f} Hz" for mode in trial.modes if mode.kind == "shell"]
    if shells:
        told.append(f"Modes like none of the beam's, in which walls move by themselves: {', '.join(shells)}.")
    told += [*_soft_core_remark(trial.model.mesh), *_knot_remark(trial.model.mesh)]
    return tuple(told)


def trial_json(trial: Trial) -> str:
    """All results as JSON.

    Parameters
    ----------
    trial : Trial

    Returns
    -------
    str
    """
    return json.dumps(_document(trial), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def solver_version(log: str) -> str:
    """Version that the solver's log names, 'unknown' where it names none.

    Examples
    --------
    >>> solver_version("CalculiX Version 2.20, Copyright(C) 1998-2022")
    '2.20'
    """
    found = re.search(r"CalculiX Version\s+([\w.]+)", log)
    return found[1] if found else "unknown"


def _is_notable(case: StaticCase | ModeCase) -> bool:
    return isfinite(case.difference) and abs(case.difference) > LOOK


def _case_remark(case: StaticCase | ModeCase, z: Floats) -> str:
    name = case.name if isinstance(case, StaticCase) else f"{case.kind} mode of {case.solver:.3f} Hz"
    parts = parts_of_difference(case)
    words = [
        f"{what} {parts[key]:+.1%}"
        for key, what in (
            ("shear", "shear strains"),
            ("coupling", "couplings within the sections"),
            ("mesh", "the mesh's sections in the place of the exact ones"),
        )
        if abs(parts[key]) >= 5e-4
    ]
    where = ""
    if isinstance(case, StaticCase) and abs(parts["left"]) > NOTABLE_LEFT:
        low, high = place_of_parting(case.line_solver - case.line_refined, case.component, z)
        where = f" That arises at z = {low:.2f} to {high:.2f} m for the most part."
    if isinstance(case, ModeCase) and 1.0 - case.rigid_share > NOTABLE_SHARE:
        where = f" Of its squared motion {1.0 - case.rigid_share:.1%} is a change of the sections' form."
    return (
        f"{name[0].upper()}{name[1:]}: {case.difference:+.1%} against Euler–Bernoulli theory. Alone,"
        f" {', '.join(words) or 'no refinement of it'} would make a difference;"
        f" {parts['left']:+.1%} is left beside all of them together.{where}"
    )


def _form_remark(trial: Trial, k: int, case: StaticCase | ModeCase, part: FormPart | None) -> list[str]:
    """What the second run says of a difference."""
    if trial.held is None:
        return []
    if part is None:
        return ["No mode of the run with sections kept in form is like it."]
    where = over = ""
    if isinstance(case, StaticCase):
        other, z = trial.held.statics[k], trial.rings.z
        if abs(part.form) > NOTABLE_LEFT:
            low, high = place_of_parting(parting_by_form(case, other), case.component, z)
            where = f" (z = {low:.2f} to {high:.2f} m)"
        if abs(part.left) > NOTABLE_LEFT:
            low, high = place_of_parting(other.line_solver - other.line_refined, case.component, z)
            over = f", at z = {low:.2f} to {high:.2f} m"
    return [
        f"Measured with sections that keep their form: their change of form makes {part.form:+.1%}{where}; what remains"
        f" is {part.difference:+.1%} against Euler–Bernoulli theory, {part.left:+.1%} against refined theory{over}."
    ]


def _distortion_remarks(trial: Trial) -> list[str]:
    told = []
    for word, what in (("ovalisation", "in their own plane (ovalisation)"), ("warping", "across it (warping)")):
        worst = max(trial.statics, key=lambda case: getattr(case, word).max())
        share = getattr(worst, word)
        if share.max() > NOTABLE_DISTORTION:
            at = trial.rings.z[share > 0.5 * share.max()]
            told.append(
                f"Sections change their form {what} by up to {share.max():.1%} of the largest displacement, under the"
                f" {worst.name}; most at z = {at.min():.2f} to {at.max():.2f} m. No beam does."
            )
    return told


def _soft_core_remark(mesh: ShellMesh) -> list[str]:
    soft = [_soft_cores(stack) for stack in mesh.stacks]
    has_core = np.array([bool(names) for names in soft] + [False])[mesh.stack]
    if not has_core.any():
        return []
    z = mesh.points[mesh.cells[has_core], 2]
    names = ", ".join(sorted(set().union(*soft)))
    regions = ", ".join(mesh.regions[k].name for k in np.unique(mesh.region[has_core]))
    return [
        f"Soft cores ({names}) in {regions}, z = {z.min():.2f} to {z.max():.2f} m: this solver gives a wall the"
        " transverse shear stiffness Σ G t of its layers, so panels there bend less across a core than they would."
    ]


def _soft_cores(stack: Stack) -> set[str]:
    most = max(layer.material.G12 for layer in stack.layers)
    inner = stack.layers[1:-1]
    return {layer.material.name for layer in inner if min(layer.material.G13, layer.material.G23) < SOFT * most}


def _knot_remark(mesh: ShellMesh) -> list[str]:
    count = np.bincount(node_normals(mesh).node, minlength=len(mesh.points))
    share = float(np.mean(count > 1))
    if share == 0.0:
        return []
    return [
        f"{share:.1%} of the nodes are rigid knots in this solver (steps in thickness or offset, corners, joints):"
        " walls are too stiff in bending there."
    ]


def _document(trial: Trial) -> dict[str, Any]:
    model, run = trial.model, trial.run
    n_static = len(trial.statics)
    held = _form_held(trial)
    return {
        "title": model.mesh.title,
        "caution": " ".join(CAUTION),
        "skinmesh": __version__,
        "solver": {
            "name": "CalculiX",
            "version": solver_version(run.log),
            "seconds": round(run.seconds, 1),
            "peak_memory_bytes": run.peak_bytes,
        },
        "deck": {"file": f"{model.mesh.stem}.inp", "sha256": model.sha256, "elements": len(model.mesh.cells)},
        "beam_table": {"sections": trial.beams.road, "note": trial.beams.note},
        "notes": {
            "root": "every node of the root ring is held in place; its walls may turn there",
            "motion": "u (m) of the point (0, 0, z) and rotation (rad) of each ring's best rigid motion; x, y, z",
            "difference": "solver / theory - 1",
            "parts": "what shear strains, couplings of the sections, and the mesh's sections alone make different;"
            " left: the solver beside theory with all of them",
            "ovalisation, warping": "root mean square of a ring's motion that no rigid motion explains, in the"
            " section's plane and across it, over the largest displacement",
            "form_held": "the same in a second run whose sections keep their form, beside theory of walls that do not"
            " strain round the section; form: what the sections' change of form makes different"
            if trial.held
            else "no such run was made (--hold-shape)",
        },
        "tip_loads_act_at_m": _numbers([*trial.tip, trial.beams.plain.z[-1]]),
        "mass_kg": {
            "solver": _number(trial.mass_solver),
            "mesh": _number(trial.mass_mesh),
            "difference": _number(mass_difference(trial)),
        },
        "rings_z_m": _numbers(trial.rings.z),
        "static": [_static(case) | more for case, more in zip(trial.statics, held[:n_static], strict=True)],
        "modes": [_mode(case) | more for case, more in zip(trial.modes, held[n_static:], strict=True)],
        "failures": list(failures(trial)),
        "remarks": list(remarks(trial)),
    }


def _static(case: StaticCase) -> dict[str, Any]:
    return {
        "case": case.name,
        "load": {"force_N": _numbers(case.load[:3]), "moment_N_m": _numbers(case.load[3:])},
        "reaction": {"force_N": _numbers(case.reaction[:3]), "moment_N_m": _numbers(case.reaction[3:])},
        "imbalance": _number(case.imbalance),
        "compared": "twist at the tip, rad"
        if case.component == 5
        else f"tip deflection along {'xyz'[case.component]}, m",
        "solver": _number(case.solver),
        "theory": _number(case.theory),
        "difference": _number(case.difference),
        "parts": {name: _number(value) for name, value in parts_of_difference(case).items()},
        "line_solver": [_numbers(row) for row in case.line_solver],
        "line_theory": [_numbers(row) for row in case.line_theory],
        "line_refined": [_numbers(row) for row in case.line_refined],
        "ovalisation": _numbers(case.ovalisation),
        "warping": _numbers(case.warping),
    }


def _mode(case: ModeCase) -> dict[str, Any]:
    return {
        "kind": case.kind,
        "solver_Hz": _number(case.solver),
        "theory_Hz": _number(case.theory),
        "theory_mode": case.theory_mode or None,
        "difference": _number(case.difference),
        "parts": {name: _number(value) for name, value in parts_of_difference(case).items()},
        "likeness": _number(case.likeness),
        "rigid_share": _number(case.rigid_share),
        "line_solver": [_numbers(row) for row in case.line],
    }


def _form_held(trial: Trial) -> list[dict[str, Any]]:
    """Entries of the second run, one a load and mode; empty ones where there was none."""
    parts = form_parts(trial)
    if trial.held is None:
        return [{}] * (len(trial.statics) + len(trial.modes))
    entries: list[dict[str, Any]] = []
    for k, part in enumerate(parts):
        if part is None:
            entries.append({"form_held": None})
            continue
        names = ("solver", "theory", "refined", "difference", "left", "form")
        entry: dict[str, Any] = {name: _number(getattr(part, name)) for name in names}
        if k < len(trial.statics):
            entry["imbalance"] = _number(trial.held.statics[k].imbalance)
            entry["line_solver"] = [_numbers(row) for row in trial.held.statics[k].line_solver]
            entry["line_refined"] = [_numbers(row) for row in trial.held.statics[k].line_refined]
        entries.append({"form_held": entry})
    return entries


def _number(value: float) -> float | None:
    return None if isnan(value) else float(f"{value:.{_DIGITS}g}")


def _numbers(values: Floats | list[float]) -> list[float | None]:
    return [_number(float(value)) for value in values]
