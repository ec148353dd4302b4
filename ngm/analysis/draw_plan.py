"""How to get from draws to K and R0: programs, the checks that a draw must pass, and the class structure of K.

A `Plan` is plain data that other processes can be sent.
"""

from __future__ import annotations

import hashlib
import pickle
import threading
from collections import OrderedDict
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.point import Point
from ngm.analysis.stated_entries import is_stated
from ngm.analysis.steps_of_time import MORE_THAN_ALL
from ngm.analysis.traced import Columns, CurvedBaseline, TracedPoint, TracedTemplate, opened
from ngm.derivation.compile import Program, compiled
from ngm.derivation.conditions import check_arrivals, check_exits
from ngm.derivation.expand import assemble
from ngm.derivation.network import network, nonzero
from ngm.derivation.space import Array
from ngm.derivation.stays import Stays, stays
from ngm.derivation.tracing import Trace, Traced
from ngm.engine.structure import classes
from ngm.expression.tree import names
from ngm.scenario.model import Intervention, Scenario

__all__ = ["MOST_TRACED", "NO_STATE", "OVERDRAWN", "Check", "Plan", "plan"]

#: Types up to which a model is traced; past them draws are done one by one.
MOST_TRACED = 150
#: A pivot below this share of its parts has lost too many digits: such a draw is done by itself, with bounds.
DOUBTFUL = 1e-8
#: Plans kept: the draws of one scenario under each of its interventions.
MOST_KEPT = 32

SINGULAR = "V is singular or no M-matrix: some infected compartments are not lost, or grow without any transmission"
NEGATIVE_F = "F has a negative entry"
POSITIVE_V = "V has a positive entry off its diagonal"
OVERDRAWN = "more leave a compartment in one step than there are in it"
NO_STATE = "no infection-free state with non-negative numbers"


_kept: OrderedDict[bytes, Plan] = OrderedDict()
_lock = threading.Lock()


@dataclass(frozen=True, slots=True)
class Check:
    """What must hold of an output of a program at a draw.

    `kind`: "above" 0, "not below" it or "finite": else there is no R0, for the reason `why`; "redo" where not above 0: the
    draw is done by itself; "value": finite and not negative, else the draws are refused; "rest": output and the one after
    it agree, else the draws are refused.
    """

    kind: str
    output: int
    why: str


@dataclass(frozen=True)
class Plan:
    """How to get from draws to K and R0.

    Attributes
    ----------
    scenario, intervention
        For draws that are done one by one.
    columns : mapping
        Which input each copy of a drawn parameter is read from; inputs are in the parameters' own units.
    inputs : int
    at, size : int
        Types at infection (rows of K).
    entries : tuple of (int, int, float or None)
        (row, column, value) of the entries of K that are not 0 by structure, row by row; those without a constant value
        are the first outputs of `main`, in this order.
    main : Program or None
        None: draws are done one by one.
    direct : Program or None
        R0 itself and the screens, where no class of K has more than two types.
    screens : tuple of str
        The last outputs of `main` and of `direct`, which tell whether any check fails anywhere: the smallest of what must
        be "above" 0 or "not below" it, the largest of what must be "finite", the largest and the smallest of the ratios
        that must be 1.
    details : Program or None
        What the checks look at.
    checks : tuple of Check
        On outputs of `details`.
    growth : Program or None
        The entries of F - V that `slopes` leaves open, where they are asked for.
    slopes : tuple of (int, int, float or None)
        As `entries`, of F - V.
    curve : Program or None
        Where the infection-free state is no affine system: net flow (n) and its slope (n, n) from inputs and state (n).
        `main` and `details` then take the state after the inputs.
    start : tuple of float
        The state at the scenario's own values.
    """

    scenario: Scenario
    intervention: Intervention | None
    columns: Columns
    inputs: int
    size: int
    entries: tuple[tuple[int, int, float | None], ...] = ()
    main: Program | None = None
    direct: Program | None = None
    screens: tuple[str, ...] = ()
    details: Program | None = None
    checks: tuple[Check, ...] = ()
    growth: Program | None = None
    slopes: tuple[tuple[int, int, float | None], ...] = ()
    curve: Program | None = None
    start: tuple[float, ...] = ()

    @property
    def extremes(self) -> tuple[str, ...]:
        """Which end of each screen tells whether a check fails."""
        return tuple("max" if kind in ("finite", "largest ratio") else "min" for kind in self.screens)

    @cached_property
    def pattern(self) -> Array:
        """Which entries of K are not 0 by structure."""
        out = np.zeros((self.size, self.size), dtype=bool)
        for i, j, _ in self.entries:
            out[i, j] = True
        return out


