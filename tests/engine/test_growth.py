"""Growth rates, whole and class by class."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ngm.engine import balls as b
from ngm.engine.enclosure import inverse, m_matrix
from ngm.engine.growth import class_growth_rate, doubling_time, growth_rate
from ngm.engine.linear import matmul
from ngm.engine.spectrum import spectrum
from tests.engine.matrices import decimals, floats

KINDS = [decimals, floats]


def _diagonal(*entries):
    return [[entries[i] if i == j else "0" for j in range(len(entries))] for i in range(len(entries))]


# Published: van den Driessche & Watmough (2002), sections 4.4 and 4.5 (from memory), values ours, recomputed.
TWO_STRAINS = (_diagonal("0.9", "0.7"), _diagonal("0.32", "0.22"))
VECTOR_HOST = ([["0", "0.6"], ["0.5", "0"]], _diagonal("0.32", "0.25"))
STRAINS_AND_VECTORS = (
    [["0", "0", "0.6", "0"], ["0", "0", "0", "0.8"], ["0.5", "0", "0", "0"], ["0", "0.45", "0", "0"]],
    _diagonal("0.32", "0.42", "0.25", "0.25"),
)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("model", "rate", "classes"),
    [
        (TWO_STRAINS, 0.58, {(0,): 0.58, (1,): 0.48}),
        (VECTOR_HOST, 0.2638396852, {(0, 1): 0.2638396852}),
        (STRAINS_AND_VECTORS, 0.2709909240, {(0, 2): 0.2638396852, (1, 3): 0.2709909240}),
    ],
)
def test_published_models(kind, model, rate, classes):
    F, V = (kind(rows) for rows in model)
    with b.precision(128):
        assert b.nearest(growth_rate(F, V)) == pytest.approx(rate, rel=1e-9)
        for members, expected in classes.items():
            assert b.nearest(class_growth_rate(F, V, members)) == pytest.approx(expected, rel=1e-9)


# SEIR with demography: by hand (r + .2005)(r + .1255) = .2 beta, so -.0005 at .125, 0 at .12581375; others recomputed.
@pytest.mark.parametrize(
    ("beta", "rate"), [("0.5", 0.1554434801), ("0.1", -0.01669125112), ("0.125", -0.0005), ("0.12581375", 0.0)]
)
def test_threshold(beta, rate):
    with b.precision(128):
        F, V = decimals([["0", beta], ["0", "0"]]), decimals([["0.2005", "0"], ["-0.2", "0.1255"]])
        found = growth_rate(F, V)
        if rate == 0:
            assert found.contains(0)
            assert abs(found) < 1e-30
        else:
            assert b.nearest(found) == pytest.approx(rate, rel=1e-9)


def test_doubling_time():
    assert b.nearest(doubling_time(0.1554434801)) == pytest.approx(4.459158919, rel=1e-9)
    assert doubling_time(0.0) is None
    assert doubling_time(b.arb(-1)) is None
    assert doubling_time(b.arb(0, 1e-20)) is None


# By hand: eigenvalues (-2 +- sqrt(20)) / 2 and -1 +- sqrt(2) i.
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("F", "V", "rate"),
    [
        ([["-3", "1"], ["1", "1"]], _diagonal("0", "0"), -1 + math.sqrt(5)),
        ([["0", "0"], ["1", "0"]], [["1", "2"], ["0", "1"]], -1.0),
        ([["0", "-2"], ["3", "0"]], _diagonal("1", "0.5"), -0.75),
    ],
)
def test_mixed_signs(kind, F, V, rate):
    with b.precision(128):
        assert b.nearest(growth_rate(kind(F), kind(V))) == pytest.approx(rate, rel=1e-9)


def test_rates_far_apart_keep_their_digits():
    # By hand: a slow loop behind a fast stage; r solves (r + 1e9)(r + 1e-9) = 1e9 * 2e-9, so r is near 1e-9.
    with b.precision(192):
        F, V = decimals([["0", "2e-9"], ["0", "0"]]), decimals([["1e9", "0"], ["-1e9", "1e-9"]])
        found = growth_rate(F, V)
        total, product = b.ball("1e9") + b.ball("1e-9"), b.ball(1) - 2
        exact = (-total + (total * total - 4 * product).sqrt()) / 2
        assert found.overlaps(exact)
        assert b.is_sharp(found)
    assert b.nearest(found) == pytest.approx(1e-9, rel=1e-9)


def test_class_without_infection_of_its_own_types():
    F, V = decimals([["0", "0"], ["1", "0"]]), decimals(_diagonal("1", "1"))
    assert class_growth_rate(F, V, [0]) is None
    assert class_growth_rate(F, V, [1]) is None


def test_states_off_the_paths_do_not_count():
    # By hand: type 0 infects itself at 2 and leaves at 5; the slow state 2 behind it infects nobody of its class.
    F = decimals([["2", "0", "0"], ["0", "0", "0.1"], ["0", "0", "0"]])
    V = decimals([["5", "0", "0"], ["0", "1", "0"], ["-1", "0", "0.01"]])
    assert b.nearest(class_growth_rate(F, V, [0])) == -3.0
    assert b.nearest(growth_rate(F, V)) == -0.01


def test_sizes_that_differ_are_refused():
    with pytest.raises(ValueError, match="shape"):
        growth_rate(np.eye(2), np.eye(3))


@st.composite
def transmission_and_transition(draw):
    size = draw(st.integers(1, 5))
    rate = st.integers(0, 300).map(lambda k: k / 100)
    F = np.array([[draw(rate) if draw(st.integers(0, 2)) == 0 else 0.0 for _ in range(size)] for _ in range(size)])
    moves = np.array([[draw(rate) if draw(st.integers(0, 2)) == 0 else 0.0 for _ in range(size)] for _ in range(size)])
    np.fill_diagonal(moves, 0.0)
    exits = np.array([draw(st.integers(1, 200)) / 100 for _ in range(size)])
    return F, np.diag(moves.sum(axis=0) + exits) - moves


# Published: sign(R0 - 1) = sign(r); and dense eigenvalues as a second route.
@settings(max_examples=80, deadline=None)
@given(transmission_and_transition())
def test_sign_of_growth_is_that_of_R0_less_one(model):
    F, V = model
    with b.precision(128):
        exact_F, exact_V = b.balls(F), b.balls(V)
        assert m_matrix(exact_V).verdict == "yes"
        K = matmul(exact_F, inverse(exact_V))
        R0, r = spectrum(K, vectors=False).root, growth_rate(exact_F, exact_V)
    assert b.sign(R0 - 1) == b.sign(r) or (R0.contains(1) and r.contains(0))
    assert b.nearest(growth_rate(F, V)) == pytest.approx(b.nearest(r), rel=1e-9, abs=1e-12)
    assert b.nearest(r) == pytest.approx(np.linalg.eigvals(F - V).real.max(), rel=1e-5, abs=1e-5)


# Second route: the definition. At a class's rate the root of its block of F (V + r I)^-1 is 1.
@settings(max_examples=60, deadline=None)
@given(transmission_and_transition())
def test_class_rate_by_its_definition(model):
    F, V = (b.balls(m) for m in model)
    with b.precision(200):
        K = matmul(F, inverse(V))
        rows = np.nonzero(model[0].any(axis=1))[0]
        assume(len(rows) > 0)
        found = spectrum(K[np.ix_(rows, rows)], vectors=False)
        largest = []
        for members, steps, root in zip(found.classes, found.periods, found.roots, strict=True):
            types = rows[members]
            rate = class_growth_rate(F, V, types)
            assert (rate is None) == (steps is None)
            if rate is None:
                continue
            largest.append(b.nearest(rate))
            assert b.sign(rate) == b.sign(root - 1) or (rate.contains(0) and root.contains(1))
            if rate > 0:  # the inverse of the whole V + r I exists
                shifted = V.copy()
                for i in range(len(V)):
                    shifted[i, i] = shifted[i, i] + rate
                block = matmul(F, inverse(shifted))[np.ix_(types, types)]
                assert abs(spectrum(block, vectors=False).root - 1) < 1e-20
        if largest and max(largest) > 0:
            assert max(largest) == pytest.approx(b.nearest(growth_rate(F, V)), rel=1e-12)
