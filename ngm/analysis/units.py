"""The units of a scenario, and the times and shares that its rates imply: the quickest way to see a slip."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.point import MOST_WRITTEN, Point
from ngm.analysis.stated_entries import is_stated
from ngm.derivation.expand import arrow_blocks
from ngm.errors import DerivationError
from ngm.expression.tree import Node
from ngm.results_opinion import Exit, ParameterUnit, Stay, UnitNote, Units
from ngm.scenario.exact import evaluate
from ngm.scenario.model import Parameter, Scenario
from ngm.scenario.slips import slips
from ngm.scenario.unit_check import check_units
from ngm.scenario.units import time_unit_name

__all__ = ["stays", "units"]

ENTRIES_FIT = "The units fit: every entry of the matrices is a pure number, and no sum mixes units."


def units(scenario: Scenario) -> Units:
    """Return what the units of a scenario say: findings, conversions, and the mean stay in every stage.

    The stay in a stage is 1 / (sum of the slopes of the rates out of it, by itself) at the infection-free state, and the
    probability of a way out is its slope over that sum. In time units; of a compartment whose exits need others (a
    susceptible who is infected) only the exits without infection count.

    Raises
    ------
    ngm.ScenarioError
        Nothing here: a scenario whose strict units do not fit was refused when it was read.
    """
    check = check_units(scenario)
    warnings = [warning for warning in scenario.warnings if not warning.startswith("Units: ")]
    found: tuple[Stay, ...] = ()
    try:
        point = Point(scenario)
        if is_stated(scenario):
            pass  # nobody moves from stage to stage by flows
        elif point.exact and len(point.template.types) <= MOST_WRITTEN:
            found = stays(point)
        else:
            warnings.append("Too many types: the stays are not listed.")
    except DerivationError as error:
        warnings.append(f"No stays: {error}")
    return Units(
        scenario.title,
        scenario.time_unit,
        scenario.strict_units,
        tuple(
            UnitNote(finding.kind, finding.where, finding.message) for finding in (*check.findings, *slips(scenario))
        ),
        tuple(_parameter(scenario, p, check.implied.get(p.name)) for p in scenario.parameters.values()),
        {}
        if is_stated(scenario)
        else {name: compartment.unit or "individual" for name, compartment in scenario.compartments.items()},
        check.expressions,
        found,
        tuple(warnings),
        *((ENTRIES_FIT,) if is_stated(scenario) else ()),
    )


def _parameter(scenario: Scenario, parameter: Parameter, implied: str | None) -> ParameterUnit:
    typed = tuple(dict.fromkeys(value.text for value in parameter.values))
    if parameter.follows:
        used = typed
    else:
        used = tuple(dict.fromkeys(_shown(as_value(node)) for node in parameter.in_force()))
    powers = None if parameter.unit is None else parameter.unit.powers
    reading = None
    if powers is not None and not parameter.follows and len(used) == 1 and float(used[0]) > 0:
        power = {word: p for word, p in powers.items() if p}
        if list(power.values()) == [Fraction(-1)] and _is_time(scenario, next(iter(power))):
            reading = f"once in {1 / as_value(parameter.in_force()[0]):.6g} {scenario.time_unit}"
    return ParameterUnit(
        parameter.name,
        None if parameter.unit is None else parameter.unit.text,
        typed,
        used,
        parameter.factor != 1,
        implied if powers is None else None,
        reading,
    )


def as_value(node: Node) -> float:
    """Return the number that a value in force is."""
    return float(evaluate(node))


def _shown(value: float) -> str:
    return f"{value:.10g}"


def _is_time(scenario: Scenario, word: str) -> bool:
    return word == scenario.time_unit or time_unit_name(word) is not None


def stays(point: Point) -> tuple[Stay, ...]:
    """Return the mean stay in every copy of every compartment that something leaves, with the ways out."""
    template, scenario = point.template, point.scenario
    compartments = (*template.infected, *template.uninfected)
    at = template.offsets(compartments)
    labels = template.items_of(compartments)
    exits: dict[int, list[tuple[int | None, str, str | None, float]]] = {}
    for found in arrow_blocks(template, point.evaluator, template.arrows, compartments):
        arrow = found.arrow
        if arrow.source is None or found.column != arrow.source or found.leaves is None:
            continue
        values = as_floats(found.block)
        for copy, row in enumerate(np.asarray(found.leaves).ravel()):
            rate = float(values[copy, int(row) - at[arrow.source]])
            if rate > 0:
                exits.setdefault(int(row), []).append((arrow.number, arrow.label, arrow.target, rate))
    infected = {item for name in template.infected for item in scenario.items(name, template.by(name))}
    out = []
    for row, label in enumerate(labels):
        ways = exits.get(row, [])
        total = sum(rate for *_, rate in ways)
        out.append(
            Stay(
                label,
                label in infected,
                1 / total if total > 0 else None,
                tuple(Exit(number, name, to, rate, rate / total) for number, name, to, rate in ways),
            )
        )
    return tuple(out)
