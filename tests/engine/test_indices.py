"""Sobol indices on functions whose indices are known, to the tolerance that theory gives at each number of rows."""

from __future__ import annotations

import math

import numpy as np
import pytest

from ngm.engine.indices import sobol_indices
from ngm.engine.partial import prcc
from ngm.engine.sampling import latin_hypercube, quantile, saltelli_values


def ishigami(u):
    x = math.pi * (2 * u - 1)
    return np.sin(x[:, 0]) + 7 * np.sin(x[:, 1]) ** 2 + 0.1 * x[:, 2] ** 4 * np.sin(x[:, 0])


G = np.array([0, 1, 4.5, 9, 99, 99, 99, 99])


def g_function(u):
    return np.prod((np.abs(4 * u - 2) + G) / (1 + G), axis=1)


def product(u):
    beta = quantile("uniform", {"low": 0.2, "high": 0.6}, u[:, 0])
    return beta * quantile("uniform", {"low": 4, "high": 6}, u[:, 1])


def bowl(u):
    return (u[:, 0] - 0.5) ** 2 + 0.01 * u[:, 1]


# Published: the closed forms of Ishigami & Homma and of Sobol (formulas); the numbers recomputed elsewhere to ten digits.
# The product: c_i^2 / (prod (1 + c^2) - 1). The bowl by hand: variances 1/180 and 1e-4/12, no interaction.
KNOWN = {
    "ishigami": (
        ishigami,
        13.84458794,
        [0.3139051911, 0.4424111448, 0],
        [0.5575888552, 0.4424111448, 0.2436836641],
    ),
    "g": (
        g_function,
        0.4654244319,
        [0.7161921689, 0.1790480422, 0.02367577418, 0.007161921689, *[7.161921689e-5] * 4],
        [0.7871441267, 0.2421981928, 0.03431691015, 0.01046038707, *[1.049490519e-4] * 4],
    ),
    "product": (product, 4 * (13 / 12 * 76 / 75 - 1), [0.8522727273, 0.1363636364], [0.8636363636, 0.1477272727]),
    "bowl": (bowl, 1 / 180 + 1e-4 / 12, [0.9985022466, 0.0014977534], [0.9985022466, 0.0014977534]),
}


def deviations(function, first, total):
    """Return the sd a row of both estimators for independent rows: what theory divides by sqrt(N).

    An index is a quotient of means; its error is the mean of (term - index * squared deviation)/Var (delta method). The
    rows here are independent ones, from another generator.
    """
    d = len(first)
    rng = np.random.default_rng(99)
    A, B = rng.random((40_000, d)), rng.random((40_000, d))
    fA, fB = function(A), function(B)
    fAB = []
    for i in range(d):
        AB = A.copy()
        AB[:, i] = B[:, i]
        fAB.append(function(AB))
    middle = (fA.mean() + fB.mean()) / 2
    fA, fB, fAB = fA - middle, fB - middle, np.array(fAB) - middle
    square = (fA**2 + fB**2) / 2
    variance = square.mean()
    of_first = [(fB * (f - fA) - s * square).std() / variance for f, s in zip(fAB, first, strict=True)]
    of_total = [((fA - f) ** 2 / 2 - t * square).std() / variance for f, t in zip(fAB, total, strict=True)]
    return np.array(of_first), np.array(of_total)


@pytest.mark.parametrize("name", KNOWN)
def test_known_indices(name):
    function, variance, first, total = KNOWN[name]
    sd_first, sd_total = deviations(function, first, total)
    for n in (2**12, 2**13, 2**14):
        found = sobol_indices(*saltelli_values(function, n, len(first), seed=5))
        # Two standard errors of independent rows; a Sobol sequence does better.
        assert np.all(np.abs(np.subtract(found.first, first)) <= 2 * sd_first / math.sqrt(n))
        assert np.all(np.abs(np.subtract(found.total, total)) <= 2 * sd_total / math.sqrt(n))
        assert found.variance == pytest.approx(variance, rel=0.02)
        # The errors that are told are these standard errors.
        assert np.array(found.first_error) == pytest.approx(sd_first / math.sqrt(n), rel=0.35)
        assert np.array(found.total_error) == pytest.approx(sd_total / math.sqrt(n), rel=0.35)


# Theory: independent rows make errors that fall by 4 from 2^10 to 2^14; a Sobol sequence falls below a third of that.
@pytest.mark.parametrize("name", KNOWN)
def test_error_shrinks(name):
    function, _, first, total = KNOWN[name]
    sd = np.array(deviations(function, first, total)).max(axis=1)
    for n, share in ((2**10, 0.7), (2**14, 1 / 3)):
        errors = []
        for seed in range(8):
            found = sobol_indices(*saltelli_values(function, n, len(first), seed))
            errors.append([np.subtract(found.first, first), np.subtract(found.total, total)])
        largest = np.sqrt(np.mean(np.square(errors), axis=0)).max(axis=1)
        assert np.all(largest < share * sd / math.sqrt(n))


