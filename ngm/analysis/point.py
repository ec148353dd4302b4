"""One scenario at its values: matrices in force, infection-free state, F and V as arrays.

Up to `MOST_EXACT` types every number is a ball around the exact one; past that they are doubles. Everything that the
verbs compute starts here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

import numpy as np

from ngm.derivation.evaluate import FLOATS, Algebra, Evaluator
from ngm.derivation.expand import assemble, net_flow, slopes
from ngm.derivation.rest import RestSystem, choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Template, flow_name
from ngm.engine.arithmetic import BALL_ARITHMETIC
from ngm.engine.balls import contains_zero, is_balls, is_finite, to_floats
from ngm.engine.rest import FreeStates, RestStates, find_rest, is_stable
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Apply, names, walk
from ngm.scenario.model import Matrix, Scenario

__all__ = ["MOST_EXACT", "MOST_WRITTEN", "Point"]

#: Types up to which numbers are enclosed exactly, and matrices are written out in results.
MOST_EXACT = 500
MOST_WRITTEN = 500
#: Net flow over gross flow up to which a given state counts as at rest.
AT_REST = 1e-9


@dataclass
class Point:
    """A scenario at its values. Attributes are computed when first asked for, and then kept."""

    scenario: Scenario
    warnings: list[str] = field(default_factory=list)

    @cached_property
    def template(self) -> Template:
        """The structure of the scenario."""
        return Template(self.scenario)

    @cached_property
    def exact(self) -> bool:
        """Whether numbers are enclosed."""
        return len(self.template.types) <= MOST_EXACT

    @cached_property
    def algebra(self) -> Algebra:
        """The arithmetic in use."""
        return BALL_ARITHMETIC if self.exact else FLOATS

    # --- matrices -----------------------------------------------------------------------------------------------------

    def _tables(self, algebra: Algebra) -> dict[str, Array]:
        """Return the matrices as the file gives them."""
        out = {}
        for name, matrix in self.scenario.matrices.items():
            entries = np.array(matrix.blocks, dtype=object)
            if algebra.dtype is float:
                table = entries.astype(float)
            else:
                table = np.empty(entries.shape, dtype=object)
                table.ravel()[:] = [algebra.number(Fraction(entry)) for entry in entries.ravel()]
            out[name] = table if matrix.within is not None else table[0]
        return out

    @cached_property
    def plain_tables(self) -> dict[str, Array]:
        """The matrices as the file gives them, as doubles: enough for trials of signs."""
        return self._tables(FLOATS)

    def _balanced(
        self, tables: dict[str, Array], algebra: Algebra, state: Mapping[str, Array] | None
    ) -> dict[str, Array]:
        """Return the matrices in force; those whose population needs a state that is not known yet are left out."""
        out = {}
        for name, matrix in self.scenario.matrices.items():
            if not matrix.reciprocal:
                out[name] = tables[name]
                continue
            assert matrix.population is not None
            if state is None and self._uses_compartments(matrix):
                continue
            evaluator = self.template.evaluator(algebra, state or {}, matrices=out)
            out[name] = self._reciprocal(matrix, tables[name], self._population(matrix, evaluator), algebra)
        return out

    def _uses_compartments(self, matrix: Matrix) -> bool:
        assert matrix.population is not None
        todo, seen = set(names(matrix.population.tree)), set()
        while todo:
            name = todo.pop()
            if name in self.scenario.compartments:
                return True
            if name in self.template.definitions and name not in seen:
                seen.add(name)
                todo |= names(self.template.definitions[name])
        return False

    def _population(self, matrix: Matrix, evaluator: Evaluator) -> Array:
        """Return the sizes of the groups, (n,), or (w, n) for a matrix given within another dimension."""
        assert matrix.population is not None
        by = (matrix.by,) if matrix.within is None else (matrix.within, matrix.by)
        flat = self.template.space.flatten(evaluator.value(matrix.population.tree), by)[:, 0]
        return flat if matrix.within is None else flat.reshape(self.template.space.size(matrix.within), -1)

    def _reciprocal(self, matrix: Matrix, table: Array, sizes: Array, algebra: Algebra) -> Array:
        groups = self.scenario.dimensions[matrix.by].groups
        for k, size in enumerate(sizes.reshape(-1)):
            if not size > 0:
                raise DerivationError(
                    Problem(
                        f"matrices.{matrix.name}",
                        f"the population of {groups[k % len(groups)]} is not above 0 in the infection-free state, so its "
                        "contacts cannot be balanced. Give it members, or leave out reciprocal = true.",
                        key=("matrices", matrix.name, "population"),
                    )
                )
        tables, all_sizes = (table[None], sizes[None]) if matrix.within is None else (table, sizes)
        two = algebra.number(Fraction(2))
        blocks = []
        for C, N in zip(tables, all_sizes, strict=True):
            total = C * N[:, None]
            blocks.append((total + total.T) / (N[:, None] * two))
        return blocks[0] if matrix.within is None else np.stack(blocks)

    # --- the infection-free state -------------------------------------------------------------------------------------

    @cached_property
    def matrices(self) -> dict[str, Array]:
        """The matrices in force (balanced where reciprocal)."""
        return self._balanced(self._tables(self.algebra), self.algebra, self.state)

    @cached_property
    def state(self) -> dict[str, Array]:
        """Every uninfected compartment in the infection-free state, as arrays over the space."""
        template = self.template
        early = self._balanced(self._tables(self.algebra), self.algebra, None)
        self._refuse_needed(early)
        system = RestSystem(template, self.algebra, early)
        floats = system
        if self.exact:
            floats = RestSystem(template, FLOATS, {name: _floats(table) for name, table in early.items()})
        try:
            found = find_rest(floats, system if self.exact else None, len(system.labels))
        except FreeStates as free:
            raise self._left_free(system, free.members) from None
        x = self._choose(system, found)
        state = system.state(x)
        self._check_given(system, x, state)
        return state

    def _refuse_needed(self, known: Mapping[str, Array]) -> None:
        for arrow in self.template.rest_arrows:
            used = {node.matrix for node in walk(arrow.rate.value) if isinstance(node, Apply)}
            for name in used - set(known):
                raise DerivationError(
                    Problem(
                        f"matrices.{name}",
                        f"{arrow.label} uses {name} without infection, but {name} is balanced with a population that is only "
                        "known in the infection-free state. Give population as an expression in parameters.",
                        key=("matrices", name, "population"),
                    )
                )

    def _left_free(self, system: RestSystem, members: tuple[int, ...]) -> DerivationError:
        compartments = [label.split("[")[0] for k, label in enumerate(system.labels) if k in members]
        named = ", ".join(dict.fromkeys(compartments))
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
        numbers = _floats(np.asarray(x))
        shown = [f"{label} = {value:.6g}" for label, value in zip(system.labels, numbers, strict=True)]
        return ", ".join(shown[:6]) + (", …" if len(shown) > 6 else "")

    def _check_given(self, system: RestSystem, x: Array, state: Mapping[str, Array]) -> None:
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
                            f"{label} = {float(_floats(np.array([value]))[0]):.6g} is negative. "
                            "The number of hosts cannot be.",
                            key=("infection_free", name),
                        )
                    )
        if problems:
            raise DerivationError(problems)
        moving = tuple(name for name in template.uninfected if name in template.depended_on)
        entering, leaving = net_flow(template, system.evaluator(x), template.rest_arrows, moving)
        labels = template.items_of(moving)
        into, out = _floats(entering)[:, 0], _floats(leaving)[:, 0]
        net = _floats(np.asarray(entering - leaving))[:, 0]
        worst = 0.0
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
            worst = max(worst, share)
            if share > AT_REST and label.split("[")[0] not in template.free:
                name = label.split("[")[0]
                problems.append(
                    Problem(
                        f"infection_free.{name}",
                        f"{label} is not at rest: {into[k]:.6g} per {self.scenario.time_unit} enter and {out[k]:.6g} leave. "
                        f"Write the state as an expression in the parameters, or leave {name} out and it is solved for.",
                        key=("infection_free", name),
                    )
                )
        if problems:
            raise DerivationError(problems)
        self.residual = worst

    residual: float = 0.0

    # --- F and V ------------------------------------------------------------------------------------------------------

    @cached_property
    def evaluator(self) -> Evaluator:
        """Everything in force at the infection-free state."""
        template = self.template
        evaluator = template.evaluator(self.algebra, self.state, matrices=self.matrices)
        _ = template.arrows
        choose_branches(evaluator, template.at_rest.selectors)
        return evaluator

    @cached_property
    def F_and_V(self) -> tuple[Array, Array]:
        """F and V of all infected types, (m, m) each."""
        F, V = assemble(self.template, self.evaluator)
        if not (is_finite(F) and is_finite(V)):
            raise self._no_slope()
        return F, V

    def _no_slope(self) -> DerivationError:
        problems = []
        for arrow in self.template.arrows:
            for column in self.template.infected:
                block = self.template.chain(arrow.rate.terms, column, self.evaluator)
                if block is not None and not is_finite(block):
                    where = arrow.label if arrow.number is None else flow_name(self.scenario, arrow.number)
                    hint = self._divisors(arrow.number)
                    problems.append(
                        Problem(
                            f"{where}, rate",
                            f"has no slope by {column} in the infection-free state: it divides by 0 or leaves the range of "
                            f"a function{hint}. Check the state and the values in the rate.",
                            key=("flow", arrow.number - 1, "rate") if arrow.number is not None else (),
                        )
                    )
                    break
        return DerivationError(problems or [Problem("derivation", "F or V is not finite at these values.")])

    def _divisors(self, number: int | None) -> str:
        """Return which names in the rate of a flow are 0 without infection, in words; empty where none is."""
        if number is None:
            return ""
        used: set[str] = set()
        todo = names(self.scenario.flows[number - 1].rate.tree)
        while todo:
            name = todo.pop()
            used.add(name)
            if name in self.template.definitions:
                todo |= names(self.template.definitions[name]) - used
        known = set(self.scenario.parameters) | set(self.template.infected)
        zero = [name for name in sorted(used - known) if self._vanishes(name)]
        return f" ({', '.join(zero)} = 0 there)" if zero else ""

    def _vanishes(self, name: str) -> bool:
        value = self.evaluator.name(name)
        if is_balls(value):
            return any(contains_zero(v) for v in value.ravel())
        return bool(np.any(value == 0))

    @cached_property
    def uninfected_slope(self) -> Array:
        """Slope of the net flows of the uninfected compartments on which something depends, by one another, as doubles."""
        template = self.template
        moving = tuple(name for name in template.uninfected if name in template.depended_on)
        _, losses, gains = slopes(template, self.evaluator, template.arrows, moving)
        return _floats(np.asarray(gains - losses))

    def is_stable_without_infection(self) -> bool | None:
        """Return whether the uninfected block is stable; None where it is neutral (an eigenvalue 0)."""
        slope = self.uninfected_slope
        if is_stable(slope):
            return True
        top = float(np.max(np.linalg.eigvals(slope).real))
        return None if top <= 1e-10 * max(1e-300, float(np.max(np.abs(slope)))) else False

    # --- reciprocity --------------------------------------------------------------------------------------------------

    def check_reciprocity(self) -> list[str]:
        """Return a warning for each contact matrix that breaks C[i][j] N[i] = C[j][i] N[j], with the worst pair."""
        out = []
        tables = self.plain_tables
        for name, matrix in self.scenario.matrices.items():
            if matrix.population is None or matrix.reciprocal:
                continue
            sizes = _floats(self._population(matrix, self.evaluator))
            blocks = tables[name] if matrix.within is not None else tables[name][None]
            groups = self.scenario.dimensions[matrix.by].groups
            worst, pair, there = 0.0, (0, 0), 0
            for k, (C, N) in enumerate(zip(blocks, sizes.reshape(len(blocks), -1), strict=True)):
                total = C * N[:, None]
                mean = (total + total.T) / 2
                gap = np.abs(total - total.T) / np.where(mean > 0, mean, 1)
                i, j = np.unravel_index(int(np.argmax(gap)), gap.shape)
                if gap[i, j] > worst:
                    worst, pair, there = float(gap[i, j]), (int(i), int(j)), k
            if worst > 1e-9:
                inside = ""
                if matrix.within is not None:
                    inside = f" in {self.scenario.dimensions[matrix.within].groups[there]}"
                out.append(
                    f"matrices.{name} is not reciprocal: contacts between {groups[pair[0]]} and {groups[pair[1]]}{inside}, "
                    f"counted from either side, differ by {100 * worst:.3g} % of their mean. Set reciprocal = true to balance "
                    "them, or check the orientation."
                )
        return out


def _floats(values: Array) -> Array:
    return to_floats(values) if is_balls(values) else np.asarray(values, dtype=float)
