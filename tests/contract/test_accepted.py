"""Models that the formats allow: each loads, keeps its text, and answers as its hand-worked columns say."""

from __future__ import annotations

from functools import cache

import pytest

import ngm
from ngm.results import Solution
from tests.contract.accepted import MODELS, Model
from tests.contract.bases import PLAIN, edited
from tests.contract.second_route import Route

BETA = 'beta = { value = 0.4, unit = "1/day" }'
MASKS = 'change = [{ parameter = "beta", multiply = 0.6 }]'
RATE = 'rate = "beta * S * I / N"'


@cache
def solved(name: str) -> Solution:
    return ngm.solve(ngm.loads(next(model.text for model in MODELS if model.name == name)))


@pytest.mark.parametrize("model", MODELS, ids=[model.name for model in MODELS])
def test_accepted(model: Model) -> None:
    scenario = ngm.loads(model.text)
    assert scenario.text == model.text
    solution = solved(model.name)
    if model.at_infection is not None:
        assert list(solution.types_at_infection) == model.at_infection
    for name, value in model.state.items():
        assert solution.infection_free[name] == pytest.approx(value, rel=1e-9, abs=1e-12)
    assert not model.warning or any(model.warning in line for line in solution.warnings)


@pytest.mark.parametrize("model", [m for m in MODELS if m.others], ids=[m.name for m in MODELS if m.others])
def test_other_values(model: Model) -> None:
    """Second route: the formulas of the file's values hold at others, and the text of the changed scenario says the same."""
    changed = ngm.loads(model.text).with_values(**model.others)
    there = ngm.solve(changed, limit=0)
    assert ngm.solve(ngm.loads(changed.text), limit=0).R0 == there.R0
    solution = solved(model.name)
    assert there.types_at_infection == solution.types_at_infection
    if solution.closed_form is not None and there.R0 is not None:
        route = Route(model.text, model.factors, model.others)
        route.at(there.infection_free)
        assert there.R0 == pytest.approx(float(route.text_value(solution.closed_form)), rel=1e-9, abs=1e-13)


@pytest.mark.parametrize(
    "text",
    [
        PLAIN.replace("\n", "\r\n"),
        edited(PLAIN, (BETA, 'beta.value = 0.4\nbeta.unit = "1/day"')),
        edited(PLAIN, (BETA, ""), ("[definitions]", '[parameters.beta]\nvalue = 0.4\nunit = "1/day"\n[definitions]')),
        edited(PLAIN, (BETA, 'beta = { value = "2/5", unit = "per day" }')),
        edited(PLAIN, (BETA, 'beta = { value = 2.8, unit = "1/week" }')),
        edited(PLAIN, (BETA, 'beta = { value = 40, unit = "% per Day" }')),
        edited(PLAIN, ("Lambda = { value = 10 }", "Lambda = { value = 0xA }"), ("0.01", "1_0e-3")),
        edited(PLAIN, (RATE, 'rate = """\nbeta * S\n  * I / N\n"""')),
        edited(PLAIN, (RATE, "rate = '((beta*S))*I/N^1'")),
        edited(PLAIN, (RATE, 'rate = "' + "(" * 50 + "beta*S*I/N" + ")" * 50 + '"')),
        edited(PLAIN, (RATE, 'rate = "beta*S*I/N' + "+0" * 4995 + '"')),
        edited(PLAIN, (RATE, 'rate = "beta*S*(1 - exp(-I/N))"')),
        edited(PLAIN, (RATE, 'rate = "beta*S*min(1, I/N)"')),
        edited(PLAIN, (RATE, 'rate = "beta*S*I/max(N, 1)*0^0"')),
        edited(PLAIN, ('S = "Lambda / mu"\nR = 0', "")),
        edited(PLAIN, ('[infection_free]\nS = "Lambda / mu"\nR = 0', "")),
        edited(PLAIN, ('S = "Lambda / mu"', "S = 1000.0000001")),
        edited(PLAIN, ("[parameters]", "[dimensions]\n[matrices]\n[report]\n[parameters]")),
        edited(PLAIN, ("change = [", "cost = 3\nnote = 'x'\nchange = [{ infectivity = 'I', reduce = '1/3' }, ")),
        edited(PLAIN, (MASKS, "[[intervention.change]]\nparameter = 'mu'\nset = 1")),
    ],
)  # fmt: skip
def test_the_same_model_written_otherwise(text: str) -> None:
    """By hand: R0 = beta sigma / ((sigma + mu) (gamma + mu)) = 0.4 * 0.25 / (0.26 * 0.21)."""
    assert ngm.solve(ngm.loads(text), limit=0).R0 == pytest.approx(0.4 * 0.25 / (0.26 * 0.21), rel=1e-9)
