"""Sharing a supply: by hand, against full grids, and bounds that hold."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ngm.engine.allocation import Problem, best_share, least_supply
from ngm.engine.allocation_bounds import least_price_bound, lower_bound
from ngm.engine.allocation_rules import first_then_even, greedy, in_order, same_multiple
from ngm.engine.symmetric import symmetric_form

SHAPES = ["full", "contacts", "cycle", "triangular", "apart", "sparse"]


def problem(K, effect=1.0, price=1.0, upper=1.0, member=None):
    K = np.array(K, dtype=float)
    member = np.arange(len(K)) if member is None else np.array(member)
    groups = member.max() + 1
    return Problem(
        K,
        member,
        np.full(len(K), effect) if np.ndim(effect) == 0 else np.array(effect, dtype=float),
        np.full(groups, price) if np.ndim(price) == 0 else np.array(price, dtype=float),
        np.full(groups, upper) if np.ndim(upper) == 0 else np.array(upper, dtype=float),
    )


def starts(given, budget):
    groups = len(given.price)
    return [
        same_multiple(given, np.ones(groups), budget),
        greedy(given, budget),
        *(first_then_even(given, g, budget) for g in range(min(groups, 8))),
    ]


def solved(given, budget):
    x = best_share(given, budget, starts(given, budget))
    bound = lower_bound(given, budget, x)
    return bound.x, bound


def drawn(shape, seed, groups=3):
    """Return a random problem and a budget."""
    rng = np.random.default_rng([SHAPES.index(shape), seed])
    price = rng.uniform(0.1, 1, groups)
    K = rng.exponential(1, (groups, groups))
    if shape == "contacts":
        T = rng.uniform(0, 1, (groups, groups))
        K = (T + T.T + np.diag(rng.uniform(0, 2, groups))) / price
    elif shape == "cycle":
        K = np.roll(np.eye(groups), 1, axis=0) * K
    elif shape == "triangular":
        K = np.tril(K)
    elif shape == "apart":
        K[0, 1:] = K[1:, 0] = 0
    elif shape == "sparse":
        K *= rng.random((groups, groups)) < 0.5
    effect = rng.uniform(0.3, 1, groups) if seed % 2 else np.ones(groups)
    upper = rng.uniform(0.3, 1, groups) if seed % 4 > 1 else np.ones(groups)
    return problem(K, effect, price, upper), float(rng.uniform(0.1, 0.8) * price.sum())


def best_on_grid(given, budget, points=61):
    """Return the least number on a full grid of two groups' coverages, the third getting what is left, each in turn."""
    best = np.inf
    for last in range(3):
        others = [k for k in range(3) if k != last]
        axes = np.meshgrid(*(np.linspace(0, given.upper[k], points) for k in others), indexing="ij")
        x = np.zeros((points**2, 3))
        for k, axis in zip(others, axes, strict=True):
            x[:, k] = axis.ravel()
        left = budget - x @ given.price
        x[:, last] = np.minimum(left / given.price[last], given.upper[last])
        x = x[left >= 0]
        scaled = (1 - given.effect * x)[:, :, None] * given.K
        best = min(best, float(np.abs(np.linalg.eigvals(scaled)).max(axis=1).min()))
    return best


# -- by hand ----------------------------------------------------------------------------------------------------------


def test_two_groups_apart_end_alike():
    # 3 (1 - x) = 2 (1 - y) with x + y = 1: x = 0.6, number 1.2. Down to 1: x = 2/3, y = 1/2.
    given = problem([[3, 0], [0, 2]])
    x, bound = solved(given, 1.0)
    assert x == pytest.approx([0.6, 0.4], abs=1e-7)
    assert given.number(x) == pytest.approx(1.2, rel=1e-7)
    assert bound.route == "convex"
    assert bound.low == pytest.approx(1.2, rel=1e-7)
    least = least_supply(given, 1.0, starts(given, 1.0))
    assert given.spend(least) == pytest.approx(7 / 6, rel=1e-7)
    assert least_price_bound(given, 1.0, least) == pytest.approx(7 / 6, rel=1e-7)


def test_proportionate_mixing_fills_by_gain_for_the_price():
    # K = a b^T: the number is sum of a_i b_i (1 - e_i x_i), so that groups fill in the order of a b e/price: 2, 0, 1.
    a, b, e, price = np.array([1, 2, 3.0]), np.array([0.5, 0.2, 0.4]), np.array([1, 0.5, 0.9]), np.array([1, 2, 0.8])
    given = problem(np.outer(a, b), e, price)
    x, bound = solved(given, 1.4)
    assert x == pytest.approx([0.6, 0, 1], abs=1e-9)
    assert given.number(x) == pytest.approx(float(a @ b - 1.2 * 0.9 - 0.5 * 0.6), rel=1e-12)
    assert bound.low == pytest.approx(given.number(x), rel=1e-9)


