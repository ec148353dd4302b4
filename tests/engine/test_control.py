"""Type-, target- and state-reproduction numbers."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ngm.engine import balls as b
from ngm.engine.control import (
    all_single_types,
    critical_effort,
    rest_number,
    state_number_by_row,
    state_reproduction_numbers,
    target_reproduction_number,
    type_reproduction_number,
)
from ngm.engine.perron import reproduction_number
from tests.engine.matrices import decimals, floats, nonnegative

KINDS = [decimals, floats]
TWO = [["0.8", "1.5"], ["0.6", "0.5"]]
THREE = [["0.6", "0.4", "0"], ["0.5", "0.3", "0.9"], ["0.2", "0.7", "0.4"]]
# Malaria after Ross and Macdonald: K_hv = a b / g, K_vh = a c m / gamma with a = .3, b = .5, c = .4, m = 2.
MALARIA = [["0", "1.25"], ["24", "0"]]


def _set(size, *types):
    mask = np.zeros(size, dtype=bool)
    mask[list(types)] = True
    return mask


def _entries(size, *pairs):
    mask = np.zeros((size, size), dtype=bool)
    for pair in pairs:
        mask[pair] = True
    return mask


# Published: Roberts & Heesterbeek (2003), Heesterbeek & Roberts (2007), from memory; matrices ours, recomputed.
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("rows", "types", "expected"),
    [
        (TWO, (0,), 2.6),
        (TWO, (1,), 5.0),
        (TWO, (0, 1), 1.610468636),
        (THREE, (0,), None),
        (THREE, (1,), 2.15),
        (THREE, (2,), 4.45),
        (THREE, (0, 1), 1.653693598),
        (THREE, (0, 2), 1.727607616),
        (THREE, (1, 2), 1.521954446),
        (THREE, (0, 1, 2), 1.341716259),
        ([["0.8", "0.3"], ["0.2", "1.1"]], (0,), None),
        ([["0.8", "0.3"], ["0.2", "1.1"]], (1,), 1.4),
        (MALARIA, (0,), 30.0),
        (MALARIA, (1,), 30.0),
        # By hand: dead-end hosts.
        ([["1.5", "0"], ["0.8", "0"]], (0,), 1.5),
        ([["1.5", "0"], ["0.8", "0"]], (1,), None),
        ([["0.5", "0"], ["0.8", "0"]], (1,), 0.0),
        ([["0"]], (0,), 0.0),
        ([["2.5"]], (0,), 2.5),
    ],
)
def test_type_numbers(kind, rows, types, expected):
    with b.precision(128):
        found = type_reproduction_number(kind(rows), _set(len(rows), *types))
        if len(types) == 1:
            alone = all_single_types(kind(rows))[types[0]]
            assert alone.T == (None if found.T is None else pytest.approx(found.T, rel=1e-14))
            assert alone.rest == pytest.approx(found.rest, rel=1e-14)
    if expected is None:
        assert found.T is None
        assert found.critical_effort is None
        assert found.rest >= 1
    else:
        assert found.T == pytest.approx(expected, rel=1e-9)
        assert found.critical_effort == pytest.approx(max(0.0, 1 - 1 / expected) if expected else 0.0, rel=1e-9)


def test_rest_is_told():
    with b.precision(128):
        found = type_reproduction_number(decimals(THREE), _set(3, 0))
        assert found.rest == pytest.approx(1.145298686, rel=1e-9)
        assert rest_number(decimals(THREE), _set(3, 0)) == found.rest
        assert (
            rest_number(decimals(TWO), _entries(2, (0, 0)))
            == target_reproduction_number(decimals(TWO), _entries(2, (0, 0))).rest
        )


# Published: Shuai, Heesterbeek & van den Driessche (2013), formulas from memory, numbers recomputed.
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("rows", "pairs", "expected"),
    [
        (TWO, [(0, 1)], 9.0),
        (TWO, [(1, 0)], 9.0),
        (TWO, [(0, 0)], None),
        (TWO, [(1, 1)], None),
        (TWO, [(0, 0), (0, 1)], 2.6),
        (TWO, [(0, 0), (0, 1), (1, 0), (1, 1)], 1.610468636),
        (MALARIA, [(0, 1)], 30.0),
        (MALARIA, [(1, 0)], 30.0),
        # By hand: an entry that is zero, or on no cycle, has 0.
        ([["0.5", "0"], ["0.8", "0"]], [(1, 0)], 0.0),
        ([["0.5", "0"], ["0.8", "0"]], [(0, 1)], 0.0),
    ],
)
def test_target_numbers(kind, rows, pairs, expected):
    with b.precision(128):
        found = target_reproduction_number(kind(rows), _entries(len(rows), *pairs))
    if expected is None:
        assert found.T is None
        assert found.rest >= 1
    else:
        assert found.T == pytest.approx(expected, rel=1e-9)


# Published: Tien & Earn (2010), shedding as transmission; formulas from memory, numbers recomputed.
@pytest.mark.parametrize(("bI", "T_I", "T_W"), [("0.25", 2.333333333, None), ("0.15", 1.857142857, 4.0)])
def test_cholera(bI, T_I, T_W):
    with b.precision(128):
        gone = b.ball("0.21")
        K = b.balls([[b.ball(bI) / gone, b.ball("0.3") / b.ball("0.5")], [b.ball("0.4") / gone, 0]])
        people, water = all_single_types(K)
        ways = [target_reproduction_number(K, _entries(2, pair)).T for pair in ((0, 1), (1, 0))]
    assert people.T == pytest.approx(T_I, rel=1e-9)
    assert water.T == (None if T_W is None else pytest.approx(T_W, rel=1e-9))
    assert ways == ([None, None] if T_W is None else pytest.approx([T_W, T_W], rel=1e-9))


# Published: Inaba & Nishiura (2008), formula from memory; SEIR with an asymptomatic branch, numbers recomputed.
@pytest.mark.parametrize("kind", KINDS)
def test_state_numbers_two_ways(kind):
    F = kind([["0", "0.5", "0.2"], ["0", "0", "0"], ["0", "0", "0"]])
    V = kind([["0.251", "0", "0"], ["-0.1625", "0.201", "0"], ["-0.0875", "0", "0.126"]])
    with b.precision(128):
        assert state_number_by_row(F, V, 1) == pytest.approx(3.605609219, rel=1e-9)
        assert state_number_by_row(F, V, 2) is None
        assert state_number_by_row(F, V, 0) == pytest.approx(2.163815716, rel=1e-9)
        found = dict(state_reproduction_numbers(F, V))
    assert sorted(found) == [1, 2]
    assert found[1].T == pytest.approx(3.605609219, rel=1e-9)
    assert found[1].critical_effort == pytest.approx(0.7226543590, rel=1e-9)
    assert found[2].T is None
    assert found[2].rest == pytest.approx(1.610473529, rel=1e-9)


# Second route: the definition of the state's number, written out in doubles.
@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6), st.integers(1, 5))
def test_state_number_by_its_definition(seed, size):
    rng = np.random.default_rng(seed)
    F = rng.random((size, size)) * (rng.random((size, size)) < 0.5)
    moves = rng.random((size, size)) * (rng.random((size, size)) < 0.5)
    np.fill_diagonal(moves, 0.0)
    V = np.diag(moves.sum(axis=0) + 0.1 + rng.random(size)) - moves
    for state, found in state_reproduction_numbers(F, V):
        column = np.zeros_like(F)
        column[:, state] = F[:, state]
        rest = np.abs(np.linalg.eigvals((F - column) @ np.linalg.inv(V))).max()
        assert found.rest == pytest.approx(rest, rel=1e-3, abs=1e-5)
        assert (found.T is None) == (rest >= 1)
        if found.T is not None:
            expected = np.abs(np.linalg.eigvals(column @ np.linalg.inv(V - F + column))).max()
            assert found.T == pytest.approx(expected, rel=1e-6, abs=1e-9)


@pytest.mark.parametrize(("T", "effort"), [(5.0, 0.8), (1.0, 0.0), (0.3, 0.0), (0.0, 0.0), (None, None)])
def test_critical_effort(T, effort):
    assert critical_effort(T) == effort


@pytest.mark.parametrize("mask", [[True], [[True, False]], [False, False]])
def test_targets_of_the_wrong_shape_are_refused(mask):
    with pytest.raises(ValueError, match="target"):
        type_reproduction_number(np.eye(2), mask)


masks = st.integers(0, 10**6).map(lambda seed: np.random.default_rng(seed))


@settings(max_examples=80, deadline=None)
@given(nonnegative(most=5, scale=3), masks)
def test_dividing_the_targeted_rows_by_T_brings_R0_to_one(rows, rng):
    size = len(rows)
    K = floats(rows) / max(1e-9, float(np.linalg.norm(floats(rows)))) * rng.choice([0.7, 1.5, 4])
    targeted = rng.random(size) < 0.5
    assume(targeted.any())
    T = type_reproduction_number(K, targeted).T
    assume(T is not None and T > 1e-6)
    rest = rest_number(K, targeted)
    assert reproduction_number(np.where(targeted[:, None], K / T, K)) == pytest.approx(1, rel=1e-6)
    assert reproduction_number(np.where(targeted[None, :], K / T, K)) == pytest.approx(1, rel=1e-6)
    assert (T > 1 + 1e-9) <= (reproduction_number(K) > 1)
    assert rest < 1


@settings(max_examples=80, deadline=None)
@given(st.integers(1, 5), masks)
def test_dividing_the_targeted_entries_by_T_brings_R0_to_one(size, rng):
    K = rng.random((size, size)) * (rng.random((size, size)) < 0.7) * rng.choice([0.5, 1, 2])
    targeted = rng.random((size, size)) < 0.4
    assume(targeted.any())
    found = target_reproduction_number(K, targeted)
    if found.T is None:
        assert np.abs(np.linalg.eigvals(np.where(targeted, 0, K))).max() >= 1 - 1e-9
    elif found.T > 1e-6:
        assert reproduction_number(np.where(targeted, K / found.T, K)) == pytest.approx(1, rel=1e-6)


# With S inside S', T_S >= T_S' >= R0 above the threshold, reversed below (after Shuai et al. 2013, from memory).
@settings(max_examples=60, deadline=None)
@given(masks)
def test_larger_targets_need_less(rng):
    K = rng.random((3, 3)) * rng.choice([0.3, 0.6, 1.2])
    small = rng.random((3, 3)) < 0.4
    large = small | (rng.random((3, 3)) < 0.4)
    assume(small.any())
    T, T_large = (target_reproduction_number(K, mask).T for mask in (small, large))
    assume(T is not None)
    R0 = reproduction_number(K)
    if R0 > 1:
        assert T >= T_large - 1e-9
        assert T_large >= R0 - 1e-9
    else:
        assert T <= T_large + 1e-9
        assert T_large <= R0 + 1e-9


# Second route: one inverse for all types against type by type.
@pytest.mark.parametrize("kind", ["balls", "doubles"])
@pytest.mark.parametrize("scale", [0.9, 1.004, 1.02, 1.5, 30.0])
def test_all_types_at_once(kind, scale):
    rng = np.random.default_rng(11)
    size = 30
    K = rng.random((size, size)) ** 6
    K[3] *= 40
    K = K / reproduction_number(K) * scale
    matrix = b.balls(K) if kind == "balls" else K
    with b.precision(128):
        found = all_single_types(matrix)
        for i in (0, 3, 7, 29):
            single = type_reproduction_number(K, _set(size, i))
            assert (found[i].T is None) == (single.T is None)
            if single.T is not None:
                assert found[i].T == pytest.approx(single.T, rel=1e-9)
            assert found[i].rest == pytest.approx(single.rest, rel=2e-3)


@pytest.mark.parametrize("kind", ["balls", "doubles"])
def test_all_types_where_the_inverse_does_not_exist(kind):
    # By hand: every row sums to 1, so R0 = 1 and every T is 1; I - K is singular.
    size = 30
    K = np.full((size, size), 1 / 32)
    K[:, 0] = 3 / 32
    matrix = b.balls(K) if kind == "balls" else K
    with b.precision(128):
        assert [i.T for i in all_single_types(matrix)] == pytest.approx([1.0] * size, rel=1e-13)


def test_several_classes_in_one_go():
    # By hand: of two classes one is above 1, and nothing done in the other helps against it.
    K = np.array([[0.5, 0, 0], [0.3, 0, 3.0], [0, 2.0, 0]])
    found = all_single_types(K)
    assert [f.T for f in found] == [None, pytest.approx(6.0), pytest.approx(6.0)]
    assert found[0].rest == pytest.approx(6**0.5)


@settings(max_examples=40, deadline=None)
@given(nonnegative(most=4, scale=2))
def test_single_types_agree_with_sets(rows):
    K = decimals(rows)
    with b.precision(128):
        together = all_single_types(K)
        for (i,) in combinations(range(len(rows)), 1):
            alone = type_reproduction_number(K, _set(len(rows), i))
            assert together[i].T == (None if alone.T is None else pytest.approx(alone.T, rel=1e-12))
