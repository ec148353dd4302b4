"""The infection-free state at the values in force: solved, chosen among several, and checked where it is given."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from ngm.analysis.large_state import find_large_rest
from ngm.analysis.matrices import as_floats
from ngm.derivation.evaluate import FLOATS, Algebra
from ngm.derivation.expand import net_flow
from ngm.derivation.rest import RestSystem
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.engine.balls import is_balls
from ngm.engine.rest import FreeStates, RestStates, find_rest
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Apply, walk

__all__ = ["InfectionFree", "infection_free"]

#: Unknowns up to which the equations at rest are written out as one matrix, where numbers are not enclosed.
MOST_DENSE = 400
#: Net flow over gross flow up to which a given state counts as at rest.
AT_REST = 1e-9


@dataclass(frozen=True)
class InfectionFree:
    """The state without infection: every uninfected compartment as an array over the space.

    `residual`: the largest net flow over gross flow of a compartment. `warnings`: what was accepted all the same.
    `net_flows`: of each given copy that has to be at rest, its net flow (in the arithmetic in use) and its gross flow.
    `among`: how many non-negative states at rest it was chosen from.
    """

    state: dict[str, Array]
    residual: float
    warnings: tuple[str, ...]
    net_flows: dict[str, tuple[Any, float]]
    among: int = 1


def infection_free(template: Template, algebra: Algebra, matrices: Mapping[str, Array]) -> InfectionFree:
    """Return the infection-free state of a scenario at its values.

    Parameters
    ----------
    matrices : mapping of str to Array
        Those that are known before the state is.

    Raises
    ------
    DerivationError
        A given state is negative or not at rest; nothing fixes a compartment; several states fit, or none.
    """
    return _Finder(template, algebra, matrices).find()


class _Finder:
    def __init__(self, template: Template, algebra: Algebra, matrices: Mapping[str, Array]) -> None:
        self.template, self.algebra, self.matrices = template, algebra, matrices
        self.scenario = template.scenario
        self.warnings: list[str] = []

    def find(self) -> InfectionFree:
        template, exact = self.template, self.algebra.dtype is object
        self._refuse_needed()
        system = RestSystem(template, self.algebra, self.matrices)
        floats = system
        if exact:
            floats = RestSystem(template, FLOATS, {name: as_floats(table) for name, table in self.matrices.items()})
        try:
            if not exact and len(system.labels) > MOST_DENSE:
                found = find_large_rest(system, discrete=self.scenario.discrete)
            else:
                found = find_rest(
                    floats, system if exact else None, len(system.labels), discrete=self.scenario.discrete
                )
        except FreeStates as free:
            raise self._left_free(system, free) from None
        x = self._choose(system, found)
        state = system.state(x)
        residual, net_flows = self._check(system, x, state)
        among = sum(found.nonnegative)
        return InfectionFree(state, residual, tuple(self.warnings), net_flows, among)

    def _refuse_needed(self) -> None:
        for arrow in self.template.rest_arrows:
            used = {node.matrix for node in walk(arrow.rate.value) if isinstance(node, Apply)}
            for name in used - set(self.matrices):
                raise DerivationError(
                    Problem(
                        f"matrices.{name}",
                        f"{arrow.label} uses {name} without infection, but {name} is balanced with a population that is only "
                        "known in the infection-free state. Give population as an expression in parameters.",
                        key=("matrices", name, "population"),
                    )
                )

    def _left_free(self, system: RestSystem, free: FreeStates) -> DerivationError:
        compartments = [label.split("[")[0] for k, label in enumerate(system.labels) if k in free.members]
        named = ", ".join(dict.fromkeys(compartments))
        if free.restless:
            filling = ", ".join(dict.fromkeys(system.labels[k].split("[")[0] for k in free.restless))
            return DerivationError(
                Problem(
                    "infection_free",
                    f"without infection {filling} never comes to rest: something enters and nothing balances it. Add a flow "
                    f"out of {filling} (deaths, ageing), or leave out the inflow and give {filling} under [infection_free].",
                    key=("infection_free",),
                )
            )
        first = compartments[0]
        return DerivationError(
            Problem(
                "infection_free",
                f"without infection nothing fixes {named}: any number of them is at rest (a closed population has no births "
                f"and deaths to fix its size). Give {named} under [infection_free], for example {first} = 1000, or a "
                f'parameter: {first} = "N0".',
                key=("infection_free",),
            )
        )

    def _choose(self, system: RestSystem, found: RestStates) -> Array:
        """Return the non-negative state that is stable without infection, or the only one there is."""
        fit = [k for k, good in enumerate(found.nonnegative) if good]
        stable = [k for k in fit if found.stable[k]]
        if len(stable) == 1:
            return np.asarray(found.states[stable[0]])
        if len(fit) == 1:
            if len(system.labels):
                named = self._words(system, found.states[fit[0]])
                self.warnings.append(
                    f"The infection-free state {named} is not stable without infection: A5 does not hold, and the "
                    "number below says nothing about what happens after a small disturbance."
                )
            return np.asarray(found.states[fit[0]])
        listed = "; ".join(self._words(system, x) for x in found.states[:5])
        free = ", ".join(self.template.free)
        if not fit:
            what = (
                f"no non-negative state without infection is at rest (found: {listed})"
                if listed
                else ("no state without infection is at rest")
            )
            advice = f"Check the flows into and out of {free}, or give the state under [infection_free]."
        else:
            which = stable or fit
            listed = "; ".join(self._words(system, found.states[k]) for k in which[:5])
            kind = "stable" if stable else "unstable"
            what = f"{len(which)} {kind} states without infection are at rest: {listed}"
            advice = f"Give the one that is meant under [infection_free] ({free})."
        raise DerivationError(Problem("infection_free", f"{what}. {advice}", key=("infection_free",)))

    def _words(self, system: RestSystem, x: Array) -> str:
        numbers = as_floats(np.asarray(x))
        shown = [f"{label} = {value:.6g}" for label, value in zip(system.labels, numbers, strict=True)]
        return ", ".join(shown[:6]) + (", …" if len(shown) > 6 else "")

    def _check(
        self, system: RestSystem, x: Array, state: Mapping[str, Array]
    ) -> tuple[float, dict[str, tuple[Any, float]]]:
        """Refuse a given state that is negative or not at rest; note the largest net flow over gross flow."""
        template, space = self.template, self.template.space
        problems = []
        for name in template.uninfected:
            array = space.flatten(np.asarray(state[name]), template.by(name))[:, 0]
            labels = self.scenario.items(name, template.by(name))
            for label, value in zip(labels, array, strict=True):
                if (is_balls(array) and not value.is_finite()) or (not is_balls(array) and not np.isfinite(value)):
                    problems.append(
                        Problem(
                            f"infection_free.{name}",
                            f"{label} has no value: it divides by 0 or leaves the range of a "
                            "function at these parameters.",
                            key=("infection_free", name),
                        )
                    )
                elif value < 0 and name in template.given:
                    problems.append(
                        Problem(
                            f"infection_free.{name}",
                            f"{label} = {float(as_floats(np.array([value]))[0]):.6g} is negative. "
                            "The number of hosts cannot be.",
                            key=("infection_free", name),
                        )
                    )
        if problems:
            raise DerivationError(problems)
        moving = tuple(name for name in template.uninfected if name in template.depended_on)
        entering, leaving = net_flow(template, system.evaluator(x), template.rest_arrows, moving)
        labels = template.items_of(moving)
        into, out = as_floats(entering)[:, 0], as_floats(leaving)[:, 0]
        exact_net = np.asarray(entering - leaving)[:, 0]
        net = as_floats(exact_net)
        worst, net_flows = 0.0, {}
        for k, label in enumerate(labels):
            gross = abs(into[k]) + abs(out[k])
            if not np.isfinite(gross):
                problems.append(
                    Problem(
                        "infection_free",
                        f"a rate at {label} has no value in the infection-free state: it divides by 0 or "
                        "leaves the range of a function.",
                        key=("infection_free",),
                    )
                )
                continue
            share = abs(net[k]) / gross if gross > 0 else 0.0
            if label.split("[")[0] not in template.free:
                net_flows[label] = (exact_net[k], gross)
            worst = max(worst, share)
            if share > AT_REST and label.split("[")[0] not in template.free:
                name = label.split("[")[0]
                problems.append(
                    Problem(
                        f"infection_free.{name}",
                        f"{label} is not at rest: {_apart(into[k], out[k])[0]} per {self.scenario.time_unit} enter and "
                        f"{_apart(into[k], out[k])[1]} leave. "
                        f"Write the state as an expression in the parameters, or leave {name} out and it is solved for.",
                        key=("infection_free", name),
                    )
                )
        if problems:
            raise DerivationError(problems)
        return worst, net_flows


def _apart(a: float, b: float) -> tuple[str, str]:
    """Return two numbers with as many digits as it takes to tell them apart."""
    for digits in (6, 9, 12, 17):
        first, second = f"{a:.{digits}g}", f"{b:.{digits}g}"
        if first != second:
            break
    return first, second
