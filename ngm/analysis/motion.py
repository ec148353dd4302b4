"""The flows of a scenario as a system to be followed, with or without an intervention: where course and threshold begin."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.derivation.dynamics import LOOSE, Dynamics, loosened, with_susceptibility
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Number
from ngm.scenario.model import Scenario

__all__ = ["dynamics_of", "flows_in_force", "no_flows", "start_of"]

FloatArray = Any


def no_flows(scenario: Scenario, what: str) -> None:
    """Refuse a scenario whose matrices stand in the file.

    Raises
    ------
    DerivationError
        There are no flows that could be followed.
    """
    if scenario.given is not None or scenario.projection is not None:
        section = "next_generation" if scenario.given is not None else "projection"
        raise DerivationError(
            Problem(
                f"[{section}]",
                f"the matrix stands in the file and has no flows behind it, so {what} cannot be computed. Write the model as "
                "compartments and flows.",
                key=(section,),
            )
        )


def flows_in_force(found: Numbers, what: str) -> Scenario:
    """Return the scenario whose flows are those in force: parameters changed, susceptibility in the rates.

    Raises
    ------
    DerivationError
        The intervention scales infectivity: that says what few infected do, and not what many do.
    """
    point, scenario = found.point, found.point.scenario
    if point.intervention is None:
        return scenario
    factors: dict[str, tuple[Fraction, ...]] = {}
    for place, change in enumerate(point.intervention.changes, 1):
        if change.what == "infectivity":
            raise DerivationError(
                Problem(
                    f'intervention "{point.intervention.name}", change {place}',
                    f"{what} follows the flows themselves, and a change of the infectivity of {change.name} does not say "
                    "which flows it enters. Change the parameter behind it.",
                )
            )
        if change.what != "susceptibility":
            continue
        amount = change.amount.tree
        share = amount.value if isinstance(amount, Number) else Fraction(_plain(found, change.amount.tree))
        by = scenario.compartments[change.name].by
        old = factors.get(change.name, (Fraction(1),) * len(scenario.copies(by)))
        factors[change.name] = tuple(
            before * (1 - share)
            if all(g in change.groups.get(d, (g,)) for d, g in zip(by, groups, strict=True))
            else before
            for before, groups in zip(old, scenario.copies(by), strict=True)
        )
    return with_susceptibility(scenario, factors) if factors else scenario


def _plain(found: Numbers, tree: Any) -> float:
    from ngm.derivation.evaluate import FLOATS

    return float(found.template.evaluator(FLOATS, {}).value(tree).ravel()[0])


def dynamics_of(found: Numbers, what: str, *, along: str | None = None, loose: bool = False) -> Dynamics:
    """Return the flows of a scenario as a system; with `loose` one quantity is let loose, see `loosened`.

    Raises
    ------
    DerivationError
        As `flows_in_force` and `no_flows`.
    NotLooseError
        As `loosened`.
    """
    no_flows(found.scenario, what)
    scenario = flows_in_force(found, what)
    if loose:
        scenario = loosened(scenario, along)
    matrices = {name: as_floats(np.asarray(table)) for name, table in found.point.matrices.items()}
    return Dynamics(scenario, matrices)


def start_of(found: Numbers, dynamics: Dynamics) -> FloatArray:
    """Return the infection-free state of a scenario as a state of its system, (n,)."""
    template = found.point.template
    parts = []
    for name in dynamics.compartments:
        if name == LOOSE:
            continue
        count = template.space.count(template.by(name))
        if name in template.infected:
            parts.append(np.zeros(count))
        else:
            flat = template.space.flatten(np.asarray(found.point.state[name]), template.by(name))[:, 0]
            parts.append(as_floats(flat))
    return np.concatenate(parts)
