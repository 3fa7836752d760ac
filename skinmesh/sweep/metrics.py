"""What is measured of each variant: a row of plain numbers and texts, and what every column holds."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import element_row_middles
from skinmesh.beam.sections import SectionProperties
from skinmesh.check.finding import FAIL, NOT_MADE, PASS, WARN
from skinmesh.check.run import check_directory
from skinmesh.definition.blade import BladeDefinition
from skinmesh.mesh.measure import mass_properties, solid_mass
from skinmesh.mesh.quality import aspect_ratio, corner_points, scaled_jacobian, warpage
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface
from skinmesh.sweep.plan import Order
from skinmesh.trial.compare import loads_at_tip, tip_motion
from skinmesh.trial.report import failures
from skinmesh.trial.run import run_trial
from skinmesh.trial.theory import BeamBays, beam_bays, natural_modes

Floats = NDArray[np.float64]
Row = dict[str, Any]

INTEGER, NUMBER, TEXT = "integer", "number", "text"
N_FREQUENCIES = 3
_DIGITS = 12
_TIP = (("tip_flap_m_per_N", 0), ("tip_edge_m_per_N", 1), ("tip_twist_deg_per_N_m", 5))
_TRIAL = {0: "trial_flap_m_per_N", 1: "trial_edge_m_per_N", 5: "trial_twist_deg_per_N_m"}


@dataclass(frozen=True)
class Column:
    """A column of the table of results.

    Attributes
    ----------
    name : str
        With its unit at the end.
    kind : str
        INTEGER, NUMBER or TEXT.
    """

    name: str
    kind: str = NUMBER


def metric_columns(order: Order) -> tuple[Column, ...]:
    """The columns of what is measured, in their order.

    Parameters
    ----------
    order : Order

    Returns
    -------
    tuple of Column

    Examples
    --------
    >>> [column.name for column in metric_columns(Order((6.0,)))][:3]
    ['numbering', 'numbering_note', 'nodes']
    """
    names = [
        Column("numbering", TEXT),
        Column("numbering_note", TEXT),
        *(Column(name, INTEGER) for name in ("nodes", "elements", "stacks")),
        *(
            Column(f"{name}")
            for name in ("area_m2", "mass_kg", "solid_mass_kg", "centre_x_m", "centre_y_m", "centre_z_m")
        ),
    ]
    for z in order.sections:
        names += [Column(name) for name in _section_names(z)]
    names += [Column(name) for name, _ in _TIP]
    names += [Column(f"frequency_{k}_Hz") for k in range(1, N_FREQUENCIES + 1)]
    names += [Column("beam_note", TEXT)]
    names += [Column(name) for name in ("worst_aspect", "least_scaled_jacobian", "least_flatness")]
    if order.checks:
        names += [Column(f"checks_{word}", INTEGER) for word in ("passed", "warned", "failed", "not_made")]
        names += [Column("failed_checks", TEXT)]
    names += [Column("warnings", INTEGER), Column("warning_texts", TEXT)]
    if order.trial:
        names += [Column(name) for name in _TRIAL.values()]
        names += [Column(f"trial_frequency_{k}_Hz") for k in range(1, N_FREQUENCIES + 1)]
        names += [Column("trial_failures", TEXT)]
    return tuple(names)


def _section_names(z: float) -> tuple[str, ...]:
    at = f"z{z:g}"
    return f"mass_per_length_{at}_kg_m", f"EA_{at}_N", f"EI_small_{at}_N_m2", f"EI_large_{at}_N_m2", f"GJ_{at}_N_m2"


def measure_mesh(mesh: ShellMesh) -> Row:
    """Counts, area, mass, centre, element quality and warnings.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict
    """
    whole = mass_properties(mesh)
    corners = corner_points(mesh)
    return {
        "nodes": mesh.n_nodes,
        "elements": len(mesh.cells),
        # a number whose content lies nowhere any more is no stack of this mesh
        "stacks": len(np.unique(mesh.stack[mesh.stack >= 0])),
        "area_m2": _number(whole.area),
        "mass_kg": _number(whole.mass),
        "solid_mass_kg": _number(solid_mass(mesh)),
        **{f"centre_{axis}_m": _number(value) for axis, value in zip("xyz", whole.centre, strict=True)},
        "worst_aspect": _number(aspect_ratio(corners).max()),
        "least_scaled_jacobian": _number(scaled_jacobian(corners).min()),
        # Verdict calls it warpage: 1 where every element is flat
        "least_flatness": _number(warpage(corners).min()) if mesh.n_sides == 4 else 1.0,
        "warnings": len(mesh.report.warnings),
        "warning_texts": " | ".join(mesh.report.warnings),
    }


def measure_beam(blade: BladeDefinition, mesh: ShellMesh, order: Order) -> Row:
    """Stiffnesses at the listed sections, and deflection and frequencies by beam theory.

    Thin-wall theory on the exact sections; Euler–Bernoulli on sections in the middles of the mesh's element rows.
    Tip deflections are those of the tip's shear centre under a unit force there.

    Parameters
    ----------
    blade : BladeDefinition
    mesh : ShellMesh
        Gives the bays.
    order : Order

    Returns
    -------
    dict
    """
    if not blade.plies:
        return {"beam_note": "the blade has no plies, so its sections have no stiffness"}
    surface = loft_surface(blade)
    skin, _ = unroll_skin(blade, surface)
    low, high = surface.z_ends
    listed = [z for z in order.sections if low <= z <= high]
    middle, length = element_row_middles(mesh)
    sections = exact_sections(blade, skin, np.concatenate([np.array(listed), middle]))
    n = len(listed)
    row: Row = {}
    for k, z in enumerate(listed):
        values = (sections.mass[k], sections.axial[k], *sections.principal[k], sections.torsion[k])
        row |= dict(zip(_section_names(z), map(_number, values), strict=True))
    edges = np.append(middle - 0.5 * length, middle[-1] + 0.5 * length[-1])
    bays_of = sections.take(np.arange(n, n + len(middle)))
    try:
        bays = beam_bays(edges, bays_of)
    except ValueError as error:
        return {**row, "beam_note": str(error)}
    outside = ", ".join(f"z = {z:g} m" for z in order.sections if z not in listed)
    note = f"outside this blade: {outside}" if outside else ""
    return {**row, **_beam_answers(bays, bays_of), "beam_note": note}


def _beam_answers(bays: BeamBays, sections: SectionProperties) -> Row:
    tip = np.asarray(sections.shear_centre[-1])
    row: Row = {}
    for name, component in _TIP:
        unit = np.zeros(6)
        unit[component] = 1.0
        answer = tip_motion(bays, loads_at_tip(bays, unit, tip), tip)[component]
        row[name] = _number(np.degrees(answer) if component == 5 else answer)
    for k, frequency in enumerate(natural_modes(bays, N_FREQUENCIES).frequency, start=1):
        row[f"frequency_{k}_Hz"] = _number(frequency)
    return row


def measure_checks(folder: Path) -> Row:
    """Verdicts of the checks of a built mesh.

    Parameters
    ----------
    folder : Path
        With the mesh's files and its inputs.

    Returns
    -------
    dict
    """
    report = check_directory(folder)
    counts = report.counts
    failed = dict.fromkeys(finding.check for finding in report.findings if finding.verdict == FAIL)
    words = {"passed": PASS, "warned": WARN, "failed": FAIL, "not_made": NOT_MADE}
    return {
        **{f"checks_{word}": counts[verdict] for word, verdict in words.items()},
        "failed_checks": "; ".join(failed),
    }


def measure_trial(folder: Path, blade_file: Path) -> Row:
    """What the solver says: deflections for a unit load, and frequencies.

    Parameters
    ----------
    folder : Path
        With the mesh's files, vtu and inp.
    blade_file : Path

    Returns
    -------
    dict

    Raises
    ------
    NoSolverError, SolverError
    """
    trial = run_trial(folder, blade_file=blade_file)
    row: Row = {}
    for case in trial.statics:
        if case.name != "weight":
            answer = case.solver / case.load[case.component]
            row[_TRIAL[case.component]] = _number(np.degrees(answer) if case.component == 5 else answer)
    for k, mode in enumerate(trial.modes[:N_FREQUENCIES], start=1):
        row[f"trial_frequency_{k}_Hz"] = _number(mode.solver)
    return {**row, "trial_failures": "; ".join(failures(trial))}


def _number(value: Any) -> float | None:
    """Enough digits for every use, free of the noise of sums; None where there is no number."""
    return float(f"{float(value):.{_DIGITS}g}") if np.isfinite(value) else None
