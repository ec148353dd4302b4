"""Whether the units of a scenario fit together: every expression's unit worked out, and what does not fit, in words.

A unit is a vector of powers, and every flow, sum and value that follows others is one linear equation between such
vectors. What carries no unit in the file (a parameter without one, a contact matrix) is an unknown of these equations: it
is solved for, so that the finding says which unit the flows need. A general library (pint 0.25) was tried and
left out: the words here are free ones (midge, germ, bite), of which it knows none and takes some for physics (S is siemens),
it refuses person-day, solves for no unknown, and takes most of a second to start.

Conventions. A compartment counts individuals unless its `unit` says otherwise, and a flow is in its compartment's unit
per time. Units of time of known length are one unit here, since numbers in another one are converted. ``person``,
``people``, ``human`` and ``host`` are individuals; events that are counted (bite, contact, infection, case) are pure
numbers; any other word stands for itself where a compartment's unit uses it or where it is a measure (litre, metre,
germ), and for individuals otherwise (``midge``, ``goat``). A plural is its singular.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, fold, names
from ngm.expression.write import write
from ngm.scenario.graph import order
from ngm.scenario.model import Flow, Scenario
from ngm.scenario.unit_powers import (
    EVENTS,
    HOSTS,
    INDIVIDUAL,
    MEASURES,
    UNKNOWN,
    Powers,
    UnitCheck,
    UnitFinding,
    is_known,
    singular,
    times,
    words_of,
)
from ngm.scenario.unit_stated import check_entries
from ngm.scenario.units import SECONDS, read_unit

__all__ = ["UnitCheck", "UnitFinding", "check_units"]


@dataclass
class _Value:
    """An expression's unit; `powers` None: fits anything (a zero, or what was already told to be wrong)."""

    powers: Powers | None
    number: Fraction | None = None


@dataclass
class _Equation:
    """`difference` must be without unit; `told` words the finding where it is not."""

    difference: Powers
    told: Callable[[Powers], UnitFinding]


