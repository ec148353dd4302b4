"""Designs: evenly spread, the same however they are split, and correlated where that is asked for."""

from __future__ import annotations

import warnings
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from scipy import stats

from ngm.engine.ranks import mean_ranks, rank_correlation
from ngm.engine.sampling import (
    SamplingError,
    correlated,
    design,
    index_ranges,
    latin_hypercube,
    mixed,
    saltelli,
    saltelli_values,
    sobol_sequence,
)


# By definition: one point in each of n equal intervals, in every column.
@pytest.mark.parametrize("n", [1, 2, 7, 1000])
def test_latin_hypercube(n):
    u = latin_hypercube(n, 3, seed=0)
    assert u.shape == (n, 3)
    assert np.all(np.sort(np.floor(u * n), axis=0) == np.arange(n)[:, None])
    assert np.all((u > 0) & (u < 1))


def test_latin_hypercube_columns_are_apart():
    u = latin_hypercube(4000, 4, seed=2)
    assert np.abs(rank_correlation(u) - np.eye(4)).max() < 5 / np.sqrt(4000)
    assert np.array_equal(latin_hypercube(4000, 2, seed=2), u[:, :2])


# By definition of a (0, m, 2)-net in base 2: the first two coordinates have one point in each box of 2^-a by 2^-(m - a).
def test_sobol_is_even():
    u = sobol_sequence(0, 256, 5, seed=3)
    # The middles of cells of width 2^-32: neither 0 nor 1 can occur.
    assert np.all(u * 2**33 % 2 == 1)
    assert np.all((u > 0) & (u < 1))
    for a in range(9):
        boxes = np.floor(u[:, 0] * 2**a) * 2 ** (8 - a) + np.floor(u[:, 1] * 2 ** (8 - a))
        assert len(np.unique(boxes)) == 256
    for k in range(5):
        assert np.all(np.sort(np.floor(u[:, k] * 256)) == np.arange(256))


@pytest.mark.parametrize("make", [lambda s: latin_hypercube(100, 3, s), lambda s: sobol_sequence(0, 100, 3, s)])
def test_the_seed_decides(make):
    assert make(5).tobytes() == make(5).tobytes()
    assert make(0).tobytes() == make(0).tobytes()
    assert not np.any(make(5) == make(6))
    assert not np.any(make(0) == make(6))


def test_sobol_is_the_same_in_pieces():
    whole = sobol_sequence(0, 1000, 6, seed=9)
    for most in (1, 7, 256, 999):
        ranges = list(index_ranges(1000, most)) if most > 1 else [(k, k + 1) for k in (0, 1, 2, 513, 999)]
        with ThreadPoolExecutor(4) as pool:
            parts = list(pool.map(lambda r: sobol_sequence(*r, 6, seed=9), ranges))
        for (start, stop), part in zip(ranges, parts, strict=True):
            assert part.tobytes() == whole[start:stop].tobytes()
    assert sobol_sequence(4, 4, 2, seed=1).shape == (0, 2)


def test_no_warning_for_any_size():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        for n in (1, 2, 3, 100):
            assert sobol_sequence(0, n, 2, seed=1).shape == (n, 2)


# By hand: a product of three shares has mean 1/8 and variance 1/27 - 1/64, which gives the standard error of independent
# draws. A scrambled sequence is unbiased and far closer: below a tenth of that over seeds, at 1024 points.
def test_sobol_integrates():
    errors = [sobol_sequence(0, 1024, 3, seed).prod(axis=1).mean() - 1 / 8 for seed in range(20)]
    independent = np.sqrt((1 / 27 - 1 / 64) / 1024)
    assert np.sqrt(np.mean(np.square(errors))) < independent / 10


def test_design_by_name():
    assert np.array_equal(design("latin_hypercube", 20, 2, 1), latin_hypercube(20, 2, 1))
    assert np.array_equal(design("sobol", 20, 2, 1), sobol_sequence(0, 20, 2, 1))
    R = [[1, 0.5], [0.5, 1]]
    assert np.array_equal(design("sobol", 20, 2, 1, correlation=R), correlated(sobol_sequence(0, 20, 2, 1), R))
    assert design("sobol", 5, 0, 1).shape == (5, 0)


# -- rank correlation ---------------------------------------------------------------------------------------------------

WANTED = np.array([[1, 0.8, -0.3], [0.8, 1, 0], [-0.3, 0, 1]])


@pytest.mark.parametrize("kind", ["latin_hypercube", "sobol"])
def test_correlated(kind):
    u = design(kind, 2000, 3, seed=4)
    out = correlated(u, WANTED)
    assert np.array_equal(np.sort(out, axis=0), np.sort(u, axis=0))
    # Second route: Spearman's coefficients by scipy. The normal scores are matched exactly, ranks only up to sampling.
    assert stats.spearmanr(out).statistic == pytest.approx(WANTED, abs=0.015)


# By hand: for the scores themselves the method is exact before ranks are taken; increasing transforms keep ranks.
def test_correlation_is_of_ranks():
    u = latin_hypercube(500, 3, seed=8)
    out = correlated(u, WANTED)
    assert np.array_equal(correlated(np.exp(9 * u), WANTED), np.exp(9 * out))


# By hand: 2 sin(pi r/6) of (0.9, 0.9, 0.63) is (0.908, 0.908, 0.648), which needs 2 * 0.908^2 - 1 = 0.649 at least: no longer
# positive definite, while the wanted ones are (2 * 0.81 - 1 = 0.62). Then the ranks fall short by 0.018 at most.
def test_correlation_at_the_edge():
    edge = np.array([[1, 0.9, 0.9], [0.9, 1, 0.63], [0.9, 0.63, 1]])
    out = correlated(latin_hypercube(5000, 3, seed=1), edge)
    assert rank_correlation(out) == pytest.approx(edge, abs=0.03)


