"""The derivation of a grouped model on its template: half a page for two ages or for 300 regions.

Blocks of F keep their matrices as they act: diag(a) C diag(b). Without movement V acts within each group, so that its
inverse is found once, for "a group", by the same elimination as for an ungrouped model; each block of K is then a chain of
F with a mean stay behind it. Where everybody mixes with everybody in proportion (a sum over groups and no matrix), F has
rank one and R0 is a sum over groups.
"""

from __future__ import annotations

import numpy as np
import sympy

from ngm.derivation.elimination import Program, residence_times
from ngm.derivation.linearise import Applied, Summed, Term, is_zero
from ngm.derivation.network import Network
from ngm.derivation.rest_symbols import solve_rest
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.derivation.tidy import tidy
from ngm.expression.symbolic import from_sympy, symbol, to_sympy
from ngm.expression.tree import Apply, Name, Node, Total, rebuild, replace_names
from ngm.expression.write import write
from ngm.results import BlockForm
from ngm.scenario.model import Scenario

__all__ = ["block_form"]

#: The longest text of one block.
MOST_CHARACTERS = 4000


def block_form(scenario: Scenario, named: frozenset[str]) -> BlockForm:
    """Return the block form of an outlined scenario; the states `named` stand for themselves."""
    return _Blocks(Template(scenario), named).run()


