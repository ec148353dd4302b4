"""Texts of scenarios whose matrices stand in the file."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence

HEAD = '[scenario]\ntitle = "Matrix"\ntime_unit = "year"\n'
Rows = Sequence[Sequence[float | str]]


def parameters(values: Mapping[str, float | str]) -> str:
    """Return the section of parameters."""
    lines = [f"{name} = {{ value = {json.dumps(value)} }}" for name, value in values.items()]
    return "[parameters]\n" + "\n".join(lines) + "\n" if lines else ""


def rows(table: Rows) -> str:
    """Return a table as TOML: numbers as numbers, texts as expressions."""
    return "[" + ", ".join("[" + ", ".join(json.dumps(entry) for entry in row) + "]" for row in table) + "]"


def given(
    K: Rows, types: Sequence[str] = (), values: Mapping[str, float | str] | None = None, more: str = "", tail: str = ""
) -> str:
    """Return a K as given; `more` stands below its types, `tail` at the end of the file."""
    names = list(types) or [f"t{k}" for k in range(1, len(K) + 1)]
    section = f"[next_generation]\ntypes = {json.dumps(names)}\nK = {rows(K)}\n{more}\n"
    return HEAD + parameters(values or {}) + section + tail


def population(
    births: Rows,
    transitions: Rows,
    stages: Sequence[str] = (),
    values: Mapping[str, float | str] | None = None,
    tail: str = "",
) -> str:
    """Return a projected population."""
    names = list(stages) or [f"s{k}" for k in range(1, len(births) + 1)]
    section = (
        f"[projection]\nstages = {json.dumps(names)}\nbirths = {rows(births)}\ntransitions = {rows(transitions)}\n"
    )
    return HEAD + parameters(values or {}) + section + tail


def change(text: str) -> str:
    """Return an intervention with one change."""
    return f'[[intervention]]\nname = "x"\nchange = [{{ {text} }}]\n'
