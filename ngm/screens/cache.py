"""What the pages compute, kept by content: the same text is read, solved and typeset once.

Results are immutable, so all sessions share one object and nothing is copied on a read. They are keyed by the text of
the scenario and the folder that its matrix files lie in; nothing about a person is kept here.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import streamlit as st

import ngm
from ngm.charts.style import short
from ngm.errors import NgmError, Problem
from ngm.results import ControlResult, Solution

__all__ = ["Outcome", "control", "conversions", "latex", "problems", "solve"]


@dataclass(frozen=True, slots=True)
class Outcome:
    """The solution of a scenario, or the problems that stand in its way."""

    solution: Solution | None
    problems: tuple[Problem, ...]


@st.cache_resource(max_entries=128, show_spinner=False)
def problems(text: str, folder: str | None) -> tuple[Problem, ...]:
    """Return every problem that the reader finds in a scenario text; none where it can be accepted."""
    try:
        ngm.loads(text, folder=folder)
    except NgmError as error:
        return error.problems
    return ()


@st.cache_resource(max_entries=64, show_spinner="Deriving …")
def solve(text: str, folder: str | None) -> Outcome:
    """Return the solution of a scenario text, or the problems found on the way."""
    try:
        return Outcome(ngm.solve(ngm.loads(text, folder=folder)), ())
    except NgmError as error:
        return Outcome(None, error.problems)


@st.cache_resource(max_entries=64, show_spinner="Computing control numbers …")
def control(text: str, folder: str | None) -> ControlResult:
    """Return type, target and state reproduction numbers of a scenario text that `solve` accepts."""
    return ngm.control(ngm.loads(text, folder=folder))


@st.cache_resource(max_entries=128, show_spinner=False)
def conversions(text: str, folder: str | None) -> tuple[tuple[str, str], ...]:
    """Return each parameter that is converted for the computation, with its value in force; none where it is no model."""
    try:
        scenario = ngm.loads(text, folder=folder)
    except NgmError:
        return ()
    out: list[tuple[str, str]] = []
    for parameter in scenario.parameters.values():
        if parameter.factor != 1:
            typed = dict.fromkeys(value.text for value in parameter.values)
            used = dict.fromkeys(_number(node, parameter.factor) for node in parameter.in_force())
            unit = parameter.unit.text if parameter.unit is not None else ""
            out.append((parameter.name, f"{', '.join(typed)} {unit} = {', '.join(used)}"))
    return tuple(out)


def _number(node: object, factor: Fraction) -> str:
    value = getattr(node, "value", None)
    return short(float(value), 6) if isinstance(value, Fraction) else f"the value times {short(float(factor), 6)}"


@st.cache_resource(max_entries=4096, show_spinner=False)
def latex(text: str) -> str:
    """Return an expression in the scenario's own syntax as LaTeX."""
    from ngm.expression.typeset import latex_of

    return latex_of(text, items=True)