def test_hosts_and_vectors_put_all_on_one_side():
    # sqrt(a b (1 - x)(1 - y)) with x + y = s is concave in between: least at a corner, sqrt(a b (1 - s)).
    given = problem([[0, 4], [9, 0]])
    x, bound = solved(given, 0.75)
    assert sorted(x) == pytest.approx([0, 0.75], abs=1e-9)
    assert given.number(x) == pytest.approx(3, rel=1e-9)
    assert bound.route == "divided"
    assert 3 * (1 - 1e-4) <= bound.low <= 3 * (1 + 1e-12)


def test_a_cycle_is_broken_where_the_supply_is_enough():
    given = problem(np.roll(np.eye(3), 1, axis=0) * [[1], [2], [3]])
    x, bound = solved(given, 1.0)
    assert given.number(x) == 0
    assert bound.low == 0


def test_more_than_enough():
    given = problem([[3, 1], [1, 2]], effect=0.5, upper=[0.5, 1])
    x, bound = solved(given, 5.0)
    assert x.tolist() == [0.5, 1]
    assert bound.route == "all"
    assert bound.low == pytest.approx(given.number(x), rel=1e-15)
    assert least_supply(given, 1.0, starts(given, 1.0)) is None


def test_several_types_of_a_group_and_types_out_of_reach():
    # Types 0 and 1 belong to one group, type 2 to none: K diagonal, so max(3 (1 - x), 2 (1 - x), 1).
    given = problem(np.diag([3.0, 2.0, 1.0]), member=[0, 0, -1])
    assert given.number(np.array([0.5])) == pytest.approx(1.5)
    assert given.spend(least_supply(given, 1.5, [np.array([1.0])])) == pytest.approx(0.5, rel=1e-12)
    assert least_supply(given, 0.9, [np.array([1.0])]) is None


def test_simple_rules_by_hand():
    given = problem(np.ones((3, 3)), price=[1, 2, 4], upper=[1, 0.5, 1])
    assert same_multiple(given, np.ones(3), 3.5) == pytest.approx([0.5, 0.5, 0.5])
    assert same_multiple(given, np.ones(3), 6) == pytest.approx([1, 0.5, 1])
    # One and a half for the first two, then the second is full: (5 - 1)/(1 + 4) each for the others.
    assert same_multiple(given, np.ones(3), 5) == pytest.approx([0.8, 0.5, 0.8])
    assert same_multiple(given, np.array([2.0, 0, 1]), 3) == pytest.approx([1, 0, 0.5])
    assert in_order(given, [2, 0, 1], 4.5) == pytest.approx([0.5, 0, 1])
    assert first_then_even(given, 1, 3.5) == pytest.approx([0.5, 0.5, 0.5])


@pytest.mark.parametrize(
    "wrong",
    [
        {"K": [[-1.0]]},
        {"K": [[np.inf]]},
        {"K": [[1.0]], "effect": 1.5},
        {"K": [[1.0]], "price": 0.0},
        {"K": [[1.0]], "upper": 1.2},
    ],
)
def test_wrong_input_is_refused(wrong):
    with pytest.raises(ValueError):
        problem(**wrong)


# -- slopes, symmetric forms ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("shape", SHAPES)
def test_slopes_are_those_of_finite_differences(shape):
    given, _ = drawn(shape, 1)
    x = 0.3 * given.upper
    values, slopes = given.roots(x)
    for k in range(3):
        step = np.zeros(3)
        step[k] = 1e-6
        difference = (given.roots(x + step)[0] - given.roots(x - step)[0]) / 2e-6
        assert slopes[:, k] == pytest.approx(difference, rel=1e-6, abs=1e-8)
    assert given.number(x) == pytest.approx(values.max(initial=0), rel=1e-11)


