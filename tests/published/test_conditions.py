"""The conditions A1 to A5 of van den Driessche & Watmough (2002) Math. Biosci. 180:29-48 (from memory), for flows."""

from __future__ import annotations

import pytest

import ngm
from ngm.errors import NgmError
from tests.published.models import Model, close, deaths, matrix

SIRS = Model(
    "SIRS",
    "I",
    "S R",
    "0->S x: Lambda; S->I t: beta*S*I/N; I->R x: gamma*I; R->S x: om*R" + deaths("S I R", "mu"),
    {"Lambda": 2.0, "beta": 0.3, "gamma": 0.1, "mu": 0.01, "om": 0.05, "v": 0.02},
    {"N": "S + I + R"},
)


def holds(model):
    return {c.name: c.holds for c in ngm.solve(model.scenario).conditions}


def test_all_hold():
    solution = SIRS.solve()
    assert {c.name: c.holds for c in solution.conditions} == dict.fromkeys(["A1", "A2", "A3", "A4", "A5"], True)
    assert all(c.detail for c in solution.conditions)
    assert not [w for w in solution.warnings if "A5" in w]


def test_a1_a_rate_that_can_be_negative():
    model = SIRS.but(arrows=SIRS.arrows + "; R->0 x: v*(R - I)*R")
    assert holds(model)["A1"] is False
    assert any("A1" in warning for warning in ngm.solve(model.scenario).warnings)


def test_a2_a_flow_that_leaves_an_empty_compartment():
    # Vaccination of a fixed number a day goes on when nobody susceptible is left.
    model = SIRS.but(arrows=SIRS.arrows + "; S->R x: v")
    found = holds(model)
    assert found["A2"] is False
    assert found["A1"] is True
    assert any("A2" in warning for warning in ngm.solve(model.scenario).warnings)


def test_a3_new_infections_must_arrive_in_an_infected_compartment():
    with pytest.raises(NgmError, match="transmission"):
        ngm.solve(SIRS.but(arrows=SIRS.arrows + "; S->R t: v*S*I").scenario)


def test_a4_a_constant_inflow_of_cases_leaves_no_infection_free_state():
    with pytest.raises(NgmError, match="I"):
        ngm.solve(SIRS.but(arrows=SIRS.arrows + "; 0->I x: v").scenario)


def test_a5_a_state_that_is_unstable_without_infection():
    # By hand: S grows by S (1 - S/1000) from S = 0, which is given.
    model = Model(
        "Logistic hosts, none yet",
        "I",
        "S",
        "0->S x: S; S->0 x: S*S/1000; S->I t: beta*S*I; I->0 x: I",
        {"beta": 0.002},
        free={"S": "0*beta"},
    )
    solution = ngm.solve(model.scenario)
    assert {c.name: c.holds for c in solution.conditions}["A5"] is False
    assert any("A5" in warning for warning in solution.warnings)
    # Left to be solved for, the stable one of the two states is taken: S = 1000, R0 = 2.
    from dataclasses import replace

    solved = replace(model, free={}).solve()
    assert solved.infection_free == {"S": close(1000)}
    assert solved.R0 == close(2)


def test_closed_population_is_accepted_with_a_warning():
    closed = Model(
        "SIR without births", "I", "S R", "S->I t: beta*S*I/N; I->R x: gamma*I", {"beta": 0.3, "gamma": 0.1, "n": 500}
    )
    closed = Model(**{**vars(closed), "definitions": {"N": "S + I + R"}, "free": {"S": "n", "R": 0}})
    solution = closed.solve()
    assert solution.R0 == close(3)
    assert holds(closed)["A5"] is False
    assert any("A5" in w or "closed" in w or "continuum" in w for w in solution.warnings)
    # Not given, it cannot be solved for: a continuum of states is at rest. The refusal names what must be given.
    with pytest.raises(NgmError, match="S"):
        ngm.solve(Model(**{**vars(closed), "free": {}}).scenario)


def gain(amount):
    """V = [[1, -2], [-amount, 1]]: a case feeds the reservoir W, and the reservoir makes cases without infection."""
    return Model(
        "Feedback",
        "I W",
        "S",
        f"0->S x: 1; S->0 x: S; S->I t: beta*S*I; I->0 x: I; W->0 x: W; 0->I x: 2*W; 0->W x: {amount}*I",
        {"beta": 0.4},
    )


def test_m_matrix():
    # Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences, chapter 6: equivalent definitions. By
    # hand: column sums 0.7 and -1, inverse [[2.5, 5], [0.75, 2.5]], so K = 0.4 * 2.5.
    solution = gain(0.3).solve()
    assert list(solution.V) == matrix([[1, -2], [-0.3, 1]])
    assert solution.R0 == close(1)
    assert list(solution.K_large) == matrix([[1, 2], [0, 0]])


def test_no_m_matrix_no_R0():
    # By hand: the determinant is -0.2.
    solution = ngm.solve(gain(0.6).scenario)
    assert solution.R0 is None
    assert "M-matrix" in solution.no_R0
    data = solution.to_json()
    for key in ("R0", "R0_bounds", "per_cycle", "closed_form", "K", "K_large", "perron", "structure"):
        assert data[key] is None
    assert data["F"] == [[close(0.4), 0], [0, 0]]
    assert solution.growth_rate > 0
    control = ngm.control(gain(0.6).scenario).to_json()
    assert control["R0"] is None
    assert control["type_reproduction"] == control["target_reproduction"] == control["state_reproduction"] == []


def test_singular_by_structure_is_refused():
    with pytest.raises(NgmError, match="I") as caught:
        ngm.solve(Model("No way out", "I", "S", "S->I t: beta*S*I; 0->S x: 1; S->0 x: S", {"beta": 0.3}).scenario)
    assert "singular" in str(caught.value)


# By hand: hosts S eaten by predators P are at rest at 0, at k alone, and at S = d/a, P = r(1 - d/(a k))/a together;
# with a k > d the last is the stable one. Symbols and numbers must speak of the same state: `solve` here compares
# them.
@pytest.mark.parametrize(("a", "S"), [(0.2, 2.5), (0.04, 10.0)])
def test_of_several_states_symbols_and_numbers_take_the_same(a, S):
    model = Model(
        "Hosts and their predators",
        "I",
        "S P",
        "0->S x: r*S; S->0 x: r*S*S/k; S->P x: a*S*P; P->0 x: d*P; S->I t: beta*S*I; I->0 x: g*I",
        {"r": 1.0, "k": 10.0, "a": a, "d": 0.5, "beta": 0.3, "g": 0.4},
    )
    solution = model.solve()
    assert solution.infection_free["S"] == close(S)
    assert solution.R0 == close(0.3 * S / 0.4)