@dataclass
class Checker:
    scenario: Scenario
    words: set[str] = field(default_factory=set)
    equations: list[_Equation] = field(default_factory=list)
    findings: list[UnitFinding] = field(default_factory=list)
    pivots: dict[str, Powers] = field(default_factory=dict)
    defined: dict[str, _Value] = field(default_factory=dict)

    # --- words --------------------------------------------------------------------------------------------------------

    def start(self) -> None:
        """Note which words the compartments' own units use."""
        for compartment in self.scenario.compartments.values():
            if compartment.unit is not None:
                powers = read_unit(compartment.unit, self.scenario.time_unit).unit.powers or {}
                self.words |= {singular(word) for word in powers}

    def canonical(self, powers: Mapping[str, Fraction]) -> Powers:
        """Return powers with each word replaced by what it counts."""
        out: Powers = {}
        for word, power in powers.items():
            meaning = self.meaning(word)
            if meaning is not None:
                out = times(out, {meaning: Fraction(1)}, power)
        return out

    def meaning(self, word: str) -> str | None:
        """Return the unit that a word stands for; None for a pure number."""
        if word in SECONDS or word == self.scenario.time_unit:
            # A step is counted, not measured: a share and a share per step are the same number.
            return None if self.scenario.discrete else self.scenario.time_unit
        single = singular(word)
        stated = self.scenario.given is not None or self.scenario.projection is not None
        # Entries of a matrix are members per member: what counts members is a pure number there, eggs included.
        if stated and (single.lower() not in MEASURES or single.lower() == "egg"):
            return None
        if single.lower() in HOSTS:
            return INDIVIDUAL
        if single in self.words or single.lower() in MEASURES:
            return {"liter": "litre", "l": "litre", "meter": "m", "metre": "m"}.get(single.lower(), single)
        return None if single.lower() in EVENTS else INDIVIDUAL

    def compartment(self, name: str) -> Powers:
        """Return the unit of a compartment; individuals where it has none, or a remark."""
        text = self.scenario.compartments[name].unit
        powers = None if text is None else read_unit(text, self.scenario.time_unit).unit.powers
        return {INDIVIDUAL: Fraction(1)} if powers is None else self.canonical(powers)

    def parameter(self, name: str) -> Powers:
        """Return the unit of a parameter, or an unknown."""
        unit = self.scenario.parameters[name].unit
        if unit is None or unit.powers is None:
            return {UNKNOWN + name: Fraction(1)}
        return self.canonical(unit.powers)

    # --- equations ----------------------------------------------------------------------------------------------------

    def require(self, difference: Powers, told: Callable[[Powers], UnitFinding]) -> bool:
        """Note that a unit must vanish; False where it is known not to."""
        if is_known(difference):
            if difference:
                self.findings.append(told(difference))
            return not difference
        self.equations.append(_Equation(difference, told))
        return True

    def solve(self) -> None:
        """Eliminate the unknowns, one equation after the other."""
        for equation in self.equations:
            rest = self.reduced(equation.difference)
            unknowns = [word for word in rest if word.startswith(UNKNOWN)]
            if not unknowns:
                if rest:
                    self.findings.append(equation.told(rest))
                continue
            # A matrix is solved for before a parameter: what stays open is then the parameter, as a pure number.
            unknown = min(unknowns, key=lambda word: word.removeprefix(UNKNOWN) in self.scenario.parameters)
            power = rest.pop(unknown)
            self.pivots[unknown] = {word: -own / power for word, own in rest.items()}
            for word, value in list(self.pivots.items()):
                if unknown in value:
                    share = value[unknown]
                    without = {w: p for w, p in value.items() if w != unknown}
                    self.pivots[word] = times(without, self.pivots[unknown], share)

    def reduced(self, powers: Powers) -> Powers:
        """Return powers with every solved unknown replaced."""
        out: Powers = {}
        for word, power in powers.items():
            out = times(out, self.pivots.get(word, {word: Fraction(1)}), power)
        return out

    # --- expressions --------------------------------------------------------------------------------------------------

    def value(self, tree: Node, where: str, key: tuple[str | int, ...]) -> _Value:
        """Return the unit of an expression, and note what must hold inside it."""
        return fold(tree, lambda node, parts: self.combined(node, parts, where, key))

    def combined(self, node: Node, parts: list[_Value], where: str, key: tuple[str | int, ...]) -> _Value:
        """Return the unit of a node from those of its parts."""
        match node:
            case Number(value=value):
                return _Value({} if value else None, value)
            case Name(name=name):
                return self.name(name)
            case Negate():
                return _Value(parts[0].powers, None if parts[0].number is None else -parts[0].number)
            case Add(terms=terms):
                return self.alike([term for _, term in terms], parts, "adds", where, key)
            case Multiply(factors=factors):
                return _product([side for side, _ in factors], parts)
            case Power(exponent=exponent):
                return self.power(parts, exponent, where, key)
            case Call(function=function, arguments=arguments):
                if function == "sqrt":
                    powers = parts[0].powers
                    return _Value(None if powers is None else times({}, powers, Fraction(1, 2)))
                if function in ("max", "min"):
                    return self.alike(list(arguments), parts, f"compares ({function})", where, key)
                self.pure(parts[0], f"{function}({write(arguments[0])})", where, key)
                return _Value({})
            case Total():
                return _Value(parts[0].powers)
            case Apply(matrix=matrix):
                powers = parts[0].powers
                return _Value(None if powers is None else times(powers, {UNKNOWN + matrix: Fraction(1)}))

    def name(self, name: str) -> _Value:
        """Return the unit of a name."""
        if name in self.scenario.compartments:
            return _Value(self.compartment(name))
        if name in self.scenario.parameters:
            return _Value(self.parameter(name))
        return self.defined.get(name, _Value(None))

    def alike(
        self, nodes: list[Node], parts: list[_Value], verb: str, where: str, key: tuple[str | int, ...]
    ) -> _Value:
        """Require that all parts have one unit, and return it."""
        known = [(node, part.powers) for node, part in zip(nodes, parts, strict=True) if part.powers is not None]
        if not known:
            return _Value(None)
        first, unit = min(known, key=lambda item: not is_known(item[1]))
        good = True
        for node, powers in known:
            if node is first:
                continue

            def told(rest: Powers, node: Node = node) -> UnitFinding:
                one = self.reduced(unit)
                texts = f"{words_of(one)} ({_short(first)}) and {words_of(times(one, rest))} ({_short(node)})"
                return UnitFinding("sum", where, f"{verb} {texts}.", key)

            good = self.require(times(powers, unit, Fraction(-1)), told) and good
        return _Value(unit if good else None)

    def power(self, parts: list[_Value], exponent: Node, where: str, key: tuple[str | int, ...]) -> _Value:
        """Return the unit of a power."""
        base, raised = parts
        if raised.number is not None and base.powers is not None:
            return _Value(times({}, base.powers, raised.number))
        self.pure(raised, f"the exponent {_short(exponent)}", where, key)
        if base.number is None:
            self.pure(base, "a quantity raised to a power that is no number", where, key)
        return _Value({})

    def pure(self, part: _Value, what: str, where: str, key: tuple[str | int, ...]) -> None:
        """Require a pure number."""
        if part.powers:
            self.require(
                part.powers,
                lambda rest: UnitFinding(
                    "argument", where, f"{what} must be a pure number and is in {words_of(rest)}.", key
                ),
            )


