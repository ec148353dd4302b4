"""Scenarios with interventions, put together as text."""

from __future__ import annotations

from typing import Any

import ngm
from tests.derivation.models import text


def intervention(name: str, *changes: str, **keys: Any) -> str:
    """Return an intervention as a part of a file; each change is the inside of an inline table."""
    lines = ["[[intervention]]", f'name = "{name}"', *(f"{key} = {value}" for key, value in keys.items())]
    return "\n".join([*lines, "change = [" + ", ".join(f"{{ {change} }}" for change in changes) + "]", ""])


def matrix_text(K: list[list[float]]) -> str:
    """Return a model whose next-generation matrix is K: types I1, I2, … that infect and recover at rate 1."""
    m = len(K)
    values = {f"k{i + 1}{j + 1}": K[i][j] for i in range(m) for j in range(m)}
    flows = []
    for i in range(1, m + 1):
        force = " + ".join(f"k{i}{j}*I{j}" for j in range(1, m + 1))
        flows += [(f"S{i}", f"I{i}", f"({force})*S{i}", "t"), (f"I{i}", "", f"I{i}", "x")]
    names = [(f"{letter}{i}", letter == "I") for letter in "SI" for i in range(1, m + 1)]
    return text(names, values, flows, free={f"S{i}": 1 for i in range(1, m + 1)})


def numbers(model: str, *interventions: str) -> dict[str, float | None]:
    """Return the control reproduction number under each intervention, by name."""
    return {row.name: row.R0 for row in ngm.compare(ngm.loads(model + "\n".join(interventions))).interventions}


#: Two age groups in one town; N and its groups, contacts that balance.
TOWN = """
[scenario]
title = "Two ages, invented"
time_unit = "day"
[dimensions]
age = ["young", "old"]
[compartments]
S = { infected = false, by = ["age"] }
I = { infected = true, by = ["age"] }
[parameters]
q = { value = 0.1 }
gamma = { value = 0.5 }
n = { value = [300, 700], by = ["age"] }
[matrices.C]
by = "age"
population = "n"
reciprocal = true
values = [[8, 4], [2, 6]]
[[flow]]
from = "S"
to = "I"
rate = "q * S * C(I / n)"
kind = "transmission"
[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"
[infection_free]
S = "n"
"""
