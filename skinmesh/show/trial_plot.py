"""A trial run as curves along the span, solver beside theory."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from skinmesh.show.page import MARGIN, Page
from skinmesh.show.palette import AXIS_COLOURS, INK, QUIET
from skinmesh.show.panel import HEIGHT, panel
from skinmesh.trial.compare import StaticCase
from skinmesh.trial.form import parting_by_form
from skinmesh.trial.run import Trial
from skinmesh.wording import CAUTION

_SOLVER, _THEORY = AXIS_COLOURS[:2]
_UNITS = {0: (1.0, "deflection along x, m"), 1: (1.0, "deflection along y, m"), 5: (180.0 / np.pi, "twist, °")}


def trial_plot(trial: Trial, path: Path) -> None:
    """Draw a trial run and write the picture as PNG, 1600 pixels wide.

    Lines are beam theory, dots the best rigid motion of each ring of the solver's model.

    Parameters
    ----------
    trial : Trial
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    page = Page(HEIGHT)
    page.text(MARGIN, 40, trial.model.mesh.title, size=26)
    page.text(
        MARGIN,
        78,
        "Trial run beside Euler–Bernoulli theory. Lines: theory on the beam table. Dots: best rigid motion of each ring"
        " in the solver.",
        colour=QUIET,
    )
    for place, case in enumerate(trial.statics):
        _line(page, place, trial, case)
    _frequencies(page, len(trial.statics), trial)
    _distortion(page, len(trial.statics) + 1, trial)
    page.text(MARGIN, HEIGHT - 25, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _line(page: Page, place: int, trial: Trial, case: StaticCase) -> None:
    factor, unit = _UNITS[case.component]
    z = trial.rings.z
    axes = panel(page, place, f"{case.name}: {unit}", (float(z[0]), float(z[-1])))
    axes.plot(z, factor * case.line_theory[:, case.component], color=_THEORY, linewidth=1.4, label="theory")
    axes.plot(
        z,
        factor * case.line_solver[:, case.component],
        ".",
        color=_SOLVER,
        markersize=6,
        label=f"solver, {case.difference:+.1%} at the tip",
    )
    if trial.held is not None:
        kept = case.line_solver - parting_by_form(case, trial.held.statics[place])
        axes.plot(
            z,
            factor * kept[:, case.component],
            "x",
            color=INK,
            markersize=5,
            markeredgewidth=1.0,
            label="without the sections' change of form",
        )
    axes.legend(frameon=False, fontsize=10)


def _frequencies(page: Page, place: int, trial: Trial) -> None:
    n = len(trial.modes)
    axes = panel(page, place, "natural frequencies, Hz", (0.4, n + 0.6))
    number = np.arange(1, n + 1)
    theory = np.array([mode.theory for mode in trial.modes])
    solver = np.array([mode.solver for mode in trial.modes])
    axes.plot(number, theory, "_", color=_THEORY, markersize=26, markeredgewidth=2.0)
    axes.plot(number, solver, ".", color=_SOLVER, markersize=10)
    axes.set_ylim(0.0, 1.1 * max(solver.max(), np.nanmax(theory, initial=0.0)))
    axes.set_xticks(number, [mode.kind for mode in trial.modes])
    axes.set_xlabel("")


def _distortion(page: Page, place: int, trial: Trial) -> None:
    z = trial.rings.z
    axes = panel(page, place, "warping, ovalisation: % of the largest motion", (float(z[0]), float(z[-1])))
    for case, style in zip(trial.statics, ("-", "--", ":", "-."), strict=False):
        axes.plot(z, 100.0 * np.hypot(case.ovalisation, case.warping), style, color=INK, linewidth=1.2, label=case.name)
    axes.set_ylim(bottom=0.0)
    axes.legend(frameon=False, fontsize=10)
