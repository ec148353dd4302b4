"""Final size, chance and pace of scenarios: published values, the flows integrated, and what does not apply."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import ngm
from ngm.__main__ import main
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.process import dense_F_and_V, process
from tests.analysis.packages import intervention
from tests.derivation.models import hosts_and_vectors, patches, text

SEIR = text(
    [("S", False), ("E", True), ("I", True), ("R", False)],
    {"beta": 0.5, "sigma": 0.2, "gamma": 0.125, "mu": 0.0005, "Lambda": 0.5},
    [
        ("", "S", "Lambda", "x"),
        ("S", "E", "beta*S*I/N", "t"),
        ("E", "I", "sigma*E", "x"),
        ("I", "R", "gamma*I", "x"),
        *((name, "", f"mu*{name}", "x") for name in "SEIR"),
    ],
    definitions={"N": "S + E + I + R"},
)
CLOSED = text(
    [("S", False), ("E", True), ("I", True), ("R", False)],
    {"beta": 0.3, "sigma": 0.5, "gamma": 0.2, "n": 1000},
    [("S", "E", "beta*S*I/(S+E+I+R)", "t"), ("E", "I", "sigma*E", "x"), ("I", "R", "gamma*I", "x")],
    free={"S": "n", "R": 0},
)
#: K = [[1.2, .8], [.5, .9]] with 400 and 600 members: contacts b_ij per susceptible i, recovery 1.
TWO = text(
    [("S1", False), ("I1", True), ("R1", False), ("S2", False), ("I2", True), ("R2", False)],
    {},
    [
        ("S1", "I1", "S1*(1.2*I1 + 0.8*I2)/400", "t"),
        ("S2", "I2", "S2*(0.5*I1 + 0.9*I2)/600", "t"),
        ("I1", "R1", "I1", "x"),
        ("I2", "R2", "I2", "x"),
    ],
    free={"S1": 400, "S2": 600, "R1": 0, "R2": 0},
)


def outbreak(model: str, **options):
    return ngm.outbreak(ngm.loads(model), **options)


# -- how many in the end ------------------------------------------------------------------------------------------------


def test_published_final_size():
    # Published (second hand), after Arino et al. (2007) Math. Biosci. Eng. 4:159-175.
    found = outbreak(TWO)
    assert found.R == pytest.approx(1.7, rel=1e-14)
    assert [row.attack_rate for row in found.final_size.rows] == pytest.approx([0.7926654955, 0.5185193597], abs=1e-10)
    assert found.final_size.infected == pytest.approx(400 * 0.7926654955 + 600 * 0.5185193597, abs=1e-6)
    for row in found.final_size.rows:
        assert row.bounds[0] <= row.attack_rate <= row.bounds[1]
        assert row.bounds[1] - row.bounds[0] < 1e-12


@pytest.mark.parametrize("share", [1.0, 0.8])
def test_against_the_flows_integrated(share):
    # Second route: the differential equations of the flows, from a very small seed; susceptibles not at full too.
    model = CLOSED.replace('S = "n"', f'S = "{share}*n"').replace('R = "0"', f'R = "{1 - share}*n"')
    found = outbreak(model)

    def slope(_, y):
        S, E, infectious, _ = y
        new = 0.3 * S * infectious / sum(y)
        return [-new, new - 0.5 * E, 0.5 * E - 0.2 * infectious, 0.2 * infectious]

    start = [share * 1000, 1e-7, 0, (1 - share) * 1000]
    done = solve_ivp(slope, (0, 2000), start, method="LSODA", rtol=1e-11, atol=1e-12)
    assert found.final_size.attack_rate == pytest.approx(1 - done.y[0, -1] / start[0], abs=1e-6)
    assert found.final_size.susceptible == pytest.approx(share * 1000)


def test_symptoms_or_none_use_up_the_same_people():
    # Second route: the flows integrated. A fixed share of the infections is without symptoms.
    model = text(
        [("S", False), ("I", True), ("A", True), ("R", False)],
        {"b": 0.4, "p": 0.6},
        [
            ("S", "I", "p*b*S*(I + A/2)/1000", "t"),
            ("S", "A", "(1-p)*b*S*(I + A/2)/1000", "t"),
            ("I", "R", "0.2*I", "x"),
            ("A", "R", "0.25*A", "x"),
        ],
        free={"S": 1000, "R": 0},
    )
    found = outbreak(model)

    def slope(_, y):
        force = 0.4 * y[0] * (y[1] + y[2] / 2) / 1000
        return [-force, 0.6 * force - 0.2 * y[1], 0.4 * force - 0.25 * y[2]]

    done = solve_ivp(slope, (0, 4000), [1000, 1e-6, 0], method="LSODA", rtol=1e-11, atol=1e-12)
    assert found.final_size.attack_rate == pytest.approx(1 - done.y[0, -1] / 1000, abs=1e-6)
    first, second = found.final_size.rows
    assert (first.type, second.type) == ("I", "A")
    assert first.infected / second.infected == pytest.approx(1.5, rel=1e-12)


@pytest.mark.parametrize(
    ("model", "said"),
    [
        (SEIR, ("come from outside by flow 1",)),
        (
            text([("S", False), ("I", True)], {}, [("S", "I", "2*S*I", "t"), ("I", "S", "I", "x")], free={"S": 1}),
            ("flow 2", "back"),
        ),
        (
            text([("S", False), ("I", True)], {}, [("S", "I", "2*I*S/(S+I)", "t"), ("I", "", "I", "x")], free={"S": 9}),
            ("not in proportion", "deaths"),
        ),
        (
            text([("S", False), ("I", True)], {}, [("", "I", "2*S*I", "t"), ("I", "", "I", "x")], free={"S": 1}),
            ("flow 1", "reservoir"),
        ),
        (CLOSED.replace("[scenario]", '[scenario]\ntime = "discrete"'), ("continuous time",)),
    ],
)
def test_where_it_does_not_apply_the_reason_is_given(model, said):
    size = outbreak(model).final_size
    assert size.rows == ()
    assert size.attack_rate is None
    assert size.why is not None
    for words in said:
        assert words in size.why


GIVEN = """
[scenario]
title = "Given"
time_unit = "week"
[next_generation]
types = ["young", "old"]
K = [[1.2, 0.8], [0.5, 0.9]]
sizes = [400, 600]
"""


def test_a_given_matrix_and_sizes_are_enough():
    # Published (second hand), as above; chances by hand: Poisson numbers with the means of K.
    found = outbreak(GIVEN, introduce={"old": 1})
    assert [row.attack_rate for row in found.final_size.rows] == pytest.approx([0.7926654955, 0.5185193597], abs=1e-10)
    q = np.array([row.dies_out for row in found.chance.rows])
    assert q == pytest.approx(np.exp(-np.array([[1.2, 0.8], [0.5, 0.9]]).T @ (1 - q)), abs=1e-14)
    assert found.chance.large_outbreak == pytest.approx(1 - q[1])
    assert "no time in it" in (found.pace.why or "")
    assert "sizes" in (outbreak(GIVEN.replace("sizes = [400, 600]", "")).final_size.why or "")


def test_a_projected_population():
    # By hand: one stage, half of the members survive a step and have 0.8 young on average.
    model = """
