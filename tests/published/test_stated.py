"""Matrices that stand in the file: a K as given, and projected populations, against printed and hand-made numbers."""

from __future__ import annotations

import math

import numpy as np
import pytest

import ngm
from tests.published.models import close
from tests.stated import given, population


def solve(text: str):
    return ngm.solve(ngm.loads(text), limit=0)


# --- K as given -------------------------------------------------------------------------------------------------------


def numbers(text: str) -> dict[tuple[str, ...], float | None]:
    return {t.types: t.T for t in ngm.control(ngm.loads(text)).type_reproduction}


def test_type_numbers_of_matrices_made_by_hand():
    # The definition is that of Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359; the matrices are ours. Two types:
    # T1 = k11 + k12 k21/(1 - k22), by hand.
    two = given([[0.8, 1.5], [0.6, 0.5]])
    assert solve(two).R0 == close(1.610468636)
    assert numbers(two) == {("t1",): close(2.6), ("t2",): close(5), ("t1", "t2"): close(1.610468636)}
    three = numbers(given([[0.6, 0.4, 0], [0.5, 0.3, 0.9], [0.2, 0.7, 0.4]]))
    expected = {"1": None, "2": 2.15, "3": 4.45, "12": 1.653693598, "13": 1.727607616, "23": 1.521954446}
    for key, value in expected.items():
        found = three[tuple(f"t{k}" for k in key)]
        assert found is None if value is None else found == close(value)
    assert three["t1", "t2", "t3"] == close(1.341716259)


def test_target_numbers_of_a_matrix_made_by_hand():
    # Definition: Shuai, Heesterbeek & van den Driessche (2013) J. Math. Biol. 67:1067. T(1,2) = k12 k21/((1-k11)(1-k22)).
    control = ngm.control(ngm.loads(given([[0.8, 1.5], [0.6, 0.5]])))
    found = {t.entry: t.T for t in control.target_reproduction}
    assert found == {
        ("t1", "t1"): None,
        ("t1", "t2"): close(9),
        ("t2", "t1"): close(9),
        ("t2", "t2"): None,
    }
    assert control.state_reproduction == ()


def test_classes_and_vectors_by_hand():
    K = [[1.2, 0, 0, 0], [0.5, 0, 2, 0], [0, 0.6, 0, 0], [0.3, 0, 0.4, 0.9]]
    solution = solve(given(K))
    assert [(c.types, c.period) for c in solution.structure.classes] == [
        (("t1",), 1),
        (("t2", "t3"), 2),
        (("t4",), 1),
    ]
    assert [c.R0 for c in solution.structure.classes] == [close(1.2), close(1.095445115), close(0.9)]
    assert [c.growth_rate for c in solution.structure.classes] == [None, None, None]
    assert solution.right == close([0.1348314607, 0.3370786517, 0.1685393258, 0.3595505618])
    assert solution.left == close([7.416666667, 0, 0, 0])
    # Two classes of one root, one after the other: the left vector times the right one is 0, and there is no scaling.
    tied = solve(given([[1.2, 0], [1, 1.2]]))
    assert (tied.R0, tied.right, tied.left) == (pytest.approx(1.2), None, None)


def test_a_directed_cycle_by_hand():
    # Weights 2, 3, 0.5, 5.4: the fourth root of their product 16.2, at 0, 90, 180 and 270 degrees.
    solution = ngm.solve(
        ngm.loads(given([[0, 0, 0, "5.4"], ["w", 0, 0, 0], [0, 3, 0, 0], [0, 0, 0.5, 0]], values={"w": 2}))
    )
    assert solution.R0 == close(2.006220915)
    assert solution.per_cycle == close(16.2)
    assert solution.structure.period == 4
    angles = sorted(round(math.degrees(math.atan2(b, a))) % 360 for a, b in solution.eigenvalues)
    assert angles == [0, 90, 180, 270]
    assert solution.closed_form is not None


def test_zero_rows_are_types_at_infection_all_the_same():
    # By hand: nobody infects type 2, and it stays in K. A dead end has T = 0.
    solution = solve(given([[0.5, 1], [0, 0]]))
    assert solution.types == solution.types_at_infection == ("t1", "t2")
    assert solution.R0 == 0.5
    assert numbers(given([[0.5, 0], [0.8, 0]]))["t2",] == 0
    nothing = solve(given([[0, 2], [0, 0]]))
    assert (nothing.R0, nothing.R0_bounds, nothing.per_cycle) == (0, (0, 0), 0)


# --- projected populations --------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("fertility", "R0", "growth", "period"),
    [([0, 1.5, 2], 1.15, 1.061517352, 1), ([0, 1.5, 1], 0.95, 0.9770828671, 1), ([0, 0, 6], 1.2, 1.062658569, 3)],
)
def test_leslie_matrices_by_hand(fertility, R0, growth, period):
    # R0 = sum of survival to an age times fertility there, survival 0.5 and 0.4; the growth factor by a second route.
    T = [[0, 0, 0], [0.5, 0, 0], [0, 0.4, 0]]
    solution = solve(population([fertility, [0] * 3, [0] * 3], T))
    assert solution.R0 == close(R0)
    assert solution.growth_factor == close(growth)
    assert solution.growth_rate == pytest.approx(math.log(solution.growth_factor), rel=1e-13)
    assert solution.projected.period == period
    oscillating = [w for w in solution.warnings if "keeps oscillating" in w]
    assert len(oscillating) == (period > 1)
    assert all("period 3" in w for w in oscillating)


