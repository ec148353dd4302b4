"""Roots of many small matrices at once: by hand, against bounds of the single root, and draw by draw the same."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ngm.engine.batch import perron_roots
from ngm.engine.perron import reproduction_number
from ngm.engine.rest_batch import follow_rest

#: What the chosen quotients and polynomials promise, with room.
CLOSE = 1e-12


def single(K: np.ndarray) -> np.ndarray:
    """Return the roots one by one, from proven bounds: the second route."""
    return np.array([reproduction_number(K[:, :, d]) for d in range(K.shape[2])])


def mixed(rng: np.random.Generator, n: int, size: int, kind: str) -> np.ndarray:
    """Return n x n matrices of a kind, draws last."""
    K = rng.random((n, n, size))
    if kind == "wide":
        return np.exp(4 * rng.normal(size=(n, n, size)))
    if kind == "sparse":
        return K * (rng.random((n, n, size)) < 0.4)
    if kind == "rank one":
        return rng.random((n, 1, size)) * rng.random((1, n, size))
    if kind == "near a tie":
        K *= 1e-7
        for k in range(n):
            K[k, k] = 1 + 1e-9 * rng.random(size)
    return K


@pytest.mark.parametrize("kind", ["even", "wide", "sparse", "rank one", "near a tie"])
@pytest.mark.parametrize("n", [1, 2, 3, 4, 5, 6, 9, 17])
def test_equals_the_single_root(n, kind):
    K = mixed(np.random.default_rng(n), n, 60, kind)
    assert perron_roots(K) == pytest.approx(single(K), rel=CLOSE, abs=0)
    assert perron_roots(K, np.ones((n, n), dtype=bool)) == pytest.approx(single(K), rel=CLOSE, abs=0)


# By hand: a cycle of n types has the n-th root of the product of its entries.
@pytest.mark.parametrize("n", [2, 3, 4, 5, 6, 7, 12])
def test_a_cycle_has_the_root_of_its_product(n):
    size = 40
    entries = np.random.default_rng(n).uniform(0.1, 5, (n, size))
    K = np.zeros((n, n, size))
    for k in range(n):
        K[(k + 1) % n, k] = entries[k]
    assert perron_roots(K) == pytest.approx(np.prod(entries, axis=0) ** (1 / n), rel=1e-13)


# By hand: hosts infect vectors and vectors hosts, so the square of the root is that of the product of both blocks.
@pytest.mark.parametrize(("hosts", "vectors"), [(1, 2), (2, 2), (2, 3), (3, 3), (5, 6)])
def test_two_kinds_that_infect_each_other(hosts, vectors):
    rng = np.random.default_rng(hosts)
    up, down = rng.random((hosts, vectors, 30)), rng.random((vectors, hosts, 30))
    n = hosts + vectors
    K = np.zeros((n, n, 30))
    K[:hosts, hosts:], K[hosts:, :hosts] = up, down
    cycle = np.einsum("ikd,kjd->ijd", up, down)
    assert perron_roots(K) == pytest.approx(np.sqrt(single(cycle)), rel=CLOSE)


# By hand: the diagonal of a triangular matrix holds its eigenvalues; zero columns and rows add none.
def test_reducible_matrices():
    rng = np.random.default_rng(2)
    K = np.triu(np.ones((6, 6)))[:, :, None] * rng.random((6, 6, 50))
    K[:, 3] = 0
    K[4] = 0
    assert perron_roots(K).tolist() == K[range(6), range(6)].max(axis=0).tolist()
    assert perron_roots(np.zeros((5, 5, 3))).tolist() == [0, 0, 0]
    nilpotent = np.triu(rng.random((6, 6)), 1)[:, :, None] * np.ones(3)
    assert perron_roots(nilpotent, np.ones((6, 6), dtype=bool)).tolist() == [0, 0, 0]


def test_no_number_where_an_entry_is_none():
    K = np.ones((3, 3, 4))
    K[0, 1, 1], K[2, 2, 2], K[1, 1, 3] = np.nan, np.inf, -1e-300
    found = perron_roots(K)
    assert found[0] == pytest.approx(3, rel=1e-14)
    assert np.isnan(found[1:]).all()


def test_empty():
    assert perron_roots(np.zeros((0, 0, 3))).tolist() == [0, 0, 0]
    assert perron_roots(np.zeros((2, 2, 0))).shape == (0,)
    with pytest.raises(ValueError, match="n, n, N"):
        perron_roots(np.zeros((2, 3, 4)))


@given(data=st.data())
@settings(max_examples=60, deadline=None)
def test_a_draw_does_not_depend_on_its_neighbours(data):
    n = data.draw(st.integers(1, 8))
    rng = np.random.default_rng(data.draw(st.integers(0, 10**6)))
    kinds = ["even", "wide", "sparse", "rank one"]
    K = np.concatenate([mixed(rng, n, 9, kind) for kind in kinds], axis=2)[:, :, rng.permutation(36)]
    whole = perron_roots(K, np.ones((n, n), dtype=bool))
    cut = data.draw(st.integers(1, 35))
    assert perron_roots(K[:, :, :cut], np.ones((n, n), dtype=bool)).tobytes() == whole[:cut].tobytes()
    assert perron_roots(K[:, :, cut : cut + 1]).tobytes() == whole[cut : cut + 1].tobytes()


# By hand: the scaling of a diagonal similarity leaves the root alone.
@given(seed=st.integers(0, 10**6), n=st.integers(2, 7))
@settings(max_examples=40, deadline=None)
def test_units_of_types_change_nothing(seed, n):
    rng = np.random.default_rng(seed)
    K = rng.random((n, n, 5))
    scale = np.exp(8 * rng.normal(size=(n, 5)))
    assert perron_roots(K * scale[:, None] / scale[None]) == pytest.approx(perron_roots(K), rel=1e-11)


# By hand: r x (1 - x / c) = m x at x = c (1 - m / r), stable where r > m; else only x = 0 is, which is not followed to.
def test_a_state_is_followed_where_it_stays_the_same_kind():
    r, m, c = np.array([2.0, 1.5, 0.4]), np.array([0.5, 1.4, 0.5]), np.array([100.0, 7.0, 100.0])

    def system(arrays: list[np.ndarray]) -> np.ndarray:
        r, m, c, x = arrays
        return np.stack([r * x * (1 - x / c) - m * x, r * (1 - 2 * x / c) - m])

    state, found = follow_rest(system, [r, m, c], np.array([80.0]))
    assert found.tolist() == [True, True, False]
    assert state[0, :2] == pytest.approx((c * (1 - m / r))[:2], rel=1e-12)
