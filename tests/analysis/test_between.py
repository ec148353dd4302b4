"""Contributions of many changes. Second route: each model between computed by itself, and the definition of the mean."""

from __future__ import annotations

import math
from itertools import permutations
from pathlib import Path

import pytest

import ngm
from ngm.analysis import between
from ngm.analysis.between import Between, Step, contributions, root_of
from ngm.analysis.numbers import decided_numbers

SCENARIOS = Path(__file__).parents[2] / "scenarios"
MIDGES = (SCENARIOS / "vector-borne-ostrel-fever.toml").read_text(encoding="utf-8")
#: text -> other text: eight values, one of them in another unit, one a share
VALUES = [
    ("a = { value = 2.1", "a = { value = 2.5"),
    ("b = { value = 30", "b = { value = 35"),
    ("c = { value = 25", "c = { value = 20"),
    ('sigma_h = { value = "1/6"', "sigma_h = { value = 0.2"),
    ('gamma_h = { value = "1/7"', "gamma_h = { value = 0.12"),
    ('births = { value = 1.1, unit = "person/day"', 'births = { value = 9, unit = "person/week"'),
    ("mu_v = { value = 0.06", "mu_v = { value = 0.05"),
    ("emergence = { value = 9000", "emergence = { value = 8000"),
]


def changed(text, edits):
    for old, new in edits:
        assert old in text
        text = text.replace(old, new)
    return text


def test_eight_values_are_averaged_over_all_orders():
    result = ngm.difference(ngm.loads(MIDGES), ngm.loads(changed(MIDGES, VALUES)))
    assert len(result.contributions) == 8
    whole = result.R0[1] - result.R0[0]
    assert sum(c.in_order for c in result.contributions) == pytest.approx(whole, rel=1e-9)
    assert sum(c.averaged for c in result.contributions) == pytest.approx(whole, rel=1e-9)
    assert not any("random orders" in warning for warning in result.warnings)


def test_models_computed_together_are_those_computed_alone():
    first, second = ngm.loads(MIDGES), ngm.loads(changed(MIDGES, VALUES[:4]))
    steps = [
        Step(name, lambda s, new=new: s.with_values(**{new.name: new.values[0].text}), parameter=new)
        for name, new in second.parameters.items()
        if first.parameters[name].in_force() != new.in_force()
    ]
    one, two = decided_numbers(first), decided_numbers(second)
    together = Between(first, second, steps, one, two)
    together.fill([frozenset(k for k in range(4) if number >> k & 1) for number in range(16)])
    assert len(together.roots) == 14
    for made, R0 in together.roots.items():
        assert R0 == pytest.approx(root_of(decided_numbers(together.scenario(made))), rel=1e-10)
    # the mean over all 24 orders, by its definition
    found = contributions(together, [])
    for k in range(4):
        moves = []
        for order in permutations(range(4)):
            place = order.index(k)
            moves.append(together.root(frozenset(order[: place + 1])) - together.root(frozenset(order[:place])))
        assert found[k].averaged == pytest.approx(math.fsum(moves) / 24, rel=1e-9)


def test_random_orders_come_near_all_orders_and_add_up(monkeypatch):
    pair = ngm.loads(MIDGES), ngm.loads(changed(MIDGES, VALUES))
    exact = ngm.difference(*pair)
    monkeypatch.setattr(between, "MOST_VALUES", 5)
    sampled = ngm.difference(*pair)
    assert any("random orders" in warning for warning in sampled.warnings)
    assert sum(c.averaged for c in sampled.contributions) == pytest.approx(exact.R0[1] - exact.R0[0], rel=1e-9)
    for one, other in zip(sampled.contributions, exact.contributions, strict=True):
        assert one.averaged == pytest.approx(other.averaged, abs=0.005)


def test_flows_and_values_together():
    more = changed(
        MIDGES, [*VALUES[:2], ("sigma_h * E_h", "0.9 * sigma_h * E_h"), ("gamma_h * I_h", "1.1 * gamma_h * I_h")]
    )
    more = changed(more, [("sigma_v * E_v", "0.8 * sigma_v * E_v"), ("a * b * I_v", "a * b * I_v * 0.7")])
    result = ngm.difference(ngm.loads(MIDGES), ngm.loads(more))
    assert len(result.contributions) == 6
    assert any("random orders" in warning for warning in result.warnings)
    whole = result.R0[1] - result.R0[0]
    assert sum(c.averaged for c in result.contributions) == pytest.approx(whole, rel=1e-9)
