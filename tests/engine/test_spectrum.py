"""R0, classes and Perron vectors of matrices of balls and of doubles."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ngm.engine import balls as b
from ngm.engine.linear import dominant_solve, solve
from ngm.engine.perron import bounds, reproduction_number, reproductive_value, stable_distribution
from ngm.engine.spectrum import spectrum
from tests.engine.matrices import decimals, floats, nonnegative

KINDS = [decimals, floats]


def _root(found):
    return b.nearest(found.root)


# Published formulas (Frobenius normal form), numbers by hand and recomputed: four types in three classes.
NORMAL_FORM = [["1.2", "0", "0", "0"], ["0.5", "0", "2", "0"], ["0", "0.6", "0", "0"], ["0.3", "0", "0.4", "0.9"]]


@pytest.mark.parametrize("kind", KINDS)
def test_normal_form(kind):
    with b.precision(128):
        found = spectrum(kind(NORMAL_FORM))
    assert [c.tolist() for c in found.classes] == [[0], [1, 2], [3]]
    assert [float(r) for r in found.roots] == pytest.approx([1.2, 1.095445115, 0.9], rel=1e-9)
    assert found.periods == (1, 2, 1)
    assert (found.irreducible, found.period, found.cycle, found.leading) == (False, None, 1, (0,))
    assert b.to_floats(found.right) == pytest.approx([0.1348314607, 0.3370786517, 0.1685393258, 0.3595505618], rel=1e-9)
    assert b.to_floats(found.left) == pytest.approx([7.416666667, 0, 0, 0], rel=1e-9)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("rows", "root", "right", "left", "cycle"),
    [
        # By hand.
        ([["0.9", "0"], ["0.5", "1.4"]], 1.4, [0, 1], [1, 1], 1),
        ([["1.2", "0"], ["1", "1.2"]], 1.2, None, None, 1),
        ([["0", "2"], ["0", "0"]], 0, None, None, None),
        ([["0"]], 0, None, None, None),
        ([["2.5"]], 2.5, [1], [1], 1),
        ([["0", "4"], ["9", "0"]], 6, [0.4, 0.6], [1.25, 0.8333333333], 2),
        ([["1.5", "0"], ["0.8", "0"]], 1.5, [0.6521739130, 0.3478260870], [1.533333333, 0], 1),
        # A period-2 class ties with a period-1 class: sqrt(4 * 1) = 2.
        ([["0", "4", "0"], ["1", "0", "0"], ["0", "0", "2"]], 2, None, None, None),
        # Recomputed by two routes: contact matrices in the right and the wrong orientation.
        (
            [["1.6", "0.37142857142857142"], ["0.86666666666666667", "1.2"]],
            2.001585208,
            [0.4804941148, 0.5195058852],
            None,
            1,
        ),
        # Published method, sensitivities: both vectors recomputed.
        ([["0.8", "1.5"], ["0.6", "0.5"]], 1.610468636, [0.6492189406, 0.3507810594], [0.8904344047, 1.202781929], 1),
    ],
)
def test_roots_and_vectors(kind, rows, root, right, left, cycle):
    with b.precision(128):
        found = spectrum(kind(rows))
    assert _root(found) == pytest.approx(root, rel=1e-9)
    assert found.cycle == cycle
    if right is None:
        assert found.right is None
        assert found.left is None
    else:
        assert b.to_floats(found.right) == pytest.approx(right, rel=1e-9)
    if left is not None:
        assert b.to_floats(found.left) == pytest.approx(left, rel=1e-9)


# Published: Nold (1980), core group with proportionate mixing; formula and numbers recomputed.
@pytest.mark.parametrize(("share", "expected"), [(0.0, 0.9490909091), (0.3, 1.165131563), (1.0, 1.8)])
def test_core_group(share, expected):
    N, c, bD = np.array([900.0, 100.0]), np.array([2.0, 15.0]), 0.12
    weights = (1 - share) * c * N
    mixing = share * np.eye(2)
    if share < 1:
        mixing = mixing + (1 - share) * weights[None, :] / weights.sum()
    K = bD * c[:, None] * N[:, None] * mixing / N[None, :]
    assert reproduction_number(K) == pytest.approx(expected, rel=1e-9)


# By hand: the root of a directed cycle is the n-th root of the product of its weights.
def test_directed_cycle():
    K = np.zeros((4, 4))
    for j, weight in enumerate([2, 3, 0.5, 5.4]):
        K[(j + 1) % 4, j] = weight
    assert reproduction_number(K) == pytest.approx((2 * 3 * 0.5 * 5.4) ** 0.25, rel=1e-14)
    assert spectrum(K).period == 4


@settings(max_examples=60, deadline=None)
@given(nonnegative(most=5))
def test_vectors_solve_their_equations(rows):
    with b.precision(160):
        K = decimals(rows)
        found = spectrum(K)
        assume(found.right is not None)
        for vector, matrix in ((found.right, K), (found.left, K.T)):
            image = b.from_mat(b.to_mat(matrix) * b.to_mat(vector))[:, 0]
            for i in range(len(K)):
                assert image[i].overlaps(found.root * vector[i])
                assert vector[i].is_zero() or (vector[i] > 0 and vector[i].rel_accuracy_bits() > 60)
        assert found.right.sum().overlaps(b.arb(1))
        assert (found.left * found.right).sum().overlaps(b.arb(1))


# Second route: doubles against balls; the class structure is the same, the numbers agree.
@settings(max_examples=60, deadline=None)
@given(nonnegative(most=6))
def test_doubles_agree_with_balls(rows):
    with b.precision(128):
        exact = spectrum(b.balls(floats(rows)))
    found = spectrum(floats(rows))
    assert [c.tolist() for c in found.classes] == [c.tolist() for c in exact.classes]
    assert found.periods == exact.periods
    low, high = bounds(floats(rows))
    with b.precision(256):
        assert low <= exact.root
        assert high >= exact.root
    assert high - low <= 1e-13 * high
    assert reproduction_number(floats(rows)) == pytest.approx(b.nearest(exact.root), rel=1e-13)
    if found.right is not None and exact.right is not None:
        assert b.to_floats(found.right) == pytest.approx(b.to_floats(exact.right), rel=1e-6, abs=1e-14)


@settings(max_examples=60, deadline=None)
@given(nonnegative(most=5), st.integers(0, 4), st.integers(0, 4), st.integers(1, 10**6))
def test_root_never_falls_when_an_entry_grows(rows, i, j, extra):
    size = len(rows)
    K = decimals(rows)
    more = K.copy()
    more[i % size, j % size] = more[i % size, j % size] + extra
    with b.precision(128):
        assert not spectrum(more, vectors=False).root < spectrum(K, vectors=False).root


def test_bounds_hold_for_the_decimals_not_for_their_doubles():
    # By hand: 0.1 + 0.2 has root 0.3, whose nearest double is below three tenths.
    with b.precision(128):
        found = spectrum(b.balls([[b.ball("0.1") + b.ball("0.2")]]))
    low, high = b.outward(found.root)
    assert Fraction(low) < Fraction(3, 10) < Fraction(high)
    assert _root(found) == 0.3


def test_entry_that_may_be_zero_is_told():
    with b.precision(128):
        doubtful = b.ball("0.3") - b.ball("0.1") - b.ball("0.2")
        found = spectrum(b.balls([[1, doubtful], [1, 1]]))
    assert len(found.classes) == 2
    assert not found.decided


@pytest.mark.parametrize("size", [10, 90])
def test_vectors_of_larger_matrices(size):
    rng = np.random.default_rng(size)
    rows = rng.random((size, size)) * 10.0 ** rng.uniform(-9, 9, (size, size)) * (rng.random((size, size)) < 0.3)
    with b.precision(128):
        K = b.balls(rows)
        found = spectrum(K)
        assert found.right is not None
        for vector, matrix in ((found.right, K), (found.left, K.T)):
            image = b.from_mat(b.to_mat(matrix) * b.to_mat(vector))[:, 0]
            assert all(y.overlaps(found.root * x) for y, x in zip(image, vector, strict=True))
            assert all(x.is_zero() or x.rel_accuracy_bits() > 60 for x in vector)
        assert (found.left * found.right).sum().overlaps(b.arb(1))


# Second route: FLINT's own solver in balls throughout.
def test_system_solved_by_refinement():
    rng = np.random.default_rng(5)
    size = 60
    coupling = rng.random((size, size)) / size
    with b.precision(128):
        system = b.balls(np.eye(size) * 1.01 - coupling / coupling.sum(axis=1)[:, None])
        right = b.balls(rng.random(size))
        found, direct = dominant_solve(system, right), solve(system, right)
        assert all(x.overlaps(y) and x.rel_accuracy_bits() > 100 for x, y in zip(found, direct, strict=True))
    with pytest.raises(ZeroDivisionError):
        dominant_solve(b.balls(np.eye(size) - 1 / size), right)


def test_large_matrices_of_doubles():
    rng = np.random.default_rng(3)
    K = rng.random((700, 700)) * 10.0 ** rng.uniform(-4, 4, (700, 1))
    low, high = bounds(K)
    # Second route: dense eigenvalues.
    assert (low + high) / 2 == pytest.approx(np.abs(np.linalg.eigvals(K)).max(), rel=1e-10)
    assert high - low < 1e-11 * high


def test_prompt_functions():
    K = np.array([[0.9, 0.0], [0.5, 1.4]])
    assert stable_distribution(K).tolist() == [0, 1]
    assert reproductive_value(K) == pytest.approx([1, 1])
    assert bounds(np.zeros((3, 3))) == (0.0, 0.0)
    with pytest.raises(ValueError, match="not square"):
        reproduction_number(np.zeros((2, 3)))
    with pytest.raises(ValueError, match="not finite"):
        reproduction_number(np.array([[np.nan]]))
    with pytest.raises(ValueError, match="negative"):
        reproduction_number(np.array([[1.0, -2.0], [3.0, 0.5]]))
