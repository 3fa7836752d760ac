"""Published values of laminates.

Sources, all quoted from memory:

* T300/5208 in Tsai & Hahn, Introduction to Composite Materials, 1980: ply constants, stiffness, invariants and the
  quasi-isotropic laminate.
* [0/30/−45] of graphite/epoxy, 5 mm a ply, in Kaw, Mechanics of Composite Materials, chapter 4 (same constants):
  A, B and D.
"""

from __future__ import annotations

from math import radians

import numpy as np
import pytest
from numpy.testing import assert_allclose

from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.laminate.theory import (
    engineering_constants,
    laminate_stiffness,
    reduced_stiffness,
    stiffness_invariants,
)

T300_5208 = Material("T300/5208", 181e9, 10.3e9, 10.3e9, 0.28, 0.28, 0.28, 7.17e9, 7.17e9, 7.17e9, 1600.0)


def stack_of(*degrees: float, thickness: float = 0.005) -> Stack:
    return Stack(tuple(Layer("ply", T300_5208, thickness, radians(angle)) for angle in degrees))


def symmetric(upper: list[float]) -> np.ndarray:
    a11, a12, a16, a22, a26, a66 = upper
    return np.array([[a11, a12, a16], [a12, a22, a26], [a16, a26, a66]])


def test_reduced_stiffness_of_tsai_and_hahn() -> None:
    q = reduced_stiffness([T300_5208])[0] / 1e9
    assert [q[0, 0], q[1, 1], q[0, 1], q[2, 2]] == pytest.approx([181.8, 10.35, 2.897, 7.17], rel=5e-4)
    assert q[0, 2] == q[1, 2] == 0


def test_invariants_of_tsai_and_hahn() -> None:
    u = stiffness_invariants(reduced_stiffness([T300_5208])[0]) / 1e9
    assert_allclose(u, [76.37, 85.73, 19.71, 22.61, 26.88], rtol=3e-4)


@pytest.mark.parametrize("degrees", [(0, 45, -45, 90), (0, 60, -60), (10, 55, 100, 145), (0, 36, 72, 108, 144)])
def test_quasi_isotropic_laminates_of_tsai_and_hahn(degrees: tuple[float, ...]) -> None:
    found = engineering_constants(laminate_stiffness([stack_of(*degrees, *degrees[::-1])]))
    assert [found.E1[0] / 1e9, found.E2[0] / 1e9, found.G12[0] / 1e9] == pytest.approx([69.68, 69.68, 26.88], rel=5e-4)
    assert found.nu12[0] == pytest.approx(0.296, abs=5e-4)


def test_stiffness_of_kaw() -> None:
    """The book's first ply lies at the bottom, the −e3 face, so our list from the +e3 face is the reverse."""
    found = laminate_stiffness([stack_of(-45, 30, 0), stack_of(0, 30, -45)])
    A = symmetric([1.7392e9, 3.8839e8, 5.6634e7, 4.5325e8, -1.1406e8, 4.5248e8])
    B = symmetric([-3.1288e6, 9.8552e5, -1.0717e6, 1.1578e6, -1.0717e6, 9.8552e5])
    D = symmetric([3.3432e4, 6.4610e3, -5.2403e3, 9.3198e3, -5.5959e3, 7.6628e3])
    for k, sign in enumerate((1, -1)):
        assert_allclose(found.A[k], A, rtol=1e-4)
        assert_allclose(found.B[k], sign * B, rtol=1e-4)
        assert_allclose(found.D[k], D, rtol=1e-4)
