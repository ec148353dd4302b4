"""Perron roots with bounds, inverses and the M-matrix property."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from ngm.engine import balls as b
from ngm.engine.enclosure import inverse, m_matrix, perron_root, spectral_radius
from ngm.engine.linear import matmul, pattern
from tests.engine.matrices import decimals, nonnegative


# By hand: the roots of 2 x 2 matrices [[a, b], [c, d]]: ((a + d) + sqrt((a - d)^2 + 4 b c)) / 2, in exact fractions.
@pytest.mark.parametrize(
    "rows",
    [
        [["0.8", "1.5"], ["0.6", "0.5"]],
        [["0", "4"], ["9", "0"]],
        [["2", "1"], ["1", "3"]],
        [["0", "1e9"], ["1e-9", "0"]],
        [["1", "1e-25"], ["1e-25", "0.9999"]],
        [["1", "1e-25"], ["1e-25", "0.99999999999999999999999"]],
    ],
)
@pytest.mark.parametrize("bits", [53, 128, 512])
def test_perron_root_by_hand(rows, bits):
    (a, c), (d, e) = ([Fraction(v) for v in row] for row in rows)
    with b.precision(bits):
        found = perron_root(decimals(rows))
    assert found.rel_accuracy_bits() > bits - 12
    with b.precision(1200):
        exact = (b.ball(a + e) + b.ball((a - e) ** 2 + 4 * c * d).sqrt()) / 2
        assert found.contains(exact)


# Second route: 60-digit eigenvalues of another library.
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(nonnegative(most=6))
def test_bounds_enclose_the_exact_root(rows):
    with b.precision(128):
        found = spectral_radius(decimals(rows))
    low, high = b.outward(found)
    with mpmath.workdps(60):
        exact = _mpmath_radius(rows)
        assert mpmath.mpf(low) <= exact * (1 + mpmath.mpf(10) ** -40)
        assert mpmath.mpf(high) >= exact * (1 - mpmath.mpf(10) ** -40)
    if exact:
        assert high - low <= 2.0**-51 * high


def _mpmath_radius(rows):
    """Return the spectral radius by squaring the matrix: rho = lim (1' A^k 1)^(1/k), Gelfand, k = 2^40 n."""
    matrix = mpmath.matrix([[mpmath.mpf(v) for v in row] for row in rows])
    size = len(rows)
    for _ in range(3):  # nilpotent: A^8 = 0 for size <= 8
        matrix = matrix * matrix
    if max(matrix) == 0:
        return mpmath.mpf(0)
    log, power = mpmath.mpf(0), mpmath.mpf(8)
    for _ in range(150):
        top = max(matrix)
        matrix = matrix / top
        log += mpmath.log(top) / power
        matrix = matrix * matrix
        power *= 2
    assert size <= 8
    return mpmath.exp(log + mpmath.log(max(matrix)) / power)


def test_root_of_a_zero_class_is_exactly_zero():
    assert b.outward(spectral_radius(decimals([["0"]]))) == (0.0, 0.0)
    assert b.outward(spectral_radius(decimals([["0", "2"], ["0", "0"]]))) == (0.0, 0.0)


def test_negative_entry_is_refused():
    with pytest.raises(ValueError, match=r"entry \(0, 1\) is negative"):
        perron_root(decimals([["1", "-2"], ["1", "1"]]))


def test_more_bits_narrow_the_root():
    rows = [["0.8", "1.5"], ["0.6", "0.5"]]
    widths = []
    for bits in (64, 128, 256):
        with b.precision(bits):
            widths.append(perron_root(decimals(rows)).rel_accuracy_bits())
    assert widths[0] < widths[1] - 50 < widths[2] - 150


# By hand: a loop of 1 and a cycle around it whose product is 1e-180: root 1 + 1e-180 to first order.
def test_loop_with_a_cycle_far_below_it():
    size = 6
    rows = [["0"] * size for _ in range(size)]
    for j in range(size):
        rows[(j + 1) % size][j] = ["1e-30", "1e20", "1e-90", "1e-20", "1e-60", "1"][j]
    rows[2][2] = "1"
    with b.precision(128):
        assert perron_root(decimals(rows)).rel_accuracy_bits() > 120
    with b.precision(900):
        excess = perron_root(decimals(rows)) - 1
        assert excess > b.ball("9.99e-181")
        assert excess < b.ball("1.01e-180")


@pytest.mark.parametrize("size", [30, 150])
def test_large_matrix_of_mixed_sizes_is_narrow(size):
    rng = np.random.default_rng(7)
    matrix = rng.random((size, size)) * 10.0 ** rng.uniform(-9, 9, (size, size))
    with b.precision(128):
        assert perron_root(b.balls(matrix)).rel_accuracy_bits() > 110
    assert perron_root(matrix).rel_accuracy_bits() > 40


# By hand: [[1, -2], [-.3, 1]] has determinant .4; with -.6 it is -.2, with -.5 it is 0.
@pytest.mark.parametrize(
    ("rows", "verdict"),
    [
        ([["1", "-2"], ["-0.3", "1"]], "yes"),
        ([["1", "-2"], ["-0.6", "1"]], "no"),
        ([["1", "-2"], ["-0.5", "1"]], "singular"),
        ([["1", "-3"], [f"-{Fraction(1, 3)}", "1"]], "singular"),
        ([["1", "0.1"], ["0", "1"]], "positive off-diagonal"),
        ([["0"]], "singular"),
        ([["-1"]], "no"),
        ([["1", "0"], ["-5", "0"]], "singular"),
        ([["0", "0"], ["-5", "-1"]], "no"),
        ([["1e-9", "0", "0"], ["-1e9", "1e9", "0"], ["0", "-1e-9", "1e-9"]], "yes"),
    ],
)
@pytest.mark.parametrize("kind", ["balls", "doubles"])
def test_m_matrix(rows, verdict, kind):
    exact = [[Fraction(v) for v in row] for row in rows]
    with b.precision(128):
        matrix = b.balls(exact)
        found = m_matrix(matrix if kind == "balls" else b.to_floats(matrix))
    assert found.verdict == verdict
    if verdict == "positive off-diagonal":
        assert found.entry == (0, 1)


def test_m_matrix_names_the_class_that_fails():
    found = m_matrix(b.balls([[1, 0, 0], [-1, 1, -2], [0, -1, 1]]))
    assert found.verdict == "no"
    assert found.members is not None
    assert found.members.tolist() == [1, 2]


@pytest.mark.parametrize(("above", "verdict"), [(True, "yes"), (False, "no")])
def test_m_matrix_close_to_singular_is_decided_with_more_bits(above, verdict):
    # By hand: the determinant is +-2^-200, which 64 bits cannot show. The entries are exact.
    with b.precision(512):
        entry = -1 + (1 if above else -1) * b.arb(2) ** -200
    with b.precision(64):
        assert m_matrix(b.balls([[1, -1], [entry, 1]])).verdict == verdict


# By hand: the inverse of [[1, -2], [-.3, 1]] is [[2.5, 5], [.75, 2.5]].
def test_inverse_by_hand():
    with b.precision(128):
        found = b.to_floats(inverse(decimals([["1", "-2"], ["-0.3", "1"]])))
    assert found.tolist() == [[2.5, 5.0], [0.75, 2.5]]


def test_inverse_keeps_zeros_of_the_structure():
    rows = [["2", "0", "0", "0"], ["-1", "3", "-1", "0"], ["0", "-1", "2", "0"], ["0", "0", "0", "5"]]
    with b.precision(128):
        found = inverse(decimals(rows))
        product = matmul(found, decimals(rows))
    assert pattern(found).tolist() == [
        [True, False, False, False],
        [True, True, True, False],
        [True, True, True, False],
        [False, False, False, True],
    ]
    assert all(found[i, j].is_zero() for i in range(4) for j in range(4) if not pattern(found)[i, j])
    assert np.allclose(b.to_floats(product), np.eye(4), atol=1e-30)


def test_inverse_of_a_singular_matrix_is_refused():
    with pytest.raises(ZeroDivisionError):
        inverse(decimals([["1", "-1"], ["-1", "1"]]))
    with pytest.raises(ZeroDivisionError):
        inverse(decimals([["0"]]))


def test_inverse_of_a_long_chain_keeps_every_digit():
    # By hand: residence times of a chain with rates 1e-9, 1e9, ... are 1/rate, small and large alike.
    size = 40
    rates = [Fraction(10) ** (9 if i % 2 else -9) for i in range(size)]
    rows = [[rates[j] if i == j else -rates[j] if i == j + 1 else 0 for j in range(size)] for i in range(size)]
    with b.precision(128):
        found = inverse(b.balls(rows))
        for i in range(size):
            for j in range(i + 1):
                assert b.is_sharp(found[i, j])
                assert b.nearest(found[i, j]) == float(1 / rates[i])


@settings(max_examples=40, deadline=None)
@given(nonnegative(most=5), st.integers(1, 4))
def test_order_and_units_of_types_change_nothing(rows, seed):
    rng = np.random.default_rng(seed)
    size = len(rows)
    order = rng.permutation(size)
    weights = 10.0 ** rng.integers(-6, 7, size)
    with b.precision(128):
        matrix = decimals(rows)
        changed = (matrix * b.balls(weights)[None, :] / b.balls(weights)[:, None])[np.ix_(order, order)]
        assert spectral_radius(matrix).overlaps(spectral_radius(changed))
