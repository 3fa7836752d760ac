"""What a second run, whose sections keep their form, tells of the first run's differences from theory."""

from __future__ import annotations

from dataclasses import dataclass
from math import isnan

import numpy as np
from numpy.typing import NDArray

from skinmesh.trial.beamside import ALL
from skinmesh.trial.compare import ModeCase, StaticCase
from skinmesh.trial.run import Trial

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class FormPart:
    """One load or mode in both runs.

    Attributes
    ----------
    solver, theory, refined : float
        In the second run, and by Euler–Bernoulli and refined theory of sections whose walls are held alike; m, rad or
        Hz.
    form : float
        What the change of the sections' form makes different: (1 + difference of the first run from its theory) /
        (1 + difference of the second run from its own) − 1. Poisson's contraction, which the second run holds and its
        theory holds too, is not in it.
    """

    solver: float
    theory: float
    refined: float
    form: float

    @property
    def difference(self) -> float:
        """Solver against Euler–Bernoulli theory in the second run, as a share of theory."""
        return self.solver / self.theory - 1.0

    @property
    def left(self) -> float:
        """Solver against refined theory in the second run, as a share of theory."""
        return self.solver / self.refined - 1.0


def form_parts(trial: Trial) -> tuple[FormPart | None, ...]:
    """The second run beside the first.

    Parameters
    ----------
    trial : Trial

    Returns
    -------
    tuple of FormPart or None
        Of every load, then of every mode of the first run; None of a mode to which the second run has none that is
        alike, or that is like none of the beam's. Empty where there was no second run.
    """
    held = trial.held
    if held is None:
        return ()
    statics = [_part(case, other) for case, other in zip(trial.statics, held.statics, strict=True)]
    modes = [
        _part(mode, held.modes[j]) if j is not None else None for mode, j in zip(trial.modes, held.partner, strict=True)
    ]
    return (*statics, *modes)


def _part(case: StaticCase | ModeCase, other: StaticCase | ModeCase) -> FormPart | None:
    if isnan(case.theory) or isnan(other.theory):
        return None
    form = (1.0 + case.difference) / (1.0 + other.difference) - 1.0
    return FormPart(other.solver, other.theory, other.variants[ALL], form)


def parting_by_form(case: StaticCase, other: StaticCase) -> Floats:
    """What the change of the sections' form makes different along the span.

    Parameters
    ----------
    case, other : StaticCase
        The same load in the first run and in the second.

    Returns
    -------
    (r, 6) float array, m and rad
        The first run's line less its refined theory's, less the same of the second.
    """
    return (case.line_solver - case.line_refined) - (other.line_solver - other.line_refined)


def place_of_parting(parting: Floats, component: int, z: Floats) -> tuple[float, float]:
    """Where two lines of rigid motion part.

    Were the blade beyond a place the same in both, the difference of displacement and rotation at that place alone
    would make some difference at the tip. The two places are where that first comes to a tenth of the whole, and to
    nine tenths for good.

    Parameters
    ----------
    parting : (r, 6) float array, m and rad
        One line less the other.
    component : int
        The motion that is compared: 0 along x, 1 along y, 5 about z.
    z : (r,) float array, m
        Of the rings.

    Returns
    -------
    low, high : float, m

    Examples
    --------
    >>> twist = np.zeros((5, 6))
    >>> twist[:, 5] = [0.0, 0.0, 1.0, 2.0, 2.0]
    >>> place_of_parting(twist, 5, np.arange(5.0))
    (1.0, 3.0)
    """
    carried = parting[:, component].copy()
    if component < 2:
        slope = parting[:, 4] if component == 0 else -parting[:, 3]
        carried += slope * (z[-1] - z)
    share = carried / carried[-1]
    low = int(np.argmax(share >= 0.1))
    high = len(z) - int(np.argmax(share[::-1] < 0.9))
    return float(z[max(low - 1, 0)]), float(z[min(high, len(z) - 1)])
