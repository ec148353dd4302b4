"""A scenario while it is being read: what could be read so far, and where it stands in the file."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from math import prod
from typing import Any, Literal

from ngm.expression.names import canonical
from ngm.scenario.fields import Findings, Key, closest, listed, short
from ngm.scenario.model import (
    Compartment,
    Definition,
    Dimension,
    Expression,
    Flow,
    Intervention,
    Matrix,
    Movement,
    Parameter,
)

__all__ = ["ARTICLE", "MOST_TYPES", "Draft", "Placed", "Role"]

#: infected types of a model, and copies of anything else that is grouped
MOST_TYPES = 200_000
#: what a name stands for
Role = str
ARTICLE = {
    "dimension": "a dimension",
    "compartment": "a compartment",
    "parameter": "a parameter",
    "matrix": "a matrix",
    "definition": "a definition",
}


@dataclass(frozen=True, slots=True)
class Placed:
    """An expression and where it stands."""

    expression: Expression
    where: str
    key: Key


@dataclass(slots=True)
class Draft:
    """The parts that could be read. `roles` knows every name of the file, whether its entry could be read or not."""

    found: Findings
    roles: dict[str, Role] = field(default_factory=dict)
    #: names that stand for two things: refused once, and nothing is concluded from them
    clashing: set[str] = field(default_factory=set)
    #: name as it stands in the file, for messages and for the keys of problems
    typed: dict[str, str] = field(default_factory=dict)
    title: str = ""
    summary: str | None = None
    time_unit: str = ""
    strict_units: bool = False
    discrete: bool = False
    dimensions: dict[str, Dimension] = field(default_factory=dict)
    compartments: dict[str, Compartment] = field(default_factory=dict)
    parameters: dict[str, Parameter] = field(default_factory=dict)
    definitions: dict[str, Definition] = field(default_factory=dict)
    matrices: dict[str, Matrix] = field(default_factory=dict)
    flows: list[tuple[Flow, Placed]] = field(default_factory=list)
    movements: list[Movement] = field(default_factory=list)
    #: section -> compartment -> its expressions: the state without infection, and the state now
    states: dict[str, dict[str, tuple[Placed, ...]]] = field(
        default_factory=lambda: {"infection_free": {}, "state_now": {}}
    )
    interventions: list[Intervention] = field(default_factory=list)
    report: dict[str, str | tuple[str, ...]] = field(default_factory=dict)
    #: matrices that stand in the file in place of compartments and flows: which form, labels, name -> rows of entries
    form: Literal["next_generation", "projection"] | None = None
    types: tuple[str, ...] = ()
    stated: dict[str, tuple[tuple[Placed, ...], ...]] = field(default_factory=dict)
    #: kinds of flow and states of infection that the file names, readable or not
    kinds: set[str] = field(default_factory=set)
    infected: set[str] = field(default_factory=set)
    #: False where a flow could not be read
    flows_read: bool = True

    def of_role(self, role: Role) -> list[str]:
        """Return the names that stand for this, in the order of the file."""
        return [name for name, own in self.roles.items() if own == role]

    def resolve(self, text: object, role: Role, where: str, key: Key) -> str | None:
        """Return the canonical name of a dimension, compartment, … that a text names; None with the problem noted."""
        if not isinstance(text, str):
            self.found.add(where, f"expected the name of {ARTICLE[role]} in quotes.", key)
            return None
        name = canonical(text)
        if name is not None and self.roles.get(name) == role:
            return name
        if name in self.clashing:
            return None
        other = self.roles.get(name) if name is not None else None
        if other is not None:
            self.found.add(where, f"'{short(text)}' is {ARTICLE[other]}, not {ARTICLE[role]}.{self.choice(role)}", key)
            return None
        hint = closest(name or text, self.of_role(role)) or self.choice(role)
        self.found.add(where, f"'{short(text)}' is not {ARTICLE[role]} of this file.{hint}", key)
        return None

    def resolve_type(self, text: object, where: str, key: Key) -> str | None:
        """Return the label of a type or stage of a matrix that stands in the file; None with the problem noted."""
        what = "type" if self.form == "next_generation" else "stage"
        if not isinstance(text, str):
            self.found.add(where, f"expected the label of a {what} in quotes.", key)
        elif text in self.types:
            return text
        elif self.types:
            hint = closest(text, self.types) or f" The {what}s: {listed(self.types)}."
            self.found.add(where, f"'{short(text)}' is not a {what} of this file.{hint}", key)
        return None

    def choice(self, role: Role) -> str:
        """Return a sentence that lists what could be named."""
        known = self.of_role(role)
        plural = {"matrix": "matrices"}.get(role, role + "s")
        return f" The {plural}: {listed(known)}." if known else f" This file has no {plural}."

    def by(self, raw: object, where: str, key: Key) -> tuple[str, ...] | None:
        """Read ``by = ["age"]``."""
        if isinstance(raw, str):
            self.found.add(where, f'expected a list of dimensions. Write by = ["{short(raw)}"].', key)
            return None
        if not isinstance(raw, list):
            self.found.add(where, 'expected a list of dimensions such as ["age"].', key)
            return None
        names = [self.resolve(item, "dimension", where, key) for item in raw]
        good = [name for name in names if name is not None]
        if len(good) < len(names):
            return None
        for name in good:
            if good.count(name) > 1:
                self.found.add(where, f"'{name}' stands twice. Name each dimension once.", key)
                return None
        return tuple(good) if all(name in self.dimensions for name in good) else None

    def copies(self, by: Iterable[str]) -> int:
        """Return the number of copies of something grouped `by` these dimensions."""
        return prod(len(self.dimensions[name].groups) for name in by)

    def groups_of(self, name: str) -> str:
        """Return ``age (0-4, 5-17)`` for messages."""
        return f"{name} ({listed(self.dimensions[name].groups)})"

    def spread(
        self, raw: object, by: tuple[str, ...], where: str, key: Key, *, loose: bool = False
    ) -> list[Any] | None:
        """Lay nested lists, in the order of `by`, out flat; a single value for all groups is a list of one.

        `loose`: a list without inner lists will do for two dimensions, the last one fastest. None, with the problem
        noted, where a length is wrong.
        """
        if not isinstance(raw, list):
            return [raw]
        if not by:
            self.found.add(where, "is a list, but there are no groups here. Write one value, or add by.", key)
            return None
        if loose and len(raw) == self.copies(by) and not any(isinstance(item, list) for item in raw):
            return list(raw)
        level: list[Any] = [raw]
        for name in by:
            size = len(self.dimensions[name].groups)
            for item in level:
                if not isinstance(item, list):
                    nested = "nested lists, in the order of by" if len(by) > 1 else "a list"
                    self.found.add(
                        where, f"expected {nested}: one value for each group of {self.groups_of(name)}.", key
                    )
                    return None
                if len(item) != size:
                    count = f"{len(item)} value{'' if len(item) == 1 else 's'}"
                    self.found.add(where, f"{count} for the {size} groups of {self.groups_of(name)}.", key)
                    return None
            level = [inner for item in level for inner in item]
        return level