def _short(node: Node) -> str:
    text = write(node)
    return text if len(text) <= 40 else text[:39] + "…"


def _product(sides: list[int], parts: list[_Value]) -> _Value:
    out: Powers = {}
    number: Fraction | None = Fraction(1)
    for side, part in zip(sides, parts, strict=True):
        if part.powers is None:
            return _Value(None)
        out = times(out, part.powers, Fraction(side))
        if number is not None:
            small = part.number is not None and part.number != 0
            number = number * part.number**side if small and part.number is not None else None
    return _Value(out, number)


def check_units(scenario: Scenario) -> UnitCheck:
    """Return what the units of a scenario say, expression by expression.

    Parameters
    ----------
    scenario : Scenario

    Returns
    -------
    UnitCheck
        No finding where every unit fits and every parameter that decides has one.
    """
    checker = Checker(scenario)
    checker.start()
    for name in _in_order(scenario):
        definition = scenario.definitions[name]
        checker.defined[name] = checker.value(definition.expression.tree, f"definitions.{name}", ("definitions", name))
    for name, parameter in scenario.parameters.items():
        if parameter.follows:
            _follows(checker, name)
    _states(checker)
    if scenario.given is not None or scenario.projection is not None:
        rates = []
        check_entries(checker)
    else:
        rates = [_flow(checker, number, flow) for number, flow in enumerate(scenario.flows, 1)]
    checker.solve()
    implied = _missing(checker)
    _rows_of_K(checker)
    expressions: dict[str, str | None] = {}
    for name, value in [*checker.defined.items(), *((f"flow {k}", rate) for k, rate in enumerate(rates, 1))]:
        reduced = None if value.powers is None else checker.reduced(value.powers)
        expressions[name] = None if reduced is None or not is_known(reduced) else words_of(reduced)
    given = any(p.unit is not None and p.unit.powers is not None for p in scenario.parameters.values())
    rank = {"follows": 0, "sum": 1, "argument": 1, "state": 2, "flow": 3, "entry": 3, "matrix": 4, "K": 5, "missing": 6}
    found = sorted(dict.fromkeys(checker.findings), key=lambda finding: rank[finding.kind])
    own_units = any(c.unit is not None for c in scenario.compartments.values())
    return UnitCheck(tuple(found), implied, expressions, given or own_units)


def _in_order(scenario: Scenario) -> Iterator[str]:
    """Yield the definitions, each after those that it uses."""
    needs = {name: sorted(names(item.expression.tree)) for name, item in scenario.definitions.items()}
    return (name for name in order(needs)[0] if name in needs)


def _follows(checker: Checker, name: str) -> None:
    own = checker.parameter(name)
    for expression in dict.fromkeys(checker.scenario.parameters[name].values):
        where, key = f"parameters.{name}, value", ("parameters", name, "value")
        value = checker.value(expression.tree, where, key)
        if value.powers is None or value.number is not None:
            continue

        def told(rest: Powers, where: str = where, key: tuple[str, str, str] = key) -> UnitFinding:
            given = checker.reduced(own)
            return UnitFinding(
                "follows",
                where,
                f"is in {words_of(times(given, rest))}, while its unit says {words_of(given)}.",
                key,
            )

        checker.require(times(value.powers, own, Fraction(-1)), told)


def _states(checker: Checker) -> None:
    for section, state in (
        ("infection_free", checker.scenario.infection_free),
        ("state_now", checker.scenario.state_now),
    ):
        for name, entries in state.items():
            own = checker.compartment(name)
            for expression in dict.fromkeys(entries):
                where, key = f"{section}.{name}", (section, name)
                value = checker.value(expression.tree, where, key)
                if value.powers is None or value.number is not None:
                    continue  # a number typed there is in the compartment's own unit

                def told(
                    rest: Powers, name: str = name, own: Powers = own, where: str = where, key: tuple[str, str] = key
                ) -> UnitFinding:
                    made = words_of(times(own, rest))
                    return UnitFinding("state", where, f"is in {made}, while {name} counts {words_of(own)}.", key)

                checker.require(times(value.powers, own, Fraction(-1)), told)


