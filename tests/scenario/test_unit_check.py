"""Units worked out through expressions. Expected units: by hand."""

from __future__ import annotations

from pathlib import Path

import pytest

import ngm
from ngm.scenario.unit_check import check_units

SCENARIOS = sorted((Path(__file__).parents[2] / "scenarios").glob("*.toml"))

TEXT = """
[scenario]
title = "Units"
time_unit = "day"
{strict}
[compartments]
S = {{ infected = false }}
I = {{ infected = true }}
[parameters]
beta = {{ value = 0.4, unit = "{beta}" }}
gamma = {{ value = 0.2, unit = "{gamma}" }}
Lambda = {{ value = 2, unit = "person/day" }}
mu = {{ value = 0.1, unit = "1/year" }}
p = {{ value = 0.1 }}
q = {{ value = 0.1 }}
[[flow]]
to = "S"
rate = "Lambda"
kind = "transition"
[[flow]]
from = "S"
to = "I"
rate = "{infection}"
kind = "transmission"
[[flow]]
from = "I"
rate = "{exit}"
kind = "transition"
[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"
"""


def text(beta="1/day", gamma="1/day", infection="beta*S*I/(S + I)", leaving="gamma*I", strict=""):
    return TEXT.format(beta=beta, gamma=gamma, infection=infection, exit=leaving, strict=strict)


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
def test_shipped_scenarios_fit(path):
    assert check_units(ngm.load(path)).findings == ()


def test_units_that_fit():
    check = check_units(ngm.loads(text(leaving="(1 - p)*gamma*I")))
    assert check.findings == ()
    assert check.implied == {"p": "1"}
    assert check.expressions["flow 2"] == "individual/day"


@pytest.mark.parametrize(
    ("changes", "kind", "words"),
    [
        ({"infection": "beta*S*I"}, "flow", "beta looks frequency dependent"),
        ({"beta": "1/(day*person)"}, "flow", "beta looks density dependent"),
        ({"gamma": "day"}, "flow", "a time T is the rate 1/T per day"),
        ({"gamma": "week"}, "flow", "a time T is the rate 1/T per day"),
        ({"leaving": "(gamma + beta*S)*I"}, "sum", "adds 1/day (gamma) and individual/day (beta*S)"),
        ({"leaving": "0.2*I"}, "flow", "Nothing in it is per day"),
        ({"infection": "p*S*I/(S + I)"}, "missing", 'the flows need one: write unit = "1/day"'),
        ({"infection": "p*q*S*I/(S + I)"}, "missing", "between them they must make 1/day"),
        ({"leaving": "gamma*exp(-gamma)*I"}, "argument", "exp(-gamma) must be a pure number and is in 1/day"),
        ({"leaving": "max(gamma, S)*I"}, "sum", "compares (max) 1/day (gamma) and individual (S)"),
        ({"infection": "beta*S*I"}, "K", "is not free of units: its row I is made with flow 2"),
    ],
)
def test_findings_in_words(changes, kind, words):
    found = [finding for finding in check_units(ngm.loads(text(**changes))).findings if finding.kind == kind]
    assert len(found) == 1
    assert words in found[0].message


def test_a_warning_by_default_and_a_refusal_where_strict():
    scenario = ngm.loads(text(beta="1/(day*person)"))
    assert any("beta looks density dependent" in warning for warning in scenario.warnings)
    with pytest.raises(ngm.ScenarioError) as refused:
        ngm.loads(text(beta="1/(day*person)", strict='units = "strict"'))
    assert "beta looks density dependent" in str(refused.value)
    assert refused.value.problems[0].key == ("flow", 1, "rate")
    assert ngm.loads(text(strict='units = "strict"')).strict_units


def test_strict_refuses_a_missing_unit_where_one_decides():
    with pytest.raises(ngm.ScenarioError, match="p: has no unit"):
        ngm.loads(text(infection="p*S*I/(S + I)", strict='units = "strict"'))


def test_a_file_without_units_is_left_alone():
    bare = text(infection="beta*S*I")
    for unit in (', unit = "1/day"', ', unit = "person/day"', ', unit = "1/year"'):
        bare = bare.replace(unit, "")
    assert ngm.loads(bare).warnings == ()


def test_compartments_with_a_unit_of_their_own():
    shares = text().replace("S = { infected = false }", 'S = { infected = false, unit = "1" }')
    shares = shares.replace("I = { infected = true }", 'I = { infected = true, unit = "1" }')
    messages = [finding.message for finding in check_units(ngm.loads(shares)).findings]
    assert messages == ["is in individual/day, where a flow of S is in 1/day."]  # births of persons into a share


def test_a_value_that_follows_others():
    own = text().replace("p = { value = 0.1 }", 'T = { value = 5, unit = "day" }\np = { value = "1/T", unit = "day" }')
    (finding,) = check_units(ngm.loads(own)).findings
    assert finding.kind == "follows"
    assert finding.message == "is in 1/day, while its unit says day."