def plan(
    scenario: Scenario, intervention: Intervention | None, columns: Columns, inputs: int, *, growth: bool = False
) -> Plan:
    """Return how to compute K and R0 for draws of some parameters; plans are kept, by what they are made from.

    `growth`: also how to compute F - V.

    Raises
    ------
    DerivationError
        The scenario itself, at its own values, has no infection-free state, or V is singular by structure.
    """
    # The bytes hold every number and tree: two scenarios with the same ones have the same plan, whatever their text says.
    key = hashlib.sha256(pickle.dumps((scenario, intervention, dict(columns), inputs, growth))).digest()
    with _lock:
        made = _kept.get(key)
        if made is not None:
            _kept.move_to_end(key)
            return made
    made = _plan(scenario, intervention, columns, inputs, growth)
    with _lock:
        _kept[key] = made
        while len(_kept) > MOST_KEPT:
            _kept.popitem(last=False)
    return made


def _plan(scenario: Scenario, intervention: Intervention | None, columns: Columns, inputs: int, growth: bool) -> Plan:
    point = Point(scenario, intervention)
    out = Plan(scenario, intervention, columns, inputs, len(point.template.at_infection))
    if len(point.template.types) > MOST_TRACED:
        return out
    if not is_stated(scenario):
        check_arrivals(point.template, point.plain_tables)
        check_exits(point.template)
    state = point.infection_free.state
    trace = Trace()
    drawn = tuple(trace.input(nonnegative=not any_sign) for any_sign in _signs(scenario, columns, inputs))
    traced = TracedPoint(opened(scenario, columns), intervention, trace, drawn, columns)
    try:
        return _traced_plan(out, traced, state, growth)
    except CurvedBaseline:
        return out


def _signs(scenario: Scenario, columns: Columns, inputs: int) -> list[bool]:
    signs = [False] * inputs
    for name, places in columns.items():
        for k in places:
            if k is not None:
                signs[k] = signs[k] or scenario.parameters[name].any_sign
    return signs


def _traced_plan(out: Plan, point: TracedPoint, state: Mapping[str, Array], growth: bool) -> Plan:
    template, trace = point.template, point.trace
    evaluator = point.evaluator
    trace.doing = ""
    F, V = assemble(template, evaluator)
    if template.exponents & _moved(template):
        return out
    if out.scenario.discrete and point.unknown:
        return out  # which of several states at rest is stable is decided by moduli: draw by draw
    F = point.scaled(F)
    net = network(template, evaluator, template.arrows, template.infected)
    at = list(template.at_infection)
    one = trace.constant(1.0)
    found = stays(net, [{j: one} for j in at], trace)
    K: Array = np.empty((len(at), len(at)), dtype=object)
    for a, row in enumerate(at):
        for b, column in enumerate(found.columns):
            total = trace.constant(0.0)
            for s, stay in column.items():
                total = total + F[row, s] * stay
            K[a, b] = total
    entries, numbers = _open(K)
    left = _left_over(trace, V) if out.scenario.discrete else []
    checks, looked_at = _checks(point, F, found, K, left)
    screens = _screens(trace, checks, looked_at)
    main = compiled(trace, [*numbers, *screens.values()])
    root = _root(trace, K)
    direct = None if root is None else compiled(trace, [root, *screens.values()])
    details = compiled(trace, looked_at)
    slopes, rates = _open(F - V) if growth else ([], [])
    curve, start = None, np.empty(0)
    if point.unknown:
        assert point.slope is not None
        curve = compiled(trace, [*point.net, *point.slope.ravel().tolist()])
        start = np.concatenate(
            [template.space.flatten(as_floats(state[name]), template.by(name))[:, 0] for name in template.free]
        )
    return replace(
        out,
        entries=tuple(entries),
        main=main,
        direct=direct,
        screens=tuple(screens),
        details=details,
        checks=tuple(checks),
        growth=compiled(trace, rates) if growth else None,
        slopes=tuple(slopes),
        curve=curve,
        start=tuple(start.tolist()),
    )


def _left_over(trace: Trace, V: Array) -> list[Traced]:
    """Return the share of each type that a step leaves where it is: the diagonal of T = I - V, with room for rounding."""
    most = trace.constant(MORE_THAN_ALL)
    return [most - V[k, k] for k in range(len(V))]


def _open(matrix: Array) -> tuple[list[tuple[int, int, float | None]], list[Traced]]:
    """Return the entries that are not 0 by structure, with their values where these are constant, and the others."""
    rows: list[list[Traced]] = matrix.tolist()
    found = [(i, j, number) for i, row in enumerate(rows) for j, number in enumerate(row) if number.value != 0]
    return [(i, j, number.value) for i, j, number in found], [number for _, _, number in found if number.value is None]


def _moved(template: TracedTemplate) -> set[str]:
    """Return the parameters and definitions that a draw changes."""
    open_ = set(template.columns)
    while True:
        more = {
            name
            for name, p in template.scenario.parameters.items()
            if name not in open_ and any(names(v.tree) & open_ for v in p.values)
        }
        more |= {n for n, tree in template.definitions.items() if n not in open_ and names(tree) & open_}
        if not more:
            return open_
        open_ |= more


