"""Every verb with a K as given and with a projected population: by hand, and by second routes."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

import ngm
from ngm.__main__ import main
from ngm.errors import DerivationError, NgmError, ScenarioError
from tests.stated import change, given, population

SPREAD = "[parameters.p]\nvalue = 0.4\nrange = [0.2, 0.6]\n[parameters.c]\nvalue = 5\nrange = [3, 7]\n"
#: K = [[0, c p], [2, 0]]: R0 = sqrt(2 c p) = 2 at c = 5, p = 0.4, by hand.
CYCLE = given([[0, "c * p"], [2, 0]], ["tick", "mouse"], more="sizes = [1000, 50]", tail=SPREAD)
#: R0 = f s/(1 - a) = 4 * 0.3/0.4 = 3, by hand.
PEOPLE = population([[0, "f"], [0, 0]], [[0, 0], ["s", "a"]], ["young", "adult"], {"f": 4, "s": 0.3, "a": 0.6})


def load(text: str, *interventions: str):
    return ngm.loads(text + "\n".join(interventions))


# --- solve ------------------------------------------------------------------------------------------------------------


def test_closed_forms():
    assert ngm.solve(load(CYCLE)).closed_form == "sqrt(2*c*p)"
    assert ngm.solve(load(PEOPLE)).closed_form == "f*s/(1 - a)"


def test_json_of_a_K():
    told = ngm.solve(load(CYCLE)).to_json()
    for name in ("infection_free", "F", "V", "K_large", "growth_rate", "doubling_time"):
        assert told[name] is None
    assert "growth_factor" not in told
    assert [told["symbolic"][name] for name in ("F", "V", "infection_free")] == [None] * 3
    assert told["symbolic"]["K"] == [["0", "c*p"], ["2", "0"]]
    assert told["symbolic"]["characteristic_polynomial"] == "x^2 - 2*c*p"
    assert told["conditions"] == []
    assert told["structure"]["period"] == 2
    assert [c["growth_rate"] for c in told["structure"]["classes"]] == [None]
    assert told["per_cycle"] == pytest.approx(4, rel=1e-15)


def test_json_of_a_population():
    told = ngm.solve(load(PEOPLE)).to_json()
    assert told["infection_free"] is None
    assert told["types"] == ["young", "adult"]
    assert told["types_at_infection"] == ["young"]
    assert told["F"] == [[0, 4], [0, 0]]
    assert told["V"] == [[1, 0], [-0.3, pytest.approx(0.4)]]
    # By hand: l^2 - 0.6 l - 1.2 = 0; w = (l - 0.6, 0.3), v = (1, l/0.3).
    factor = 0.3 + math.sqrt(0.09 + 1.2)
    assert told["growth_factor"] == pytest.approx(factor, rel=1e-14)
    assert told["growth_rate"] == pytest.approx(math.log(factor), rel=1e-14)
    assert told["doubling_time"] == pytest.approx(math.log(2) / math.log(factor), rel=1e-13)
    total = factor - 0.6 + 0.3
    assert told["stable_structure"] == pytest.approx([(factor - 0.6) / total, 0.3 / total], rel=1e-13)
    assert told["reproductive_values"] == pytest.approx([1, factor / 0.3], rel=1e-13)
    assert told["growth_factor_period"] == 1
    assert [c["name"] for c in told["conditions"]] == ["A1", "A2", "A3", "A4", "A5"]
    assert all(c["holds"] for c in told["conditions"])
    # The growth rate of a class: ln of the l at which its block of F (l I - T)^-1 has root 1: that of the whole here.
    assert told["structure"]["classes"][0]["growth_rate"] == pytest.approx(math.log(factor), rel=1e-14)


def test_classes_of_a_population_grow_by_themselves():
    # By hand: two populations side by side, l = 1.5 * ... each stage breeds for itself: F = diag(0.9, 0.2), T = diag(0.3, 0.7).
    text = population([[0.9, 0], [0.1, 0.2]], [[0.3, 0], [0, 0.7]])
    classes = {c.types[0]: c for c in ngm.solve(ngm.loads(text), limit=0).structure.classes}
    assert classes["s1"].R0 == pytest.approx(0.9 / 0.7, rel=1e-14)
    assert classes["s1"].growth_rate == pytest.approx(math.log(1.2), rel=1e-13)
    assert classes["s2"].R0 == pytest.approx(0.2 / 0.3, rel=1e-14)
    assert classes["s2"].growth_rate == pytest.approx(math.log(0.9), rel=1e-13)


def test_classes_that_tie_have_no_structure():
    text = population([[0.5, 0], [0.2, 0.5]], [[0.5, 0], [0, 0.5]])
    solution = ngm.solve(ngm.loads(text), limit=0)
    assert solution.growth_factor == 1
    assert solution.projected.stable_structure is None
    assert any("share the growth factor" in warning for warning in solution.warnings)


def test_elasticities_of_the_growth_factor_against_differences():
    # Second route: central differences of the dominant root of a general routine.
    F, T = np.array([[0, 1.5, 2.0], [0, 0, 0], [0, 0, 0]]), np.array([[0.1, 0, 0], [0.5, 0.2, 0], [0, 0.4, 0.3]])
    about = ngm.solve(ngm.loads(population(F.tolist(), T.tolist())), limit=0).projected

    def root(A):
        return max(np.linalg.eigvals(A).real)

    for part, told in ((F, about.elasticity_births), (T, about.elasticity_transitions)):
        for i, j in np.argwhere(part > 0):
            step = np.zeros((3, 3))
            step[i, j] = 1e-6 * part[i, j]
            slope = (root(F + T + step) - root(F + T - step)) / 2e-6
            assert told[i][j] == pytest.approx(slope / root(F + T), rel=1e-7)


def test_negative_entries_at_the_values():
    K = given([["a - b"]], ["x"], {"a": 1, "b": 2})
    solution = ngm.solve(ngm.loads(K), limit=0)
    assert solution.R0 is None
    assert solution.no_R0.startswith("K[x, x] is negative at these values")
    births = population([["a - b"]], [[0.5]], ["x"], {"a": 1, "b": 2})
    assert ngm.solve(ngm.loads(births), limit=0).no_R0.startswith("births[x, x] is negative")
    with pytest.raises(DerivationError, match=r"projection, transitions\[x, x\]: is -1 at these values"):
        ngm.solve(ngm.loads(population([[1]], [["a - b"]], ["x"], {"a": 1, "b": 2})), limit=0)


# --- interventions and control ----------------------------------------------------------------------------------------


def test_interventions_scale_rows_and_columns():
    # By hand: each of the two entries of the cycle is multiplied, so R0 by the root of it.
    rows = ngm.compare(
        load(
            CYCLE,
            change('susceptibility = "mouse", reduce = 0.75').replace('"x"', '"row"'),
            change('infectivity = "mouse", reduce = 0.36').replace('"x"', '"column"'),
            change('parameter = "p", set = 0.1').replace('"x"', '"value"'),
        )
    )
    assert rows.baseline.growth_rate is None
    assert [row.R0 for row in rows.interventions] == pytest.approx([1, 1.6, 1], rel=1e-14)
    assert [row.growth_rate for row in rows.interventions] == [None] * 3
    people = ngm.compare(load(PEOPLE, change('infectivity = "adult", reduce = 0.5'))).interventions
    assert people[0].R0 == pytest.approx(1.5, rel=1e-14)
    assert people[0].growth_rate == pytest.approx(math.log(0.3 + math.sqrt(0.09 + 0.6)), rel=1e-13)


def test_control_of_a_population():
    result = ngm.control(load(PEOPLE))
    assert [t.T for t in result.type_reproduction] == pytest.approx([3], rel=1e-14)
    (state,) = result.state_reproduction
    assert (state.state, state.T) == ("adult", pytest.approx(3, rel=1e-14))
    assert ngm.control(load(CYCLE)).state_reproduction == ()


def test_strength_coverage_and_supply():
    # By hand: (1 - s)(1 - 0) of one entry: R0^2 = 4 (1 - 0.9 s) = 1 at s = 5/6.
    scenario = load(CYCLE, change('susceptibility = "mouse", reduce = 0.9'))
    assert ngm.strength_needed(scenario, "x").strength == pytest.approx(5 / 6, rel=1e-9)
    # One type alone: T = 4.
    assert ngm.coverage_needed(scenario, ["mouse"]).coverage == pytest.approx(0.75, rel=1e-12)
    shared = ngm.allocate(scenario, 10)
    assert shared.groups == ("tick", "mouse")
    assert shared.sizes == (1000, 50)
    # All ten doses to the fifty mice: R0^2 = 4 (1 - 0.2), by hand.
    assert shared.best.R0 == pytest.approx(math.sqrt(3.2), rel=1e-6)
    with pytest.raises(ScenarioError, match="a projected population is not vaccinated"):
        ngm.coverage_needed(load(PEOPLE))


# --- sensitivities ----------------------------------------------------------------------------------------------------


def test_local_indices_by_hand():
    result = ngm.sensitivity(load(CYCLE))
    assert {i.parameter: i.elasticity for i in result.local} == {"p": pytest.approx(0.5), "c": pytest.approx(0.5)}
    assert {i.growth_elasticity for i in result.local} == {None}
    assert np.array(result.entry_elasticity) == pytest.approx(np.array([[0, 0.5], [0.5, 0]]))
    people = {i.parameter: i for i in ngm.sensitivity(load(PEOPLE)).local}
    assert people["a"].elasticity == pytest.approx(0.6 / 0.4, rel=1e-13)
    # d ln l / da by hand: l^2 = a l + f s, so dl/da = l/(2 l - a).
    factor = 0.3 + math.sqrt(0.09 + 1.2)
    assert people["a"].growth_derivative == pytest.approx(1 / (2 * factor - 0.6), rel=1e-12)


def test_draws_are_solved_one_by_one():
    scenario = load(CYCLE)
    found = ngm.reproduction_numbers(scenario, {"c": np.array([1.0, 2, 8]), "p": np.array([0.5, 0.25, 1])})
    assert found == pytest.approx([1, 1, 4], rel=1e-14)
    # Shares of a draw past 1: there is no R0, and the draw is told.
    people = ngm.reproduction_numbers(load(PEOPLE), {"a": np.array([0.2, 0.6, 1.0, 1.5])})
    assert people[:2] == pytest.approx([1.5, 3], rel=1e-14)
    assert np.isnan(people[2:]).all()
    spread = ngm.sensitivity(scenario, draws=500, seed=1).uncertainty
    assert spread.R0.rejected == 0
    assert 1.5 < spread.R0.mean < 2.5


def test_calibrate():
    assert ngm.calibrate(load(CYCLE), "c", 1.6).value == pytest.approx(3.2, rel=1e-9)
    with pytest.raises(ScenarioError, match="no growth rate"):
        ngm.calibrate(load(CYCLE), "c", growth_rate=0.1)
    assert ngm.calibrate(load(PEOPLE), "f", growth_rate=0.0).value == pytest.approx(4 / 3, rel=1e-9)


# --- second opinions --------------------------------------------------------------------------------------------------


def test_second_opinions():
    scenario = load(CYCLE)
    assert ngm.formula(scenario, "sqrt(2 * c * p)").verdict == "equal"
    assert ngm.formula(scenario, "2 * c * p").verdict in ("square", "type number")
    assert ngm.formula(load(PEOPLE), "f * s / (1 - a)").verdict == "equal"
    splits = ngm.splits(scenario)
    assert splits.choices == {}
    assert "no flows that could be divided" in splits.none
    units = ngm.units(scenario)
    assert (units.stays, units.compartments) == ((), {})
    assert "every entry of the matrices" in units.fits
    moved = ngm.difference(scenario, scenario.with_values(c=10))
    assert {(e.matrix, e.row, e.column, e.after) for e in moved.entries} == {("K", "tick", "mouse", 4.0)}
    people = load(PEOPLE)
    other = load(PEOPLE.replace('"s"', "0.5"))
    moved = ngm.difference(people, other)
    assert [change.words() for change in moved.changes] == ["entry transitions[adult, young] changed: s -> 0.5"]
    assert moved.contributions[0].in_order == pytest.approx(2, rel=1e-12)  # from 3 to 5
    # Two forms: the whole is one change, from 2 to 3.
    moved = ngm.difference(scenario, people)
    assert [change.words() for change in moved.changes] == ["model form changed: K as given -> projection"]
    assert moved.contributions[0].in_order == pytest.approx(1, rel=1e-12)


@pytest.mark.parametrize("verb", ["solve", "compare", "control", "sensitivity", "units", "splits", "outbreak"])
@pytest.mark.parametrize("text", [CYCLE, PEOPLE], ids=["K", "population"])
def test_verbs_on_the_command_line(verb, text, tmp_path, capsys):
    path = tmp_path / "x.toml"
    path.write_text(text, encoding="utf-8")
    assert main([verb, str(path), "--json"]) == 0
    assert "warnings" in json.loads(capsys.readouterr().out)
    assert main([verb, str(path)]) == 0
    said = capsys.readouterr().out
    assert "None" not in said
    assert "nan" not in said


def test_what_needs_flows_or_contacts_is_refused_in_a_sentence():
    for text in (CYCLE, PEOPLE):
        with pytest.raises(NgmError, match="contact matrix"):
            ngm.mixing(load(text))
        with pytest.raises(ScenarioError, match="no dimension"):
            ngm.control(load(text), by="age")


def test_a_population_without_births_says_so():
    scenario = load(population([[0, 0], [0, 0]], [[0.5, 0], [0.2, 0.9]]))
    assert ngm.solve(scenario, limit=0).warnings == ("No stage has births: R0 is 0.",)
    assert ngm.control(scenario).warnings == ("No stage has births: R0 is 0. There is nothing to control.",)
