"""The number at the state now: beside R0, never under its name, and under every intervention."""

from __future__ import annotations

import pytest

import ngm
from tests.derivation.models import text

FLOWS = [
    ("", "S", "Lambda", "x"),
    ("S", "I", "beta*S*I/N", "t"),
    ("R", "I", "eps*beta*R*I/N", "t"),
    ("I", "R", "gamma*I", "x"),
    *((c, "", f"mu*{c}", "x") for c in "SIR"),
]
MODEL = text(
    [("S", False), ("I", True), ("R", False)],
    {"Lambda": 10, "beta": 0.5, "gamma": 0.19, "mu": 0.01, "eps": 0.2},
    FLOWS,
    definitions={"N": "S + I + R"},
)
ACTIONS = """
[[intervention]]
name = "Half the contacts"
change = [{ parameter = "beta", multiply = 0.5 }]
[[intervention]]
name = "Less susceptible"
change = [{ susceptibility = "I", reduce = 0.25 }]
"""


def test_immunity_lowers_the_number_now() -> None:
    """By hand: R0 = beta/(gamma + mu) = 2.5; with 40 % recovered, 0.2 times as susceptible: 2.5 (0.6 + 0.2 0.4) = 1.7."""
    scenario = ngm.loads(MODEL + "\n[state_now]\nS = 600\nR = 400\n" + ACTIONS)
    solution = ngm.solve(scenario)
    assert solution.R0 == pytest.approx(2.5, rel=1e-14)
    assert solution.infection_free == {"S": 1000.0, "R": 0.0}
    assert solution.to_json()["effective"] == {"R": pytest.approx(1.7, rel=1e-14), "state": {"S": 600.0, "R": 400.0}}
    rows = {row.name: row for row in ngm.compare(scenario).interventions}
    assert rows["Half the contacts"].effective == pytest.approx(0.85, rel=1e-14)
    assert rows["Less susceptible"].effective == pytest.approx(1.275, rel=1e-14)


def test_what_is_left_out_is_as_without_infection() -> None:
    solution = ngm.solve(ngm.loads(MODEL + '\n[state_now]\nR = "0.5*Lambda/mu"\n'), limit=0)
    assert solution.effective is not None
    assert solution.effective.state == {"S": 1000.0, "R": 500.0}
    assert solution.effective.R == pytest.approx(2.5 * (1000 + 0.2 * 500) / 1500, rel=1e-14)


def test_one_state_may_follow_another() -> None:
    solution = ngm.solve(ngm.loads(MODEL + '\n[state_now]\nS = "1000 - R"\nR = 250\n'), limit=0)
    assert solution.effective is not None
    assert solution.effective.state == {"S": 750.0, "R": 250.0}


def test_without_a_state_now_nothing_is_said_of_it() -> None:
    solution = ngm.solve(ngm.loads(MODEL), limit=0)
    assert solution.effective is None
    assert "effective" not in solution.to_json()


@pytest.mark.parametrize(
    ("state", "message"),
    [('S = "Lambda - 20"', "state_now.S: S = -10 is negative"), ('S = "1 - R"\nR = "1 - S"', "goes in a circle")],
)
def test_refused_in_words(state: str, message: str) -> None:
    with pytest.raises(ngm.NgmError, match=message):
        ngm.solve(ngm.loads(f"{MODEL}\n[state_now]\n{state}\n"), limit=0)


def test_a_set_of_entries_is_acted_on_together() -> None:
    """Published: part A10: on K = [[.8, 1.5], [.6, .5]] the entries (1,1), (1,2) give T1 = 2.6; all four give R0."""
    flows = [
        ("S", "A", "S*(0.8*A + 1.5*B)", "t"), ("S", "B", "S*(0.6*A + 0.5*B)", "t"), ("A", "", "A", "x"), ("B", "", "B", "x"),
    ]  # fmt: skip
    scenario = ngm.loads(text([("S", False), ("A", True), ("B", True)], {"unused": 1}, flows, free={"S": 1}))
    row = ngm.control(scenario, entries=[("A", "A"), ("A", "B")]).entry_set
    assert row is not None
    assert row.T == pytest.approx(2.6, rel=1e-9)
    assert row.critical_effort == pytest.approx(0.6153846154, rel=1e-9)
    every = ngm.control(scenario, entries=[(i, j) for i in "AB" for j in "AB"]).to_json()["entry_set"]
    assert every["T"] == pytest.approx(1.610468636, rel=1e-9)
    with pytest.raises(ngm.ScenarioError, match="'C' is no type at infection"):
        ngm.control(scenario, entries=[("A", "C")])
    assert "entry_set" not in ngm.control(scenario).to_json()
