"""Entries of matrices that stand in the file, at their values: what is refused, and what is said where there is no R0."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.derivation.evaluate import Evaluator
from ngm.derivation.expand import blank
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Number
from ngm.scenario.model import Expression, Scenario

__all__ = [
    "form_of",
    "is_stated",
    "matrices_of",
    "negative_entry",
    "nothing_new",
    "refuse_negative_shares",
    "sizes_of",
    "without_end",
]

MOST_TOLD = 5


def is_stated(scenario: Scenario) -> bool:
    """Return whether the matrices of a scenario stand in its file: a K as given, or a projection."""
    return scenario.given is not None or scenario.projection is not None


def form_of(scenario: Scenario) -> str:
    """Return what a scenario is made of: "flows", "K as given" or "projection"."""
    return "K as given" if scenario.given is not None else "flows" if scenario.projection is None else "projection"


def sizes_of(scenario: Scenario, evaluator: Evaluator) -> tuple[float, ...] | None:
    """Return the members of each type of a K as given, None where the file does not say."""
    if scenario.given is None or not scenario.given.sizes:
        return None
    return tuple(float(as_floats(evaluator.value(size.tree)).ravel()[0]) for size in scenario.given.sizes)


def matrices_of(scenario: Scenario, evaluator: Evaluator) -> tuple[Array, Array] | None:
    """Return F and V of matrices that stand in the file, entry by entry as they are; None where flows make them.

    They are those that the arrows of `ngm.scenario.stated` make, without a sum that has to be taken apart again.
    """
    n = len(scenario.compartments)
    one = blank(evaluator, n, n)
    np.fill_diagonal(one, evaluator.algebra.number(Fraction(1)))
    if scenario.given is not None:
        return _entries(scenario.given.K, evaluator), one
    if scenario.projection is not None:
        T = _entries(scenario.projection.transitions, evaluator)
        return _entries(scenario.projection.births, evaluator), evaluator.algebra.subtract(one, T)
    return None


def _entries(rows: tuple[tuple[Expression, ...], ...], evaluator: Evaluator) -> Array:
    out = blank(evaluator, len(rows), len(rows))
    for i, row in enumerate(rows):
        for j, entry in enumerate(row):
            if isinstance(entry.tree, Number):
                out[i, j] = evaluator.algebra.number(entry.tree.value)
            else:
                out[i, j] = evaluator.value(entry.tree).ravel()[0]
    return out


def refuse_negative_shares(template: Template, V: Array) -> None:
    """Refuse a projection in which an entry of T = I - V is negative at its values.

    Raises
    ------
    DerivationError
        With the entries.
    """
    problems = []
    stages = template.types
    for i, j in np.argwhere(as_floats(V) > np.eye(len(V))):
        share = (1 if i == j else 0) - V[i, j]
        if share < 0:
            problems.append(
                Problem(
                    f"projection, transitions[{stages[i]}, {stages[j]}]",
                    f"is {float(as_floats(np.array([share]))[0]):.6g} at these values. A share is positive or zero: check the "
                    "values of its parameters.",
                    key=("projection", "transitions", int(i), int(j)),
                )
            )
    if problems:
        raise DerivationError(problems[:MOST_TOLD])


def negative_entry(scenario: Scenario, row: str, column: str) -> str:
    """Return why there is no R0 where an entry of K, or of births, is negative."""
    if scenario.given is not None:
        return f"K[{row}, {column}] is negative at these values. A number of new infections is positive or zero."
    return f"births[{row}, {column}] is negative at these values. A number of new members is positive or zero."


def nothing_new(scenario: Scenario) -> str:
    """Return what to say where nothing makes new infections, or no stage has births."""
    if scenario.projection is not None:
        return "No stage has births: R0 is 0."
    return "No flow makes new infections near the infection-free state: R0 is 0."


def without_end(members: list[str]) -> str:
    """Return why a projection has no net reproduction number: without births its members are not gone in the end."""
    named = ", ".join(members[:6]) + (", …" if len(members) > 6 else "")
    return (
        f"rho(T) >= 1 at these values: without births the members of {named} are not all gone in the end, so the number of "
        "births in a life has no finite mean. The growth factor is that of F + T all the same. Check the shares of transitions."
    )