def _flow(checker: Checker, number: int, flow: Flow) -> _Value:
    where = f'flow {number} "{flow.label}", rate' if flow.label else f"flow {number}, rate"
    key = ("flow", number - 1, "rate")
    value = checker.value(flow.rate.tree, where, key)
    if value.powers is None:
        return value
    time: Powers = {} if checker.scenario.discrete else {checker.scenario.time_unit: Fraction(1)}
    seen: list[Powers] = []
    for end in (flow.target, flow.source):
        if end is None or checker.compartment(end) in seen:
            continue
        own = checker.compartment(end)
        seen.append(own)

        def told(rest: Powers, end: str = end, own: Powers = own) -> UnitFinding:
            wanted = times(own, time, Fraction(-1))
            made = words_of(times(wanted, rest))
            hint = _hint(checker, flow, rest)
            message = f"is in {made}, where a flow of {end} is in {words_of(wanted)}.{hint}"
            return UnitFinding("flow", where, message, key)

        checker.require(times(times(value.powers, time), own, Fraction(-1)), told)
    return value


def _hint(checker: Checker, flow: Flow, rest: Powers) -> str:
    """Return what is the likely slip behind a flow's wrong unit, as a sentence; empty where there is none."""
    scenario = checker.scenario
    used: set[str] = set()
    todo = set(names(flow.rate.tree))
    while todo:
        name = todo.pop()
        used.add(name)
        if name in scenario.definitions:
            todo |= names(scenario.definitions[name].expression.tree) - used
    rates = []
    for name in sorted(used & set(scenario.parameters)):
        powers = checker.parameter(name)
        if is_known(powers) and powers.get(scenario.time_unit) == -1:
            rates.append((name, powers))
    unit = scenario.time_unit
    if set(rest) == {INDIVIDUAL}:
        dense = [name for name, powers in rates if powers.get(INDIVIDUAL, Fraction(0)) < 0]
        plain = [name for name, powers in rates if INDIVIDUAL not in powers]
        if rest[INDIVIDUAL] < 0 and dense:
            return f" {dense[0]} looks density dependent: do not divide by a number of individuals, or give it in 1/{unit}."
        if rest[INDIVIDUAL] > 0 and plain:
            return (
                f" {plain[0]} looks frequency dependent: divide by the number of individuals, or give it in "
                f"1/({unit}*individual)."
            )
        if rest[INDIVIDUAL] == -1 and all(c.unit is None for c in scenario.compartments.values()):
            return ' Where compartments are shares of the population, write unit = "1" on each.'
    if set(rest) == {unit}:
        if not rates and rest[unit] == 1:
            return f" Nothing in it is per {unit}: give a rate a name and its unit."
        return f" A mean time stands where a rate is needed, or a rate where a share is: a time T is the rate 1/T per {unit}."
    return ""


def _missing(checker: Checker) -> dict[str, str]:
    """Tell of each parameter without a unit where one decides, and return what the flows need of each."""
    scenario = checker.scenario
    implied: dict[str, str] = {}
    for unknown, powers in checker.pivots.items():
        name = unknown.removeprefix(UNKNOWN)
        known = {word: power for word, power in powers.items() if not word.startswith(UNKNOWN)}
        free = sorted(word.removeprefix(UNKNOWN) for word in powers if word.startswith(UNKNOWN))
        if name in scenario.matrices:
            if not free and known not in ({}, {scenario.time_unit: Fraction(-1)}):
                text = f"its entries would be in {words_of(known)}; contacts are per {scenario.time_unit}."
                checker.findings.append(UnitFinding("matrix", f"matrices.{name}", text, ("matrices", name)))
            continue
        if not free:
            implied[name] = words_of(known)
        if not known and not free:
            continue
        unit = scenario.parameters[name].unit
        lead = "has no unit" if unit is None else f"has a remark in place of a unit ('{unit.text[:40]}')"
        if free:
            if not known:
                continue
            text = f"{lead}, and {', '.join(free)} neither: between them they must make {words_of(known)}."
        else:
            text = f'{lead}, and the flows need one: write unit = "{words_of(known)}".'
        checker.findings.append(UnitFinding("missing", f"parameters.{name}", text, ("parameters", name)))
    return implied


def _rows_of_K(checker: Checker) -> None:
    """Say that K is not free of units where a flow of new infections is in the wrong unit."""
    rows: dict[str, list[str]] = {}
    for finding in checker.findings:
        if finding.kind == "flow" and isinstance(finding.key[1], int):
            flow = checker.scenario.flows[finding.key[1]]
            infected = flow.target is not None and checker.scenario.compartments[flow.target].infected
            if flow.kind == "transmission" and infected and flow.target is not None:
                rows.setdefault(flow.target, []).append(str(finding.key[1] + 1))
    for row, flows in rows.items():
        named = ", ".join(dict.fromkeys(flows))
        text = f"is not free of units: its row {row} is made with flow {named}, so R0 is no pure number."
        checker.findings.append(UnitFinding("K", "K", text, ()))
