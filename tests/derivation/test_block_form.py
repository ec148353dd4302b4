"""Grouped models on their template: blocks by hand, and the sum formula of proportionate mixing."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.derivation.evaluate import FLOATS
from ngm.derivation.template import Template
from ngm.expression.parse import parse

ROOT = Path(__file__).parents[2]


def proportionate(sizes: list[float], contacts: list[float], extra: str = "") -> str:
    """Return a model in which each contact is with any group in proportion to its contacts."""
    groups = [f"g{k}" for k in range(len(sizes))]
    return f"""
[scenario]
title = "Proportionate mixing"
time_unit = "day"
[dimensions]
group = {str(groups).replace("'", '"')}
[compartments]
S = {{ infected = false, by = ["group"] }}
I = {{ infected = true, by = ["group"] }}
[parameters]
n = {{ value = {sizes}, by = ["group"] }}
c = {{ value = {contacts}, by = ["group"] }}
b = {{ value = 0.12 }}
gamma = {{ value = 1 }}
[[flow]]
from = "S"
to = "I"
rate = "b * c * S * sum(c * I) / sum(c * n) {extra}"
kind = "transmission"
[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"
[infection_free]
S = "n"
"""


def test_rank_one_mixing_gives_the_sum_formula() -> None:
    """Published: Nold (1980) Math. Biosci. 52:227-240 (formula from memory): R0 = b D sum(c^2 N) / sum(c N)."""
    rng = np.random.default_rng(3)
    sizes, contacts = rng.uniform(10, 100, 17).round(2), rng.uniform(1, 20, 17).round(2)
    scenario = ngm.loads(proportionate(sizes.tolist(), contacts.tolist()))
    solution = ngm.solve(scenario)
    expected = 0.12 * np.sum(contacts**2 * sizes) / np.sum(contacts * sizes)
    assert solution.R0 == pytest.approx(expected, rel=1e-12)
    assert solution.symbolic.K is None  # 17 types are not written out
    assert solution.closed_form is not None
    assert solution.closed_form.startswith("sum(")
    value = Template(scenario).evaluator(FLOATS, {}).value(parse(solution.closed_form))
    assert float(value.ravel()[0]) == pytest.approx(expected, rel=1e-12)


def test_the_core_group_of_the_published_example() -> None:
    """Published: model 11 of the published examples: N = (900, 100), c = (2, 15), b D = 0.12: 0.9490909091."""
    solution = ngm.solve(ngm.loads(proportionate([900, 100], [2, 15])))
    assert solution.R0 == pytest.approx(0.9490909091, rel=1e-9)
    assert solution.closed_form is not None
    assert solution.symbolic.blocks is not None
    assert solution.symbolic.blocks.closed_form is not None


def test_mixing_of_another_rank_has_no_sum_formula() -> None:
    solution = ngm.solve(ngm.loads(proportionate([5.0] * 17, [2.0] * 17, "+ 0.01 * c * c * S * I")))
    assert solution.closed_form is None


def test_blocks_of_the_age_example() -> None:
    """By hand: infection q sigma S C(I/N) with S = N = population, a latent and an infectious stage, no deaths."""
    blocks = ngm.solve(ngm.load(ROOT / "scenarios" / "age-groups-ember-cough.toml")).symbolic.blocks
    assert blocks is not None
    assert blocks.F == {("E", "I"): "diag(population*q*sigma) contacts diag(1/population)"}
    assert blocks.V == {("E", "E"): "diag(latent)", ("I", "E"): "diag(-latent)", ("I", "I"): "diag(gamma)"}
    assert blocks.K == {("E", "E"): "diag(population*q*sigma) contacts diag(1/(gamma*population))"}
    assert blocks.root == "rho(diag(population*q*sigma) contacts diag(1/(gamma*population)))"
    assert blocks.infection_free == {"S": "population", "R": "0"}


def test_movement_stays_in_V_and_leaves_K_without_a_formula_by_group() -> None:
    blocks = ngm.solve(ngm.load(ROOT / "scenarios" / "three-towns-torvane-fever.toml")).symbolic.blocks
    assert blocks is not None
    assert blocks.K is None
    assert blocks.V["E", "E"] == "diag(mu + moves(1) + sigma) - moves'"
    assert blocks.F == {("E", "I"): "diag(beta)"}


def test_an_ungrouped_model_has_no_blocks() -> None:
    assert ngm.solve(ngm.load(ROOT / "scenarios" / "seir-velmar-fever.toml")).symbolic.blocks is None
