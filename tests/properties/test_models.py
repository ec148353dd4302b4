"""What holds for every model, on random ones: symbols, numbers and slopes agree; order and time units change nothing."""

from __future__ import annotations

import math
import random

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import ngm
from ngm.derivation.symbols import derive_symbols
from ngm.expression.tree import names
from ngm.results import Solution
from ngm.scenario.model import Scenario
from tests.properties.random_models import draw
from tests.published.models import evaluate

#: A model is drawn from its seed; hypothesis draws the seeds, the same ones in every run.
SEEDS = st.integers(0, 10**9)
few = settings(max_examples=25, derandomize=True, deadline=None)
many = settings(max_examples=80, derandomize=True, deadline=None)


def point(scenario: Scenario) -> dict[str, float]:
    """Return the parameters of an ungrouped scenario."""
    return {name: evaluate(p.values[0].text, {}) for name, p in scenario.parameters.items()}


def shared_symbols(scenario: Scenario, solution: Solution) -> None:
    """Check that every formula gives the number beside it."""
    symbolic = derive_symbols(scenario, solution.infection_free, point(scenario))
    values = point(scenario)
    for name, line in symbolic.abbreviations.items():
        values[name] = evaluate(line, values)
    for texts, numbers in ((symbolic.F, solution.F), (symbolic.V, solution.V), (symbolic.K, solution.K)):
        if texts is None or numbers is None:
            continue
        for row, expected in zip(texts, numbers, strict=True):
            assert [evaluate(t, values) for t in row] == pytest.approx(list(expected), rel=1e-9, abs=1e-300)
    assert solution.R0 is not None
    if symbolic.closed_form is not None:
        assert evaluate(symbolic.closed_form, point(scenario)) == pytest.approx(solution.R0, rel=1e-9)
    if symbolic.characteristic_polynomial is not None and solution.R0 > 0:
        name = symbolic.polynomial_variable
        at_root = evaluate(symbolic.characteristic_polynomial, {**values, name: solution.R0})
        far = max(
            abs(evaluate(symbolic.characteristic_polynomial, {**values, name: s * 2 * solution.R0})) for s in (1, -1)
        )
        assert abs(at_root) <= 1e-7 * far


@many
@given(seed=SEEDS)
def test_formulas_give_the_numbers(seed: int) -> None:
    """Second route: the text of each formula, read by the tests' own evaluator in doubles, against the proven number."""
    scenario = ngm.loads(draw(seed).scenario_text)
    solution = ngm.solve(scenario, limit=0)
    if solution.R0 is not None:
        shared_symbols(scenario, solution)


@few
@given(seed=SEEDS)
def test_F_and_V_are_the_slopes_of_the_flows(seed: int) -> None:
    """Second route: central differences of the flows as typed, at the infection-free state."""
    scenario = ngm.loads(draw(seed).scenario_text)
    solution = ngm.solve(scenario, limit=0)
    infected = [c.name for c in scenario.compartments.values() if c.infected]
    base = {**point(scenario), **solution.infection_free, **dict.fromkeys(infected, 0.0)}

    def flows(state: dict[str, float]) -> tuple[np.ndarray, np.ndarray]:
        values = dict(state)
        for name, definition in scenario.definitions.items():
            values[name] = evaluate(definition.expression.text, values)
        new, other = np.zeros(len(infected)), np.zeros(len(infected))
        for flow in scenario.flows:
            rate = evaluate(flow.rate.text, values)
            if flow.target in infected:
                (new if flow.kind == "transmission" else other)[infected.index(flow.target)] += rate
            if flow.source in infected:
                other[infected.index(flow.source)] -= rate
        return new, other

    step = 1e-4
    for j, name in enumerate(infected):
        above, below = flows({**base, name: step}), flows({**base, name: -step})
        F_column = (above[0] - below[0]) / (2 * step)
        V_column = -(above[1] - below[1]) / (2 * step)
        assert solution.F is not None
        assert solution.V is not None
        assert [row[j] for row in solution.F] == pytest.approx(F_column.tolist(), rel=1e-6, abs=1e-12)
        scale = float(np.max(np.abs(V_column)))
        assert [row[j] for row in solution.V] == pytest.approx(V_column.tolist(), rel=1e-6, abs=1e-9 * scale)


@few
@given(seed=SEEDS)
def test_order_of_compartments_and_flows_changes_nothing(seed: int) -> None:
    model = draw(seed)
    first = ngm.solve(ngm.loads(model.scenario_text), limit=0)
    lines = model.scenario_text.split("\n\n")
    head = [part for part in lines if not part.startswith("[[flow]]")]
    flows = [part for part in lines if part.startswith("[[flow]]")]
    random.Random(seed).shuffle(flows)
    start = next(k for k, part in enumerate(head) if part.startswith("[compartments]"))
    title, *compartments = head[start].strip().splitlines()
    head[start] = "\n".join([title, *reversed(compartments)])
    second = ngm.solve(ngm.loads("\n\n".join([*head, *flows])), limit=0)
    assert sorted(second.types) == sorted(first.types)
    if first.R0 is None:
        assert second.R0 is None
        return
    assert second.R0 == first.R0
    assert second.growth_rate == first.growth_rate
    if first.right is not None and first.left is not None:
        assert second.right is not None
        assert second.left is not None
        shares = dict(zip(second.types_at_infection, second.right, strict=True))
        values = dict(zip(second.types_at_infection, second.left, strict=True))
        assert [shares[name] for name in first.types_at_infection] == pytest.approx(list(first.right), rel=1e-12)
        assert [values[name] for name in first.types_at_infection] == pytest.approx(list(first.left), rel=1e-12)


@few
@given(seed=SEEDS)
def test_rates_weigh_in_with_their_power_of_time(seed: int) -> None:
    """Common practice, no source: indices of the rates sum to 0 for R0, which has no unit, and to 1 for the growth rate.

    Every parameter of these models is a rate. Elasticities by central differences of the proven numbers.
    """
    scenario = ngm.loads(draw(seed).scenario_text)
    base = ngm.solve(scenario, limit=0)
    assume(base.R0 is not None and base.R0 > 0 and base.right is not None)
    assert base.R0 is not None
    step = 1e-6
    total_R0, total_r = [], []
    for name in scenario.parameters:
        value = point(scenario)[name]
        above, below = (ngm.solve(scenario.with_values(**{name: value * (1 + s)}), limit=0) for s in (step, -step))
        assert above.R0 is not None
        assert below.R0 is not None
        total_R0.append((above.R0 - below.R0) / (2 * step) / base.R0)
        total_r.append((above.growth_rate - below.growth_rate) / (2 * step))
    assert math.fsum(total_R0) == pytest.approx(0, abs=1e-6)
    assert math.fsum(total_r) == pytest.approx(base.growth_rate, rel=1e-4, abs=1e-5 * max(map(abs, total_r)))


def test_every_random_model_uses_its_parameters() -> None:
    """Guards the generator: a drawn rate that no flow uses would make the sums above prove nothing."""
    for seed in range(5000, 5120):
        scenario = ngm.loads(draw(seed).scenario_text)
        used = {name for flow in scenario.flows for name in names(flow.rate.tree)}
        assert set(scenario.parameters) <= used
