"""R0 and the case mix of one scenario with other matrices in force, in doubles, many times over.

What does not change is kept: the structure, the state without infection where no contact matrix bears on it, V^-1 where V
stays. One evaluation of 16 groups with two infected states takes some 2 ms.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ngm.analysis.matrices import balanced, tables
from ngm.analysis.state import infection_free
from ngm.derivation.evaluate import FLOATS, Evaluator
from ngm.derivation.expand import assemble
from ngm.derivation.linearise import Applied, Summed, Term
from ngm.derivation.rest import choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.engine.spectrum import spectrum
from ngm.errors import NgmError
from ngm.expression.tree import Apply, Node, names, walk
from ngm.scenario.model import Scenario

__all__ = ["MOST_VARIED", "Outcome", "Variation", "contact_matrices"]

#: Infected types up to which a scenario is evaluated again and again.
MOST_VARIED = 300
#: The step of a derivative along the imaginary axis, relative to what is moved: no difference is taken, so it may be tiny.
_IMAGINARY = 1e-40
#: The step of a central difference, where the state without infection moves with the contacts.
_STEP = 1e-5
#: Entries of V^-1 this far below 0, relative to the largest, are rounding.
_ROUNDING = 1e-12


def contact_matrices(scenario: Scenario) -> tuple[str, ...]:
    """Return the matrices that no movement uses, in the order of the file: those of contacts."""
    moving = {movement.matrix for movement in scenario.movements}
    return tuple(name for name in scenario.matrices if name not in moving)


@dataclass(frozen=True, eq=False)
class Outcome:
    """R0 and the Perron vectors of K, by types at infection; None with the reason where they do not exist."""

    R0: float | None
    right: Array | None = None
    left: Array | None = None
    why: str | None = None


class Variation:
    """A scenario, evaluated with other matrices in force.

    `tables` are the matrices in force: (n, n), or (w, n, n) for one given within another dimension.
    """

    def __init__(self, scenario: Scenario) -> None:
        self.scenario = scenario
        template = self.template = Template(scenario)
        given = tables(template, FLOATS)
        early = balanced(template, FLOATS, given, None)
        self.state = infection_free(template, FLOATS, early).state
        self.tables = balanced(template, FLOATS, given, self.state)
        self.at = np.array(template.at_infection, dtype=int)
        self._inverse: tuple[Array, Array] | None = None

    # --- what a matrix bears on ---------------------------------------------------------------------------------------

    def _uses(self, node: Node, matrix: str, seen: set[str]) -> bool:
        """Return whether an expression applies the matrix, itself or by what it names."""
        if any(isinstance(part, Apply) and part.matrix == matrix for part in walk(node)):
            return True
        known = {**self.template.definitions, **self.template.given}
        for name in names(node) & set(known):
            if name not in seen:
                seen.add(name)
                if self._uses(known[name], matrix, seen):
                    return True
        return False

    def moves_state(self, matrix: str) -> bool:
        """Return whether the state without infection may depend on a matrix."""
        template = self.template
        trees = [arrow.rate.value for arrow in template.rest_arrows]
        trees += [template.given[name] for name in template.uninfected if name in template.given]
        return any(self._uses(tree, matrix, set()) for tree in trees)

    @cached_property
    def _moving(self) -> frozenset[str]:
        return frozenset(name for name in contact_matrices(self.scenario) if self.moves_state(name))

    def _touched(self, term: Term, matrix: str) -> bool:
        for factor in term.factors:
            if isinstance(factor, Applied):
                if factor.matrix == matrix:
                    return True
            elif not isinstance(factor, Summed) and self._uses(factor, matrix, set()):
                return True
        return False

    # --- evaluation ---------------------------------------------------------------------------------------------------

    def _evaluator(self, replaced: Mapping[str, Array]) -> Evaluator:
        matrices = {**self.tables, **replaced}
        state = self.state
        if self._moving & set(replaced):
            state = infection_free(self.template, FLOATS, matrices).state
        evaluator = self.template.evaluator(FLOATS, state, matrices=matrices)
        _ = self.template.arrows
        choose_branches(evaluator, self.template.at_rest.selectors)
        return evaluator

    def outcome(self, replaced: Mapping[str, Array] | None = None) -> Outcome:
        """Return R0 and the vectors with some matrices replaced; a model without an R0 there is told, not raised."""
        if not len(self.at):
            return Outcome(0.0, why="no flow makes new infections")
        try:
            with np.errstate(all="ignore"):
                F, V = assemble(self.template, self._evaluator(replaced or {}))
        except NgmError as error:
            return Outcome(None, why=str(error.problems[0]))
        if not (np.all(np.isfinite(F)) and np.all(np.isfinite(V))):
            return Outcome(None, why="a rate has no slope at these values")
        times = self._times(V)
        if times is None or np.any(F < 0):
            return Outcome(None, why="V is no M-matrix at these values, or F has a negative entry")
        K = F[self.at] @ times[:, self.at]
        found = spectrum(np.maximum(K, 0.0))
        R0 = float(found.root.mid())
        why = None if found.right is not None else "the case mix is not unique: several classes tie, or R0 is 0"
        return Outcome(R0, found.right, found.left, why)

    def _times(self, V: Array) -> Array | None:
        """Return V^-1, the expected times in each state; None where V is no M-matrix."""
        if self._inverse is None or not np.array_equal(self._inverse[0], V):
            try:
                inverse = np.linalg.inv(V)
            except np.linalg.LinAlgError:
                return None
            self._inverse = V, inverse
        inverse = self._inverse[1]
        return inverse if inverse.min() >= -_ROUNDING * inverse.max() else None

    # --- derivatives --------------------------------------------------------------------------------------------------

    def slopes(self, matrix: str, directions: list[Array]) -> list[float] | None:
        """Return dR0/dt with t times each direction added to a matrix in force, at t = 0; None where R0 has no slope.

        v (dF - K dV) V^-1 w / (v w), both vectors those of K. dF and dV are taken along the imaginary axis, which is
        exact to rounding; where the state without infection moves with the contacts, by central differences of R0.
        """
        here = self.outcome()
        if here.R0 is None or here.right is None or here.left is None:
            return None
        if matrix in self._moving:
            return self._differences(matrix, directions)
        base = self._evaluator({})
        F, V = assemble(self.template, base)
        times = self._times(V)
        assert times is not None
        stay = times[:, self.at] @ here.right
        value = np.zeros(len(stay))
        value[self.at] = here.left
        worth = (here.left @ F[self.at]) @ times
        parts = _Parts(self.template, stay, value, worth)
        chosen = {
            (k, column)
            for k, arrow in enumerate(self.template.arrows)
            for column in self.template.infected
            if any(t.column == column and self._touched(t, matrix) for t in arrow.rate.terms)
        }
        kept = {name: base.names[name] for name in self.scenario.parameters if name in base.names}
        kept |= {s.name: base.names[s.name] for s in self.template.at_rest.selectors}
        out = []
        for direction in directions:
            moved = {**self.tables, matrix: self.tables[matrix] + 1j * _IMAGINARY * direction}
            evaluator = self.template.evaluator(FLOATS, self.state, matrices=moved)
            evaluator.names.update(kept)
            out.append(float(parts.weigh(evaluator, chosen).imag / _IMAGINARY))
        return out

    def _differences(self, matrix: str, directions: list[Array]) -> list[float] | None:
        table, out = self.tables[matrix], []
        for direction in directions:
            size = float(np.abs(direction).max()) or 1.0
            scale = float(np.abs(table[direction != 0]).max(initial=0.0)) or 1.0
            step = _STEP * scale / size
            ends = [self.outcome({matrix: table + sign * step * direction}).R0 for sign in (1, -1)]
            if ends[0] is None or ends[1] is None:
                return None
            out.append((ends[0] - ends[1]) / (2 * step))
        return out


class _Parts:
    """The weighted sum of F and V that the derivative of R0 is made of."""

    def __init__(self, template: Template, stay: Array, value: Array, worth: Array) -> None:
        self.template = template
        at = template.offsets(template.infected)
        size = {name: template.space.count(template.by(name)) for name in template.infected}
        self.stay = {
            name: template.space.spread(stay[at[name] : at[name] + size[name]].reshape(-1, 1), template.by(name))
            for name in template.infected
        }
        self.value = {name: value[at[name] : at[name] + size[name]] for name in template.infected}
        self.worth = {name: worth[at[name] : at[name] + size[name]] for name in template.infected}

    def weigh(self, evaluator: Evaluator, chosen: set[tuple[int, str]]) -> complex:
        """Return value . F stay - worth . V stay, of the arrows and columns chosen."""
        total = 0j
        for k, column in chosen:
            arrow = self.template.arrows[k]
            block = self.template.along(arrow.rate.terms, column, evaluator, self.stay[column])
            if block is None:
                continue
            if arrow.source in self.worth:
                total -= self._at(evaluator, block, arrow.source, arrow.by, self.worth)
            if arrow.target in self.worth and arrow.arriving is None:
                weights = self.value if arrow.transmission else self.worth
                total += self._at(evaluator, block, arrow.target, arrow.by, weights)
        return total

    def _at(
        self, evaluator: Evaluator, block: Array, side: str, by: tuple[str, ...], weights: Mapping[str, Array]
    ) -> complex:
        own = self.template.by(side)
        lost = tuple(name for name in by if name not in own)
        flat = self.template.space.flatten(evaluator.total(block, lost) if lost else block, own)[:, 0]
        return complex(weights[side] @ flat)
