"""What follows the format loads, and says what the file says."""

from __future__ import annotations

from decimal import Decimal
from fractions import Fraction
from pathlib import Path

import pytest

from ngm.expression.parse import parse
from ngm.expression.tree import Negate, Number
from ngm.scenario.file import load, loads
from tests.scenario.models import GROUPED, PLAIN, changed

ROOT = Path(__file__).parents[2]


@pytest.mark.parametrize("path", sorted((ROOT / "scenarios").glob("*.toml")), ids=lambda path: path.stem)
def test_the_examples_load(path: Path) -> None:
    assert load(path).warnings == ()


def test_plain_model() -> None:
    scenario = loads(PLAIN)
    assert list(scenario.compartments) == ["S", "E", "I", "R"]
    assert [c.infected for c in scenario.compartments.values()] == [False, True, True, False]
    assert scenario.compartments["S"].label == "Susceptible"
    beta = scenario.parameters["beta"]
    assert (beta.values[0].tree, beta.range, beta.unit and beta.unit.text) == (
        Number(Fraction(2, 5)),
        (0.2, 0.6),
        "1/day",
    )
    assert scenario.parameters["sigma"].values[0].is_number
    assert not scenario.parameters["sigma"].follows
    assert scenario.parameters["gamma"].distributions[0].arguments == {"mean": 0.2, "sd": 0.04}
    assert scenario.definitions["N"].expression.tree == parse("S + E + I + R")
    first = scenario.flows[0]
    assert (first.source, first.target, first.kind, first.label) == ("S", "E", "transmission", "Infection")
    assert scenario.infection_free["S"][0].tree == Number(Fraction(1000))
    assert scenario.interventions[0].changes[0].action == "multiply"
    assert scenario.text == PLAIN
    assert scenario.warnings == ()


def test_grouped_model() -> None:
    scenario = loads(GROUPED)
    assert scenario.items("S", ("age", "region"))[:2] == ("S[young,North]", "S[young,Mid]")
    assert [v.text for v in scenario.parameters["both"].values] == ["1", "2", "3", "4", "5", "6"]
    assert [v.text for v in scenario.parameters["gamma"].values] == ["0.2"] * 3
    assert scenario.definitions["N"].by == ("age", "region")
    assert scenario.definitions["total"].by == ()
    assert scenario.matrices["M"].within == "region"
    assert scenario.matrices["C"].blocks == (((Decimal(1), Decimal(2)), (Decimal(3), Decimal(4))),)
    assert [v.text for v in scenario.infection_free["S"]] == ["100", "200", "300", "400", "500", "600"]
    assert scenario.interventions[0].changes[3].groups == {"age": ("old",), "region": ("South",)}


def test_every_name_of_the_format() -> None:
    names = [*"SIENOQCxt", "beta", "gamma", "zeta", "lambda", "Lambda", "pi", "in", "if", "is"]
    names += ["None", "True", "def", "class", "eval"]
    parameters = "\n".join(f"{name} = {{ value = {number} }}" for number, name in enumerate(names[2:]))
    text = f"""
    [scenario]
    title = "Names"
    time_unit = "day"
    [compartments]
    S = {{ infected = false }}
    I = {{ infected = true }}
    [parameters]
    {parameters}
    [[flow]]
    to = "I"
    from = "S"
    kind = "transmission"
    rate = "{" * ".join(names)}"
    """
    assert list(loads(text).parameters) == names[2:]


def test_greek_letters_are_their_spelling() -> None:
    text = changed(PLAIN, "beta = {", '"β" = {')
    assert "beta" in loads(text).parameters
    assert "beta" in loads(changed(text, "beta * I / N", "β * I / N")).parameters
    for letter, name in (("ϵ", "epsilon"), ("ϕ", "phi"), ("ς", "sigma2"), ("\u00b5", "mu")):
        assert (
            name.rstrip("2")
            in loads(changed(PLAIN, "sigma = {", f'"{letter}" = {{').replace("sigma * E", f"{letter} * E")).parameters
        )


