"""What the pages compute, kept by content: the same text is read, solved and typeset once.

Results are immutable, so all sessions share one object and nothing is copied on a read. They are keyed by the text of
the scenario and the folder that its matrix files lie in; nothing about a person is kept here.
"""

from __future__ import annotations

import functools
from dataclasses import dataclass

import streamlit as st

import ngm
from ngm.errors import NgmError, Problem
from ngm.results import ControlResult, Solution
from ngm.results_control import Allocation, Comparison, Coverage, Strength
from ngm.results_mixing import Mixing, MixingMap, MixingResponses
from ngm.results_sensitivity import Sensitivity, Swings
from ngm.screens import jobs

__all__ = [
    "ByGroup",
    "Outcome",
    "allocate",
    "compare",
    "control",
    "conversions",
    "coverage",
    "latex",
    "mixing",
    "mixing_map",
    "mixing_responses",
    "numbers",
    "problems",
    "slopes",
    "solve",
    "strength",
    "swings",
]

#: One number for all groups, or (group, number) for each: plain values, so that they can be part of a key.
ByGroup = float | tuple[tuple[str, float], ...]


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


@st.cache_resource(max_entries=128, show_spinner=False)
def numbers(text: str, folder: str | None) -> Outcome:
    """Return the numbers of a scenario text without its formulas, or the problems found on the way."""
    try:
        return Outcome(ngm.solve(_read(text, folder), limit=0), ())
    except NgmError as error:
        return Outcome(None, error.problems)


@functools.lru_cache(maxsize=32)
def _read(text: str, folder: str | None) -> ngm.Scenario:
    """Return a scenario: one reading for all that is asked of a text just typed."""
    return ngm.loads(text, folder=folder)


def solve(text: str, folder: str | None) -> Outcome:
    """Return the solution of a scenario text: with its formulas where they have come, else the numbers alone."""
    ready = jobs.ready(text, folder)
    return numbers(text, folder) if ready is None else Outcome(ready, ())


@st.cache_resource(max_entries=64, show_spinner="Computing control numbers …")
def control(text: str, folder: str | None, entries: tuple[tuple[str, str], ...] = ()) -> ControlResult:
    """Return type, target and state reproduction numbers of a scenario text that `solve` accepts."""
    return ngm.control(ngm.loads(text, folder=folder), entries=entries)


@st.cache_resource(max_entries=64, show_spinner="Comparing the interventions …")
def compare(
    text: str, folder: str | None, combinations: tuple[tuple[str, ...], ...] = ()
) -> Comparison | tuple[Problem, ...]:
    """Return every intervention, and combinations of them, beside the baseline; or why there is no comparison."""
    try:
        return ngm.compare(ngm.loads(text, folder=folder), combinations=combinations, partial=True)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=256, show_spinner=False)
def strength(
    text: str, folder: str | None, name: str, target: float, besides: tuple[str, ...]
) -> Strength | tuple[Problem, ...]:
    """Return the strength at which an intervention brings the number to a target, others being in force besides."""
    try:
        scenario = ngm.loads(text, folder=folder)
        also = ngm.combined(scenario, besides).intervention if besides else None
        return ngm.strength_needed(scenario, name, target=target, with_also=also)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=128, show_spinner="Computing the coverage …")
def coverage(
    text: str,
    folder: str | None,
    groups: tuple[str, ...] | None = None,
    efficacy: ByGroup = 1.0,
    against_spread: ByGroup = 0.0,
    kind: str = "leaky",
    turnover: float | None = None,
    waning: float = 0.0,
    target: float = 1.0,
    besides: tuple[str, ...] = (),
) -> Coverage | tuple[Problem, ...]:
    """Return the coverage that groups need, or what is wrong with the question."""
    try:
        scenario = ngm.loads(text, folder=folder)
        return ngm.coverage_needed(
            scenario,
            groups,
            efficacy=_by_group(efficacy),
            against_spread=_by_group(against_spread),
            kind=kind,
            turnover=turnover,
            waning=waning,
            target=target,
            intervention=ngm.combined(scenario, besides).intervention if besides else None,
        )
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner="Sharing the supply: many ways are tried …")
def allocate(
    text: str,
    folder: str | None,
    supply: float,
    groups: tuple[str, ...] | None,
    efficacy: ByGroup,
    against_spread: ByGroup,
    cost: ByGroup,
    upper: ByGroup,
    sizes: tuple[tuple[str, float], ...],
    target: float,
    besides: tuple[str, ...],
) -> Allocation | tuple[Problem, ...]:
    """Return the best share of a supply, or what is wrong with the question."""
    try:
        scenario = ngm.loads(text, folder=folder)
        return ngm.allocate(
            scenario,
            supply,
            groups=groups,
            efficacy=_by_group(efficacy),
            against_spread=_by_group(against_spread),
            cost=_by_group(cost),
            upper=_by_group(upper),
            sizes=dict(sizes),
            target=target,
            intervention=ngm.combined(scenario, besides).intervention if besides else None,
        )
    except NgmError as error:
        return error.problems


def _by_group(given: ByGroup) -> float | dict[str, float]:
    return dict(given) if isinstance(given, tuple) else given


@st.cache_resource(max_entries=64, show_spinner=False)
def mixing(
    text: str, folder: str | None, matrix: str | None, within: str | None, factors: tuple[tuple[str, float], ...] = ()
) -> Mixing | tuple[Problem, ...]:
    """Return a contact matrix looked at, or why there is none to look at."""
    try:
        return ngm.mixing(ngm.loads(text, folder=folder), matrix, within, factors=dict(factors))
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=32, show_spinner="Computing what R0 answers to …")
def mixing_responses(
    text: str, folder: str | None, matrix: str, within: str | None
) -> MixingResponses | tuple[Problem, ...]:
    """Return how R0 and the case mix answer to mixing, or why they cannot be asked."""
    try:
        return ngm.mixing_responses(ngm.loads(text, folder=folder), matrix, within)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=32, show_spinner="Drawing the map …")
def mixing_map(
    text: str, folder: str | None, x: tuple[str, str], y: tuple[str, str], within: str | None
) -> MixingMap | tuple[Problem, ...]:
    """Return R0 over two quantities, or why there is no such map."""
    try:
        return ngm.mixing_map(ngm.loads(text, folder=folder), x, y, within=within)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner="Differentiating the closed form …")
def slopes(text: str, folder: str | None, closed_form: str) -> Sensitivity | tuple[Problem, ...]:
    """Return the local indices with their formulas, made from the closed form of R0."""
    try:
        return ngm.sensitivity(ngm.loads(text, folder=folder), formulas=closed_form)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner=False)
def swings(text: str, folder: str | None) -> Swings | tuple[Problem, ...]:
    """Return R0 at the ends of each parameter's range, or why there is none."""
    try:
        return ngm.swings(ngm.loads(text, folder=folder))
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=128, show_spinner=False)
def conversions(text: str, folder: str | None) -> tuple[tuple[tuple[str, str], ...], tuple[tuple[str, str], ...]]:
    """Return the parameters that are converted, with their values in force, and the slips of units of time with where they are.

    Nothing of either where the text is no model.
    """
    try:
        scenario = _read(text, folder)
    except NgmError:
        return (), ()
    return ngm.conversions(scenario), tuple((found.where, found.message) for found in ngm.slips(scenario))


@st.cache_resource(max_entries=4096, show_spinner=False)
def latex(text: str) -> str:
    """Return an expression in the scenario's own syntax as LaTeX."""
    from ngm.expression.typeset import latex_of

    return latex_of(text, items=True)
