"""How many in the end: published values, integration of the flows, bounds, and vaccines."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from ngm.engine.final_size import Kinds, final_size
from ngm.engine.perron import reproduction_number

# Published (second hand), after Arino et al. (2007) Math. Biosci. Eng. 4:159-175: two types, and one with R0 = 2.
K = np.array([[1.2, 0.8], [0.5, 0.9]])
N = np.array([400.0, 600.0])


def test_published_values():
    assert final_size(K, N).attack == pytest.approx([0.7926654955, 0.5185193597], abs=1e-10)
    assert final_size(np.array([[2.0]]), np.ones(1)).attack == pytest.approx([0.7968121300], abs=1e-10)


def test_a_transposed_matrix_gives_other_numbers():
    # Published (second hand), same source: what a transposed K gives, so that a slip in the orientation shows.
    assert final_size(K.T, N).attack == pytest.approx([0.7397304178, 0.6111477721], abs=1e-10)


def course(K, N, seed=1e-9):
    """Return the shares infected in the end by the differential equations of susceptible and infectious, recovery 1."""
    n = len(N)
    beta = K / N[:, None]  # infections of i by one of j, per susceptible i

    def slope(_, y):
        S, infectious = y[:n], y[n:]
        new = S * (beta @ infectious)
        return np.concatenate([-new, new - infectious])

    done = solve_ivp(slope, (0, 400), np.concatenate([N, seed * N]), method="LSODA", rtol=1e-11, atol=1e-13)
    return 1 - done.y[:n, -1] / N


@pytest.mark.parametrize("matrix", [K, [[0.3, 0, 0.2], [1.5, 0.4, 0.1], [0.2, 1.1, 0.6]], [[1.6, 0], [0.7, 0.4]]])
def test_against_integration_of_the_flows(matrix):
    # Second route: the ordinary differential equations behind the equation.
    matrix = np.array(matrix)
    sizes = np.array([400.0, 600, 250])[: len(matrix)]
    assert final_size(matrix, sizes).attack == pytest.approx(course(matrix, sizes), abs=1e-6)


def test_nothing_below_one_and_types_that_are_not_reached():
    assert final_size(K / 2, N).attack.tolist() == [0, 0]
    # By hand: the first type sustains the infection and infects the second; the third is infected by neither.
    found = final_size(np.array([[2.0, 0, 0], [0.5, 0.1, 0], [0, 0, 0.9]]), np.ones(3))
    first = brentq(lambda z: 1 - z - math.exp(-2 * z), 0.1, 1)
    second = brentq(lambda z: 1 - z - math.exp(-0.5 * first - 0.1 * z), 0.01, 1)
    assert found.attack == pytest.approx([first, second, 0], abs=1e-13)
    assert found.attack[2] == 0


def test_one_just_above_one():
    # By hand: for R0 = 1 + e the attack rate is 2 e to first order.
    found = final_size(np.array([[1 + 1e-7]]), np.ones(1))
    assert found.attack[0] == pytest.approx(2e-7, rel=1e-6)
    assert found.low[0] <= found.attack[0] <= found.high[0]


def test_a_type_without_members_has_no_infections():
    assert final_size(np.array([[2.0, 1], [1, 3]]), np.array([100.0, 0])).attack == pytest.approx(
        [0.7968121300, 0], abs=1e-9
    )


def test_wrong_input():
    for matrix, sizes in (([[1.0, 2.0]], [1, 1]), ([[-1.0]], [1]), ([[1.0]], [-1])):
        with pytest.raises(ValueError, match="expected"):
            final_size(np.array(matrix), np.array(sizes, dtype=float))


entries = st.lists(st.floats(0, 3), min_size=9, max_size=9)


@settings(max_examples=30, deadline=None)
@given(entries=entries, sizes=st.lists(st.floats(1, 1000), min_size=3, max_size=3))
def test_it_solves_the_equation_and_lies_in_its_bounds(entries, sizes):
    K, N = np.array(entries).reshape(3, 3), np.array(sizes)
    found = final_size(K, N)
    z = found.attack
    assert 1 - z == pytest.approx(np.exp(-(K @ (N * z)) / N), abs=1e-12)
    assert np.all(found.low <= z)
    assert np.all(z <= found.high)
    assert np.all(found.high - found.low <= 1e-9)
    assert (z.max() > 0) == (reproduction_number(K) > 1)
    more = final_size(K * 1.1, N).attack
    assert np.all(more >= z - 1e-12)


# -- vaccines -----------------------------------------------------------------------------------------------------------


def leaky(c, a, b=0.0):
    c, a, b = np.broadcast_arrays(*(np.atleast_1d(x) for x in (c, a, b)))
    one = np.ones_like(c, dtype=float)
    return Kinds(np.stack([1 - c, c], 1), np.stack([one, 1 - a], 1), np.stack([one, 1 - b], 1))


def test_leaky_vaccine_by_hand():
    # By hand: x = R0 ((1-c)(1-e^-x) + c (1-b) (1-e^-(1-a)x)), solved by bisection.
    R0, c, a, b = 3.0, 0.4, 0.6, 0.3
    x = brentq(
        lambda x: x - R0 * ((1 - c) * -math.expm1(-x) + c * (1 - b) * -math.expm1(-(1 - a) * x)), 0.1, 5, xtol=1e-15
    )
    found = final_size(np.array([[R0]]), np.ones(1), leaky(c, a, b))
    assert found.force == pytest.approx([x], rel=1e-13)
    assert found.attack_by_kind[0] == pytest.approx([-math.expm1(-x), -math.expm1(-(1 - a) * x)], rel=1e-12)
    assert found.attack[0] == pytest.approx((1 - c) * -math.expm1(-x) + c * -math.expm1(-(1 - a) * x), rel=1e-12)


def test_all_or_nothing_is_a_smaller_population():
    # By hand: with the share c a immune, the rest is a population of (1 - c a) N with that much smaller a number.
    R0, c, a = 3.0, 0.5, 0.8
    kinds = Kinds(np.array([[1 - c, c * (1 - a), c * a]]), np.array([[1.0, 1, 0]]), np.ones((1, 3)))
    rest = final_size(np.array([[R0 * (1 - c * a)]]), np.ones(1)).attack[0]
    found = final_size(np.array([[R0]]), np.ones(1), kinds)
    assert found.attack[0] == pytest.approx((1 - c * a) * rest, rel=1e-12)


def test_a_leaky_vaccine_leaves_more_infected_than_all_or_nothing():
    # The same share of infections prevented at first; in the end leaky protection is passed by repeated exposure.
    c, a = np.array([0.5, 0.5]), np.array([0.8, 0.8])
    one, none = np.ones(2), np.zeros(2)
    aon = Kinds(np.stack([1 - c, c * (1 - a), c * a], 1), np.stack([one, one, none], 1), np.stack([one] * 3, 1))
    K3 = 2.5 * K
    assert np.all(final_size(K3, N, leaky(c, a)).attack > final_size(K3, N, aon).attack)