def test_no_correlation_changes_nothing():
    u = latin_hypercube(50, 2, seed=1)
    assert np.array_equal(correlated(u, np.eye(2)), u)


@pytest.mark.parametrize(
    ("correlation", "words"),
    [
        ([[1, 0.5]], "the correlations of 2 parameters are a 2 x 2 matrix, not one of shape (1, 2)."),
        ([[1, np.nan], [np.nan, 1]], "a correlation is not finite."),
        ([[2, 0.5], [0.5, 1]], "the correlation of parameter 1 with itself is 2, not 1."),
        ([[1, 0.5], [0.4, 1]], "not symmetric: 0.4 in row 2, column 1, and 0.5 in row 1, column 2."),
        ([[1, 1], [1, 1]], "the correlation 1 of parameters 1 and 2 lies outside -1 to 1, or at an end of it."),
        ([[1, -1.5], [-1.5, 1]], "the correlation -1.5 of parameters 1 and 2 lies outside"),
    ],
)
def test_correlation_refused(correlation, words):
    with pytest.raises(SamplingError) as caught:
        correlated(latin_hypercube(10, 2, seed=1), correlation)
    assert words in str(caught.value)


# By hand: x close to y, y close to z, z opposed to x: least eigenvalue 1 - 2 * 0.9.
def test_impossible_correlations():
    R = [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]]
    with pytest.raises(SamplingError, match=r"not positive definite: its least eigenvalue is -0\.8\. No parameters"):
        correlated(latin_hypercube(10, 3, seed=1), R)


def test_too_few_draws_for_correlations():
    R = [[1, 0.5], [0.5, 1]]
    with pytest.raises(SamplingError, match="2 draws of 2 correlated parameters: more draws than parameters"):
        correlated(latin_hypercube(2, 2, seed=1), R)
    with pytest.raises(SamplingError, match="10 draws are too few for these correlations"):
        correlated(np.tile(np.arange(10.0)[:, None], 2), R)
    with pytest.raises(SamplingError, match="column 2 is the same in every draw"):
        correlated(np.column_stack([np.arange(10.0), np.ones(10)]), R)


# -- blocks -----------------------------------------------------------------------------------------------------------


def test_blocks():
    A, B = saltelli(0, 16, 3, seed=2)
    assert np.array_equal(np.hstack([A, B]), sobol_sequence(0, 16, 6, seed=2))
    AB = mixed(A, B, 1)
    assert np.array_equal(AB[:, [0, 2]], A[:, [0, 2]])
    assert np.array_equal(AB[:, 1], B[:, 1])
    assert not np.any(A == B)


def test_blocks_in_chunks():
    calls = []

    def function(u):
        calls.append(len(u))
        return u[:, 0] * np.exp(u[:, 1])

    whole = saltelli_values(function, 100, 2, seed=3)
    assert calls == [100] * 4
    for most in (1, 7, 64):
        for a, b in zip(whole, saltelli_values(function, 100, 2, seed=3, most=most), strict=True):
            assert a.tobytes() == b.tobytes()


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: latin_hypercube(0, 2, 1), "0 draws: expected a whole number, 1 or more."),
        (lambda: latin_hypercube(2.5, 2, 1), "2.5 draws"),
        (lambda: latin_hypercube(2, -1, 1), "-1 parameters: expected a whole number, 0 or more."),
        (lambda: latin_hypercube(2, 2, -1), "seed -1: expected a whole number, 0 or more."),
        (lambda: latin_hypercube(2, 2, True), "seed True"),
        (lambda: latin_hypercube(2, 2, None), "seed None"),
        (lambda: sobol_sequence(3, 2, 2, 1), "rows 3 to 2 are no part of a Sobol sequence"),
        (lambda: sobol_sequence(0, 2, 21202, 1), "21202 columns: a Sobol sequence has at most 21201."),
        (lambda: saltelli(0, 2, 0.5, 1), "0.5 parameters"),
        (lambda: design("grid", 2, 2, 1), "'grid' is not a design that is known here: latin_hypercube, sobol."),
        (lambda: list(index_ranges(5, 0)), "chunks of 0 rows: at least 1."),
        (lambda: correlated([1, 2], [[1]]), "expected a table of draws by parameters"),
    ],
)
def test_refused_in_words(call, words):
    with pytest.raises(SamplingError) as caught:
        call()
    assert words in str(caught.value)


# -- ranks --------------------------------------------------------------------------------------------------------------


# Second route: scipy's ranks and Spearman coefficients.
def test_ranks_second_route():
    rng = np.random.default_rng(1)
    X = np.column_stack([rng.integers(0, 6, 80), rng.normal(size=80), rng.integers(0, 2, 80)]).astype(float)
    for column in X.T:
        assert np.array_equal(mean_ranks(column), stats.rankdata(column))
    assert rank_correlation(X) == pytest.approx(stats.spearmanr(X).statistic, abs=1e-14)
    assert mean_ranks([]).tolist() == []


def test_ranks_of_what_is_none():
    with pytest.raises(ValueError, match="a nan has no rank"):
        mean_ranks([1, np.nan])
    with pytest.raises(ValueError, match="one row"):
        mean_ranks([[1]])
    with pytest.raises(ValueError, match="expected a table"):
        rank_correlation([1.0, 2.0])
    assert np.isnan(rank_correlation([[1, 2], [1, 3]])).tolist() == [[True, True], [True, False]]
