"""Pace: means that are known, the sum over ages, and R0 from growth and intervals."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.linalg import expm

from ngm.engine.pace import pace
from ngm.engine.perron import reproductive_value, stable_distribution

ONE = np.ones(1)


def test_latent_then_infectious():
    # By hand: memoryless stays, so the mean is 1/sigma + 1/gamma and the variance 1/sigma^2 + 1/gamma^2; the density is
    # sigma gamma (exp(-sigma a) - exp(-gamma a)) / (gamma - sigma).
    beta, sigma, gamma = 0.6, 0.5, 0.2
    F, V = np.array([[0, beta], [0, 0]]), np.array([[sigma, 0], [-sigma, gamma]])
    r = max(np.linalg.eigvals(F - V).real)
    found = pace(F, V, np.array([0]), ONE, ONE, r)
    assert found.mean == pytest.approx(1 / sigma + 1 / gamma, rel=1e-13)
    assert found.sd == pytest.approx(math.hypot(1 / sigma, 1 / gamma), rel=1e-12)
    a = found.ages
    assert found.density == pytest.approx(
        sigma * gamma * (np.exp(-sigma * a) - np.exp(-gamma * a)) / (gamma - sigma), abs=1e-12
    )
    assert found.cumulative[0] == pytest.approx(0, abs=1e-15)
    assert 0.998 < found.cumulative[-1] < 1
    assert found.total == pytest.approx(1, abs=1e-6)
    # Wallinga & Lipsitch (2007): R0 = 1 / M(-r); R0 is beta/gamma by hand.
    assert 1 / found.transform == pytest.approx(beta / gamma, rel=1e-12)


def test_two_types_against_integration():
    # Second route: the density by the matrix exponential at each age, added up by quadrature.
    F = np.array([[0, 0.4, 0, 0.1], [0, 0, 0, 0], [0, 0.3, 0, 0.5], [0, 0, 0, 0]])
    V = np.array([[0.5, 0, 0, 0], [-0.4, 0.3, 0, 0], [0, 0, 1.0, 0], [0, 0, -0.9, 0.2]])
    at = np.array([0, 2])
    K = (F @ np.linalg.inv(V))[np.ix_(at, at)]
    w, v = stable_distribution(K), reproductive_value(K)
    R0 = max(np.linalg.eigvals(K).real)
    found = pace(F, V, at, w, v, 0.1)

    def density(a):
        return float(v @ (F @ expm(-V * a))[np.ix_(at, at)] @ w) / R0

    assert quad(density, 0, 300, limit=400)[0] == pytest.approx(1, rel=1e-7)
    assert found.density[10] == pytest.approx(density(found.ages[10]), rel=1e-9)
    assert found.mean == pytest.approx(quad(lambda a: a * density(a), 0, 300, limit=400)[0], rel=1e-7)
    assert found.transform == pytest.approx(
        quad(lambda a: math.exp(-0.1 * a) * density(a), 0, 300, limit=400)[0], rel=1e-7
    )
    # The mean over new cases, each type weighted with what its infections are worth.
    worth = v @ K
    assert found.mean == pytest.approx(float(worth * w @ found.mean_by_type / (worth @ w)), rel=1e-12)


def test_steps():
    # By hand: geometric stays, mean 1/a + 1/g steps; second route: the sum over steps.
    F, T = np.array([[0, 0.3], [0, 0]]), np.array([[0.6, 0], [0.4, 0.8]])
    factor = 0.7 + math.sqrt(0.13)
    found = pace(F, np.eye(2) - T, np.array([0]), ONE, ONE, math.log(factor), discrete=True)
    assert found.mean == pytest.approx(1 / 0.4 + 1 / 0.2, rel=1e-12)
    shares = [float((F @ np.linalg.matrix_power(T, k - 1))[0, 0]) / 1.5 for k in range(1, 400)]
    ages = np.arange(1, 400)
    assert found.density == pytest.approx(shares[: len(found.density)], abs=1e-14)
    assert found.sd == pytest.approx(math.sqrt(sum(shares * ages**2) - found.mean**2), rel=1e-9)
    assert found.total == pytest.approx(1, abs=1e-12)
    assert found.transform == pytest.approx(1 / 1.5, rel=1e-12)


def test_a_type_that_infects_nobody_has_no_mean():
    F = np.array([[0.5, 0], [0.2, 0]])
    V = np.eye(2)
    found = pace(F, V, np.array([0, 1]), np.array([0.7, 0.3]), np.array([1.0, 0]), -0.5)
    assert found.mean_by_type[0] == pytest.approx(1, rel=1e-14)
    assert np.isnan(found.mean_by_type[1])