def test_large_classes_give_what_the_dense_solver_gives():
    rng = np.random.default_rng(3)
    given = problem(rng.exponential(1, (60, 60)), 0.7)
    x = rng.uniform(0, 1, 60)
    values, slopes = given.roots(x)
    scaled = given.factors(x)[:, None] * given.K
    assert values[0] == pytest.approx(np.abs(np.linalg.eigvals(scaled)).max(), rel=1e-11)
    step = np.zeros(60)
    step[7] = 1e-6
    difference = (given.roots(x + step)[0] - given.roots(x - step)[0]) / 2e-6
    assert slopes[:, 7] == pytest.approx(difference, rel=1e-5)


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10_000), size=st.integers(1, 6))
def test_symmetric_forms(seed, size):
    rng = np.random.default_rng(seed)
    S = rng.uniform(0, 1, (size, size))
    S = S + S.T
    h = 10 ** rng.uniform(-3, 3, size)
    form = symmetric_form(S * h[:, None] / h[None, :])
    assert form == pytest.approx(S, rel=1e-9)
    if size > 2:
        assert symmetric_form(rng.uniform(0.1, 1, (size, size))) is None


# -- against grids, and bounds ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("shape", SHAPES)
def test_three_groups_against_a_full_grid(shape, seed):
    given, budget = drawn(shape, seed)
    x, bound = solved(given, budget)
    number = given.number(x)
    grid = best_on_grid(given, budget)
    assert np.all((x >= 0) & (x <= given.upper))
    assert given.spend(x) <= budget * (1 + 1e-12)
    assert number <= grid * 1.001 + 1e-9
    assert bound.low <= min(number, grid) + 1e-9
    assert bound.low >= number * 0.999 - 1e-9  # and proven so


@pytest.mark.parametrize("weights", [(0.0, 1e-313), (1.0, 1e-313), (1e300, 1e-300), (5e-324, 5e-324)])
def test_weights_of_any_size_spend_the_budget_and_no_more(weights):
    given, budget = drawn("contacts", 0, 2)
    for share in (0.3, 1.0):
        spent = given.spend(same_multiple(given, np.array(weights), share * budget))
        # by hand: only groups with a weight take any
        room = given.spend(np.where(np.array(weights) > 0, given.upper, 0.0))
        assert spent == pytest.approx(min(share * budget, room), rel=1e-9)


@pytest.mark.parametrize(("seed", "groups"), [(9, 2), (37, 3), (59, 2), (248, 3)])  # found by a scan of seeds
def test_without_a_cycle_nothing_need_be_spent(seed, groups):
    given, budget = drawn("sparse", seed, groups)
    x, bound = solved(given, budget)
    assert max(abs(np.linalg.eigvals(given.K))) == 0  # numpy, as the second route
    assert given.number(x) == bound.low == 0


@settings(max_examples=40, deadline=None)
@given(shape=st.sampled_from(SHAPES), seed=st.integers(0, 100_000), groups=st.integers(2, 6), data=st.data())
def test_no_share_beats_the_bound(shape, seed, groups, data):
    given, budget = drawn(shape, seed, groups)
    x, bound = solved(given, budget)
    weights = np.array(data.draw(st.lists(st.floats(0, 1), min_size=groups, max_size=groups)))
    other = same_multiple(given, weights, budget)
    assert given.spend(other) <= budget * (1 + 1e-12)
    assert bound.low <= given.number(other) * (1 + 1e-9) + 1e-9
    assert given.number(x) <= min(given.number(start) for start in starts(given, budget)) * (1 + 1e-9) + 1e-9


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("shape", SHAPES)
def test_the_smallest_supply_reaches_the_target_and_a_smaller_one_does_not(shape, seed):
    given, budget = drawn(shape, seed)
    target = 0.6 * given.number(np.zeros(3)) + 0.4 * given.number(given.upper)
    if target == 0:
        pytest.skip("K has no cycle")
    least = least_supply(given, target, starts(given, budget))
    assert given.number(least) == pytest.approx(target, rel=1e-9)
    # A second route: the best number that a supply smaller by 1 % reaches, proven.
    smaller = 0.99 * given.spend(least)
    x = best_share(given, smaller, [*starts(given, smaller), 0.99 * least])
    assert lower_bound(given, smaller, x).low > target * (1 - 1e-9)


def test_many_groups():
    for groups in (17, 300):
        rng = np.random.default_rng(groups)
        members = rng.uniform(1e3, 1e5, groups)
        T = rng.uniform(0, 1, (groups, groups))
        T = (T + T.T + np.diag(rng.uniform(5, 20, groups))) * np.sqrt(np.outer(members, members)) / groups
        given = problem(3 * T / members / np.abs(np.linalg.eigvals(T / members)).max(), 0.8, members, 0.95)
        budget = 0.3 * members.sum()
        x, bound = solved(given, budget)
        least = least_supply(given, 1.0, [*starts(given, budget), x])
        assert bound.low > 0.99 * given.number(x)
        assert given.number(least) == pytest.approx(1, rel=1e-9)
