"""A first model of three compartments, from answers to a few questions. No Streamlit here."""

from __future__ import annotations

import json
from dataclasses import dataclass

__all__ = ["Answers", "amount", "written"]


@dataclass(frozen=True, slots=True)
class Answers:
    """What was asked, in the order of the steps; times in the time unit, the lifetime in years.

    Attributes
    ----------
    title, time_unit : str
        What it is called; day, week, month or year.
    wanes : bool
        Immunity is lost again; else it is for good.
    per_head : bool
        A person has as many contacts however many people there are; else contacts grow with their number.
    beta : float
        Infectious contacts of one infectious person per time unit (per person present where they grow with the number).
    infectious, immune : float
        Mean length of the infectious and of the immune stage.
    people : float
        How many people there are.
    turnover : bool
        People are born and die.
    lifetime : float
        Mean lifetime, years.
    """

    title: str = "My first model"
    time_unit: str = "day"
    wanes: bool = False
    per_head: bool = True
    beta: float = 0.4
    infectious: float = 5.0
    immune: float = 365.0
    people: float = 10_000.0
    turnover: bool = False
    lifetime: float = 70.0


def amount(value: float) -> str:
    """Return a number as it is written into the file: at full precision, whole numbers without a point."""
    return repr(value).removesuffix(".0")


def written(a: Answers) -> str:
    """Return the scenario that the answers describe."""
    unit = f"1/{a.time_unit}" if a.per_head else f"1/person/{a.time_unit}"
    lines = [
        "[scenario]",
        f"title = {json.dumps(a.title, ensure_ascii=False)}",
        f'time_unit = "{a.time_unit}"',
        "",
        "[compartments]",
        'S = { label = "Susceptible", infected = false }',
        'I = { label = "Infectious", infected = true }',
        'R = { label = "Recovered", infected = false }',
        "",
        "[parameters]",
        f'beta = {{ value = {amount(a.beta)}, unit = "{unit}", label = "Infectious contacts of one infectious person" }}',
        _rate("gamma", a.infectious, a.time_unit, "Rate of recovery"),
    ]
    if a.wanes:
        lines.append(_rate("omega", a.immune, a.time_unit, "Rate at which immunity is lost"))
    if a.turnover:
        lines.append(_rate("mu", a.lifetime, "year", "Death rate"))
        lines.append(
            f'people = {{ value = {amount(a.people)}, unit = "person", label = "People when all is at rest" }}'
        )
    lines += ["", "[definitions]", 'N = "S + I + R"']
    spread = "beta * S * I / N" if a.per_head else "beta * S * I"
    flows = [("S", "I", spread, "transmission", "Infection"), ("I", "R", "gamma * I", "transition", "Recovery")]
    if a.wanes:
        flows.append(("R", "S", "omega * R", "transition", "Loss of immunity"))
    if a.turnover:
        flows.append(("", "S", "mu * people", "transition", "Births"))
        flows += [(name, "", f"mu * {name}", "transition", f"Deaths from {name}") for name in "SIR"]
    for source, target, rate, kind, label in flows:
        lines += ["", "[[flow]]"]
        fields = (("from", source), ("to", target), ("rate", rate), ("kind", kind), ("label", label))
        lines += [f'{key} = "{value}"' for key, value in fields if value]
    if not a.turnover:
        # Without births any number of immune people is at rest: the state has to be said.
        lines += ["", "[infection_free]", f"S = {amount(a.people)}", "R = 0"]
    return "\n".join(lines) + "\n"


def _rate(name: str, stay: float, unit: str, label: str) -> str:
    return f'{name} = {{ value = "1/{amount(stay)}", unit = "1/{unit}", label = "{label}; mean stay {amount(stay)} {unit}s" }}'
