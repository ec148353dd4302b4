"""Classes, periods and reachability, against the definitions worked out by brute force."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from ngm.engine import structure
from ngm.engine.structure import classes, cyclic_sets, is_irreducible, leading_to, period, reachable

patterns = st.integers(1, 7).flatmap(lambda n: arrays(bool, (n, n)))


def _closure(pattern):
    reach = pattern | np.eye(len(pattern), dtype=bool)
    for _ in range(len(pattern)):
        reach = reach @ reach
    return reach  # reach[i, j]: j leads to i


# Second route: the graph library's way, which larger patterns take; the order is the same, too.
@settings(max_examples=150, deadline=None)
@given(patterns)
def test_small_patterns_have_the_classes_of_large_ones(pattern):
    few = [members.tolist() for members in classes(pattern)]
    before, structure._SMALL = structure._SMALL, 0
    try:
        assert [members.tolist() for members in classes(pattern)] == few
    finally:
        structure._SMALL = before


# Second route: mutual reachability by powers of the matrix.
@settings(max_examples=150, deadline=None)
@given(patterns)
def test_classes_are_mutual_reachability_in_order(pattern):
    reach = _closure(pattern)
    groups = classes(pattern)
    number = np.empty(len(pattern), dtype=int)
    for c, members in enumerate(groups):
        number[members] = c
        assert members.tolist() == sorted(members.tolist())
    assert sorted(np.concatenate(groups).tolist()) == list(range(len(pattern)))
    for i, j in np.ndindex(pattern.shape):
        assert (number[i] == number[j]) == (reach[i, j] and reach[j, i])
        if pattern[i, j]:
            assert number[j] <= number[i]


# Second route: the lengths k at which a power of the matrix has a diagonal entry.
@settings(max_examples=150, deadline=None)
@given(patterns)
def test_period_is_the_common_divisor_of_returns(pattern):
    for members in classes(pattern):
        block = pattern[np.ix_(members, members)]
        power, lengths = block, []
        for k in range(1, 3 * len(members) + 1):
            if power.diagonal().any():
                lengths.append(k)
            power = power @ block
        expected = math.gcd(*lengths) if lengths else None
        assert period(pattern, members) == expected
        groups = cyclic_sets(pattern, members)
        assert len(groups) == (expected or 1)
        for k, group in enumerate(groups):
            following = groups[(k + 1) % len(groups)]
            others = np.setdiff1d(members, following)
            assert not pattern[np.ix_(others, group)].any() or expected is None


@settings(max_examples=60, deadline=None)
@given(patterns, st.integers(0, 6))
def test_reachability(pattern, start):
    start %= len(pattern)
    reach = _closure(pattern)
    assert reachable(pattern, [start]).tolist() == reach[:, start].tolist()
    assert leading_to(pattern, [start]).tolist() == reach[start, :].tolist()


# By hand.
def test_zero_and_single_types():
    assert period(np.array([[False]])) is None
    assert period(np.array([[True]])) == 1
    assert not is_irreducible(np.array([[False]]))
    assert is_irreducible(np.array([[True]]))
    assert not is_irreducible(np.array([[True, False], [True, True]]))
    assert classes(np.zeros((0, 0), dtype=bool)) == []


def test_independent_classes_keep_the_order_of_their_types():
    assert [c.tolist() for c in classes(np.eye(4, dtype=bool))] == [[0], [1], [2], [3]]


def test_period_of_several_classes_is_refused():
    with pytest.raises(ValueError, match="one class"):
        period(np.array([[True, False], [True, True]])[::-1, ::-1].copy(), [0, 1])
    with pytest.raises(ValueError, match="one class"):
        period(np.eye(2, dtype=bool))


def test_cycle_of_twelve_with_a_chord():
    # By hand: cycle lengths 12 and 9, so the period is 3.
    pattern = np.zeros((12, 12), dtype=bool)
    for j in range(12):
        pattern[(j + 1) % 12, j] = True
    assert period(pattern) == 12
    pattern[4, 0] = True
    assert period(pattern) == 3
