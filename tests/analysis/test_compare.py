"""Interventions beside the baseline, and control that does what its critical effort promises."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import ngm
from ngm.__main__ import main
from ngm.analysis.numbers import decided_numbers
from ngm.engine.balls import to_floats
from ngm.engine.control import target_reproduction_number, type_reproduction_number
from ngm.engine.perron import reproduction_number
from tests.analysis.packages import TOWN, intervention, matrix_text, numbers
from tests.derivation.models import text
from tests.properties.random_models import draw

SIR = text(
    [("S", False), ("I", True)],
    {"beta": 0.6, "gamma": 0.2},
    [("S", "I", "beta*S*I/1000", "t"), ("I", "", "gamma*I", "x")],
    free={"S": 1000},
)
PACKAGES = [
    intervention("Distance", 'parameter = "beta", multiply = 0.5', cost=2.0),
    intervention("Treatment", 'parameter = "gamma", add = 0.8', cost=1.5, note='"by hand"'),
]


def rows(model: str, *interventions: str, **options):
    return {row.name: row for row in ngm.compare(ngm.loads(model + "\n".join(interventions)), **options).interventions}


# -- by hand ----------------------------------------------------------------------------------------------------------


def test_numbers_of_one_type_by_hand():
    result = ngm.compare(ngm.loads(SIR + "\n".join(PACKAGES)))
    assert result.baseline.label == "R0"
    assert result.baseline.R0 == pytest.approx(3, rel=1e-15)
    assert result.baseline.doubling_time == pytest.approx(math.log(2) / 0.4, rel=1e-14)
    assert result.baseline.halving_time is None
    distance, treatment = result.interventions
    assert distance.label == treatment.label == "control reproduction number"
    assert distance.R0 == pytest.approx(1.5, rel=1e-15)  # 0.3/0.2
    assert distance.growth_rate == pytest.approx(0.1, rel=1e-14)
    assert distance.reduction == pytest.approx(0.5, rel=1e-15)
    assert not distance.below_one
    assert treatment.R0 == pytest.approx(0.6, rel=1e-15)  # 0.6/1
    assert treatment.growth_rate == pytest.approx(-0.4, rel=1e-14)
    assert treatment.halving_time == pytest.approx(math.log(2) / 0.4, rel=1e-14)
    assert treatment.doubling_time is None
    assert treatment.below_one
    assert (treatment.cost, treatment.note) == (1.5, "by hand")
    for row in (result.baseline, distance, treatment):
        low, high = row.bounds
        assert low <= row.R0 <= high
    assert [row.name for row in result.by_number()] == ["Treatment", "Distance"]


def test_every_kind_of_change_by_hand():
    # K = q/gamma diag(n) C' diag(1/n) with C' = [[8, 13/3], [13/7, 6]] (balanced by hand) and q/gamma = 0.2.
    def root(K):
        return max(np.linalg.eigvals(np.array(K)).real)

    n, C = np.array([300.0, 700.0]), np.array([[8, 13 / 3], [13 / 7, 6]])
    K = 0.2 * n[:, None] * C / n[None, :]
    school = C * [[0.5, 1], [1, 1]]
    added = C + np.array([[0, 0], [1, 1]])
    found = numbers(
        TOWN,
        intervention("all contacts", 'matrix = "C", multiply = 0.3'),
        intervention("school", 'matrix = "C", multiply = 0.5, rows = ["young"], columns = ["young"]'),
        intervention("added", 'matrix = "C", add = 1, rows = ["old"]'),
        intervention("set", 'matrix = "C", set = 2'),
        intervention("less susceptible", 'susceptibility = "I", group = { age = "old" }, reduce = 0.5'),
        intervention("less infectious", 'infectivity = "I", group = { age = ["old"] }, reduce = 0.5'),
        intervention("everybody", 'susceptibility = "I", reduce = 0.25', 'infectivity = "I", reduce = 0.5'),
        intervention("in order", 'parameter = "q", multiply = 0', 'parameter = "q", add = 0.05'),
    )
    expected = {
        "all contacts": root(0.3 * K),
        "school": root(0.2 * n[:, None] * school / n[None, :]),
        "added": root(0.2 * n[:, None] * added / n[None, :]),
        "set": root(0.2 * n[:, None] * np.full((2, 2), 2.0) / n[None, :]),
        "less susceptible": root(K * [[1, 1], [0.5, 0.5]]),
        "less infectious": root(K * [[1, 0.5], [1, 0.5]]),
        "everybody": root(K) * 0.75 * 0.5,
        "in order": root(K) / 2,
    }
    assert found == {name: pytest.approx(value, rel=1e-12) for name, value in expected.items()}
    # Published check value: qD = 0.2 with these contacts gives 2.001585208, and 1.741055677 where one row is halved.
    assert root(K) == pytest.approx(2.001585208, rel=1e-9)
    assert found["less susceptible"] == pytest.approx(1.741055677, rel=1e-9)


def test_case_mix_before_and_after():
    result = ngm.compare(
        ngm.loads(TOWN + intervention("old", 'susceptibility = "I", group = { age = "old" }, reduce = 1'))
    )
    assert result.types == ("I[young]", "I[old]")
    # Shares of new cases, from the same published check.
    assert result.baseline.case_mix == pytest.approx((0.4804941148, 0.5195058852), rel=1e-9)
    assert result.interventions[0].case_mix == pytest.approx((1, 0), abs=1e-15)
    assert list(result.mix_frame().columns) == ["Baseline", "old"]


def test_the_state_is_found_anew():
    # Births follow mu, so the state stays solvable; S = L/mu halves as mu doubles, and so does beta S.
    model = text(
        [("S", False), ("I", True)],
        {"L": 2.0, "mu": 0.02, "beta": 0.004, "gamma": 0.08},
        [("", "S", "L", "x"), ("S", "", "mu*S", "x"), ("S", "I", "beta*S*I", "t"), ("I", "", "(gamma + mu)*I", "x")],
    )
    found = numbers(model, intervention("Emigration", 'parameter = "mu", multiply = 2'))
    assert found["Emigration"] == pytest.approx(0.004 * 50 / 0.12, rel=1e-14)


# -- in words ---------------------------------------------------------------------------------------------------------

CLOSED = text(
    [("S", False), ("I", True)],
    {"L": 2.0, "mu": 0.02, "beta": 0.4, "gamma": 0.08},
    [("", "S", "L", "x"), ("S", "", "mu*S", "x"), ("S", "I", "beta*S*I/100", "t"), ("I", "", "gamma*I", "x")],
    free={"S": "100"},
)
MOVES = intervention("Emigration", 'parameter = "mu", multiply = 2')
HELPS = intervention("Masks", 'parameter = "beta", multiply = 0.5')


def test_a_state_that_is_moved_off_rest_is_refused_by_name():
    with pytest.raises(ngm.ScenarioError) as caught:
        ngm.compare(ngm.loads(CLOSED + MOVES + HELPS))
    message = str(caught.value)
    assert message.startswith('intervention "Emigration", infection_free.S: S is not at rest')
    assert "expression" in message
    found = rows(CLOSED, MOVES, HELPS, partial=True)
    assert found["Emigration"].R0 is None
    assert found["Emigration"].growth_rate is None
    assert "not at rest" in found["Emigration"].no_R0
    assert found["Masks"].R0 == pytest.approx(2.5, rel=1e-14)
    warnings = ngm.compare(ngm.loads(CLOSED + MOVES + HELPS), partial=True).warnings
    assert any("Emigration" in warning and "not at rest" in warning for warning in warnings)


def test_a_group_that_is_emptied_is_refused_where_its_size_divides():
    change = 'parameter = "n", group = { age = "old" }, set = 0'
    with pytest.raises(ngm.ScenarioError, match='intervention "Flight"'):
        ngm.compare(ngm.loads(TOWN + intervention("Flight", change)))


def test_a_group_that_is_emptied_is_told_where_the_model_bears_it():
    bare = TOWN.replace("C(I / n)", "C(I / 1000)")
    row = rows(bare, intervention("Flight", 'parameter = "n", group = { age = "old" }, set = 0'))["Flight"]
    assert row.R0 == pytest.approx(0.2 * 8 * 300 / 1000, rel=1e-12)  # only the young are left
    assert any("Nobody is left in old" in warning for warning in row.warnings)


def test_a_parameter_below_zero_is_refused():
    with pytest.raises(ngm.ScenarioError, match=r'intervention "Too much".*beta.*becomes -0\.4'):
        ngm.compare(ngm.loads(SIR + intervention("Too much", 'parameter = "beta", add = -1')))


def test_a_matrix_entry_below_zero_is_refused():
    with pytest.raises(ngm.ScenarioError, match='intervention "Too much", change 1: an entry of C becomes negative'):
        ngm.compare(ngm.loads(TOWN + intervention("Too much", 'matrix = "C", add = -3')))


def test_no_number_under_an_intervention_is_null_with_its_reason():
    row = rows(SIR, intervention("No recovery", 'parameter = "gamma", set = 0'))["No recovery"]
    assert row.R0 is None
    assert "singular" in row.no_R0
    assert row.growth_rate == pytest.approx(0.6, rel=1e-14)
    assert (row.reduction, row.below_one, row.bounds, row.case_mix) == (None, False, None, None)


def test_a_breach_of_reciprocity_is_told():
    found = rows(
        TOWN,
        intervention("one side", 'matrix = "C", multiply = 0.5, rows = ["young"], columns = ["old"]'),
        intervention("both sides", 'matrix = "C", multiply = 0.5'),
        intervention("other sizes", 'parameter = "n", group = { age = "young" }, multiply = 0.5'),
    )
    # 300 * 13/6 against 700 * 13/7 = 1300: 650 over the mean 975.
    assert any("66.7 %" in warning for warning in found["one side"].warnings)
    assert found["both sides"].warnings == ()
    # Contacts stay those of the old sizes, as the number says: 150 * 13/3 = 650 against 1300.
    assert any("66.7 %" in warning for warning in found["other sizes"].warnings)


def test_nothing_to_reduce():
    none = text(
        [("S", False), ("I", True)],
        {"beta": 0, "gamma": 0.2},
        [("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")],
        free={"S": 1},
    )
    result = ngm.compare(ngm.loads(none + HELPS))
    assert result.baseline.R0 == result.interventions[0].R0 == 0
    assert result.interventions[0].reduction is None
    assert result.interventions[0].below_one
    assert any("nothing to reduce" in warning for warning in result.warnings)


def test_without_interventions():
    result = ngm.compare(ngm.loads(SIR))
    assert result.interventions == ()
    assert any("no intervention" in warning for warning in result.warnings)


# -- combinations -----------------------------------------------------------------------------------------------------


def test_a_combination_by_hand():
    both = rows(SIR, *PACKAGES, combinations=[["Distance", "Treatment"]])["Distance + Treatment"]
    assert both.R0 == pytest.approx(0.3, rel=1e-14)  # 0.3/1
    assert both.parts == ("Distance", "Treatment")
    assert both.cost == 3.5
    assert both.warnings == ()


def test_what_a_combination_does_twice_is_told():
    again = intervention("Masks", 'parameter = "beta", multiply = 0.8')
    fixed = intervention("Curfew", 'parameter = "beta", set = 0.1')
    found = rows(SIR, *PACKAGES, again, fixed, combinations=[["Distance", "Masks"], ["Masks", "Curfew"]])
    assert found["Distance + Masks"].R0 == pytest.approx(1.2, rel=1e-14)
    assert "the factors multiply" in found["Distance + Masks"].warnings[0]
    assert found["Distance + Masks"].cost is None
    assert found["Masks + Curfew"].R0 == pytest.approx(0.5, rel=1e-14)
    assert "undoes Masks" in found["Masks + Curfew"].warnings[0]


@pytest.mark.parametrize(
    ("names", "message"),
    [
        (["Distance", "Distance"], "named twice"),
        (["Distance", "Treatmint"], "Did you mean 'Treatment'"),
        ([], "names no intervention"),
    ],
)
def test_a_combination_that_is_none(names, message):
    with pytest.raises(ngm.ScenarioError, match=message):
        ngm.compare(ngm.loads(SIR + "\n".join(PACKAGES)), combinations=[names])


# -- the command line -------------------------------------------------------------------------------------------------


@pytest.fixture
def path(tmp_path):
    file = tmp_path / "sir.toml"
    file.write_text(SIR + "\n".join(PACKAGES))
    return str(file)


def test_json_is_the_agreed_object(path, capsys):
    assert main(["compare", path, "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert set(found) == {"baseline", "interventions", "warnings"}
    assert set(found["baseline"]) == {"R0", "no_R0", "growth_rate"}
    keys = {"name", "R0", "no_R0", "growth_rate", "reduction", "below_one", "cost"}
    assert [set(row) for row in found["interventions"]] == [keys, keys]
    assert [row["name"] for row in found["interventions"]] == ["Distance", "Treatment"]  # the order of the file
    assert found == ngm.compare(ngm.load(path)).to_json()


def test_text_says_what_the_number_is_and_sorts(path, capsys):
    assert main(["compare", path, "--combine", "Distance", "Treatment"]) == 0
    out = capsys.readouterr().out
    assert "control reproduction number" in out
    assert out.index("Distance + Treatment") < out.index("Treatment  ") < out.index("Distance  ")


def test_set_holds_for_all_rows(path, capsys):
    assert main(["compare", path, "--json", "--set", "beta=1.2"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert [found["baseline"]["R0"], *(row["R0"] for row in found["interventions"])] == pytest.approx([6, 3, 1.2])


@pytest.mark.parametrize(
    ("more", "message"),
    [
        (["--combine", "Distance", "Nothing"], "'Nothing' is no intervention"),
        (["--set", "bata=1"], "Did you mean 'beta'"),
    ],
)
def test_wrong_input_is_exit_2(path, capsys, more, message):
    assert main(["compare", path, *more]) == 2
    out, error = capsys.readouterr()
    assert out == ""
    assert message in error


def test_an_intervention_that_cannot_be_evaluated_is_exit_2(tmp_path, capsys):
    file = tmp_path / "closed.toml"
    file.write_text(CLOSED + MOVES + HELPS)
    assert main(["compare", str(file), "--json"]) == 2
    out, error = capsys.readouterr()
    assert out == ""
    assert 'intervention "Emigration"' in error
    assert len(error) < 2000


# -- what an effort promises ------------------------------------------------------------------------------------------

TWO = matrix_text([[0.8, 1.5], [0.6, 0.5]])
THREE = matrix_text([[0.6, 0.4, 0], [0.5, 0.3, 0.9], [0.2, 0.7, 0.4]])


def test_published_efforts_on_types_reach_one():
    # Roberts & Heesterbeek (2003), formulas from memory, matrices ours: T1 = 2.6, T2 = 5; T12 = 1.653693598.
    found = numbers(
        TWO,
        intervention("first", 'susceptibility = "I1", reduce = "1 - 1/2.6"'),
        intervention("second", 'susceptibility = "I2", reduce = 0.8'),
        intervention("naive", 'susceptibility = "I1", reduce = 0.3790627288'),
    )
    assert found["first"] == pytest.approx(1, abs=1e-12)
    assert found["second"] == pytest.approx(1, abs=1e-12)
    assert found["naive"] > 1.2  # 1 - 1/R0 of one type alone is not enough
    three = numbers(
        THREE,
        *(intervention(f"T{k}", f'susceptibility = "I{k}", reduce = "1 - 1/{T}"') for k, T in ((2, 2.15), (3, 4.45))),
        intervention("T12", *(f'susceptibility = "I{k}", reduce = "1 - 1/1.653693598"' for k in (1, 2))),
        intervention("all of 1", 'susceptibility = "I1", reduce = 1'),
    )
    assert [three["T2"], three["T3"]] == pytest.approx([1, 1], abs=1e-12)
    assert three["T12"] == pytest.approx(1, rel=1e-9)
    assert three["all of 1"] == pytest.approx(1.145298686, rel=1e-9)  # T1 does not exist: the rest sustains itself
    why = {t.types: t.why for t in ngm.control(ngm.loads(THREE)).type_reproduction}[("I1",)]
    assert why == "T(I1) does not exist: without it the infection sustains itself (rho = 1.145)."


def test_published_efforts_on_entries_reach_one():
    # Shuai, Heesterbeek & van den Driessche (2013), formulas from memory: T(1,2) = T(2,1) = 9, {(1,1), (1,2)} = 2.6.
    found = numbers(
        TWO,
        intervention("12", 'parameter = "k12", multiply = "1/9"'),
        intervention("21", 'parameter = "k21", multiply = "1/9"'),
        intervention("row", 'parameter = "k11", multiply = "1/2.6"', 'parameter = "k12", multiply = "1/2.6"'),
        intervention("11", 'parameter = "k11", multiply = 0'),
    )
    assert [found["12"], found["21"], found["row"]] == pytest.approx([1, 1, 1], abs=1e-12)
    assert found["11"] > 1  # no T(1,1)


@pytest.mark.parametrize("kind", ["transition", "transmission"])
def test_shedding_into_water_whatever_it_counts_as(kind):
    # Tien & Earn (2010), formulas from memory: with bI = 0.15, T_W = T(I,W) = T(W,I) = 4. A quarter of the shedding or of
    # infection by water brings either split to 1, R0 1.857142857 or 1.484266703.
    values = {"bI": 0.15, "bW": 0.3, "xi": 0.4, "de": 0.5, "gamma": 0.2, "mu": 0.01}
    flows = [
        ("S", "I", "(bI*I + bW*W)*S", "t"),
        ("", "W", "xi*I", "t" if kind == "transmission" else "x"),
        ("W", "", "de*W", "x"),
    ]
    flows += [("I", "", "(gamma + mu)*I", "x")]
    model = text([("S", False), ("I", True), ("W", True)], values, flows, free={"S": 1})
    found = numbers(
        model,
        intervention("shedding", 'parameter = "xi", multiply = 0.25'),
        intervention("water", 'parameter = "bW", multiply = 0.25'),
        intervention("state W", 'infectivity = "W", reduce = 0.75'),
    )
    assert list(found.values()) == pytest.approx([1, 1, 1], abs=1e-12)
    baseline = ngm.compare(ngm.loads(model)).baseline.R0
    assert baseline == pytest.approx({"transition": 1.857142857, "transmission": 1.484266703}[kind], rel=1e-9)


def test_state_number_of_the_symptomatic_reaches_one():
    # SEIR with an asymptomatic branch: T = p a/(1 - (1 - p) b) = 3.605609219, effort 0.7226543590 (numbers recomputed).
    p, beta, q, sigma, gI, gA, mu = 0.65, 0.5, 0.4, 0.25, 0.2, 0.125, 0.001
    survive = sigma / (sigma + mu)
    a, b = beta * survive / (gI + mu), q * beta * survive / (gA + mu)
    T = p * a / (1 - (1 - p) * b)
    assert T == pytest.approx(3.605609219, rel=1e-9)
    values = {"beta": beta, "q": q, "sigma": sigma, "p": p, "gI": gI, "gA": gA, "mu": mu}
    flows = [("S", "E", "beta*(I + q*A)*S", "t"), ("E", "I", "p*sigma*E", "x"), ("E", "A", "(1 - p)*sigma*E", "x")]
    flows += [("I", "", "(gI + mu)*I", "x"), ("A", "", "(gA + mu)*A", "x"), ("E", "", "mu*E", "x")]
    model = text([("S", False), ("E", True), ("I", True), ("A", True)], values, flows, free={"S": 1})
    found = numbers(
        model,
        intervention("I", f'infectivity = "I", reduce = {1 - 1 / T!r}'),
        intervention("A", 'infectivity = "A", reduce = 1'),
    )
    assert found["I"] == pytest.approx(1, abs=1e-12)
    assert found["A"] == pytest.approx(1.610473529, rel=1e-9)  # p a > 1: the asymptomatic alone cannot be the target


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 100_000), data=st.data())
def test_a_critical_effort_brings_a_random_model_to_one(seed, data):
    # A property of definition (second route: through F, the infection-free state and K anew, by an intervention). A large
    # T leaves 1/T of a double that was rounded at 1: beyond 10^5 it cannot be told to 1e-9.
    model = draw(seed).scenario_text
    result = ngm.control(ngm.loads(model))
    options = [("susceptibility", t.types, t.T) for t in result.type_reproduction if t.T is not None and 1 < t.T < 1e5]
    options += [
        ("infectivity", (s.state,), s.T) for s in result.state_reproduction if s.T is not None and 1 < s.T < 1e5
    ]
    assume(options)
    what, names, T = data.draw(st.sampled_from(options))
    changes = [f'{what} = "{name}", reduce = {(T - 1) / T!r}' for name in names]
    assert numbers(model, intervention("Effort", *changes))["Effort"] == pytest.approx(1, abs=1e-9)


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 100_000), data=st.data())
def test_any_set_of_entries_divided_by_its_number_reaches_one(seed, data):
    # Sets that are no full block too: the entrywise formula, with the correction of 2015.
    found = decided_numbers(ngm.loads(draw(seed).scenario_text))
    assume(found.K is not None and found.spectrum is not None)
    K = to_floats(found.K)
    m = len(K)
    mask = np.array(data.draw(st.lists(st.booleans(), min_size=m * m, max_size=m * m))).reshape(m, m)
    assume(mask.any())
    T = target_reproduction_number(found.K, mask).T
    assume(T is not None and T > 0)
    assert reproduction_number(np.where(mask, K / T, K)) == pytest.approx(1, abs=1e-9)
    rows_hit = mask.any(axis=1)
    whole = type_reproduction_number(found.K, rows_hit).T
    if T > 1 and whole is not None:
        assert whole <= T * (1 + 1e-12)  # acting on more entries asks for no more
