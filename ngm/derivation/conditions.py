"""The conditions A1 to A5 under which F V^-1 is a next-generation matrix, each tested on the flows.

Source: van den Driessche & Watmough (2002) Math. Biosci. 180:29-48, doi:10.1016/S0025-5564(02)00108-6 (conditions from
memory). In words, for flows: A1 no rate is negative; A2 nothing leaves an empty compartment; A3 new infections arrive in
infected compartments only; A4 without infection, none arises; A5 without new infections, the infection-free state is stable.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from ngm.derivation.evaluate import FLOATS, Evaluator
from ngm.derivation.space import Array
from ngm.derivation.template import Template, flow_name
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Add, Call, Multiply, Name, Negate, Node, Number, Power, children, names
from ngm.results import Condition

__all__ = ["check_arrivals", "check_exits", "fifth_condition", "first_conditions"]

TRIALS = 24


def _trial_states(template: Template, seed: int) -> Iterator[dict[str, Array]]:
    """Yield random positive states: sizes over six decades, every compartment by itself."""
    rng = np.random.default_rng(seed)
    for _ in range(TRIALS):
        scale = 10 ** rng.uniform(-2, 4)
        state = {}
        for name in template.scenario.compartments:
            by = template.by(name)
            flat = scale * np.exp(rng.normal(size=(template.space.count(by), 1)) * 1.5)
            state[name] = template.space.spread(flat, by)
        yield state


class _Trials:
    """Evaluates rates at trial states; parameters are evaluated once."""

    def __init__(self, template: Template, matrices: Mapping[str, Array]) -> None:
        self.template, self.matrices = template, matrices
        base = template.evaluator(FLOATS, {}, matrices=matrices)
        self.parameters = {name: base.name(name) for name in template.scenario.parameters}

    def at(self, state: Mapping[str, Array]) -> Evaluator:
        """Return an evaluator at a state."""
        return self.template.evaluator(FLOATS, state, names=self.parameters, matrices=self.matrices)

    def rate(self, state: Mapping[str, Array], tree: Node, by: tuple[str, ...]) -> Array:
        """Return the rate of a flow at a state, copy by copy."""
        return self.template.space.flatten(self.at(state).value(tree), by)[:, 0]


def first_conditions(template: Template, matrices: Mapping[str, Array]) -> list[Condition]:
    """Return A1, A2, A3 and A4; in discrete time A1 says of T as well that it has no negative entry (checked before).

    `matrices` as doubles. A4 is refused before (`check_arrivals`); A3 by the reader.
    """
    with np.errstate(all="ignore"):
        trials = _Trials(template, matrices)
        return [
            _in_steps(template, _rates_not_negative(template, trials)),
            _nothing_leaves_empty(template, trials),
            Condition("A3", True, "Every transmission flow arrives in an infected compartment."),
            Condition("A4", True, "With nobody infected, every flow into an infected compartment is 0."),
        ]


def _in_steps(template: Template, condition: Condition) -> Condition:
    """Return A1 as it is said in discrete time."""
    if not template.scenario.discrete or not condition.holds:
        return condition
    more = " Exits add up to no more than all members of a compartment: T = I - V has no negative entry."
    return Condition(condition.name, True, condition.detail + more)


def _rates_not_negative(template: Template, trials: _Trials) -> Condition:
    scenario = template.scenario
    evaluator = trials.at({})
    doubtful = [
        (number, flow)
        for number, flow in enumerate(scenario.flows, 1)
        if not _never_negative(template, evaluator, flow.rate.tree)
    ]
    if not doubtful:
        return Condition("A1", True, "No rate can be negative: each is built from non-negative parts.")
    negative = set()
    for state in _trial_states(template, 1):
        values = trials.at(state)
        for number, flow in doubtful:
            value = values.value(flow.rate.tree)
            if np.any(value < -1e-12 * max(1e-300, float(np.max(np.abs(value))))):
                negative.add(number)
    if negative:
        named = ", ".join(flow_name(scenario, number) for number in sorted(negative))
        return Condition("A1", False, f"The rate of {named} is negative in some states that are not negative.")
    named = ", ".join(flow_name(scenario, number) for number, _ in doubtful)
    return Condition("A1", True, f"No rate was negative in {TRIALS} random states; not proven by form for {named}.")


def _never_negative(template: Template, evaluator: Evaluator, node: Node) -> bool:
    """Return whether an expression cannot be negative at these parameters, whatever the (non-negative) state."""
    here = names(node)
    free = _expanded(template, here)
    if not free & set(template.scenario.compartments):
        value = evaluator.value(node)
        return bool(np.all(value >= 0))
    match node:
        case Number(value=value_):
            return value_ >= 0
        case Name(name=name):
            if name in template.definitions:
                return _never_negative(template, evaluator, template.definitions[name])
            return True
        case Negate():
            return False
        case Add(terms=terms):
            return all(sign > 0 for sign, _ in terms) and all(
                _never_negative(template, evaluator, term) for _, term in terms
            )
        case Multiply():
            return all(_never_negative(template, evaluator, child) for child in children(node))
        case Power(base=base):
            return _never_negative(template, evaluator, base)
        case Call(function="exp" | "sqrt"):
            return True
        case Call(function="log"):
            return False
        case Call(function="max", arguments=arguments):
            return any(_never_negative(template, evaluator, a) for a in arguments)
    return all(_never_negative(template, evaluator, child) for child in children(node))


def _expanded(template: Template, here: set[str]) -> set[str]:
    """Return the names behind these names, definitions followed."""
    seen: set[str] = set()
    todo = set(here)
    while todo:
        name = todo.pop()
        if name not in seen:
            seen.add(name)
            if name in template.definitions:
                todo |= names(template.definitions[name])
    return seen


def _nothing_leaves_empty(template: Template, trials: _Trials) -> Condition:
    scenario, space = template.scenario, template.space
    broken = set()
    for trial, state in enumerate(_trial_states(template, 2)):
        if trial == 3:
            break
        for number, flow in enumerate(scenario.flows, 1):
            if flow.source is None:
                continue
            arrow_by = template.arrows[number - 1].by
            own = space.index_of(template.by(flow.source), arrow_by)
            full = trials.rate(state, flow.rate.tree, arrow_by)
            for copy in {0, len(set(own.tolist())) - 1}:
                emptied = dict(state)
                flat = space.flatten(state[flow.source], template.by(flow.source)).copy()
                flat[copy] = 1e-30 * float(np.max(np.abs(flat)))
                emptied[flow.source] = space.spread(flat, template.by(flow.source))
                rate = trials.rate(emptied, flow.rate.tree, arrow_by)
                if np.any(np.abs(rate[own == copy]) > 1e-9 * float(np.max(np.abs(full)))):
                    broken.add(number)
    if broken:
        named = ", ".join(flow_name(scenario, number) for number in sorted(broken))
        return Condition(
            "A2",
            False,
            f"{named} leaves a compartment even when it is empty: multiply the rate by the number in the compartment left.",
        )
    return Condition("A2", True, "Every flow out of a compartment is 0 when that compartment is empty.")


def check_arrivals(template: Template, matrices: Mapping[str, Array]) -> None:
    """Refuse a flow into an infected compartment that is not 0 when nobody is infected (A4).

    Raises
    ------
    DerivationError
        With each such flow: a constant inflow of infected individuals leaves no infection-free state.
    """
    scenario = template.scenario
    walker = template.lineariser(set(template.infected), set(), template.definitions)
    problems = []
    trials: _Trials | None = None
    for number, flow in enumerate(scenario.flows, 1):
        if flow.target not in template.infected:
            continue
        name = flow_name(scenario, number)
        rate = walker.at(flow.rate.tree, f"{name}, rate")
        if rate.is_zero:
            continue
        trials = trials or _Trials(template, matrices)
        with np.errstate(all="ignore"):
            nothing = True
            for state in _trial_states(template, 3):
                clear = {key: value * (key not in template.infected) for key, value in state.items()}
                value = trials.at(clear).value(flow.rate.tree)
                if not np.all(np.abs(value) <= 1e-300):
                    nothing = False
                    break
        if nothing:
            continue
        if flow.source is not None and flow.source not in template.infected:
            advice = (
                f"If members of {flow.source} carry the infection, set infected = true for {flow.source}; "
                "if they are infected by others, the rate must hold an infected compartment as a factor."
            )
        else:
            advice = "Leave it out: R0 belongs to the model without importation."
        problems.append(
            Problem(
                f"{name}, rate",
                f"brings infected individuals into {flow.target} even when nobody is infected, so there is no infection-free "
                f"state (A4). {advice}",
                key=("flow", number - 1, "rate"),
            )
        )
    if problems:
        raise DerivationError(problems)


def check_exits(template: Template) -> None:
    """Refuse a V that is singular by structure: an infected compartment, or a loop of them, that nothing leaves.

    Raises
    ------
    DerivationError
        With the compartment or loop, and what to do.
    """
    from ngm.derivation.network import pattern_network

    problems = []
    for members in pattern_network(template).traps():
        compartments = list(dict.fromkeys(template.types[k].split("[")[0] for k in members))
        if len(compartments) == 1:
            what = f"nothing leaves {compartments[0]}"
            advice = f"Add a flow out of {compartments[0]}, or set infected = false."
        else:
            named = ", ".join(compartments)
            what = f"{named} pass their members round in a loop that nobody leaves"
            advice = f"Add a flow out of one of {named} (recovery, death, loss)."
        problems.append(Problem("derivation", f"V is singular: {what}. {advice}", key=("flow",)))
    if problems:
        raise DerivationError(list(dict.fromkeys(problems)))


def fifth_condition(stable: bool | None, regular: bool, why: str | None, *, discrete: bool = False) -> Condition:
    """Return A5: `stable` is that of the uninfected block (None: neutral), `regular` whether V is a non-singular M-matrix.

    In discrete time: no eigenvalue of T, and of the step among the uninfected, has a modulus of 1 or more.
    """
    if not regular:
        return Condition("A5", False, f"Without new infections the infected compartments do not empty: {why}")
    if stable is None:
        return Condition(
            "A5",
            False,
            "The state without infection is neutral, not stable: the population is closed, and any division of it among the "
            "uninfected compartments is at rest. The infected compartments empty without new infections, which is what "
            "R0 needs.",
        )
    if not stable:
        return Condition("A5", False, "The state without infection is unstable even without infection.")
    proof = " (a step without new infections leaves less and less: rho(T) < 1)" if discrete else ""
    return Condition("A5", True, f"Without new infections the infection-free state is stable{proof}.")
