"""The derivation in symbols: infection-free state, F, V, K, closed form, each as text in the file's own syntax.

For plain models, and for grouped ones small enough to be written out copy by copy. Runs in a process of its own, which is
ended when its time is over; so nothing here watches the clock.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import sympy

from ngm.derivation.block_form import block_form
from ngm.derivation.closed_form import ClassForm, class_forms, maximum, polynomial
from ngm.derivation.elimination import Program, residence_times
from ngm.derivation.evaluate import Evaluator
from ngm.derivation.expand import assemble
from ngm.derivation.network import Network, network
from ngm.derivation.outline import outline
from ngm.derivation.rest_symbols import solve_rest
from ngm.derivation.space import Array
from ngm.derivation.sympy_algebra import SYMBOLS
from ngm.derivation.template import Template
from ngm.derivation.tidy import tidy
from ngm.expression.symbolic import symbol, text
from ngm.results import Step, Symbolic
from ngm.scenario.model import Scenario

__all__ = ["derive_symbols"]

#: Operations from which a part gets an abbreviation rather than being repeated.
MOST_REPEATED = 20
#: The longest text that is given for one formula.
MOST_CHARACTERS = 20_000


def derive_symbols(
    scenario: Scenario,
    state: Mapping[str, float] | None = None,
    values: Mapping[str, float] | None = None,
    branches: Mapping[str, list[int]] | None = None,
    *,
    outlined: bool = False,
    stand_alone: frozenset[str] = frozenset(),
) -> Symbolic:
    """Return the derivation in symbols; its parts are None where the model is too large to be written out.

    Parameters
    ----------
    scenario : Scenario
    state : mapping of str to float
        The infection-free state at the scenario's values, by copy: of several solutions the one that was chosen.
    values : mapping of str to float
        Parameters in force, by item, which tell several solutions apart.
    branches : mapping of str to list of int
        Which side of each max or min is in force (1 or 0), over the space.
    outlined : bool
        The scenario is an outline of a larger one: only its block form is asked for.
    stand_alone : frozenset of str
        States that have no formula for all groups, and stand for themselves.
    """
    named = frozenset(
        name for name, given in scenario.infection_free.items() if len({value.tree for value in given}) > 1
    )
    template = Template(scenario)
    out = Symbolic()
    if template.is_written_out and not outlined:
        out = _Derivation(template, state or {}, values or {}, branches or {}).run()
    if scenario.dimensions and not template.at_rest.selectors:
        blocks = block_form(outline(scenario), stand_alone | named)
        closed = out.closed_form or (None if template.at_rest.by_value else blocks.closed_form)
        out = replace(out, blocks=blocks, closed_form=closed)
    return out


class _Derivation:
    def __init__(
        self,
        template: Template,
        state: Mapping[str, float],
        values: Mapping[str, float],
        branches: Mapping[str, list[int]],
    ) -> None:
        self.template, self.state, self.values, self.branches = template, state, values, branches
        self.taken = set(template.scenario.parameters) | set(template.scenario.compartments)
        self.taken |= set(template.scenario.definitions) | set(template.scenario.matrices)
        self.program = Program(self._free_name)
        self.steps: list[Step] = []

    def _free_name(self, wish: str) -> sympy.Symbol:
        while wish in self.taken:
            wish += "_"
        self.taken.add(wish)
        return symbol(wish)

    # --- names and matrices as symbols --------------------------------------------------------------------------------

    def parameters(self) -> dict[str, Array]:
        """Return every parameter as its symbols, copy by copy."""
        scenario, space = self.template.scenario, self.template.space
        out = {}
        for name, parameter in scenario.parameters.items():
            flat = np.empty((space.count(parameter.by), 1), dtype=object)
            flat[:, 0] = [symbol(item, parameter.any_sign) for item in scenario.items(name, parameter.by)]
            out[name] = space.spread(flat, parameter.by)
        return out

    def matrices(self) -> dict[str, Array]:
        """Return every matrix as symbols ``C[0-4,65+]``; a movement has a diagonal of 0."""
        scenario = self.template.scenario
        moving = {movement.matrix for movement in scenario.movements}
        out = {}
        for name, matrix in scenario.matrices.items():
            groups = scenario.dimensions[matrix.by].groups
            inside = ("",) if matrix.within is None else scenario.dimensions[matrix.within].groups
            blocks = np.empty((len(inside), len(groups), len(groups)), dtype=object)
            for w, within in enumerate(inside):
                for i, row in enumerate(groups):
                    for j, column in enumerate(groups):
                        tail = f",{within}" if within else ""
                        entry = (
                            sympy.Integer(0) if name in moving and i == j else symbol(f"{name}[{row},{column}{tail}]")
                        )
                        blocks[w, i, j] = entry
            out[name] = blocks if matrix.within is not None else blocks[0]
        return out

    # --- the steps ----------------------------------------------------------------------------------------------------

    def run(self) -> Symbolic:
        template = self.template
        names, matrices = self.parameters(), self.matrices()
        solved = solve_rest(template, names, matrices, self.state, self.values, self.program)
        known = solved is not None
        infection_free = None
        if solved is not None:
            infection_free, solved = self._state_in_words(solved)
        evaluator = self._evaluator(solved, names, matrices)
        F, V = assemble(template, evaluator)
        F, V = _each(F, tidy), _each(V, tidy)
        out: dict[str, Any] = {"F": _texts(F), "V": _texts(V), "infection_free": infection_free}
        net = network(template, evaluator, template.arrows, template.infected)
        at = list(template.at_infection)
        if all(entry == 0 for entry in net.stray.ravel()) and at:
            self._next_generation(out, F, net, at, known)
        elif not at:
            out.update(K=(), closed_form="0", characteristic_polynomial="1")
        abbreviations = {str(name): text(line) for name, line in self.program.lines.items()}
        eliminated = [
            Step("elimination", str(name), abbreviations[str(name)], self.program.about[name])
            for name in self.program.lines
        ]
        return Symbolic(
            F=out["F"],
            V=out["V"],
            K=out.get("K"),
            infection_free=infection_free,
            characteristic_polynomial=out.get("characteristic_polynomial"),
            polynomial_variable=out.get("polynomial_variable", "x"),
            abbreviations=abbreviations,
            closed_form=out.get("closed_form"),
            steps=(*eliminated, *self.steps),
        )

    def _state_in_words(self, solved: Mapping[str, Array]) -> tuple[dict[str, str], dict[str, Array]]:
        """Return the state as texts, and as expressions in which long ones are abbreviated."""
        template, written, short = self.template, {}, {}
        for name in template.uninfected:
            by = template.by(name)
            flat = template.space.flatten(solved[name], by)[:, 0]
            items = template.scenario.items(name, by)
            values = [tidy(value) for value in flat]
            named = np.empty((len(values), 1), dtype=object)
            for k, (item, value) in enumerate(zip(items, values, strict=True)):
                named[k, 0] = self.program.name(value, f"{item} without infection", least=MOST_REPEATED)
                whole = _short(value)
                written[item] = str(named[k, 0]) if whole is None else whole
            short[name] = template.space.spread(named, by)
        return written, short

    def _evaluator(
        self, solved: Mapping[str, Array] | None, names: Mapping[str, Array], matrices: Mapping[str, Array]
    ) -> Evaluator:
        template, space = self.template, self.template.space
        if solved is None:
            solved = {}
            for name in template.uninfected:
                flat = np.empty((space.count(template.by(name)), 1), dtype=object)
                items = template.scenario.items(name, template.by(name))
                flat[:, 0] = [sympy.Integer(0) if name in template.empty else symbol(item) for item in items]
                solved[name] = space.spread(flat, template.by(name))
        evaluator = template.evaluator(SYMBOLS, solved, names=names, matrices=matrices)
        for name in template.scenario.definitions:
            value = evaluator.name(name)
            about = f"{name} without infection"
            evaluator.names[name] = _each(value, lambda e, about=about: self._named(tidy(e), about))
        _ = template.arrows
        for selector in template.at_rest.selectors:
            flags = self.branches.get(selector.name, [1])
            shape = evaluator.value(selector.larger).shape
            array = np.empty(shape, dtype=object)
            array.ravel()[:] = [sympy.Integer(flag) for flag in flags]
            evaluator.names[selector.name] = array
        return evaluator

    def _named(self, expression: sympy.Expr, about: str) -> sympy.Expr:
        return self.program.name(expression, about, least=MOST_REPEATED)

    def _next_generation(self, out: dict[str, Any], F: Array, net: Network, at: list[int], known: bool) -> None:
        template = self.template
        # Rates per head enter the elimination in their short form, as they stand in V.
        net = replace(net, moves=_each(net.moves, tidy), sources=_each(net.sources, tidy), exits=_each(net.exits, tidy))
        stays = residence_times(net, at, self.program, template.types, tidy)
        if any(stay.has(sympy.zoo, sympy.nan) for column in stays.values() for stay in column.values()):
            return  # nobody leaves some state, whatever the values: a mean stay there is no number
        for j in at:
            for row, stay in stays[j].items():
                about = f"time spent in {template.types[row]} by one who enters at {template.types[j]}"
                stays[j][row] = self._named(stay, about)
        K = [
            [tidy(sympy.Add(*(F[i, s] * stay for s, stay in stays[j].items() if F[i, s] != 0))) for j in at] for i in at
        ]
        for j in at:
            for row, stay in stays[j].items():
                self.steps.append(Step("residence", template.types[row], _short(stay), template.types[j]))
        out["K"] = _texts(np.array(K, dtype=object))
        forms = class_forms(K, self.program, tidy)
        root = maximum(forms)
        for form in forms:
            self.steps.append(self._class_step(form, at))
        by_value = template.at_rest.by_value
        if root is not None and known and not by_value:
            plain = self.program.written_out(root, MOST_CHARACTERS // 3)
            out["closed_form"] = None if plain is None else _short(tidy(plain))
        x = self._free_name("x")
        out["polynomial_variable"] = str(x)
        characteristic = polynomial(K, forms, x, self.program)
        out["characteristic_polynomial"] = None if characteristic is None else _short(characteristic)

    def _class_step(self, form: ClassForm, at: list[int]) -> Step:
        members = ", ".join(self.template.types[at[k]] for k in form.members)
        return Step("class", members, None if form.formula is None else _short(form.formula), form.rule)


def _short(expression: sympy.Expr) -> str | None:
    """Return the text, None where it is longer than anybody could read back."""
    if int(sympy.count_ops(expression)) > MOST_CHARACTERS:
        return None
    written = text(expression)
    return written if len(written) <= MOST_CHARACTERS else None


def _each(values: Array, change: Any) -> Array:
    out = np.empty(values.shape, dtype=object)
    out.ravel()[:] = [change(v) for v in values.ravel()]
    return out


def _texts(values: Array) -> tuple[tuple[str, ...], ...] | None:
    rows = tuple(tuple(text(entry) for entry in row) for row in values)
    return None if any(len(entry) > MOST_CHARACTERS for row in rows for entry in row) else rows