PIECES: list[tuple[str, str, str]] = [
    (PLAIN, 'time_unit = "day"', 'time_unit = "generation"\nformat = 1\nsummary = ""\nunits = "warn"'),
    (PLAIN, "beta = {", 'beta = { sign = "any",'),
    (PLAIN, "beta = { value = 0.4", 'beta = { sign = "any", value = -0.4'),
    (PLAIN, "beta = { value = 0.4", 'beta = { value = "exp(-1)"'),
    (PLAIN, "beta = { value = 0.4", "beta = { value = 0"),
    (PLAIN, "beta = { value = 0.4", "beta = { value = 1e-3"),
    (PLAIN, "range = [0.2, 0.6]", 'range = ["1/5", "3/5"]'),
    (PLAIN, "range = [0.2, 0.6]", "range = [0.2, 0.2]"),
    (PLAIN, ", range = [0.2, 0.6] }", ' }\nperiod = { value = "1/beta", unit = "day" }'),
    (PLAIN, ", range = [0.2, 0.6] }", ' }\n"if" = { value = "max(beta, 1) - min(beta, 1)" }'),
    (PLAIN, 'name = "lognormal", mean = 0.2, sd = 0.04', 'name = "uniform", low = 0, high = 1'),
    (PLAIN, 'name = "lognormal", mean = 0.2, sd = 0.04', 'name = "triangular", low = 0, mode = 0, high = 1'),
    (PLAIN, 'name = "lognormal", mean = 0.2, sd = 0.04', 'name = "normal", mean = 1, sd = 0.1'),
    (PLAIN, 'name = "lognormal", mean = 0.2, sd = 0.04', 'name = "gamma", mean = "1/5", sd = 2'),
    (PLAIN, 'name = "lognormal", mean = 0.2, sd = 0.04', 'name = "beta", mean = 0.5, sd = 0.49'),
    (PLAIN, "E = { infected = true }", 'E = { infected = true, by = [], unit = "person" }'),
    (PLAIN, 'from = "E"\nto = "I"\n', 'to = "E"\n'),
    (PLAIN, 'from = "E"\nto = "I"\n', 'from = "E"\n'),
    (PLAIN, "S = 1000\nR = 0", ""),
    (PLAIN, "S = 1000", 'S = "1000 - R"'),
    (PLAIN, "[infection_free]\nS = 1000\nR = 0", ""),
    (PLAIN, "multiply = 0.6", "add = -0.05"),
    (PLAIN, "multiply = 0.6", 'set = "1/7"'),
    (PLAIN, 'parameter = "beta", multiply = 0.6', 'susceptibility = "E", reduce = 1'),
    (PLAIN, 'parameter = "beta", multiply = 0.6', 'infectivity = "I", reduce = 0'),
    (PLAIN, 'name = "Masks"', 'name = "Masks"\nnote = "x"\ncost = 3.0'),
    (PLAIN, "[infection_free]", '[report]\nquestion = "?"\nlimits = ["a", "b"]\nchanges = []\n[infection_free]'),
    (PLAIN, 'N = "S + E + I + R"', 'N = """\nS + E\n + I + R"""'),
    (PLAIN, "foi * S", "foi^1 * S ** 1 * x0"),
    (GROUPED, "gamma * I", "gamma * I * sum(both) / sum(sum(both, age), region)"),
    (GROUPED, "gamma * I", "gamma * I * C(1) * T(C(sus))"),
    (GROUPED, "gamma * I", "gamma * I * sum(C(1), age)"),
    (GROUPED, "sus = { value = [1.0, 0.5]", 'sus = { value = [1.0, "2 * q"]'),
    (GROUPED, "both = { value = [[1, 2, 3], [4, 5, 6]]", 'both = { value = "sus / gamma"'),
    (GROUPED, "gamma = { value = 0.2,", 'gamma = { value = 0.2, distribution = { name = "gamma", mean = 1, sd = 1 },'),
    (GROUPED, "[[100, 200, 300], [400, 500, 600]]", "[100, 200, 300, 400, 500, 600]"),
    (GROUPED, "[[100, 200, 300], [400, 500, 600]]", '"100 * both"'),
    (GROUPED, "[[100, 200, 300], [400, 500, 600]]", '[["total_", 1, 1], [1, "2*q", 1]]'),
    (GROUPED, 'population = "sum(N, region)"', 'population = "sum(N, region)"\nreciprocal = true'),
    (GROUPED, 'population = "sum(N, region)"', 'population = "100"\nreciprocal = false'),
    (GROUPED, 'within = "region"', 'within = "region"\npopulation = "N"\nreciprocal = true'),
    (GROUPED, 'group = { region = "North" }', 'group = { region = ["North", "Mid"] }'),
]


@pytest.mark.parametrize(("text", "old", "new"), PIECES)
def test_pieces_that_follow_the_format(text: str, old: str, new: str) -> None:
    text = changed(text, old, new)
    if "generation" in new:
        text = text.replace("1/day", "1/generation")
    text = text.replace("[parameters]", "[parameters]\nx0 = { value = 1 }\ntotal_ = { value = 5 }", 1)
    loads(text)


def test_negative_numbers_read_as_typed_ones() -> None:
    scenario = loads(changed(PLAIN, "beta = { value = 0.4", 'beta = { sign = "any", value = -0.4'))
    assert scenario.parameters["beta"].values[0].tree == Negate(Number(Fraction(2, 5)))
    assert scenario.parameters["beta"].values[0].text == "-0.4"


def test_a_matrix_need_not_be_used_and_tables_may_be_written_long() -> None:
    text = PLAIN.replace("beta = { value = 0.4, ", "").replace('unit = "1/day", range = [0.2, 0.6] }', "")
    text = text.replace("[definitions]", "[parameters.beta]\nvalue = 0.4\nrange = [0.2, 0.6]\n[definitions]", 1)
    assert loads(text).parameters["beta"].range == (0.2, 0.6)


def test_wide_normal_distributions_warn() -> None:
    text = changed(PLAIN, '"lognormal", mean = 0.2, sd = 0.04', '"normal", mean = 0.2, sd = 0.1')
    (warning,) = loads(text).warnings
    assert warning.startswith("parameters.gamma, distribution: a normal distribution this wide reaches below 0.")


def test_digest_is_of_the_text() -> None:
    # Second route: sha256sum of the text.
    from hashlib import sha256

    assert loads(PLAIN).digest == sha256(PLAIN.encode()).hexdigest()[:16]
    assert loads(PLAIN + "# x\n").digest != loads(PLAIN).digest


def test_a_value_outside_its_range_warns() -> None:
    (warning,) = loads(changed(PLAIN, "range = [0.2, 0.6]", "range = [0.5, 0.6]")).warnings
    assert warning == "parameters.beta, range: the value 0.4 lies outside the range 0.5 to 0.6."