def test_discrete_time_by_hand():
    # Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127 for the method: R0 = rho(F (I - T)^-1).
    solution = solve(population([[0, 0.3], [0, 0]], [[0.6, 0], [0.4, 0.8]]))
    assert solution.R0 == close(1.5)
    assert solution.growth_factor == close(1.060555128)
    assert solution.V == ((0.4, 0), (-0.4, close(0.2)))


# Published: Crouse, Crowder & Caswell (1987) Ecology 68:1412-1423, loggerhead sea turtles: matrix, growth factor 0.945,
# stable stages (in per cent) and reproductive values as printed there, all from memory; they agree with one another.
TURTLE_STAGES = ("hatchling", "small juvenile", "large juvenile", "subadult", "novice", "remigrant", "mature")
TURTLE_SHARES = (20.65, 66.975, 11.46, 0.66, 0.04, 0.03, 0.18)
TURTLE_VALUES = (1.00, 1.40, 6.00, 115.845, 568.780, 507.373, 587.669)


def turtles() -> tuple[list[list[float]], list[list[float]]]:
    F, T = np.zeros((7, 7)), np.zeros((7, 7))
    F[0, 4:] = 127, 4, 80
    for (row, column), share in {
        (1, 0): 0.6747,
        (1, 1): 0.7370,
        (2, 1): 0.0486,
        (2, 2): 0.6610,
        (3, 2): 0.0147,
        (3, 3): 0.6907,
        (4, 3): 0.0518,
        (5, 4): 0.8091,
        (6, 5): 0.8091,
        (6, 6): 0.8089,
    }.items():
        T[row, column] = share
    return F.tolist(), T.tolist()


def test_published_turtles():
    solution = solve(population(*turtles(), TURTLE_STAGES))
    about = solution.projected
    assert solution.growth_factor == pytest.approx(0.945, abs=5e-5)
    assert 100 * np.array(about.stable_structure) == pytest.approx(TURTLE_SHARES, abs=6e-3)
    assert about.reproductive_values == pytest.approx(TURTLE_VALUES, rel=1e-5, abs=5e-3)
    assert sum(about.stable_structure) == pytest.approx(1, abs=1e-15)
    assert about.reproductive_values[0] == 1
    total = np.sum(about.elasticity_births) + np.sum(about.elasticity_transitions)
    assert total == pytest.approx(1, abs=1e-14)
    # One mature class of births: R0 is the number of births in a life, here by the geometric sums of the stages.
    j, k, s = 0.6747 / (1 - 0.7370), 0.0486 / (1 - 0.6610), 0.0147 / (1 - 0.6907)
    births = 0.0518 * (127 + 0.8091 * (4 + 0.8091 * 80 / (1 - 0.8089)))
    assert solution.R0 == pytest.approx(j * k * s * births, rel=1e-12)


def test_published_whales():
    # Brault & Caswell (1993) Ecology 74:1444-1454, killer whales: matrix, growth factor 1.0254 and stable shares from
    # memory; they agree with one another. Females past breeding are worth nothing for growth.
    F = [[0, 0.0043, 0.1132, 0], [0] * 4, [0] * 4, [0] * 4]
    T = [[0] * 4, [0.9775, 0.9111, 0, 0], [0, 0.0736, 0.9534, 0], [0, 0, 0.0452, 0.9804]]
    solution = solve(population(F, T, ("yearling", "juvenile", "breeding", "past breeding")))
    assert solution.growth_factor == pytest.approx(1.0254, abs=5e-5)
    assert solution.projected.stable_structure == pytest.approx((0.037, 0.316, 0.323, 0.324), abs=5e-4)
    assert solution.projected.reproductive_values[3] == 0
    # The first stage comes last: the value 1 belongs to the first one that is not 0.
    turned = solve(population(np.array(F)[::-1, ::-1].tolist(), np.array(T)[::-1, ::-1].tolist()))
    assert turned.projected.reproductive_values[:2] == (0, 1)
    assert turned.R0 == pytest.approx(solution.R0, rel=1e-13)


def test_life_without_end_has_no_R0():
    # By hand: who is adult stays so for ever, rho(T) = 1; F + T grows like the root of x^2 - x - 0.5.
    solution = solve(population([[0, 1], [0, 0]], [[0, 0], [0.5, 1]]))
    assert (solution.R0, solution.K, solution.R0_bounds) == (None, None, None)
    assert "rho(T) >= 1" in solution.no_R0
    assert "s2" in solution.no_R0
    assert solution.growth_factor == pytest.approx((1 + math.sqrt(3)) / 2, rel=1e-14)
    assert solution.projected.stable_structure is not None
    # The same where more than all are found a step later, which is told when the file is read.
    more = ngm.loads(population([[0, 1], [0, 0]], [[0, 0], [0.5, 1.25]]))
    assert any("adds up to 1.25" in warning for warning in more.warnings)
    assert ngm.solve(more, limit=0).R0 is None


def test_a_population_that_is_gone():
    # By hand: F + T is nilpotent, so nothing is left after two steps.
    solution = solve(population([[0, 0], [0, 0]], [[0, 0], [0.5, 0]]))
    assert (solution.R0, solution.growth_factor, solution.growth_rate) == (0, 0, None)
    assert solution.projected.stable_structure is None
    assert solution.types_at_infection == ()
