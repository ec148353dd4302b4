"""Who stands behind the types at infection: groups of hosts, and how many they are without infection."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.analysis.stated_entries import sizes_of

__all__ = ["HostGroup", "host_groups"]

#: the label of hosts that are not grouped
EVERYBODY = "everybody"

#: a kind of hosts, and (dimension, group) in the order of the file's dimensions
_Key = tuple[str, tuple[tuple[str, str], ...]]


@dataclass(frozen=True)
class HostGroup:
    """Hosts of one kind in one group.

    `members`: their types at infection, as rows of K. `size`: how many they are in the infection-free state; None where
    no uninfected compartment is linked to them by flows (a reservoir), or one that is cannot be told by group.
    """

    label: str
    members: tuple[int, ...]
    size: float | None


def host_groups(found: Numbers) -> tuple[HostGroup, ...]:
    """Return the groups of hosts of a scenario, in the order of their first types at infection.

    Compartments that flows link belong to one kind of hosts: susceptible people are not counted among midges. A kind is
    split by the groups of its types at infection. Where there is one kind, a label names the group ("65+", or "everybody"
    without groups); where there are several, it names the types at infection ("E_h", "I1[65+] + I2[65+]"). Of a K as given
    each type is a group, with its size where the file has one.
    """
    scenario, template = found.scenario, found.template
    if scenario.given is not None:
        sizes_given = sizes_of(scenario, found.point.evaluator) or [None] * len(template.types)
        return tuple(HostGroup(label, (k,), sizes_given[k]) for k, label in enumerate(template.types))
    kinds = _kinds(found)
    rows: dict[_Key, list[int]] = {}
    places = [
        (name, groups) for name in template.infected for groups in scenario.copies(scenario.compartments[name].by)
    ]
    first: dict[_Key, str] = {}
    for row, k in enumerate(found.at):
        name, groups = places[int(k)]
        own = dict(zip(scenario.compartments[name].by, groups, strict=True))
        key = (kinds[name], tuple((d, own[d]) for d in scenario.dimensions if d in own))
        rows.setdefault(key, []).append(row)
        first.setdefault(key, ",".join(groups) if groups else "")
    several = len({kind for kind, _ in rows}) > 1
    sizes = _sizes(found, kinds, {(kind, tuple(d for d, _ in groups)) for kind, groups in rows})
    out = []
    for key, members in rows.items():
        label = first[key] or EVERYBODY
        if several:
            label = " + ".join(template.types[int(found.at[k])] for k in members)
        out.append(HostGroup(label, tuple(members), sizes.get(key)))
    return tuple(out)


def _kinds(found: Numbers) -> dict[str, str]:
    """Return for each compartment one that stands for all those that flows link it to."""
    leader = {name: name for name in found.scenario.compartments}

    def top(name: str) -> str:
        while leader[name] != name:
            name = leader[name]
        return name

    for flow in found.scenario.flows:
        if flow.source is not None and flow.target is not None:
            leader[top(flow.source)] = top(flow.target)
    return {name: top(name) for name in leader}


def _sizes(found: Numbers, kinds: dict[str, str], wanted: set[tuple[str, tuple[str, ...]]]) -> dict[_Key, float]:
    """Return the hosts of each kind in each of its groups, for the dimensions wanted, where they can be told."""
    scenario, template = found.scenario, found.template
    out: dict[_Key, float] = {}
    unclear = set()
    for name in template.uninfected:
        by = template.by(name)
        flat = as_floats(template.space.flatten(np.asarray(found.point.state[name]), by))[:, 0]
        for kind, dimensions in wanted:
            if kinds[name] != kind:
                continue
            if not set(dimensions) <= set(by):
                if np.any(flat != 0):
                    unclear.add((kind, dimensions))
                continue
            at = [by.index(d) for d in dimensions]
            for value, copy in zip(flat.tolist(), scenario.copies(by), strict=True):
                key = (kind, tuple((d, copy[k]) for d, k in zip(dimensions, at, strict=True)))
                out[key] = out.get(key, 0.0) + value
    return {key: size for key, size in out.items() if (key[0], tuple(d for d, _ in key[1])) not in unclear}
