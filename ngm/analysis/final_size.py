"""How many are infected in the end, in a closed population: when the final-size equation applies, and what it gives.

The equation needs K and the number of susceptible members of each type only. It holds where nobody joins or leaves the
susceptible but by infection, and where the force of infection is linear in the infected all along: both are looked at in
the flows, the second at states that the flows lead to.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.analysis.process import dense_F_and_V, dense_K
from ngm.derivation.evaluate import FLOATS, Evaluator
from ngm.derivation.expand import net_flow
from ngm.derivation.linearise import ONE, product
from ngm.derivation.rest import choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template, flow_name
from ngm.engine.final_size import Kinds
from ngm.engine.final_size import final_size as largest_solution
from ngm.expression.tree import Apply, Name, Node
from ngm.results_outbreak import FinalSizeResult, FinalSizeRow, Vaccine

__all__ = ["Susceptibles", "final_size", "kinds_of", "susceptibles"]

FloatArray = npt.NDArray[np.float64]

TRIALS = 4
#: Relative error of a force of infection up to which it counts as linear.
LINEAR = 1e-8
MOST_NAMED = 4


@dataclass(frozen=True, eq=False)
class Susceptibles:
    """Who can be infected, in pools that infection uses up; none, with the reason, where the equation does not apply.

    Attributes
    ----------
    sizes : (p,) array or None
        Susceptible members of each pool.
    pool : (n,) array of int
        The pool of each type at infection.
    share : (n,) array
        Share of its pool's infections that are of each type.
    """

    sizes: FloatArray | None
    why: str | None = None
    pool: npt.NDArray[np.intp] = field(default_factory=lambda: np.zeros(0, dtype=np.intp))
    share: FloatArray = field(default_factory=lambda: np.zeros(0))


def final_size(found: Numbers, before: Susceptibles, vaccine: Vaccine | None = None) -> FinalSizeResult:
    """Return how many are infected in the end.

    Parameters
    ----------
    found : Numbers
        With an R0, under whatever intervention.
    before : Susceptibles
        From `susceptibles`, or the sizes that stand beside a K as given.
    vaccine : Vaccine, optional
    """
    if before.sizes is None:
        return FinalSizeResult(before.why)
    sizes, pool = before.sizes, before.pool
    first = np.array([int(np.flatnonzero(pool == k)[0]) for k in range(len(sizes))], dtype=int)
    kinds = Kinds.alike(len(sizes))
    if vaccine is not None:
        kinds = kinds_of(vaccine)
        kinds = Kinds(kinds.shares[first], kinds.susceptibility[first], kinds.infectivity[first])
    member = np.equal.outer(np.arange(len(sizes)), pool).astype(float)
    solved = largest_solution(member @ dense_K(found) @ (member * before.share).T, sizes, kinds)
    names = [found.template.types[int(k)] for k in found.at]
    rows = []
    for n, name in enumerate(names):
        k, part = int(pool[n]), float(before.share[n])
        unvaccinated = vaccinated = None
        if vaccine is not None and vaccine.coverage[n] > 0:
            each = solved.attack_by_kind[k]
            unvaccinated = part * float(each[0])
            immune = float(vaccine.efficacy[n])
            vaccinated = part * float(each[1]) if vaccine.kind == "leaky" else (1 - immune) * unvaccinated
        attack = part * float(solved.attack[k])
        low, high = part * float(solved.low[k]), part * float(solved.high[k])
        rows.append(
            FinalSizeRow(
                name,
                float(sizes[k]),
                attack,
                (min(low, attack), max(high, attack)),
                attack * float(sizes[k]),
                unvaccinated,
                vaccinated,
            )
        )
    infected, there = sum(row.infected for row in rows), float(sizes.sum())
    return FinalSizeResult(None, tuple(rows), there, infected, infected / there if there > 0 else None, vaccine)


def kinds_of(vaccine: Vaccine) -> Kinds:
    """Return what a vaccine makes of the susceptible members of each type: without it, and with it.

    All-or-nothing: the immune share of the vaccinated has susceptibility 0, the rest of them is like the others, but for
    its infectivity where the vaccine works against spread.
    """
    c, a = np.array(vaccine.coverage), np.array(vaccine.efficacy)
    spread = 1 - np.array(vaccine.against_spread)
    one, none = np.ones_like(c), np.zeros_like(c)
    if vaccine.kind == "leaky":
        return Kinds(np.stack([1 - c, c], 1), np.stack([one, 1 - a], 1), np.stack([one, spread], 1))
    return Kinds(
        np.stack([1 - c, c * (1 - a), c * a], 1), np.stack([one, one, none], 1), np.stack([one, spread, none], 1)
    )


def susceptibles(found: Numbers) -> Susceptibles:
    """Return the susceptible members behind each type at infection, or why the final-size equation does not apply."""
    scenario = found.scenario
    if scenario.projection is not None:
        return Susceptibles(None, "a projected population has births in every step: there is no end to count up to.")
    if scenario.given is not None:
        sizes = _given_sizes(found)
        if sizes is None:
            return Susceptibles(None, "the file gives no sizes beside K. Write sizes = […] below [next_generation].")
        return Susceptibles(sizes, None, np.arange(len(sizes)), np.ones(len(sizes)))
    if scenario.discrete:
        return Susceptibles(
            None,
            "the equation is that of continuous time. In steps the susceptible lose a share of "
            "themselves at once, and what is "
            "left is a product over the steps and no exponential.",
        )
    why = _not_closed(found)
    if why is not None:
        return Susceptibles(None, why)
    return _by_type(found)


def _given_sizes(found: Numbers) -> FloatArray | None:
    from ngm.analysis.stated_entries import sizes_of

    sizes = sizes_of(found.scenario, found.point.evaluator)
    return None if sizes is None else np.asarray(sizes, dtype=float)


def _named(template: Template, numbers: list[int]) -> str:
    shown = ", ".join(flow_name(template.scenario, number) for number in numbers[:MOST_NAMED])
    return shown + (", …" if len(numbers) > MOST_NAMED else "")


def _not_closed(found: Numbers) -> str | None:
    """Return which flows keep the population from being closed, in words; None where none does."""
    template, scenario = found.template, found.scenario
    counted = template.depended_on
    infectible = {flow.source for flow in scenario.flows if flow.kind == "transmission"}
    numbered = list(enumerate(scenario.flows, 1))
    seasonal = [name for name, p in scenario.parameters.items() if p.season is not None]
    if seasonal:
        return f"{', '.join(seasonal[:MOST_NAMED])} changes with the season: the final size then depends on the day it starts."
    entering = [n for n, f in numbered if f.source is None and f.target in counted and f.kind == "transition"]
    if entering:
        return (
            f"members come from outside by {_named(template, entering)} (births, or a reservoir): the susceptible are "
            "replaced, and there is no final size."
        )
    unlinked = [n for n, f in numbered if f.kind == "transmission" and f.source is None]
    if unlinked:
        return (
            f"{_named(template, unlinked)} takes new infections from no compartment (a reservoir, or hosts that are not in "
            "the model): nobody is used up by it."
        )
    twice = [n for n, f in numbered if f.kind == "transmission" and f.source in template.infected]
    if twice:
        return (
            f"{_named(template, twice)} infects those who are infected already: they are not used up once and for all."
        )
    back = [n for n, f in numbered if f.target in infectible and f.kind == "transition"]
    if back:
        return f"{_named(template, back)} brings members back to those who can be infected (waning, or no immunity)."
    gone = [n for n, f in numbered if f.source in infectible and f.kind == "transition"]
    if gone:
        return f"members leave those who can be infected by {_named(template, gone)} (deaths, vaccination) besides infection."
    moving = [m.matrix for m in scenario.movements if set(m.of) & infectible]
    if moving:
        return f"members who can be infected move between groups ({', '.join(moving)}), so the groups mix in the course of it."
    return None


def _by_type(found: Numbers) -> Susceptibles:
    """Return the susceptible behind each type at infection, after a look at whether forces of infection are linear."""
    template, point = found.template, found.point
    sources: dict[str, set[str]] = {}
    for flow in found.scenario.flows:
        if flow.kind == "transmission" and flow.target is not None and flow.source is not None:
            sources.setdefault(flow.target, set()).add(flow.source)
    infected_from: dict[str, set[str]] = {}
    for target, kinds in sources.items():
        for kind in kinds:
            infected_from.setdefault(kind, set()).add(target)
    for target, kinds in sources.items():
        if len(kinds) > 1:
            return Susceptibles(
                None,
                f"infections of {target} come from several compartments ({', '.join(sorted(kinds))}), "
                "each used up at its own "
                "pace. Give each its own compartment of newly infected.",
            )
    start = template.offsets(template.infected)
    row_of = {int(k): n for n, k in enumerate(found.at)}
    sizes: list[FloatArray] = []
    pool, share = np.zeros(len(found.at), dtype=np.intp), np.ones(len(found.at))
    F, _ = dense_F_and_V(found)
    for kind, targets in infected_from.items():
        flat = as_floats(template.space.flatten(np.asarray(point.state[kind]), template.by(kind)))[:, 0]
        own = np.arange(len(flat)) + sum(len(s) for s in sizes)
        sizes.append(flat)
        rows = []
        for target in sorted(targets):
            if template.by(kind) != template.by(target):
                why = f"{kind} and {target} are not grouped alike, so nobody knows who is used up by whom."
                return Susceptibles(None, why)
            rows.append(np.arange(start[target], start[target] + len(flat)))
        force = np.stack([F[r] for r in rows])
        whole = force.sum(axis=0)
        parts = np.divide(
            force.sum(axis=2), whole.sum(axis=1), out=np.zeros(force.shape[:2]), where=whole.sum(axis=1) > 0
        )
        if np.any(np.abs(force - parts[:, :, None] * whole) > LINEAR * max(float(whole.max(initial=0.0)), 1e-300)):
            return Susceptibles(
                None,
                f"members of {kind} become {', '.join(sorted(targets))}, by different cases: two infections use up the same "
                "people, and how far either gets depends on when it starts.",
            )
        for k, r in enumerate(rows):
            for copy, row in enumerate(r.tolist()):
                if row in row_of:
                    pool[row_of[row]], share[row_of[row]] = own[copy], parts[k, copy]
    kept, pool = np.unique(pool, return_inverse=True)
    state = {name: _floats(value) for name, value in point.state.items()}
    curved = _not_linear(found, state, {target: next(iter(kinds)) for target, kinds in sources.items()})
    return (
        Susceptibles(None, curved)
        if curved is not None
        else Susceptibles(np.concatenate(sizes)[kept], None, pool, share)
    )


def _floats(values: Any) -> Array:
    array = np.asarray(values)
    return as_floats(array.reshape(-1)).reshape(array.shape) if array.dtype == object else array.astype(float)


def _not_linear(found: Numbers, state: Mapping[str, Array], sources: Mapping[str, str]) -> str | None:
    """Return why the force of infection, or the course of an infection, is not linear in the infected; None where it is.

    At states that the flows lead to, new infections must be (S now / S before) F x, x the infected, and the rest -V x.
    """
    template, point = found.template, found.point
    plain = Numbers(point.original) if point.intervention is not None else found
    F, V = dense_F_and_V(plain)
    before = {name: _floats(value) for name, value in plain.point.state.items()} if plain is not found else dict(state)
    matrices = {name: _floats(table) for name, table in plain.point.matrices.items()}
    at = template.offsets(template.infected)
    infection = tuple(a for a in template.arrows if a.transmission)
    course = tuple(a for a in template.arrows if not a.transmission)
    for now in _states_on_the_way(plain.template, before):
        evaluator = plain.template.evaluator(FLOATS, now, matrices=matrices)
        choose_branches(evaluator, plain.template.at_rest.selectors)
        x = np.concatenate([template.space.flatten(now[name], template.by(name))[:, 0] for name in template.infected])
        left = np.ones(len(x))
        for target, source in sources.items():
            here, there = (template.space.flatten(s[source], template.by(source))[:, 0] for s in (now, before))
            left[at[target] : at[target] + len(here)] = np.divide(here, there, out=np.zeros_like(here), where=there > 0)
        # rates of the file at this state, flow by flow
        for arrows, wanted, what in ((infection, left * (F @ x), "new infections"), (course, -(V @ x), "the rest")):
            entering, leaving = _net(plain.template, evaluator, arrows)
            gap = np.abs(entering - leaving - wanted)
            if np.any(gap > LINEAR * np.maximum(np.abs(wanted).max(), 1e-300)):
                row = template.types[int(np.argmax(gap))]
                if what == "the rest":
                    return f"what leaves and enters {row} is not in proportion to the infected as the outbreak goes on."
                return (
                    f"new infections of {row} are not in proportion to the susceptible and the "
                    "infected as the outbreak goes on: "
                    "the size of the population that mixes changes (deaths), or the rate has another form."
                )
    return None


def _net(template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...]) -> tuple[FloatArray, FloatArray]:
    """Return what enters and leaves the infected states by these flows, their rates taken as typed."""
    whole = tuple(replace(arrow, rate=replace(arrow.rate, value=_typed(template, arrow))) for arrow in arrows)
    entering, leaving = net_flow(template, evaluator, whole, template.infected)
    return np.asarray(entering[:, 0], dtype=float), np.asarray(leaving[:, 0], dtype=float)


def _typed(template: Template, arrow: Arrow) -> Node:
    """Return the rate of an arrow as the file has it, where infected compartments are not taken as empty."""
    if arrow.number is not None:
        return template.scenario.flows[arrow.number - 1].rate.tree
    assert arrow.matrix is not None
    assert arrow.source is not None
    return product(Apply(arrow.matrix, ONE), Name(arrow.source))


def _states_on_the_way(template: Template, before: Mapping[str, Array]) -> Iterator[dict[str, Array]]:
    """Yield states that the flows lead to: random shares of each compartment passed on along them."""
    scenario, space = template.scenario, template.space
    rng = np.random.default_rng(2007)
    for _ in range(TRIALS):
        now = {name: np.array(value, dtype=float) for name, value in before.items()}
        for name in template.infected:
            now[name] = space.spread(np.zeros((space.count(template.by(name)), 1)), template.by(name))
        order = [f for f in scenario.flows if f.kind == "transmission"] + [
            f for _ in range(3) for f in scenario.flows if f.kind == "transition"
        ]
        for flow in order:
            if flow.source is None or (
                flow.target is not None and template.by(flow.source) != template.by(flow.target)
            ):
                continue
            here = now[flow.source]
            passed = here * rng.uniform(0.1, 0.6, size=here.shape)
            now[flow.source] = here - passed
            if flow.target is not None:
                now[flow.target] = np.broadcast_to(now[flow.target], here.shape) + passed
        yield now
