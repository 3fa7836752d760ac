"""Quality metrics against the Verdict library in VTK, and against shapes whose value anyone can tell."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
import pyvista
from numpy.testing import assert_allclose
from sample_meshes import box_with_web, tube

from skinmesh.mesh import quality

METRICS: dict[str, tuple[Callable[[np.ndarray], np.ndarray], float]] = {
    "aspect_ratio": (quality.aspect_ratio, 1.0),
    "min_angle": (quality.smallest_angle, 180 / np.pi),
    "max_angle": (quality.largest_angle, 180 / np.pi),
    "scaled_jacobian": (quality.scaled_jacobian, 1.0),
    "skew": (quality.skew, 1.0),
    "warpage": (quality.warpage, 1.0),
    "taper": (quality.taper, 1.0),
}
TRIANGLE_METRICS = ["aspect_ratio", "min_angle", "max_angle", "scaled_jacobian"]
SQUARE = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=float)


def verdict(corners: np.ndarray, metric: str) -> np.ndarray:
    n, k, _ = corners.shape
    faces = np.hstack([np.full((n, 1), k), np.arange(n * k).reshape(n, k)]).ravel()
    grid = pyvista.PolyData(corners.reshape(-1, 3), faces=faces)
    return np.asarray(grid.cell_quality(metric)[metric])


def random_quads() -> np.ndarray:
    """Two thousand bent squares of all sizes, and two thousand that are hardly quadrilaterals any more."""
    rng = np.random.default_rng(20)
    bent = (SQUARE + rng.uniform(-0.4, 0.4, (2000, 4, 3))) * 10 ** rng.uniform(-3, 3, (2000, 1, 1))
    return np.concatenate([bent, rng.normal(size=(2000, 4, 3))])


@pytest.mark.parametrize("metric", METRICS)
def test_random_quadrilaterals_as_verdict(metric: str) -> None:
    corners = random_quads()
    own, unit = METRICS[metric]
    assert_allclose(own(corners) * unit, verdict(corners, metric), rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("metric", TRIANGLE_METRICS)
def test_random_triangles_as_verdict(metric: str) -> None:
    corners = np.random.default_rng(21).normal(size=(3000, 3, 3))
    own, unit = METRICS[metric]
    assert_allclose(own(corners) * unit, verdict(corners, metric), rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("metric", METRICS)
def test_elements_of_a_cone_as_verdict(metric: str) -> None:
    corners = quality.corner_points(tube(24, 15, taper=0.3))
    own, unit = METRICS[metric]
    assert_allclose(own(corners) * unit, verdict(corners, metric), rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("metric", TRIANGLE_METRICS)
def test_triangles_of_a_cone_as_verdict(metric: str) -> None:
    corners = quality.corner_points(tube(24, 15, taper=0.3, shape="triangle"))
    own, unit = METRICS[metric]
    assert_allclose(own(corners) * unit, verdict(corners, metric), rtol=1e-10, atol=1e-10)


def test_a_square_is_perfect() -> None:
    square = SQUARE[None]
    assert quality.aspect_ratio(square) == 1
    assert quality.scaled_jacobian(square) == 1
    assert quality.skew(square) == quality.taper(square) == 0
    assert quality.warpage(square) == 1
    assert_allclose(quality.corner_angles(square), np.pi / 2)


def test_a_square_with_one_corner_lifted() -> None:
    """By h: the normals beside the lifted corner are (0, −h, 1) and (−h, 0, 1), and part most."""
    lifted = SQUARE + np.array([[0, 0, 0], [0, 0, 0], [0, 0, 0.2], [0, 0, 0]])
    assert quality.warpage(lifted[None])[0] == pytest.approx((1 / 1.04) ** 3)


def test_an_equilateral_triangle_is_perfect() -> None:
    triangle = np.array([[[0, 0, 0], [1, 0, 0], [0.5, np.sqrt(3) / 2, 0]]])
    assert quality.aspect_ratio(triangle) == pytest.approx(1)
    assert quality.scaled_jacobian(triangle) == pytest.approx(1)
    assert_allclose(quality.corner_angles(triangle), np.pi / 3)


def test_a_quadrilateral_crossed_over_is_found() -> None:
    bow_tie = np.array([[[0, 0, 0], [1, 0, 0], [0.1, 1, 0], [1, 0.5, 0]]])
    assert quality.scaled_jacobian(bow_tie) < 0


def test_a_quadrilateral_that_turns_back_has_its_true_angle() -> None:
    dart = np.array([[[0, 0, 0], [1, 0, 0], [0.2, 0.2, 0], [0, 1, 0]]])
    assert np.degrees(quality.largest_angle(dart))[0] == pytest.approx(
        180 + 2 * np.degrees(np.arctan(0.6 / 1.0)), abs=0.2
    )
    assert quality.scaled_jacobian(dart) < 0


@pytest.mark.parametrize("k", [3, 4])
def test_collapsed_elements_give_no_nan(k: int) -> None:
    point, line = np.zeros((1, k, 3)), np.zeros((1, k, 3))
    line[0, 1:, 0] = np.arange(1, k)
    names = METRICS if k == 4 else TRIANGLE_METRICS
    for collapsed in (point, line):
        for name in names:
            assert not np.isnan(METRICS[name][0](collapsed)).any()
        assert quality.aspect_ratio(collapsed) == np.inf
        assert quality.scaled_jacobian(collapsed) <= 0


@pytest.mark.parametrize("metric", METRICS)
def test_metrics_do_not_depend_on_place_size_or_first_corner(metric: str) -> None:
    corners = quality.corner_points(box_with_web(3, 2, 4)) + np.random.default_rng(22).uniform(
        -0.03, 0.03, (40 + 8, 4, 3)
    )
    turn = np.linalg.qr(np.random.default_rng(23).normal(size=(3, 3)))[0]
    own = METRICS[metric][0]
    assert_allclose(own(7.0 * corners @ turn.T + [3, -4, 5]), own(corners), rtol=1e-9, atol=1e-9)
    assert_allclose(own(np.roll(corners, 1, axis=1)), own(corners), rtol=1e-9, atol=1e-12)
