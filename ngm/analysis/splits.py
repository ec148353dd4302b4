"""The same flows under every defensible division into new infections and the rest: what agrees, and what does not."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from itertools import product

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.point import MOST_WRITTEN, Point
from ngm.analysis.stated_entries import is_stated
from ngm.analysis.steady import refuse_season
from ngm.derivation.template import flow_name
from ngm.engine.balls import nearest, precision
from ngm.engine.control import type_reproduction_number
from ngm.errors import DerivationError
from ngm.results_opinion import Split, Splits
from ngm.scenario.model import Kind, Scenario

__all__ = ["choices", "roots", "splits", "with_kinds"]

#: Flows that may be a choice at once: 16 combinations.
MOST_CHOICES = 4
#: Numbers that differ by less than this share are one number.
SAME = 1e-9

NO_FLOWS = "The matrix stands in the file: there are no flows that could be divided otherwise."

KINDS: tuple[Kind, ...] = ("transition", "transmission")


def with_kinds(scenario: Scenario, kinds: Mapping[int, Kind]) -> Scenario:
    """Return the scenario with other kinds for some flows, by their number from 1."""
    flows = tuple(replace(flow, kind=kinds.get(k, flow.kind)) for k, flow in enumerate(scenario.flows, 1))
    return replace(scenario, flows=flows)


def choices(scenario: Scenario) -> dict[int, str]:
    """Return the flows whose kind is a choice, with the reason, the likeliest first.

    They arrive in an infected compartment and come from outside (shedding, vertical transmission) or from another
    infected one: where new infections arrive too (conversion of strains, failed treatment), back to an earlier stage
    (relapse), or, last, a step forward in the course of one infection, which some papers count as a new infection all
    the same.
    """
    if is_stated(scenario):
        return {}
    infected = {name for name, compartment in scenario.compartments.items() if compartment.infected}
    entered = {
        flow.target
        for flow in scenario.flows
        if flow.kind == "transmission" and (flow.source is None or flow.source not in infected)
    }
    steps: list[tuple[str | None, str | None]] = [
        (f.source, f.target) for f in scenario.flows if f.source in infected and f.target in infected
    ]
    ranked: tuple[dict[int, str], ...] = ({}, {}, {}, {})
    for number, flow in enumerate(scenario.flows, 1):
        if flow.target not in infected or flow.source == flow.target:
            continue
        if flow.source is None:
            ranked[0][number] = f"enters {flow.target} from outside: birth or shedding, or new infection"
            continue
        if flow.source not in infected:
            continue
        way = f"infected of {flow.source}"
        if flow.kind == "transmission":
            ranked[1][number] = f"moves {way} to {flow.target}, and is counted as new infection"
        elif flow.target in entered:
            ranked[1][number] = f"moves {way} to {flow.target}, where new infections arrive too"
        elif _leads(steps, flow.target, flow.source) and _against(scenario, number, entered, steps):
            # Of a loop that is entered at its head every arrow leads back; only the one against the course is a relapse.
            ranked[2][number] = f"takes {way} back to {flow.target}"
        else:
            ranked[3][number] = (
                f"moves {way} on to {flow.target}: a step in the course of one infection, rarely counted as a new one"
            )
    return {number: why for rank in ranked for number, why in rank.items()}


def _leads(steps: list[tuple[str | None, str | None]], start: str | None, end: str | None) -> bool:
    seen, todo = {start}, [start]
    while todo:
        here = todo.pop()
        if here == end:
            return True
        for source, target in steps:
            if source == here and target not in seen:
                seen.add(target)
                todo.append(target)
    return False


def _against(
    scenario: Scenario, number: int, entered: set[str | None], steps: list[tuple[str | None, str | None]]
) -> bool:
    """Return whether a flow's target lies nearer to where infection enters than its source."""
    distance: dict[str | None, int] = dict.fromkeys(entered, 0)
    todo = list(entered)
    for here in todo:
        for source, target in steps:
            if source == here and target not in distance:
                distance[target] = distance[here] + 1
                todo.append(target)
    flow = scenario.flows[number - 1]
    return distance.get(flow.target, 0) < distance.get(flow.source, 0)


def splits(scenario: Scenario) -> Splits:
    """Return F, V, K, R0, the hosts' type numbers and the growth rate under every division of the flows that is a choice.

    At most 16 combinations, the one of the file first; of more than four choices the likeliest four are varied, and a
    warning names those that keep the kind of the file. A combination that is no valid split (V singular or no M-matrix, F
    with a negative entry, no new infections at all) is kept with the condition that fails. The growth rate and whether
    R0 exceeds 1 are properties of the flows and agree in all valid splits; R0 itself does not.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`, for the split of the file.

    References
    ----------
    Cushing & Diekmann (2016) J. Theor. Biol. 404:295-302
    """
    refuse_season(scenario, "R0 under other divisions")
    typed = decided_numbers(scenario)
    found = choices(scenario)
    warnings = list(dict.fromkeys([*scenario.warnings, *typed.point.infection_free.warnings]))
    if len(typed.template.types) > MOST_WRITTEN:
        warnings.append("Too many types: the splits are not compared.")
        found = {}
    if len(found) > MOST_CHOICES:
        left = ", ".join(flow_name(scenario, number) for number in list(found)[MOST_CHOICES:])
        warnings.append(
            f"{len(found)} flows are a choice: the likeliest {MOST_CHOICES} are varied, in {2**MOST_CHOICES} combinations; "
            f"these keep the kind of the file: {left}."
        )
        found = dict(list(found.items())[:MOST_CHOICES])
    hosts = _hosts(scenario, typed)
    numbers = list(found)
    own = tuple(scenario.flows[number - 1].kind for number in numbers)
    combinations = [own, *(kinds for kinds in product(KINDS, repeat=len(numbers)) if kinds != own)]
    rows = []
    for kinds in combinations:
        chosen = dict(zip(numbers, kinds, strict=True))
        rows.append(_split(scenario, chosen, hosts, typed, typed=kinds == own))
    agree, differ = _agreement([row for row in rows if row.refused is None])
    return Splits(
        scenario.title,
        scenario.time_unit,
        typed.template.types,
        {str(number): why for number, why in found.items()},
        tuple(rows),
        agree,
        differ,
        tuple(warnings),
        *((NO_FLOWS,) if is_stated(scenario) else ()),
    )


