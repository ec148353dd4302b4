"""Growth rates and target reproduction numbers of many matrices at once."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.engine.control import target_reproduction_number
from ngm.engine.drawn_numbers import growth_rates, target_numbers

RNG = np.random.default_rng(20)


def random_slopes(m, size, density):
    """Return matrices that are not negative off the diagonal, with the same zeros in all draws."""
    pattern = RNG.random((m, m)) < density
    np.fill_diagonal(pattern, True)
    G = RNG.exponential(size=(m, m, size)) * 10.0 ** RNG.integers(-3, 3, (m, m, 1)) * pattern[:, :, None]
    k = np.arange(m)
    G[k, k] *= -1
    return G, pattern


@pytest.mark.parametrize(("m", "density"), [(1, 1), (2, 1), (3, 1), (4, 0.5), (7, 0.2), (7, 0.6), (12, 0.3)])
def test_growth_rates_are_the_largest_real_parts(m, density):
    # Second route: numpy's eigenvalues of each matrix.
    G, pattern = random_slopes(m, 40, density)
    expected = np.linalg.eigvals(np.moveaxis(G, 2, 0)).real.max(axis=1)
    scale = np.abs(G).max(axis=(0, 1))
    assert np.all(np.abs(growth_rates(G, pattern) - expected) < 1e-11 * scale)
    assert np.all(np.abs(growth_rates(G) - expected) < 1e-11 * scale)


def test_growth_with_negative_entries_off_the_diagonal():
    # By hand: a rotation with loss; eigenvalues -1 +- 2i.
    G = np.array([[-1.0, -2.0], [2.0, -1.0]])[:, :, None]
    assert growth_rates(G).tolist() == pytest.approx([-1], abs=1e-12)


def test_growth_without_a_value():
    G = np.array([[[-1.0, np.nan, np.inf]]])
    assert np.isnan(growth_rates(G)).tolist() == [False, True, True]
    assert np.isnan(growth_rates(np.empty((0, 0, 2)))).all()


@pytest.mark.parametrize("n", [1, 2, 4, 6])
def test_target_numbers_are_those_of_each_matrix_alone(n):
    # Second route: the one for single matrices, with doubles.
    for _ in range(6):
        K = RNG.exponential(0.5, (n, n, 9)) * (RNG.random((n, n, 1)) < 0.8)
        mask = RNG.random((n, n)) < 0.5
        if not mask.any():
            mask[0, 0] = True
        found = target_numbers(K, mask)
        for d in range(9):
            alone = target_reproduction_number(K[:, :, d], mask)
            if abs(alone.rest - 1) < 1e-9:
                continue
            if alone.T is None:
                assert np.isnan(found[d])
            else:
                assert found[d] == pytest.approx(alone.T, rel=1e-9)


def test_a_draw_without_a_matrix_has_no_number():
    K = np.array([[[0.5, np.nan]]])
    assert target_numbers(K, np.array([[True]]))[0] == 0.5
    assert np.isnan(target_numbers(K, np.array([[True]]))[1])
