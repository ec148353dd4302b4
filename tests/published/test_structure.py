"""Classes, periods, vectors and bounds on matrices whose answers are known by hand or computed apart."""

from __future__ import annotations

import math

import numpy as np
import pytest

import ngm
from ngm.engine.perron import reproduction_number
from tests.published.models import close
from tests.published.test_groups import close_pair, given_matrix

# Numbers computed apart; the facts are those of non-negative matrices: Berman & Plemmons (1994), chapters 1 and 2.
REDUCIBLE = [[1.2, 0, 0, 0], [0.5, 0, 2, 0], [0, 0.6, 0, 0], [0.3, 0, 0.4, 0.9]]


def test_classes_in_topological_order():
    solution = given_matrix(REDUCIBLE).solve()
    structure = solution.structure
    assert not structure.irreducible
    assert structure.period is None
    classes = {tuple(name[2] for name in c.types): c for c in structure.classes}
    assert set(classes) == {("1",), ("2", "3"), ("4",)}
    assert [c.types[0] for c in structure.classes] == ["I[1]", "I[2]", "I[4]"]
    assert classes["1",].R0 == close(1.2)
    assert classes["2", "3"].R0 == close(1.095445115)
    assert classes["4",].R0 == close(0.9)
    assert [classes[key].period for key in (("1",), ("2", "3"), ("4",))] == [1, 2, 1]
    assert solution.R0 == close(1.2)
    assert solution.right == close_pair(0.1348314607, 0.3370786517, 0.1685393258, 0.3595505618)
    assert solution.left == pytest.approx((7.416666667, 0, 0, 0), rel=1e-9)
    assert solution.per_cycle == close(1.2)


def test_vectors_of_a_class_that_others_lead_to():
    solution = given_matrix([[0.9, 0], [0.5, 1.4]]).solve()
    assert solution.right == pytest.approx((0, 1))
    assert solution.left == pytest.approx((1, 1))


def test_a_tie_has_no_vectors():
    solution = given_matrix([[1.2, 0], [1, 1.2]]).solve()
    assert solution.R0 == close(1.2)
    assert (solution.right, solution.left) == (None, None)
    assert solution.to_json()["perron"] is None


def test_a_type_that_infects_nobody_has_no_period():
    solution = given_matrix([[1.5, 0], [0.8, 0]]).solve()
    dead_end = solution.structure.classes[1]
    assert dead_end.types == ("I[2]",)
    assert (dead_end.R0, dead_end.period, dead_end.growth_rate) == (0, None, None)
    numbers = given_matrix([[1.5, 0], [0.8, 0]]).control().types
    assert numbers["I[1]"].T == close(1.5)
    assert numbers["I[2]"].T is None
    below = given_matrix([[0.5, 0], [0.8, 0]]).control().types["I[2]"]
    assert (below.T, below.critical_effort) == (0, 0)


def test_an_infection_that_dies_out_in_one_step():
    solution = given_matrix([[0, 2], [0, 0]]).solve()
    assert solution.R0 == 0
    assert solution.R0_bounds == (0, 0)
    assert solution.per_cycle == 0
    assert not solution.structure.irreducible


@pytest.mark.parametrize(
    ("K", "root", "period"),
    [
        ([[0, 4], [9, 0]], 6, 2),
        ([[2, 1], [1, 3]], 3.618033989, 1),
        # A directed cycle: the fourth root of 2 * 3 * 0.5 * 5.4.
        ([[0, 0, 0, 5.4], [2, 0, 0, 0], [0, 3, 0, 0], [0, 0, 0.5, 0]], 2.006220915, 4),
    ],
)
def test_period(K, root, period):
    solution = given_matrix(K).solve()
    assert solution.structure.irreducible
    assert solution.structure.period == period
    assert solution.R0 == close(root)
    assert solution.per_cycle == close(root**period, rel=5e-9)
    on_the_circle = [complex(*value) for value in solution.eigenvalues if abs(complex(*value)) > root * (1 - 1e-9)]
    assert len(on_the_circle) == period
    for k in range(period):
        point = root * complex(math.cos(2 * math.pi * k / period), math.sin(2 * math.pi * k / period))
        assert min(abs(value - point) for value in on_the_circle) < 1e-8


def test_shares_of_a_periodic_matrix():
    # The mean over a period of the generations points along (0.4, 0.6).
    assert given_matrix([[0, 4], [9, 0]]).solve().right == close_pair(0.4, 0.6)


def test_order_of_types_changes_nothing():
    order = [2, 0, 3, 1]
    shuffled = [[REDUCIBLE[i][j] for j in order] for i in order]
    one, two = given_matrix(REDUCIBLE).solve(), given_matrix(shuffled).solve()
    assert one.R0 == two.R0
    assert two.right == pytest.approx([one.right[i] for i in order], rel=1e-12)


# Common linear algebra, through the engine.
def test_row_and_column_sums_bound_the_root():
    K = np.array([[0.8, 1.5], [0.6, 0.5]])
    root = reproduction_number(K)
    assert root == close(1.610468636)
    for axis in (0, 1):
        assert K.sum(axis).min() <= root <= K.sum(axis).max()


def test_root_of_a_nilpotent_matrix_is_zero():
    assert reproduction_number(np.array([[0.0, 2.0], [0.0, 0.0]])) == 0


def test_independent_entries_have_their_root_near_the_mean_row_sum():
    # 12 x 12, uniform on (0, 1): of 20,000 draws 99 % lay within 5.26 to 6.76, and the mean was 6.00.
    rng = np.random.default_rng(20)
    roots = np.array([reproduction_number(rng.random((12, 12))) for _ in range(200)])
    assert roots.mean() == pytest.approx(6.0, abs=0.1)
    assert np.mean((roots > 5.26) & (roots < 6.76)) >= 0.96


def test_a_chain_of_steps_grows_where_the_root_exceeds_one():
    for K, grows in (([[0.5, 0.6], [0.6, 0.5]], True), ([[0.5, 0.4], [0.4, 0.5]], False)):
        x = np.linalg.matrix_power(np.array(K), 200) @ np.ones(2)
        assert (x.sum() > 2) == grows == (ngm.solve(given_matrix(K).scenario).R0 > 1)
