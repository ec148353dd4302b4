"""Partial rank correlation, and the check whether it may be read."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from ngm.engine.partial import prcc
from ngm.engine.ranks import rank_correlation
from ngm.engine.sampling import correlated, latin_hypercube

X1, X2 = [1, 2, 3, 4, 5, 6, 7, 8], [3, 8, 1, 6, 2, 7, 5, 4]
Y = [2, 5, 4, 9, 8, 20, 25, 40]


def values(X, y):
    return [c.value for c in prcc(X, y).coefficients]


# Published: the definition of Marino et al (2008); the numbers recomputed elsewhere to ten digits.
def test_worked_example():
    X = np.transpose([X1, X2])
    assert values(X, Y) == pytest.approx([0.9874208829, 0.8723391598], rel=1e-9)
    # Alone, x2 hardly shows: Spearman's coefficient is 1/3.
    assert rank_correlation(np.transpose([X2, Y]))[0, 1] == pytest.approx(0.3333333333, rel=1e-9)
    assert values(np.transpose([X2]), Y) == pytest.approx([0.3333333333], rel=1e-9)


# Second route: the definition with the inverse, and correlations of residuals of least squares, ties included.
@pytest.mark.parametrize("seed", range(5))
def test_two_other_routes(seed):
    rng = np.random.default_rng(seed)
    X = np.column_stack([rng.normal(size=60), rng.integers(0, 5, 60), rng.integers(0, 2, 60), rng.exponential(size=60)])
    X[:, 3] += X[:, 0]
    y = np.round(X @ [1, 0.5, -1, 0.2] + rng.normal(size=60))
    ranks = np.column_stack([stats.rankdata(column) for column in [*X.T, y]])
    C = np.linalg.inv(np.corrcoef(ranks, rowvar=False))
    inverse = [-C[i, -1] / np.sqrt(C[i, i] * C[-1, -1]) for i in range(4)]
    residuals = []
    for i in range(4):
        others = np.column_stack([np.ones(60), np.delete(ranks[:, :4], i, axis=1)])
        left = [r - others @ np.linalg.lstsq(others, r)[0] for r in (ranks[:, i], ranks[:, -1])]
        residuals.append(np.corrcoef(*left)[0, 1])
    found = values(X, y)
    assert found == pytest.approx(inverse, abs=1e-12)
    assert found == pytest.approx(residuals, abs=1e-12)


# By hand: ranks do not change under increasing transforms, and turn their sign under a falling one.
def test_transforms():
    X = latin_hypercube(200, 2, seed=1)
    y = X[:, 0] + 0.3 * X[:, 1]
    found = values(X, y)
    assert values(np.exp(5 * X), np.log(y)) == pytest.approx(found, abs=1e-12)
    assert values(X * [1, -1], y) == pytest.approx([found[0], -found[1]], abs=1e-12)


def test_columns_without_a_coefficient():
    X = np.transpose([X1, X2, [4] * 8])
    found = prcc(X, Y).coefficients
    assert [c.value for c in found[:2]] == pytest.approx([0.9874208829, 0.8723391598], rel=1e-9)
    assert (found[2].value, found[2].monotone) == (None, None)
    assert found[2].why == "the parameter is the same in every draw."


# By hand: a column twice (its ranks, falling) spoils its own two coefficients; the third one is as with one copy.
def test_columns_that_follow_from_each_other():
    X = np.transpose([X1, X2, [-x for x in X1]])
    found = prcc(X, Y).coefficients
    assert [c.value for c in found] == [None, pytest.approx(0.8723391598, rel=1e-9), None]
    assert found[0].why == "the other parameters determine the ranks of this one in these draws."


# By hand: y rises with x1 alone, so that nothing is left for x2.
def test_result_that_follows_from_one():
    found = prcc(np.transpose([X1, X2]), np.square(X1)).coefficients
    assert found[0].value == pytest.approx(1, abs=1e-12)
    assert found[1].value is None
    assert "leave nothing to explain" in found[1].why


@pytest.mark.parametrize(
    ("X", "y", "why"),
    [
        (np.transpose([X1, X2]), [3.0] * 8, "the result is the same in every draw."),
        (np.transpose([X1, X2]), [np.nan] * 8, "no draw has a result."),
        (np.zeros((0, 2)), [], "no draw has a result."),
        (np.transpose([X1, X2])[:3], Y[:3], "3 draws are too few for 2 parameters: at least 4."),
    ],
)
def test_no_coefficients_at_all(X, y, why):
    assert [(c.value, c.why) for c in prcc(X, y).coefficients] == [(None, why)] * 2


def test_draws_without_a_result_are_counted():
    X = np.transpose([[*X1, 100, 0], [*X2, 0, 100]])
    found = prcc(X, [*Y, np.nan, np.inf])
    assert (found.draws, found.rejected) == (10, 2)
    assert [c.value for c in found.coefficients] == pytest.approx([0.9874208829, 0.8723391598], rel=1e-9)


def test_refused():
    with pytest.raises(ValueError, match=r"draws of shape \(8, 2\) and results of shape \(7,\) do not fit"):
        prcc(np.transpose([X1, X2]), Y[:7])
    with pytest.raises(ValueError, match="draw 2, column 1 is not finite"):
        prcc([[1, 2], [np.nan, 3]], [1, 2])


# -- the check --------------------------------------------------------------------------------------------------------


# Published example: near 0, although x1 makes 99.85 % of the variance. The U is told, and what rises is left in peace.
@pytest.mark.parametrize("n", [200, 1000, 50_000])
def test_bowl(n):
    u = latin_hypercube(n, 2, seed=1)
    first, second = prcc(u, (u[:, 0] - 0.5) ** 2 + 0.01 * u[:, 1]).coefficients
    assert abs(first.value) < 0.1
    assert (first.monotone, first.turns_with) == (False, None)
    # By hand: in ranks the bowl is |2x - 1|. Its best rising curve is level, sqrt(2) - 1, up to x = sqrt(1/2), and beside it
    # 12 * 0.05719 = 0.686 of the variance is left; bins and x2 take a little.
    assert first.turning_share == pytest.approx(0.686, abs=0.1)
    assert (second.monotone, second.turning_share) == (True, 0)


# By hand: a bowl whose lowest point lies at v falls on a share v of the draws, by (v/(1 - v))^2 of its rise. At 0.2 that is
# seen, and counts for little beside the rise; at 0.4 the coefficient says less than half of what the parameter does.
def test_a_little_turning_is_told_and_not_flagged():
    u = latin_hypercube(4000, 2, seed=1)
    little, much = (prcc(u, (u[:, 0] - v) ** 2 + 0.01 * u[:, 1]).coefficients[0] for v in (0.2, 0.4))
    assert little.monotone
    assert 0.01 < little.turning_share < 0.1 * little.value**2
    assert not much.monotone
    assert much.turning_share > much.value**2


# By hand: x1 raises y where x2 is above a half and lowers it below: on average it does nothing.
def test_direction_that_depends_on_another():
    u = latin_hypercube(1000, 3, seed=2)
    y = (u[:, 0] - 0.5) * (u[:, 1] - 0.5) + 0.1 * u[:, 2]
    found = prcc(u, y).coefficients
    assert [(c.monotone, c.turns_with) for c in found] == [(False, 1), (False, 0), (True, None)]


MONOTONE = {
    "seir": lambda u: u[:, 0] * u[:, 1] / (u[:, 2] + 0.1),
    "steep": lambda u: np.exp(8 * u[:, 0]) + u[:, 1] + 0 * u[:, 2],
    "step": lambda u: np.where(u[:, 0] > 0.7, 1.0, 0) + 0.1 * u[:, 1] * u[:, 2],
    "root": lambda u: np.sqrt(u[:, 0]) - u[:, 1] ** 9 + 0.01 * u[:, 2],
    "largest": lambda u: np.maximum(u[:, 0], 2 * u[:, 1] * u[:, 2]),
}


# By design: a false alarm has at most one chance in a thousand a parameter, and monotone responses have less.
@pytest.mark.parametrize("name", MONOTONE)
def test_no_false_alarm(name):
    alarms = 0
    for seed in range(15):
        for n in (150, 600, 5000):
            u = latin_hypercube(n, 4, seed)
            noise = 0.05 * np.random.default_rng(seed).normal(size=n)
            alarms += sum(c.monotone is False for c in prcc(u, MONOTONE[name](u) + noise).coefficients)
    assert alarms == 0


# Correlated parameters, a posterior's: the straight part of one's effect is not laid at another's door.
def test_correlated_parameters():
    u = correlated(latin_hypercube(4000, 2, seed=5), [[1, 0.9], [0.9, 1]])
    up, none = prcc(u, u[:, 0] + 0.1 * np.random.default_rng(1).normal(size=4000)).coefficients
    assert up.value > 0.7
    assert abs(none.value) < 0.1
    assert up.monotone
    assert none.monotone
    bowl, other = prcc(u, (u[:, 0] - 0.5) ** 2 + 0.3 * u[:, 1]).coefficients
    assert (bowl.monotone, other.value > 0) == (False, True)


def test_two_values_can_not_turn():
    rng = np.random.default_rng(2)
    X = np.column_stack([rng.integers(0, 2, 500), rng.normal(size=500)])
    assert [c.monotone for c in prcc(X, X[:, 0] + X[:, 1] ** 2).coefficients] == [True, False]


def test_too_few_draws_to_tell():
    u = latin_hypercube(100, 2, seed=1)
    assert [(c.monotone, c.turning_share) for c in prcc(u, u.sum(axis=1)).coefficients] == [(None, None)] * 2