class _Blocks:
    def __init__(self, template: Template, named: frozenset[str]) -> None:
        self.template, self.named = template, named
        self.places: dict[str, Node] = {}
        self.state = self._state()

    # --- expressions of one group --------------------------------------------------------------------------------------

    def scalar(self, node: Node) -> sympy.Expr:
        """Return an expression of one group; a matrix or a sum in it is one symbol, whose meaning is kept."""
        return to_sympy(self._opaque(self._expanded(node)), self._lookup)

    def _expanded(self, node: Node) -> Node:
        """Return the expression with definitions written out as they are without infection."""
        walker = self.template.at_rest

        def replacement(name: Name) -> Node | None:
            if name.name in self.template.definitions:
                inner = walker.walk(name)
                folded = walker.folded.get(name.name, inner.value)
                return inner.value if is_zero(inner.value) else self._expanded(folded)
            return None

        return replace_names(node, replacement)

    def _opaque(self, node: Node) -> Node:
        if isinstance(node, Apply | Total):
            for name, known in self.places.items():
                if known == node:
                    return Name(name)
            name = f"opaque{len(self.places)}"
            while name in self.template.scenario.parameters or name in self.template.scenario.compartments:
                name += "_"
            self.places[name] = node
            return Name(name)
        return rebuild(node, self._opaque)

    def _lookup(self, name: Name) -> sympy.Expr:
        if name.name in self.state:
            return self.state[name.name]
        parameter = self.template.scenario.parameters.get(name.name)
        return symbol(name.name, parameter is not None and parameter.any_sign)

    def text(self, expression: sympy.Expr) -> str:
        """Return an expression as text, with matrices and sums in their places."""
        tree = from_sympy(tidy(expression))

        def back(name: Name) -> Node | None:
            return self.places.get(name.name)

        return write(replace_names(tree, back))

    def _state(self) -> dict[str, sympy.Expr]:
        """Return each uninfected compartment as an expression of one group, or as its own name."""
        template = self.template
        self.state = {}
        out: dict[str, sympy.Expr] = {}
        for name in template.uninfected:
            if name in template.empty and name not in self.named:
                out[name] = sympy.Integer(0)
            else:
                out[name] = symbol(name)
        solved = self._solved()
        for name in template.uninfected:
            given = template.scenario.infection_free.get(name)
            if name in self.named:
                continue
            if given is not None and not (isinstance(given[0].tree, Apply | Total) or _acts(given[0].tree)):
                self.state = out
                out[name] = self.scalar(given[0].tree)
            elif name in solved:
                out[name] = solved[name]
        return out

    def _solved(self) -> dict[str, sympy.Expr]:
        """Return the compartments that can be solved for group by group."""
        template = self.template
        if self.named or not template.free or any(arrow.matrix is not None for arrow in template.rest_arrows):
            return {}
        for arrow in template.rest_arrows:
            acts = any(isinstance(f, Applied | Summed) for term in arrow.rate.terms for f in term.factors)
            if acts or _acts(arrow.rate.value):
                return {}
        scenario, space = template.scenario, template.space
        names = {name: _one(space.dimensions, symbol(name, p.any_sign)) for name, p in scenario.parameters.items()}
        program = Program(lambda wish: sympy.Dummy(wish))
        found = solve_rest(template, names, {}, {}, {}, program)
        if found is None or program.lines:
            return {}
        return {name: found[name].ravel()[0] for name in template.free}

    # --- blocks --------------------------------------------------------------------------------------------------------

    def run(self) -> BlockForm:
        """Return the blocks."""
        template = self.template
        infected = template.infected
        place = {name: k for k, name in enumerate(infected)}
        F: dict[tuple[str, str], list[str]] = {}
        V: dict[tuple[str, str], list[tuple[int, str]]] = {}
        local_V = True
        own: dict[tuple[str, str], sympy.Expr] = {}
        n = len(infected)
        moves, sources, stray = (np.full((n, n), sympy.Integer(0), dtype=object) for _ in range(3))
        exits = np.full(n, sympy.Integer(0), dtype=object)
        chains: dict[tuple[str, str], list[Term]] = {}
        for arrow in template.arrows:
            for term in arrow.rate.terms:
                if term.column not in place:
                    continue
                lost_source, lost_target = (
                    () if side is None else tuple(d for d in arrow.by if d not in template.by(side))
                    for side in (arrow.source, arrow.target)
                )
                acts = any(isinstance(f, Applied | Summed) for f in term.factors)
                j = place[term.column]
                rate = None if acts else self._rate(term)
                left = arrow.source in place
                arrived = arrow.target in place and arrow.arriving is None
                if arrived and arrow.transmission and arrow.target is not None:
                    whole = term if not lost_target else term.under(Summed(lost_target))
                    F.setdefault((arrow.target, term.column), []).append(self.chain(whole))
                    chains.setdefault((arrow.target, term.column), []).append(whole)
                for side, sign, lost in ((arrow.source, 1, lost_source), (arrow.target, -1, lost_target)):
                    if side not in place or (sign < 0 and (arrow.transmission or arrow.arriving is not None)):
                        continue
                    assert side is not None
                    if rate is not None and not lost:
                        key = (side, term.column)
                        own[key] = own.get(key, sympy.Integer(0)) + sign * rate
                    else:
                        local_V = False
                        whole = term if not lost else term.under(Summed(lost))
                        V.setdefault((side, term.column), []).append((sign, self.chain(whole)))
                if rate is None or lost_source or lost_target:
                    continue
                if left and place[str(arrow.source)] == j:
                    if arrived and not arrow.transmission:
                        moves[place[str(arrow.target)], j] += rate
                    else:
                        exits[j] += rate
                else:
                    if left:
                        stray[place[str(arrow.source)], j] += rate
                    if arrived and not arrow.transmission:
                        sources[place[str(arrow.target)], j] += rate
            for term in arrow.arriving or ():
                if term.column in place and arrow.target in place:
                    local_V = False
                    V.setdefault((str(arrow.target), term.column), []).append((-1, self.chain(term)))
        for (row, column), total in own.items():
            if total != 0:
                V.setdefault((row, column), []).insert(0, (1, f"diag({self.text(total)})"))
        K = root = closed = None
        if local_V and not any(s != 0 for s in stray.ravel()):
            net = Network(_tidied(moves), _tidied(sources), _tidied(exits), stray)
            K, root, closed = self._next_generation(chains, net, place)
        return BlockForm(
            F={key: " + ".join(terms) for key, terms in F.items()},
            V={key: _signed(terms) for key, terms in V.items()},
            K=K,
            infection_free={name: self.text(value) for name, value in self.state.items()},
            root=root,
            closed_form=closed,
        )

    def _rate(self, term: Term) -> sympy.Expr:
        total: sympy.Expr = sympy.Integer(term.sign)
        for factor in term.factors:
            assert not isinstance(factor, Applied | Summed)
            total = total * self.scalar(factor)
        return total

    def chain(self, term: Term, after: sympy.Expr | None = None) -> str:
        """Return a chain as text, with a diagonal factor behind it where one is given."""
        parts: list[str] = []
        waiting: sympy.Expr = sympy.Integer(term.sign)
        for factor in term.factors:
            if isinstance(factor, Applied | Summed):
                if waiting != 1:
                    parts.append(f"diag({self.text(waiting)})")
                waiting = sympy.Integer(1)
                parts.append(self._operator(factor))
            else:
                waiting = waiting * self.scalar(factor)
        if after is not None:
            waiting = waiting * after
        if waiting != 1 or not parts:
            parts.append(f"diag({self.text(waiting)})")
        return " ".join(parts)

    def _operator(self, factor: Applied | Summed) -> str:
        if isinstance(factor, Applied):
            return f"{factor.matrix}'" if factor.transposed else factor.matrix
        over = ", ".join(factor.dimensions)
        return f"sum[{over}]"

    def _next_generation(
        self, chains: dict[tuple[str, str], list[Term]], net: Network, place: dict[str, int]
    ) -> tuple[dict[tuple[str, str], str] | None, str | None, str | None]:
        template = self.template
        infected = template.infected
        born = [name for name in infected if any(row == name for row, _ in chains)]
        if not born:
            return {}, None, None
        program = Program(lambda wish: sympy.Dummy(wish))
        columns = [place[name] for name in born]
        if any(
            net.exits[k] == 0 and not any(net.moves[i, k] != 0 for i in range(len(infected)))
            for k in range(len(infected))
        ):
            return None, None, None
        stays = residence_times(net, columns, program, infected, tidy)
        if program.lines:
            return None, None, None
        K: dict[tuple[str, str], str] = {}
        pieces: dict[tuple[str, str], list[tuple[Term, sympy.Expr]]] = {}
        for name in born:
            for (row, column), terms in chains.items():
                stay = stays[place[name]].get(place[column])
                if stay is not None:
                    pieces.setdefault((row, name), []).extend((term, stay) for term in terms)
        for key, items in pieces.items():
            K[key] = self._gathered(items)
        if any(len(value) > MOST_CHARACTERS for value in K.values()):
            return None, None, None
        root = closed = None
        if len(born) == 1:
            block = K.get((born[0], born[0]), "0")
            root = f"rho({block})"
            closed = self._rank_one(pieces.get((born[0], born[0]), []), born[0])
        return K, root, closed

    def _gathered(self, items: list[tuple[Term, sympy.Expr]]) -> str:
        """Return a sum of chains; those with the same head are added up in their last diagonal factor."""
        heads: dict[tuple[object, ...], tuple[Term, sympy.Expr]] = {}
        for term, stay in items:
            last = max((k for k, f in enumerate(term.factors) if isinstance(f, Applied | Summed)), default=-1)
            tail: sympy.Expr = sympy.Integer(term.sign)
            for factor in term.factors[last + 1 :]:
                assert not isinstance(factor, Applied | Summed)
                tail = tail * self.scalar(factor)
            head = term.factors[: last + 1]
            known = heads.get(head)
            total = tail * stay if known is None else known[1] + tail * stay
            heads[head] = (Term(term.column, 1, head), total)
        return " + ".join(self.chain(term, tidy(total)) for term, total in heads.values())

    def _rank_one(self, items: list[tuple[Term, sympy.Expr]], born: str) -> str | None:
        """Return R0 as a sum over groups where every chain adds up all groups before it spreads: proportionate mixing."""
        total: sympy.Expr = sympy.Integer(0)
        by = set(self.template.by(born))
        if not by:
            return None
        for term, stay in items:
            product: sympy.Expr = sympy.Integer(term.sign) * stay
            summed: set[str] = set()
            for factor in term.factors:
                if isinstance(factor, Applied):
                    return None
                if isinstance(factor, Summed):
                    summed |= set(factor.dimensions)
                else:
                    product = product * self.scalar(factor)
            if summed != by:
                return None
            total = total + product
        if len({self.text(self._head(term)) for term, _ in items}) != 1:
            return None
        return f"sum({self.text(total)})"

    def _head(self, term: Term) -> sympy.Expr:
        """Return what stands before the sum over groups."""
        head: sympy.Expr = sympy.Integer(1)
        for factor in term.factors:
            if isinstance(factor, Applied | Summed):
                break
            head = head * self.scalar(factor)
        return head


def _acts(node: Node) -> bool:
    from ngm.expression.tree import walk

    return any(isinstance(part, Apply | Total) for part in walk(node))


def _one(dimensions: tuple[str, ...], value: sympy.Expr) -> Array:
    out: Array = np.empty((1,) * (len(dimensions) + 1), dtype=object)
    out[...] = value
    return out


def _tidied(values: Array) -> Array:
    out: Array = np.empty(values.shape, dtype=object)
    out.ravel()[:] = [tidy(v) for v in values.ravel()]
    return out


def _signed(terms: list[tuple[int, str]]) -> str:
    out = terms[0][1] if terms[0][0] > 0 else f"-{terms[0][1]}"
    for sign, part in terms[1:]:
        out += f" + {part}" if sign > 0 else f" - {part}"
    return out