[scenario]
title = "Projected"
time_unit = "year"
[projection]
stages = ["adult"]
births = [[0.8]]
transitions = [[0.5]]
"""
    found = outbreak(model)
    q = found.chance.rows[0].dies_out
    assert q == pytest.approx((0.5 + 0.5 * q) * math.exp(-0.8 * (1 - q)), abs=1e-14)
    assert 0 < q < 1
    assert found.pace.mean == pytest.approx(2, rel=1e-12)  # sum of a (1/2)^a over a
    assert "births in every step" in (found.final_size.why or "")


def test_two_strains_do_not_share_one_equation():
    model = text(
        [("S", False), ("A", True), ("B", True), ("R", False)],
        {},
        [("S", "A", "2*S*A", "t"), ("S", "B", "3*S*B", "t"), ("A", "R", "A", "x"), ("B", "R", "B", "x")],
        free={"S": 1, "R": 0},
    )
    assert "two infections use up the same people" in (outbreak(model).final_size.why or "")


def test_vaccines():
    # By hand: all-or-nothing with the share c a immune is a smaller population; leaky by its own equation.
    c, a = 0.4, 0.6
    found = outbreak(CLOSED, coverage=c, efficacy=a, kind="all-or-nothing")
    assert found.label == "control reproduction number"
    assert found.R == pytest.approx(1.5 * (1 - c * a), rel=1e-12)
    rest = outbreak(CLOSED.replace('S = "n"', f'S = "{1 - c * a}*n"').replace('R = "0"', f'R = "{c * a}*n"'))
    assert found.final_size.infected == pytest.approx(rest.final_size.infected, rel=1e-12)
    row = found.final_size.rows[0]
    assert row.vaccinated == pytest.approx((1 - a) * row.unvaccinated, rel=1e-14)
    leaky = outbreak(CLOSED, coverage=c, efficacy=a)
    x = -math.log(1 - leaky.final_size.rows[0].unvaccinated)
    assert x == pytest.approx(1.5 * ((1 - c) * (1 - math.exp(-x)) + c * (1 - math.exp(-(1 - a) * x))), rel=1e-12)
    # the chance at first: infections thinned by the same share, whatever the kind
    assert leaky.chance.rows[1].dies_out == pytest.approx(1 / (1.5 * (1 - c * a)), rel=1e-12)
    assert outbreak(CLOSED, coverage=c, efficacy=a, against_spread=0.5).chance.why is not None


def test_wrong_questions():
    for options, said in (
        ({"introduce": {"J": 1}}, "no infected type"),
        ({"introduce": {"I": 0.5}}, "whole number"),
        ({"coverage": 30}, "For 30 % write 0.30"),
        ({"coverage": {"nobody": 0.3}}, "no group of hosts"),
        ({"kind": "good", "coverage": 0.1}, "leaky"),
        ({"interventions": ["Nothing"]}, "Nothing"),
    ):
        with pytest.raises(ngm.ScenarioError, match=said):
            outbreak(CLOSED, **options)


# -- by chance ----------------------------------------------------------------------------------------------------------


def test_published_chances():
    # Published (second hand), Allen & Lahodny (2012) J. Biol. Dyn. 6:590-611.
    chance = {row.type: row.dies_out for row in outbreak(SEIR).chance.rows}
    assert chance == pytest.approx({"E": 0.2534937656, "I": 0.2516275000}, abs=1e-10)
    malaria = text(
        [("Sv", False), ("Iv", True), ("Sh", False), ("Ih", True)],
        {"a": 0.3, "b": 0.5, "c": 0.4, "gamma": 0.01, "g": 0.12},
        [
            ("Sh", "Ih", "a*b*Iv*Sh/100", "t"),
            ("Sv", "Iv", "a*c*Ih*Sv/100", "t"),
            ("Ih", "", "gamma*Ih", "x"),
            ("Iv", "", "g*Iv", "x"),
        ],
        free={"Sv": 200, "Sh": 100},
    )
    found = outbreak(malaria)
    chance = {row.type: row.dies_out for row in found.chance.rows}
    assert chance == pytest.approx({"Ih": 0.072, "Iv": 0.4629629630}, abs=1e-10)
    assert chance["Ih"] * chance["Iv"] == pytest.approx(1 / found.R**2, rel=1e-12)


def test_cases_introduced_are_independent():
    found = outbreak(SEIR, introduce={"I": 3, "E": 1}).chance
    chance = {row.type: row.dies_out for row in found.rows}
    assert found.large_outbreak == pytest.approx(1 - chance["I"] ** 3 * chance["E"], rel=1e-14)
    assert outbreak(SEIR).chance.large_outbreak is None


def test_interventions_prevent_infections():
    # By hand: with 60 % of infectivity gone q_I solves a quadratic with the roots 1 and (gamma+mu)(sigma+mu)/(0.4 beta sigma).
    model = SEIR + intervention("Masks", 'infectivity = "I", reduce = 0.6')
    found = outbreak(model, interventions=["Masks"])
    assert found.label == "control reproduction number"
    assert {r.type: r.dies_out for r in found.chance.rows}["I"] == pytest.approx(
        0.1255 * 0.2005 / (0.4 * 0.5 * 0.2), rel=1e-12
    )


def test_steps_against_simulation():
    # Second route: 2,000 families simulated step by step, seed fixed, within four standard errors.
    found = outbreak(CLOSED.replace("[scenario]", '[scenario]\ntime = "discrete"'))
    q = {row.type: row.dies_out for row in found.chance.rows}
    rng = np.random.default_rng(5)
    runs = 2000
    E, infectious = np.zeros(runs, dtype=int), np.ones(runs, dtype=int)
    while True:
        active = (E + infectious > 0) & (E + infectious < 150)
        if not active.any():
            break
        onset, recovered = rng.binomial(E, 0.5), rng.binomial(infectious, 0.2)
        made = rng.poisson(0.3 * infectious)
        E = np.where(active, E - onset + made, E)
        infectious = np.where(active, infectious + onset - recovered, infectious)
    share = np.mean(E + infectious == 0)
    assert abs(share - q["I"]) < 4 * math.sqrt(q["I"] * (1 - q["I"]) / runs)


@pytest.mark.parametrize("model", [SEIR, TWO, hosts_and_vectors(2, 2), patches(3)])
def test_events_add_up_to_F_and_V(model):
    found = decided_numbers(ngm.loads(model))
    events = process(found)
    F, V = dense_F_and_V(found)
    assert events.F == pytest.approx(F, abs=1e-14)
    assert events.V == pytest.approx(V, abs=1e-14)


def test_a_transmission_that_leaves_an_infected_state():
    # By hand: E becomes I by a flow counted as transmission; under an intervention it leaves and is no case.
    model = text(
        [("S", False), ("E", True), ("I", True)],
        {},
        [("S", "E", "S*I", "t"), ("E", "I", "0.4*E", "t"), ("E", "", "0.1*E", "x"), ("I", "", "0.5*I", "x")],
        free={"S": 1},
    ) + intervention("Drug", 'susceptibility = "I", reduce = 0.25')
    events = process(decided_numbers(ngm.loads(model)))
    assert events.swaps == pytest.approx(np.array([[0, 0], [0.4, 0]]))
    assert events.exits == pytest.approx([0.1, 0.5])
    under = process(decided_numbers(ngm.loads(model), ngm.loads(model).interventions[0]))
    assert under.swaps == pytest.approx(np.array([[0, 0], [0.3, 0]]))
    assert under.exits == pytest.approx([0.2, 0.5])


# -- pace ---------------------------------------------------------------------------------------------------------------


def test_pace_of_a_plain_model():
    # By hand: 1/sigma + 1/gamma; R0 from growth and intervals (Wallinga & Lipsitch 2007) is that of F V^-1.
    found = outbreak(CLOSED)
    assert found.pace.mean == pytest.approx(7, rel=1e-13)
    assert found.pace.sd == pytest.approx(math.hypot(2, 5), rel=1e-12)
    assert found.pace.R0_by_growth == pytest.approx(found.R, rel=1e-9)
    assert found.pace.growth_rate == pytest.approx(ngm.solve(ngm.loads(CLOSED)).growth_rate, rel=1e-12)
    assert found.pace.total == pytest.approx(1, abs=1e-6)


def test_pace_is_that_of_the_class_that_attains_R0():
    model = text(
        [("S", False), ("A", True), ("B", True)],
        {},
        [("S", "A", "2*S*A", "t"), ("S", "B", "9*S*B", "t"), ("A", "", "0.5*A", "x"), ("B", "", "3*B", "x")],
        free={"S": 1},
    )
    found = outbreak(model)
    assert found.pace.types == ("A",)
    assert found.pace.mean == pytest.approx(2, rel=1e-12)


# -- command line -------------------------------------------------------------------------------------------------------


def test_command_line(tmp_path, capsys):
    path = tmp_path / "closed.toml"
    path.write_text(CLOSED + intervention("Masks", 'infectivity = "I", reduce = 0.1'))
    assert main(["outbreak", str(path), "--introduce", "I=2", "--with", "Masks"]) == 0
    text = capsys.readouterr().out
    assert "with Masks in force" in text
    assert "2 I start a large outbreak" in text
    assert "control reproduction number = 1.35" in text
    assert main(["outbreak", str(path), "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["label"] == "R0"
    assert told["final_size"]["types"][0]["attack_rate"] == pytest.approx(0.5828116438, abs=1e-9)
    assert told["pace"]["mean"] == pytest.approx(7)
    assert "warnings" in told
    assert main(["outbreak", str(path), "--introduce", "J=2"]) == 2
    assert "no infected type" in capsys.readouterr().err
    assert main(["outbreak", str(path), "--introduce", "2"]) == 2
    assert "TYPE=NUMBER" in capsys.readouterr().err
