"""One scenario at its values: matrices in force, infection-free state, F and V as arrays.

Up to `MOST_EXACT` types every number is a ball around the exact one; past that they are doubles. Everything that the
verbs compute starts here.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from ngm.analysis.large import block_slopes, scaled
from ngm.analysis.large_state import is_large_stable
from ngm.analysis.matrices import as_floats, balanced, changed, reciprocity_warnings, tables
from ngm.analysis.state import InfectionFree, infection_free
from ngm.analysis.stated_entries import is_stated, matrices_of
from ngm.derivation.evaluate import FLOATS, Algebra, Evaluator
from ngm.derivation.expand import assemble, slopes
from ngm.derivation.rest import choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Template, flow_name
from ngm.engine.arithmetic import BALL_ARITHMETIC
from ngm.engine.balls import contains_zero, is_balls, is_finite
from ngm.engine.blocks import BlockMatrix
from ngm.engine.rest import is_stable
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import names
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.values import intervened

__all__ = ["MOST_EXACT", "MOST_WRITTEN", "Point", "refuse_huge"]

#: Entries of matrices stay below this.
LARGEST = 1e300
#: Types up to which numbers are enclosed exactly, and matrices are written out in results.
MOST_EXACT = 500
MOST_WRITTEN = 500


def refuse_huge(name: str, matrix: Array, labels: tuple[str, ...]) -> None:
    """Refuse a matrix with an entry that is no number below 1e300.

    Raises
    ------
    DerivationError
        With the entry and its labels.
    """
    numbers = as_floats(matrix)
    for i, j in np.argwhere(~(np.abs(numbers) < LARGEST)):
        raise DerivationError(
            Problem(
                "derivation",
                f"{name}[{labels[i]}, {labels[j]}] is too large: numbers stay below 1e300. Check the units and the values in "
                "the rates behind it.",
            )
        )


@dataclass(frozen=True)
class LargeSlopes:
    """F, losses and gains as block matrices: V = losses - gains."""

    F: BlockMatrix
    losses: BlockMatrix
    gains: BlockMatrix


@dataclass
class Point:
    """A scenario at its values, with or without an intervention. Attributes are computed when first asked for.

    Under an intervention parameters and matrices change, the infection-free state is found anew, and F is scaled;
    reciprocal matrices are balanced at the values without it.
    """

    original: Scenario
    intervention: Intervention | None = None

    @cached_property
    def scenario(self) -> Scenario:
        """The scenario with the parameters in force."""
        return self.original if self.intervention is None else intervened(self.original, self.intervention)

    @cached_property
    def template(self) -> Template:
        """The structure of the scenario."""
        return Template(self.scenario)

    @cached_property
    def exact(self) -> bool:
        """Whether numbers are enclosed."""
        return is_stated(self.scenario) or len(self.template.types) <= MOST_EXACT

    @cached_property
    def algebra(self) -> Algebra:
        """The arithmetic in use."""
        return BALL_ARITHMETIC if self.exact else FLOATS

    @cached_property
    def plain_tables(self) -> dict[str, Array]:
        """The matrices as the file gives them, as doubles: enough for trials of signs."""
        return tables(self.template, FLOATS)

    @cached_property
    def own_tables(self) -> dict[str, Array]:
        """The matrices as the file gives them, in the arithmetic in use."""
        return tables(self.template, self.algebra) if self.exact else self.plain_tables

    @cached_property
    def _baseline(self) -> Point:
        return self if self.intervention is None else Point(self.original)

    @cached_property
    def infection_free(self) -> InfectionFree:
        """The infection-free state at the values in force."""
        if self.intervention is None:
            return infection_free(
                self.template, self.algebra, balanced(self.template, self.algebra, self.own_tables, None)
            )
        early = balanced(self._baseline.template, self.algebra, self.own_tables, None)
        late = [m for m in self.scenario.matrices if m not in early]
        if late:
            early = self._baseline.matrices
        return infection_free(
            self.template, self.algebra, changed(self.template, self.algebra, early, self.intervention)
        )

    @property
    def state(self) -> dict[str, Array]:
        """Every uninfected compartment in the infection-free state, as arrays over the space."""
        return self.infection_free.state

    @cached_property
    def matrices(self) -> dict[str, Array]:
        """The matrices in force (balanced where reciprocal, changed by the intervention)."""
        if self.intervention is None:
            return balanced(self.template, self.algebra, self.own_tables, self.state)
        return changed(self.template, self.algebra, self._baseline.matrices, self.intervention)

    # --- F and V ------------------------------------------------------------------------------------------------------

    @cached_property
    def evaluator(self) -> Evaluator:
        """Everything in force at the infection-free state."""
        template = self.template
        evaluator = template.evaluator(self.algebra, self.state, matrices=self.matrices)
        if is_stated(self.scenario):
            return evaluator  # entries hold no compartments, so there is no side of a max or min to be chosen
        _ = template.arrows
        choose_branches(evaluator, template.at_rest.selectors)
        return evaluator

    @cached_property
    def F_and_V(self) -> tuple[Array, Array]:
        """F and V of all infected types, (m, m) each."""
        F, V = matrices_of(self.scenario, self.evaluator) or assemble(self.template, self.evaluator)
        F = self.scaled(F)
        if not (is_finite(F) and is_finite(V)):
            raise self._no_slope()
        for name, matrix in (("F", F), ("V", V)):
            refuse_huge(name, matrix, self.template.types)
        return F, V

    @cached_property
    def blocks(self) -> LargeSlopes:
        """F, losses and gains of a large model as block matrices."""
        F, losses, gains = block_slopes(self.template, self.evaluator, self.template.arrows, self.template.infected)
        if self.intervention is not None:
            F = scaled(F, *self.scales(self.intervention))
        return LargeSlopes(F, losses, gains)

    def scales(self, intervention: Intervention) -> tuple[dict[int, Array], dict[int, Array]]:
        """Return what multiplies the rows and the columns of F under an intervention, by infected compartment."""
        rows: dict[int, Array] = {}
        columns: dict[int, Array] = {}
        space = self.template.space
        for change in intervention.changes:
            if change.what not in ("susceptibility", "infectivity"):
                continue
            by = self.template.by(change.name)
            part = self.template.infected.index(change.name)
            left = 1 - float(self.template.evaluator(FLOATS, {}).value(change.amount.tree).ravel()[0])
            chosen = [
                left if all(g in change.groups.get(d, (g,)) for d, g in zip(by, groups, strict=True)) else 1.0
                for groups in self.scenario.copies(by)
            ]
            values = space.spread(np.array(chosen).reshape(-1, 1), by)[..., 0]
            into = rows if change.what == "susceptibility" else columns
            into[part] = into[part] * values if part in into else values
        return rows, columns

    def scaled(self, F: Array) -> Array:
        """Return F with rows scaled by susceptibility and columns by infectivity, where an intervention does that."""
        if self.intervention is None:
            return F
        F = F.copy()
        at = self.template.offsets(self.template.infected)
        for change in self.intervention.changes:
            if change.what not in ("susceptibility", "infectivity"):
                continue
            by = self.template.by(change.name)
            chosen = [
                at[change.name] + k
                for k, groups in enumerate(self.scenario.copies(by))
                if all(g in change.groups.get(d, (g,)) for d, g in zip(by, groups, strict=True))
            ]
            amount: Any = self.template.evaluator(self.algebra, {}).value(change.amount.tree).ravel()[0]
            left = 1 - amount
            if change.what == "susceptibility":
                F[chosen, :] = F[chosen, :] * left
            else:
                F[:, chosen] = F[:, chosen] * left
        return F

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
        return as_floats(np.asarray(gains - losses))

    def is_stable_without_infection(self) -> bool | None:
        """Return whether the uninfected block is stable; None where it is neutral (an eigenvalue 0)."""
        moving = tuple(name for name in self.template.uninfected if name in self.template.depended_on)
        if not self.exact and len(self.template.items_of(moving)) > MOST_EXACT:
            return is_large_stable(
                self.template, self.evaluator, self.template.arrows, moving, discrete=self.scenario.discrete
            )
        slope, discrete = self.uninfected_slope, self.scenario.discrete
        if is_stable(slope, discrete=discrete):
            return True
        values = np.linalg.eigvals(slope)
        top = float(np.max(np.abs(1 + values)) - 1) if discrete else float(np.max(values.real))
        return None if top <= 1e-10 * max(1e-300, float(np.max(np.abs(slope)))) else False

    def reciprocity_warnings(self) -> list[str]:
        """Return a warning for each contact matrix that is not reciprocal and not balanced."""
        return reciprocity_warnings(self.template, self.evaluator, self.plain_tables)
