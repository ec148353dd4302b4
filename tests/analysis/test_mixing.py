"""Mixing: contacts looked at, R0 and the case mix as given, balanced and transposed, and what they answer to."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.analysis.mixing import choose
from ngm.analysis.variation import Variation
from ngm.engine.mixing import assortativity_index, with_assortativity

SCENARIOS = Path(__file__).parents[2] / "scenarios"


def text(matrices, rate, *, q=0.2, s="[1, 1]", gamma="1", sizes="[300, 700]", more=""):
    """Two groups, one infected state."""
    return f"""\
[scenario]
title = "Two groups"
time_unit = "day"

[dimensions]
g = ["young", "old"]

[compartments]
S = {{ infected = false, by = ["g"] }}
I = {{ infected = true, by = ["g"] }}

[parameters]
q = {{ value = {q}, range = [0.1, 0.3] }}
s = {{ value = {s}, by = ["g"] }}
gamma = {{ value = {gamma} }}
size = {{ value = {sizes}, by = ["g"] }}

{matrices}
[[flow]]
from = "S"
to = "I"
rate = "{rate}"
kind = "transmission"

[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"

[infection_free]
S = "size"
{more}
"""


PLAIN = '[matrices.C]\nby = "g"\nvalues = [[8, 4], [2, 6]]\npopulation = "size"\n'
BALANCED = PLAIN + "reciprocal = true\n"
RATE = "q * s * S * C(I / size)"

#: The settings of the published example: the same two groups.
SETTINGS = {
    "home": [[2, 1.4], [0.6, 1.5]],
    "school": [[5, 0.7], [0.3, 0.2]],
    "work": [[0, 0.35], [0.15, 2.5]],
    "other": [[1, 1.4], [0.6, 1.8]],
}


def settings():
    matrices = "".join(
        f'[matrices.{name}]\nby = "g"\nvalues = {values}\npopulation = "size"\n\n' for name, values in SETTINGS.items()
    )
    sums = " + ".join(f"{name}(I / size)" for name in SETTINGS)
    return ngm.loads(text(matrices, f"q * S * ({sums})", q=0.2).replace("value = 0.2", "value = 1"))


# Published: Wallinga et al. (2006) Am. J. Epidemiol. 164:936-944 for reciprocity and its correction (the citation is
# read, the formula is common practice after it); N = (300, 700), C = [[8, 4], [2, 6]], q D = 0.2, numbers re-derived.
def test_reciprocity_and_its_correction():
    found = ngm.mixing(ngm.loads(text(PLAIN, RATE)))
    assert not found.reciprocal
    assert found.gaps.pair == ("old", "young")
    assert found.gaps.largest == pytest.approx(200 / 1300, rel=1e-12)  # by hand: 1400 counted one way, 1200 the other
    assert not found.gaps.is_reciprocal
    assert (found.row_sums, found.column_sums) == ((12, 8), (10, 10))
    assert found.in_force.name == "as given"
    assert found.in_force.R0 == pytest.approx(0.2 * 10, rel=1e-12)
    balanced = found.case("balanced")
    assert balanced.R0 == pytest.approx(2.001585208, abs=5e-10)
    assert balanced.case_mix == pytest.approx((0.4804941148, 0.5195058852), abs=5e-11)


def test_balanced_in_the_scenario_is_balanced_on_the_page():
    found = ngm.mixing(ngm.loads(text(BALANCED, RATE)))
    assert found.in_force.name == "balanced"
    assert found.in_force.R0 == ngm.solve(ngm.loads(text(BALANCED, RATE))).R0  # the same to the last digit
    assert found.in_force.R0 == pytest.approx(2.001585208, abs=5e-10)
    assert np.array(found.table) == pytest.approx(np.array([[8, 13 / 3], [13 / 7, 6]]), rel=1e-12)
    assert found.given == ((8.0, 4.0), (2.0, 6.0))
    assert found.gaps.largest == pytest.approx(200 / 1300, rel=1e-12)
    assert found.case("as given").R0 == pytest.approx(2, rel=1e-12)
    # Published (assortativity index Q, and Newman's r which equals it for two groups).
    assert found.assortativity == pytest.approx(0.4122850123, abs=5e-11)
    assert found.coefficient == pytest.approx(0.4122850123, abs=5e-11)


@pytest.mark.parametrize("s", ["[1, 1]", "[1, 0.5]"])
def test_R0_cannot_reveal_a_transposed_matrix_and_the_mix_can(s):
    found = ngm.mixing(ngm.loads(text(BALANCED, RATE, s=s)))
    turned = found.case("transposed")
    assert turned.R0 == pytest.approx(found.in_force.R0, rel=1e-12)
    if s == "[1, 0.5]":
        assert turned.R0 == pytest.approx(1.741055677, abs=5e-10)  # published
    # Second route: K written out with the transposed matrix.
    K = 0.2 * np.diag([1, float(s[4:-1])]) @ np.diag([300, 700]) @ np.array(found.table).T @ np.diag([1 / 300, 1 / 700])
    values, vectors = np.linalg.eig(K)
    mix = np.abs(vectors[:, np.argmax(values.real)])
    assert turned.case_mix == pytest.approx(mix / mix.sum(), rel=1e-10)
    assert abs(turned.case_mix[0] - found.in_force.case_mix[0]) > 0.1


def test_transposed_first_and_balanced_then_is_another_matrix():
    found = ngm.mixing(ngm.loads(text(BALANCED, RATE)))
    # By hand: C^T = [[8, 2], [4, 6]], totals 600 and 2800, mean 1700.
    K = 0.2 * np.array([[8, 1700 / 300], [1700 / 700, 6]])
    assert found.case("transposed, then balanced").R0 == pytest.approx(max(np.linalg.eigvals(K)), rel=1e-12)


# Published: settings of the same groups, B13's figures; losses do not add up to 1, elasticities do.
def test_settings():
    scenario = settings()
    found = ngm.mixing_responses(scenario, "school")
    assert found.R0 == pytest.approx(9.711549373, abs=5e-10)
    assert found.losses == pytest.approx((0.2770882532, 0.2902791870, 0.07725247529, 0.2041468782), abs=5e-10)
    shares = [curve.elasticity for curve in found.settings]
    assert shares == pytest.approx((0.2774129619, 0.4027224086, 0.1031747639, 0.2166898656), abs=5e-10)
    assert sum(shares) == pytest.approx(1, rel=1e-12)
    assert np.sum(found.entries) == pytest.approx(shares[1], rel=1e-12)
    roots = [2.7, 5.043358345, 2.520826503, 2.4]
    for name, root in zip(SETTINGS, roots, strict=True):
        others = {other: 0.0 for other in SETTINGS if other != name}
        case = ngm.mixing(scenario, name, factors=others).case("with these factors")
        assert case.R0 == pytest.approx(root, abs=5e-10)


def test_factors_are_an_intervention_that_multiplies():
    change = '\n[[intervention]]\nname = "Less"\nchange = [{ matrix = "C", multiply = 0.6 }]\n'
    scenario = ngm.loads(text(BALANCED, RATE, more=change))
    case = ngm.mixing(scenario, factors={"C": 0.6}).case("with these factors")
    (row,) = ngm.compare(scenario).interventions
    assert case.R0 == pytest.approx(row.R0, rel=1e-13)
    assert case.case_mix == pytest.approx(row.case_mix, rel=1e-12)


def test_assortativity_leads_from_proportionate_to_apart():
    scenario = ngm.loads(text(BALANCED, RATE))
    curve = ngm.mixing_responses(scenario).assortativity
    assert curve.now == pytest.approx(0.4122850123, abs=5e-11)
    by_Q = dict(zip(curve.x, curve.R0, strict=True))
    # By hand: a = (37/3, 55/7) contacts. Q = 0: sum(a^2 N)/sum(a N); Q = 1: the most active group alone.
    a, N = np.array([37 / 3, 55 / 7]), np.array([300, 700])
    assert by_Q[0.0] == pytest.approx(0.2 * (a**2 @ N) / (a @ N), rel=1e-12)
    assert by_Q[1.0] == pytest.approx(0.2 * 37 / 3, rel=1e-12)
    assert by_Q[curve.now] == pytest.approx(2.001585208, abs=5e-10)
    table = with_assortativity(np.array(ngm.mixing(scenario).table), N, 0.8)
    assert assortativity_index(table) == pytest.approx(0.8)
    assert curve.case_mix[-1] == pytest.approx((1, 0), abs=1e-12)


def entries_by_differences(scenario, name, block=None):
    """Elasticities a second way: R0 anew with each entry a little larger and smaller."""
    varied = Variation(scenario)
    table = varied.tables[name]
    out = np.zeros_like(table)
    for place in zip(*np.nonzero(table), strict=True):
        ends = []
        for sign in (1, -1):
            moved = table.copy()
            moved[place] *= 1 + sign * 1e-6
            ends.append(varied.outcome({name: moved}).R0)
        out[place] = (ends[0] - ends[1]) / 2e-6 / varied.outcome().R0
    return out if block is None else out[block]


COEFFICIENT = text(BALANCED, "q * s * S * C(I / size) / (1 + C(1)) * max(C(s), 3)", s="[1, 0.5]")
BOTH_SIDES = text(PLAIN, RATE).replace('rate = "gamma * I"', 'rate = "gamma * I * C(0.1)"')
NESTED = text(PLAIN, "q * S * C(C(I / size))")


@pytest.mark.parametrize(
    ("made", "name", "within"),
    [
        (text(BALANCED, RATE, s="[1, 0.5]"), "C", None),
        (COEFFICIENT, "C", None),  # a rate that divides by the number of contacts
        (BOTH_SIDES, "C", None),  # contacts that also take people out
        (NESTED, "C", None),
        ("age-by-region-lantern-rash.toml", "meets", "Southholm"),
        ("age-by-region-lantern-rash.toml", "visits", None),
        ("age-groups-ember-cough.toml", "contacts", None),
    ],
)
def test_elasticities_are_those_of_differences(made, name, within):
    scenario = ngm.load(SCENARIOS / made) if made.endswith(".toml") else ngm.loads(made)
    found = ngm.mixing_responses(scenario, name, within)
    assert found.exact
    block = choose(scenario, name, within).block
    assert np.array(found.entries) == pytest.approx(entries_by_differences(scenario, name, block), abs=2e-9)


def test_a_pair_moves_together():
    found = ngm.mixing_responses(ngm.load(SCENARIOS / "age-groups-ember-cough.toml"))
    entries, pairs = np.array(found.entries), np.array(found.pairs)
    assert pairs[0, 2] == entries[0, 2] + entries[2, 0] == pairs[2, 0]
    assert pairs[1, 1] == entries[1, 1]
    assert np.triu(pairs).sum() == pytest.approx(1, rel=1e-12)  # the only matrix, so each pair once makes 1
    assert found.by_group == pytest.approx(pairs.sum(axis=1), rel=1e-12)


#: Contacts move the state without infection: the shy stay at home.
SHY = """\
[[flow]]
from = "S"
to = "A"
rate = "0.1 * S * C(1)"
kind = "transition"

[[flow]]
from = "A"
to = "S"
rate = "A"
kind = "transition"

[[flow]]
to = "S"
rate = "0.1 * size"
kind = "transition"

[[flow]]
from = "S"
rate = "0.1 * S"
kind = "transition"

[[flow]]
from = "A"
rate = "0.1 * A"
kind = "transition"
"""


def test_contacts_that_move_the_state_without_infection():
    made = text(PLAIN.replace('population = "size"\n', ""), RATE, more=SHY)
    made = made.replace('S = "size"\n', "").replace("[infection_free]\n", "")
    made = made.replace("\n[parameters]", 'A = { infected = false, by = ["g"] }\n\n[parameters]')
    change = '\n[[intervention]]\nname = "Less"\nchange = [{ matrix = "C", multiply = 0.5 }]\n'
    scenario = ngm.loads(made + change)
    found = ngm.mixing_responses(scenario)
    assert not found.exact
    (row,) = ngm.compare(scenario).interventions
    assert found.settings[0].R0[10] == pytest.approx(row.R0, rel=1e-12)  # at a factor of 0.5
    assert np.array(found.entries) == pytest.approx(entries_by_differences(scenario, "C"), abs=1e-7)
    # By hand: S = size (1.1)/(1.1 + 0.1 c), c the row sum, so the elasticity of R0 is less than 1.
    assert found.settings[0].elasticity < 0.8


def test_a_map_and_its_line():
    scenario = ngm.loads(text(BALANCED, RATE))
    found = ngm.mixing_map(scenario, ("factor", "C"), ("parameter", "q"))
    assert found.y.values[0] == 0.1
    assert found.y.values[-1] == 0.3
    # By hand: R0 = 10.00792604 q f, so the line is q = 1/(10.00792604 f).
    for q, row in zip(found.y.values, found.R0, strict=True):
        assert row == pytest.approx([10.00792604 * q * f for f in found.x.values], rel=1e-8)
    assert found.line
    for piece in found.line:
        for f, q in piece:
            assert f * q == pytest.approx(1 / 10.00792604, rel=0.03)  # linear between points of the grid
    assert found.now == pytest.approx(2.001585208, abs=5e-10)


def test_a_map_of_assortativity_and_of_a_grouped_parameter():
    scenario = ngm.loads(text(BALANCED, RATE, s="[1, 0.5]"))
    found = ngm.mixing_map(scenario, ("assortativity", "C"), ("parameter", "s"), side=5)
    assert found.y.title == "factor on s"
    assert found.R0[0] == (0.0,) * 5
    # By hand: at Q = 1 the most active group alone, times the factor.
    assert [row[-1] for row in found.R0] == pytest.approx([0.2 * 37 / 3 * f for f in found.y.values], rel=1e-12)


def test_a_map_tells_where_there_is_no_number():
    scenario = ngm.loads(text(BALANCED, RATE))
    found = ngm.mixing_map(scenario, ("parameter", "gamma"), ("factor", "C"), side=3)
    assert [row[0] for row in found.R0] == [None] * 3  # gamma = 0: V is singular
    assert found.missing


def test_sizes_are_counted_where_they_are_not_given():
    found = ngm.mixing(ngm.loads(text(PLAIN.replace('population = "size"\n', ""), RATE)))
    assert found.sizes == (300, 700)
    assert "without infection" in found.sizes_from
    within = ngm.mixing(ngm.load(SCENARIOS / "age-by-region-lantern-rash.toml"), "meets", "Southholm")
    assert within.within == "Southholm"
    # Second route: the state that `solve` finds.
    state = ngm.solve(ngm.load(SCENARIOS / "age-by-region-lantern-rash.toml")).infection_free
    assert within.sizes == pytest.approx([state["S[child,Southholm]"], state["S[adult,Southholm]"]], rel=1e-12)


def test_the_mix_is_that_of_solve_summed_by_group():
    scenario = ngm.load(SCENARIOS / "age-by-region-lantern-rash.toml")
    solution = ngm.solve(scenario)
    child = sum(
        share for name, share in zip(solution.types_at_infection, solution.right, strict=True) if "child" in name
    )
    assert ngm.mixing(scenario, "meets").in_force.case_mix == pytest.approx((child, 1 - child), rel=1e-12)


def test_movements_are_no_contacts():
    assert ngm.mixing(ngm.load(SCENARIOS / "age-by-region-lantern-rash.toml")).settings == ("meets", "visits")


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda s: ngm.mixing(s, "D"), "'D' is no contact matrix of this scenario. There are C."),
        (lambda s: ngm.mixing(s, "C", "young"), "is one matrix"),
        (lambda s: ngm.mixing(s, factors={"C": -1.0}), "-1 is no factor"),
        (lambda s: ngm.mixing(s, factors={"c": 1.0}), "'c' is no contact matrix"),
        (lambda s: ngm.mixing_map(s, ("factor", "C"), ("factor", "C")), "the same quantity"),
        (lambda s: ngm.mixing_map(s, ("factor", "C"), ("parameter", "beta")), "'beta' is no parameter"),
        (lambda s: ngm.mixing_map(s, ("factor", "C"), ("speed", "C")), "no kind of axis"),
        (
            lambda s: ngm.mixing_map(s, ("factor", "C"), ("assortativity", "C"), ranges=(None, (0.0, 2.0))),
            "is no range",
        ),
    ],
)
def test_what_is_refused(call, words):
    with pytest.raises(ngm.ScenarioError) as caught:
        call(ngm.loads(text(PLAIN, RATE)))
    assert words in str(caught.value)


def test_without_a_matrix_the_refusal_says_what_to_do():
    with pytest.raises(ngm.ScenarioError) as caught:
        ngm.mixing(ngm.load(SCENARIOS / "seir-velmar-fever.toml"))
    assert "[matrices.NAME]" in str(caught.value)


def test_an_empty_group_is_named():
    found = ngm.mixing(ngm.loads(text(PLAIN, "q * S * C(I / 1000)", sizes="[0, 700]")))
    assert found.sizes is None
    assert "young has no members" in found.sizes_from
    assert found.gaps is None
    assert found.case("balanced") is None


def test_a_scenario_without_R0_still_shows_its_matrix():
    made = text(PLAIN, RATE, more='[[flow]]\nto = "I"\nrate = "2 * I"\nkind = "transition"\n')
    found = ngm.mixing(ngm.loads(made))
    assert found.in_force.R0 is None
    assert "M-matrix" in found.in_force.why
    responses = ngm.mixing_responses(ngm.loads(made))
    assert responses.R0 is None
    assert responses.entries is None


def test_sixteen_groups_answer():
    scenario = ngm.load(SCENARIOS / "sixteen-ages-marl-cough.toml")
    assert ngm.mixing_responses(scenario, "school").R0 is not None
    assert ngm.mixing_map(scenario, ("factor", "school"), ("factor", "elsewhere")) is not None