def _hosts(scenario: Scenario, typed: Numbers) -> tuple[str, ...]:
    """Return the types that are entered by new infection of uninfected members."""
    template = typed.template
    names = {
        flow.target
        for flow in scenario.flows
        if flow.kind == "transmission" and flow.source is not None and not scenario.compartments[flow.source].infected
    }
    at = {template.types[int(k)] for k in typed.at}
    items = (item for name in template.infected if name in names for item in scenario.items(name, template.by(name)))
    return tuple(item for item in items if item in at)


def _split(
    scenario: Scenario, kinds: dict[int, Kind], hosts: tuple[str, ...], as_typed: Numbers, *, typed: bool
) -> Split:
    shown = {str(number): kind for number, kind in kinds.items()}
    changed = with_kinds(scenario, kinds)
    if not any(flow.kind == "transmission" for flow in changed.flows):
        return Split(shown, typed, "no flow makes new infections: F is 0.")
    try:
        found = as_typed if typed else _numbers(changed, as_typed)
    except DerivationError as error:
        return Split(shown, typed, str(error))
    if found.no_R0 is not None:
        # A sign that is wrong in F, or off the diagonal of V, comes from a rate that A1 and A2 exclude.
        signs = found.broken is None or "off-diagonal" in found.no_R0
        return Split(shown, typed, f"{'A1 or A2' if signs else 'A5'} fails: {found.no_R0}")
    types = [found.template.types[int(k)] for k in found.at]
    with precision(found.bits):
        root = 0.0 if found.spectrum is None else nearest(found.spectrum.root)
        members = {}
        sets = [(host,) for host in hosts] + ([hosts] if 1 < len(hosts) <= 12 else [])
        for members_of in sets[:40]:
            mask = np.array([item in members_of for item in types], dtype=bool)
            members[", ".join(members_of)] = type_reproduction_number(found.K, mask).T if mask.any() else None
        growth = found.growth
    small = found.point.exact
    return Split(
        shown,
        typed,
        None,
        tuple(types),
        _rows(found.F) if small else None,
        _rows(found.V) if small else None,
        _rows(found.K) if small else None,
        root,
        growth,
        members,
    )


def roots(scenario: Scenario) -> list[tuple[dict[int, Kind], float]]:
    """Return R0 of every other division in plain doubles, as far as it has one: to be looked at before it is computed well.

    What a flow moves when its kind is changed adds up: each is changed once, and the combinations are sums.
    """
    typed = decided_numbers(scenario)
    found = list(choices(scenario))[:MOST_CHOICES]
    if typed.F is None or len(typed.template.types) > MOST_WRITTEN:
        return []
    F, V = as_floats(typed.F), as_floats(typed.V)
    kinds: dict[int, Kind] = {}
    moves = []
    for number in found:
        kinds[number] = "transition" if scenario.flows[number - 1].kind == "transmission" else "transmission"
        with precision(typed.bits):
            point = Point(with_kinds(scenario, {number: kinds[number]}))
            point.infection_free = typed.point.infection_free
            one, two = point.F_and_V
        moves.append((as_floats(one) - F, as_floats(two) - V))
    out = []
    for chosen in product((False, True), repeat=len(found)):
        made = [k for k, yes in enumerate(chosen) if yes]
        if not made:
            continue
        A, B = F + sum(moves[k][0] for k in made), V + sum(moves[k][1] for k in made)
        try:
            stays = np.linalg.inv(B)
        except np.linalg.LinAlgError:
            continue
        if stays.min() >= -SAME * np.abs(stays).max():
            out.append(({found[k]: kinds[found[k]] for k in made}, float(np.abs(np.linalg.eigvals(A @ stays)).max())))
    return out


def _numbers(changed: Scenario, as_typed: Numbers) -> Numbers:
    """Return the numbers under other kinds; the state without infection does not depend on them."""
    with precision(as_typed.bits):
        found = Numbers(changed, state=as_typed.point.infection_free)
    found.bits = as_typed.bits
    return found if found.decided else decided_numbers(changed)


def _rows(matrix: object) -> tuple[tuple[float, ...], ...]:
    return tuple(tuple(row) for row in as_floats(matrix).tolist())  # type: ignore[arg-type]


def _agreement(rows: list[Split]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return the figures that are the same in all rows, and the others."""
    if len(rows) < 2:
        return (), ()
    agree: list[str] = []
    differ: list[str] = []
    figures: list[tuple[str, list[float | None]]] = [
        ("growth rate", [row.growth_rate for row in rows]),
        ("R0", [row.R0 for row in rows]),
        *((f"T({host})", [row.hosts.get(host) for row in rows]) for host in rows[0].hosts),
    ]
    for name, values in figures:
        known = [value for value in values if value is not None]
        scale = max((abs(value) for value in known), default=0.0)
        same = max(known, default=0.0) - min(known, default=0.0) <= SAME * max(scale, 1e-300)
        (agree if same and len(known) in (0, len(values)) else differ).append(name)
    sides = {(row.R0 or 0.0) > 1 for row in rows}
    if len(sides) == 1:
        agree.insert(1, "whether R0 exceeds 1")
    return tuple(agree), tuple(differ)
