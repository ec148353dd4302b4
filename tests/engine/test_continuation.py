"""Curves of states at rest round their turning points, against normal forms solved by hand."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.engine.continuation import Problem, at_parameter, follow, stable_beside

NONE = np.empty((0, 1))


def subcritical():
    """x' = x (p + x - x^2): x = 0, and p = x^2 - x with its turning point at x = 1/2, p = -1/4."""
    return Problem(
        net=lambda y: np.array([y[0] * (y[1] + y[0] - y[0] ** 2)]),
        slope=lambda y: np.array([[y[1] + 2 * y[0] - 3 * y[0] ** 2, y[0]]]),
        scale=np.array([1.0, 1.0]),
        conserved=NONE,
        infected=1,
    )


def test_turning_point():
    branch = follow(subcritical(), np.array([0.0, 0.0]), np.array([1.0, -1.0]), -1.0, 1.0)
    assert len(branch.turning) == 1
    assert branch.turning[0] == pytest.approx([0.5, -0.25], abs=1e-10)
    assert branch.left == "range"
    x, p = branch.points.T
    assert p == pytest.approx(x**2 - x, abs=1e-12)


def test_states_at_one_parameter():
    branch = follow(subcritical(), np.array([0.0, 0.0]), np.array([1.0, -1.0]), -1.0, 1.0)
    found = sorted(float(y[0]) for y in at_parameter(subcritical(), branch, -0.2))
    assert found == pytest.approx([(1 - np.sqrt(0.2)) / 2, (1 + np.sqrt(0.2)) / 2], rel=1e-12)
    assert at_parameter(subcritical(), branch, -0.3) == []


def test_conserved_sums_make_no_eigenvalue_unstable():
    slope = np.array([[-0.3, 0.2], [0.3, -0.2]])
    assert stable_beside(slope, np.array([[1.0, 1.0]]) / np.sqrt(2))
    assert not stable_beside(slope, np.empty((0, 2)))