# The published warning: a partial rank correlation near 0 for what makes 99.85 % of the variance.
def test_beside_partial_rank_correlation():
    u = latin_hypercube(4096, 2, seed=1)
    assert abs(prcc(u, bowl(u)).coefficients[0].value) < 0.03
    assert sobol_indices(*saltelli_values(bowl, 4096, 2, seed=1)).first[0] == pytest.approx(0.9985022466, abs=0.01)


def independent(function, n, d, seed):
    rng = np.random.default_rng(seed)
    A, B = rng.random((n, d)), rng.random((n, d))
    fAB = np.array([function(np.where(np.arange(d) == i, B, A)) for i in range(d)])
    return function(A), function(B), fAB


# Theory: 95 % of the intervals hold the index, for independent rows (100 seeds: sd 2.2 %; the bootstrap is a little narrow).
@pytest.mark.parametrize("n", [400, 10_000])
def test_intervals_hold(n):
    _, _, first, total = KNOWN["product"]
    held = np.zeros(4)
    for seed in range(100):
        found = sobol_indices(*independent(product, n, 2, seed), seed=seed)
        ends = np.array([*found.first_interval, *found.total_interval])
        held += (ends[:, 0] <= [*first, *total]) & ([*first, *total] <= ends[:, 1])
    assert np.all((held >= 87) & (held <= 100))


def test_the_level_and_the_seed_count():
    values = saltelli_values(product, 512, 2, seed=1)
    found, again, other = sobol_indices(*values), sobol_indices(*values), sobol_indices(*values, seed=1)
    assert found == again
    assert (found.first, found.total) == (other.first, other.total)
    assert found.first_interval != other.first_interval


# Second route: of many rows the estimates are normal, so both ends lie as many errors away as a normal quantile says.
@pytest.mark.parametrize(("level", "errors"), [(0.95, 1.959964), (0.5, 0.6744898)])
def test_intervals_are_as_wide_as_errors_say(level, errors):
    found = sobol_indices(*saltelli_values(product, 2**14, 2, seed=1), level=level)
    for value, (low, high), error in (
        *zip(found.first, found.first_interval, found.first_error, strict=True),
        *zip(found.total, found.total_interval, found.total_error, strict=True),
    ):
        assert (high - value) / error == pytest.approx(errors, abs=0.2)
        assert (value - low) / error == pytest.approx(errors, abs=0.2)


# By hand: scale and shift change no index, at any size of number.
@pytest.mark.parametrize(("scale", "shift"), [(1e-3, 0), (7, -500), (1e200, 0), (1e-200, 0), (-2, 3)])
def test_scale_and_shift(scale, shift):
    values = saltelli_values(product, 256, 2, seed=1)
    found, moved = sobol_indices(*values), sobol_indices(*(scale * value + shift for value in values))
    assert moved.first == pytest.approx(found.first, rel=1e-9)
    assert moved.total == pytest.approx(found.total, rel=1e-9)


# By hand, n = 2: f(A) = (0, 2), f(B) = (2, 0), mean 1, Var 1. f(A_B) = f(B): mean((1)(2), (-1)(-2)) = 2, mean(4, 4)/2 = 2.
def test_by_hand():
    found = sobol_indices([0, 2], [2, 0], [[2, 0], [0, 2]])
    assert (found.first, found.total, found.variance) == ((2, 0), (2, 0), 1)


@pytest.mark.parametrize("value", [0.0, 0.1, 1e300])
def test_no_variance(value):
    constant = np.full(64, value)
    found = sobol_indices(constant, constant, [constant] * 3)
    assert found.first == found.total == found.first_interval == found.total_error == (None,) * 3
    assert found.why.startswith("the result is the same in every draw")


def test_rows_without_a_value_are_counted():
    fA, fB, fAB = saltelli_values(product, 64, 2, seed=1)
    whole = sobol_indices(fA[2:], fB[2:], fAB[:, 2:])
    fA[0], fAB[1, 1] = np.nan, np.inf
    found = sobol_indices(fA, fB, fAB)
    assert (found.rows, found.rejected) == (64, 2)
    assert found.first == pytest.approx(whole.first, rel=1e-12)
    none = sobol_indices(np.full(64, np.nan), fB, fAB)
    assert (none.rejected, none.first, none.why) == (
        64,
        (None, None),
        "fewer than two rows of the design have all their values.",
    )


@pytest.mark.parametrize("n", [2, 3, 4097, 9000])
def test_any_number_of_rows(n):
    found = sobol_indices(*saltelli_values(product, n, 2, seed=1))
    assert np.all(np.isfinite(found.first_interval))
    assert np.all(np.isfinite(found.total_error))


def test_refused():
    fA, fB, fAB = saltelli_values(product, 8, 2, seed=1)
    with pytest.raises(ValueError, match=r"shapes \(8,\), \(7,\) and \(2, 8\) do not fit"):
        sobol_indices(fA, fB[:7], fAB)
    with pytest.raises(ValueError, match="do not fit"):
        sobol_indices(fA, fB, fAB.T)
    with pytest.raises(ValueError, match="seed -1"):
        sobol_indices(fA, fB, fAB, seed=-1)
    with pytest.raises(ValueError, match=r"level 1 lies outside \(0, 1\)"):
        sobol_indices(fA, fB, fAB, level=1)