def _as_drawn(number: Traced) -> bool:
    """Return whether a number is an input, converted or not: it was looked at when it came in."""
    name, a, b = number.trace.operations[number.place]
    if name == "multiply":
        parts = (number.trace.operations[a][0], number.trace.operations[b][0])
        return number.nonnegative and sorted(parts) == ["constant", "input"]
    return name == "input"


def _root(trace: Trace, K: Array) -> Traced | None:
    """Return the Perron root of K as a formula, None where a class has none of the simple ones.

    One type: its entry. Two types: (a + d)/2 + sqrt(((a - d)/2)^2 + b c). Several classes: the largest of theirs.
    """
    out = trace.constant(0.0)
    there = nonzero(K)
    half = trace.constant(0.5)
    for members in classes(there):
        if len(members) == 1:
            found = K[members[0], members[0]]
        elif len(members) == 2:
            (a, b), (c, d) = K[np.ix_(members, members)]
            gap = half * (a - d)
            found = half * (a + d) + trace.call("sqrt", (gap * gap + b * c,))
        else:
            return None
        out = found if out.value == 0 else trace.call("max", (out, found))
    return out


def _screens(trace: Trace, checks: list[Check], numbers: list[Traced]) -> dict[str, Traced]:
    """Return few numbers that stand for all that is checked, by what they must be; no number where one of them is none."""
    out: dict[str, Traced] = {}

    def join(kind: str, number: Traced, function: str = "min") -> None:
        out[kind] = trace.call(function, (out[kind], number)) if kind in out else number

    for check in checks:
        number = numbers[check.output]
        if check.kind in ("above", "redo"):
            join("above", number)
        elif check.kind == "rest":
            ratio = number / numbers[check.output + 1]
            join("largest ratio", ratio, "max")
            join("smallest ratio", ratio)
        else:
            if not (number.nonnegative or check.kind == "finite"):
                join("not below", number)
            if check.kind in ("value", "finite"):
                join("finite", number, "max")
    return out


def _checks(
    point: TracedPoint, F: Array, found: Stays, K: Array, left: list[Traced]
) -> tuple[list[Check], list[Traced]]:
    """Return the checks, and the numbers that they look at."""
    template, trace = point.template, point.trace
    out: list[Check] = []
    numbers: list[Traced] = []
    seen: set[tuple[str, int]] = set()

    def add(kind: str, number: Traced, why: str, second: Traced | None = None) -> None:
        if (kind, number.place) in seen and second is None:
            return
        if (
            number.value is not None
            and second is None
            and (number.value > 0 or (kind != "above" and number.value == 0))
        ):
            return  # it holds at every draw
        seen.add((kind, number.place))
        out.append(Check(kind, len(numbers), why))
        numbers.append(number)
        if second is not None:
            numbers.append(second)

    for name, parameter in template.scenario.parameters.items():
        if name.startswith("#") or parameter.any_sign:
            continue
        values = template.space.flatten(template.traced[name], parameter.by)[:, 0]
        for item, value in zip(template.scenario.items(name, parameter.by), values.tolist(), strict=True):
            if value.value is None and not _as_drawn(value):
                add("value", value, item)
    for label, a, b in point.balance:
        if a.value is None or b.value is None:
            add("rest", a, label, b)
    for name in template.given:
        for value in point.state[name].ravel().tolist():
            if value.value is None and not value.nonnegative:
                add("value", value, f"{name} in the infection-free state")
    for value in point.solved:
        if value.value is None and not value.nonnegative:
            add("not below", value, NO_STATE)
    for guard in trace.guards:
        if guard.why:
            add("above" if guard.strict else "not below", guard.number, guard.why)
    for pivot, parts in (*point.doubtful, *found.doubtful):
        # Signs are decided by what follows; here only digits that cancelled.
        gap = trace.subtract(trace.multiply(pivot, pivot), trace.multiply(parts * DOUBTFUL, parts * DOUBTFUL))
        add("redo", gap, "")
    for entry in F.ravel().tolist():
        if not entry.nonnegative:
            add("not below", entry, NEGATIVE_F)
    for rate in found.rates:
        if not rate.nonnegative:
            add("not below", rate, POSITIVE_V)
    for share in left:
        add("not below", share, OVERDRAWN)
    for pivot in found.pivots:
        add("above", pivot, SINGULAR)
    inside = np.zeros(K.shape, dtype=bool)
    for members in classes(nonzero(K)):
        inside[np.ix_(members, members)] = True
    for entry in K[~inside].tolist():  # the others show in the root, where they have no value
        add("finite", entry, "")
    return out, numbers
