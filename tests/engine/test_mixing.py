"""Assortativity, mixing built from activity, and the path between the extremes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ngm.engine.contacts import ContactError, per_head_of_pairs, reciprocal_contacts, reciprocity
from ngm.engine.mixing import (
    assortativity_coefficient,
    assortativity_index,
    preferential_mixing,
    proportionate_mixing,
    with_assortativity,
)
from ngm.engine.perron import reproduction_number
from tests.engine.contact_data import SIZE, C, N, contacts_and_sizes

# Published: Nold (1980), Jacquez et al (1988), formulas from memory; the example recomputed.
CORE_SIZES = np.array([900, 100.0])
CORE_ACTIVITY = np.array([2, 15.0])
RISK = 0.12  # probability of transmission a contact, times the infectious period


def test_proportionate_core_group():
    contacts = proportionate_mixing(CORE_ACTIVITY, CORE_SIZES)
    R0 = reproduction_number(RISK * contacts)
    assert R0 == pytest.approx(0.9490909091, rel=1e-9)
    assert R0 == pytest.approx(RISK * (4 * 900 + 225 * 100) / (2 * 900 + 15 * 100), rel=1e-12)
    # not what the mean activity gives
    assert RISK * (CORE_SIZES @ CORE_ACTIVITY) / 1000 == pytest.approx(0.396, rel=1e-12)


# By hand at 1: 0.12 * 15.
@pytest.mark.parametrize(("epsilon", "R0"), [(0.3, 1.165131563), ([0.3, 0.3], 1.165131563), (1, 1.8), ([1, 1], 1.8)])
def test_preferential_core_group(epsilon, R0):
    contacts = preferential_mixing(CORE_ACTIVITY, CORE_SIZES, epsilon)
    assert reproduction_number(RISK * contacts) == pytest.approx(R0, rel=1e-9)


# Second route: R0 = x solves sum_j b D (1 - eps_j)^2 c_j^2 N_j / (x - b D c_j eps_j) = sum (1 - eps_j) c_j N_j.
@pytest.mark.parametrize("epsilon", [[0.3, 0.3], [0.1, 0.6], [0.9, 0.0], [0.0, 0.0]])
def test_one_epsilon_a_group(epsilon):
    c, N, eps = CORE_ACTIVITY, CORE_SIZES, np.array(epsilon)
    x = reproduction_number(RISK * preferential_mixing(c, N, eps))
    left = np.sum(RISK * (1 - eps) ** 2 * c**2 * N / (x - RISK * c * eps))
    assert left == pytest.approx(np.sum((1 - eps) * c * N), rel=1e-9)


# By hand: the group with epsilon 1 is apart, the others share out what they offer: 2 * 10 and 6 * 5, of 50.
def test_a_group_that_keeps_to_itself():
    found = preferential_mixing([2, 4, 6], [10, 7, 5], [0, 1, 0])
    assert found == pytest.approx(np.array([[0.8, 0, 1.2], [0, 4, 0], [2.4, 0, 3.6]]), rel=1e-14)
    # all others have no contacts at all
    assert preferential_mixing([0, 4], [10, 7], [0, 1]).tolist() == [[0, 0], [0, 4]]
    assert proportionate_mixing([0, 0], [10, 7]).tolist() == [[0, 0], [0, 0]]


# Published: Gupta, Anderson & May (1989), formula from memory, and Newman (2003); the value recomputed.
def test_indices():
    corrected = reciprocal_contacts(C, N)
    assert assortativity_index(corrected) == pytest.approx(0.4122850123, rel=1e-9)
    assert assortativity_coefficient(corrected, N) == pytest.approx(0.4122850123, rel=1e-9)


# By hand. Three groups, own shares 1/2, 1/3, 1/4: Q = (13/12 - 1)/2.
def test_index_by_hand():
    assert assortativity_index([[2, 1, 1], [1, 1, 1], [3, 3, 2]]) == pytest.approx(1 / 24, rel=1e-12)
    assert assortativity_index([[0, 5], [7, 0]]) == -1
    assert assortativity_index([[0, 1, 1], [1, 0, 1], [1, 1, 0]]) == -0.5
    assert assortativity_index(np.diag([1, 20, 300])) == 1


# By hand: e = [[.3, .1], [.1, .5]], a = b = (.4, .6), sum a b = .52: (.8 - .52)/.48, which is also Q = 3/4 + 5/6 - 1. With two
# groups and reciprocal contacts both indices are equal, with three they are not.
def test_coefficient_by_hand():
    N = np.array([4, 12.0])
    contacts = np.array([[0.3, 0.1], [0.1, 0.5]]) / N[:, None]
    assert assortativity_coefficient(contacts, N) == pytest.approx(0.28 / 0.48, rel=1e-12)
    assert assortativity_index(contacts) == pytest.approx(0.28 / 0.48, rel=1e-12)
    three = np.array([[6, 1, 1], [1, 1, 1], [1, 1, 1.0]])
    # trace 8/14, a = b = (8, 3, 3)/14, sum a b = 82/196: (112 - 82)/(196 - 82)
    assert assortativity_coefficient(three, [1, 1, 1]) == pytest.approx(30 / 114, rel=1e-12)
    assert assortativity_index(three) == pytest.approx((6 / 8 + 2 / 3 - 1) / 2, rel=1e-12)


def test_what_does_not_exist():
    assert assortativity_index([[4]]) is None
    assert assortativity_index([[4, 1], [0, 0]]) is None
    assert assortativity_coefficient([[4]], [10]) is None
    assert assortativity_coefficient([[4, 0], [0, 0]], [10, 20]) is None
    assert assortativity_coefficient([[0, 0], [0, 0]], [10, 20]) is None
    # contacts that one group makes and another receives: a and b share no group, r = 0
    assert assortativity_coefficient([[0, 4], [0, 0]], [10, 20]) == 0


# Rank one, but not reciprocal: the per-pair form a_i l_j of van den Driessche & Watmough (2002), section 4.2.
def test_rank_one_is_proportionate():
    contacts = per_head_of_pairs(np.outer([0.002, 0.001], [0.6, 1.1]), [746.6666667, 370.212766])
    assert assortativity_index(contacts) == pytest.approx(0, abs=1e-15)
    assert assortativity_coefficient(contacts, [746.6666667, 370.212766]) == pytest.approx(0, abs=1e-15)


@st.composite
def activities(draw: st.DrawFn, least: int = 2):
    size = draw(st.integers(least, 5))
    positive = st.floats(1e-2, 1e2)
    groups = [draw(st.lists(part, min_size=size, max_size=size)) for part in (positive, SIZE, st.floats(0, 1))]
    return tuple(np.array(part) for part in groups)


@given(activities(), st.floats(0, 1))
def test_a_common_epsilon_is_the_assortativity_index(given_activities, epsilon):
    a, N, _ = given_activities
    found = preferential_mixing(a, N, epsilon)
    assert assortativity_index(found) == pytest.approx(epsilon, abs=1e-12)
    # and the coefficient too: e = eps diag(a) + (1 - eps) a a'
    assert assortativity_coefficient(found, N) == pytest.approx(epsilon, abs=1e-9)


@given(activities())
def test_built_contacts_keep_activities_and_are_reciprocal(given_activities):
    a, N, epsilon = given_activities
    found = preferential_mixing(a, N, epsilon)
    assert found.sum(axis=1) == pytest.approx(a, rel=1e-12)
    # gaps are relative, and an epsilon next to 1 leaves products that underflow to nothing: look at the counts
    counts = N[:, None] * found
    assert np.abs(counts - counts.T).max() <= 1e-13 * counts.max()


@given(contacts_and_sizes(least=2, positive=True), st.floats(0, 1))
def test_the_path_keeps_contacts_and_reciprocity(given_contacts, Q):
    C, N = given_contacts
    C = reciprocal_contacts(C, N)
    moved = with_assortativity(C, N, Q)
    assert assortativity_index(moved) == pytest.approx(Q, abs=1e-10)
    assert moved.sum(axis=1) == pytest.approx(C.sum(axis=1), rel=1e-12)
    counts = N[:, None] * moved
    assert np.abs(counts - counts.T).max() <= 1e-12 * counts.max()


@given(activities(), st.floats(0, 1))
def test_from_proportionate_the_path_is_preferential_mixing(given_activities, Q):
    a, N, _ = given_activities
    moved = with_assortativity(proportionate_mixing(a, N), N, Q)
    assert moved == pytest.approx(preferential_mixing(a, N, Q), rel=1e-8, abs=1e-10 * a.max())


@given(contacts_and_sizes(least=2, positive=True))
def test_the_path_goes_through_the_contacts_as_given(given_contacts):
    C, N = given_contacts
    assert with_assortativity(C, N, assortativity_index(C)) == pytest.approx(C, rel=1e-12)


# By hand: fully assortative, R0 is that of the busiest group; proportionate, sum(a^2 N)/sum(a N).
def test_ends_of_the_path():
    corrected = reciprocal_contacts(C, N)
    a = corrected.sum(axis=1)
    assert reproduction_number(with_assortativity(corrected, N, 1)) == pytest.approx(a.max(), rel=1e-12)
    assert reproduction_number(with_assortativity(corrected, N, 0)) == pytest.approx((a**2 @ N) / (a @ N), rel=1e-12)


# By hand: Q = -1 to begin with, and half way to 1 is 0.
def test_disassortative_contacts():
    assert with_assortativity([[0, 4], [2, 0]], [10, 20], 0).tolist() == [[2, 2], [1, 1]]
    assert with_assortativity([[0, 4], [2, 0]], [10, 20], -0.5).tolist() == [[1, 3], [1.5, 0.5]]


@pytest.mark.parametrize(
    ("act", "message", "index"),
    [
        (lambda: proportionate_mixing([1, -2], [1, 1]), "the activity of group 1 = -2 is negative", (1,)),
        (lambda: proportionate_mixing([1, 2, 3], [1, 1]), "the activity: expected one value for each group, 2 in", ()),
        (lambda: proportionate_mixing([1, 2], [1, 0]), "group 1 has no members", (1,)),
        (lambda: proportionate_mixing([], []), "the size: expected one value", ()),
        (lambda: preferential_mixing([1, 2], [1, 1], 1.5), r"epsilon\[0\] = 1.5 lies outside \[0, 1\]", (0,)),
        (lambda: preferential_mixing([1, 2], [1, 1], [0, 1.5]), r"epsilon\[1\] = 1.5 lies outside", (1,)),
        (lambda: preferential_mixing([1, 2], [1, 1], -0.1), "epsilon of group 0 = -0.1 is negative", (0,)),
        (lambda: preferential_mixing([1, 2], [1, 1], np.nan), "epsilon of group 0 = nan is not finite", (0,)),
        (lambda: preferential_mixing([1, 2], [1, 1], [0.1]), "epsilon: expected one value for each group", ()),
        (lambda: with_assortativity(C, N, 1.1), r"Q = 1.1 cannot be reached. Choose it from 0 to 1\.", ()),
        (lambda: with_assortativity(C, N, -0.1), "Q = -0.1 cannot be reached", ()),
        (lambda: with_assortativity(C, N, np.nan), "Q = nan cannot be reached", ()),
        (lambda: with_assortativity([[0, 1], [1, 0]], N, -2), "Choose it from -1 to 1", ()),
        (lambda: with_assortativity([[1, 1], [0, 0]], N, 0.5), "group 1 makes no contacts", (1,)),
        (lambda: with_assortativity([[1]], [1], 0.5), "a single group has no assortativity", ()),
        (lambda: assortativity_index([[1, 2]]), "square matrix", ()),
        (lambda: assortativity_coefficient(C, [1, 0]), "group 1 has no members", (1,)),
    ],
)
def test_refusals(act, message, index):
    with pytest.raises(ContactError, match=message) as caught:
        act()
    assert caught.value.index == index


def test_reciprocity_of_the_example():
    assert reciprocity(preferential_mixing(CORE_ACTIVITY, CORE_SIZES, [0.1, 0.6]), CORE_SIZES).largest < 1e-14
