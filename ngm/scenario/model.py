"""A scenario as checked data: what one file says, with every name resolved and nothing computed.

No sympy, no numpy. Numbers are exact: what the file writes in decimals is kept as decimals (`Decimal` in matrices,
`Number` nodes in expressions), so that a bound on R0 can speak about the file and not about its rounding to binary.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import Decimal
from fractions import Fraction
from typing import Literal

from ngm.expression.tree import Apply, Name, Node, Number, Total, walk

__all__ = [
    "Change",
    "Compartment",
    "Definition",
    "Dimension",
    "Distribution",
    "Expression",
    "Flow",
    "GivenMatrix",
    "Intervention",
    "Matrix",
    "Movement",
    "Parameter",
    "Projection",
    "Scenario",
    "Season",
    "Unit",
]

Kind = Literal["transmission", "transition"]
DistributionName = Literal["uniform", "triangular", "normal", "lognormal", "gamma", "beta"]


@dataclass(frozen=True, slots=True)
class Expression:
    """An expression as typed (`text`) and as read (`tree`)."""

    text: str
    tree: Node

    @property
    def is_number(self) -> bool:
        """True where neither a name, a sum over groups nor a matrix occurs: ``"1/7"`` is a number in every respect."""
        if isinstance(self.tree, Number):
            return True
        return not any(isinstance(node, Name | Total | Apply) for node in walk(self.tree))


@dataclass(frozen=True, slots=True)
class Dimension:
    """One way in which hosts are grouped, with the labels of its groups in order."""

    name: str
    groups: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Compartment:
    """A stage of the course of infection, one copy in each group of the dimensions `by`."""

    name: str
    infected: bool
    label: str | None = None
    by: tuple[str, ...] = ()
    unit: str | None = None


@dataclass(frozen=True, slots=True)
class Unit:
    """What a parameter's number is in.

    Attributes
    ----------
    text : str
        As typed.
    powers : mapping of str to Fraction, or None
        Canonical unit name -> power (``{"day": -1, "person": -1}``); None where the text is a remark and no unit.
    factor : Fraction
        A number in this unit times `factor` is the number in force: 1/7 for ``1/week`` in a scenario in days, 1/100
        for ``%``; 1 where nothing is converted.
    """

    text: str
    powers: Mapping[str, Fraction] | None
    factor: Fraction = Fraction(1)


@dataclass(frozen=True, slots=True)
class Distribution:
    """A distribution by its moments or bounds, in the parameter's own unit: `name` and the keys of the contract."""

    name: DistributionName
    arguments: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Season:
    """What a parameter's value is multiplied by in the course of a period, in the scenario's time unit.

    Either 1 + `amplitude` cos(2 pi (t - `peak`) / `period`), or, where `values` is not empty, its k-th entry on the k-th of
    as many equal parts of the period.
    """

    period: Fraction
    amplitude: Fraction = Fraction(0)
    peak: Fraction = Fraction(0)
    values: tuple[Fraction, ...] = ()


@dataclass(frozen=True, slots=True)
class Parameter:
    """A parameter as typed.

    Attributes
    ----------
    values : tuple of Expression
        One for each group of `by`, flat, the last dimension of `by` fastest; a single one where `by` is empty, and
        all the same where the file gives a single number for all groups. In the parameter's own unit.
    unit : Unit or None
        `unit.factor` converts a *number*; a parameter that follows others is not converted.
    range : (float, float) or None
    distributions : tuple of Distribution
        Empty, one for all groups (one draw), or one a group (independent).
    any_sign : bool
        True where ``sign = "any"``.
    """

    name: str
    values: tuple[Expression, ...]
    by: tuple[str, ...] = ()
    unit: Unit | None = None
    label: str | None = None
    source: str | None = None
    range: tuple[float, float] | None = None
    distributions: tuple[Distribution, ...] = ()
    any_sign: bool = False
    season: Season | None = None

    @property
    def follows(self) -> bool:
        """True where at least one value is an expression in other parameters: then nothing is converted."""
        return not all(value.is_number for value in self.values)

    @property
    def factor(self) -> Fraction:
        """What a number of this parameter is multiplied by to be in force (1 for a parameter that follows others)."""
        return Fraction(1) if self.unit is None or self.follows else self.unit.factor

    def in_force(self) -> tuple[Node, ...]:
        """Return the values that the computation uses, one for each group: `ngm.scenario.values.converted`."""
        from ngm.scenario.values import converted

        return converted(self)


@dataclass(frozen=True, slots=True)
class Definition:
    """An abbreviation. `by`: the dimensions over which it varies, in the order of the file's dimensions."""

    name: str
    expression: Expression
    by: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Matrix:
    """Contacts or movement between the groups of dimension `by`.

    `blocks` holds one square table, or, with `within`, one for each group of that other dimension, in order. Entry
    [i][j] of contacts: contacts that one member of group i makes with group j, per time unit; of a movement: the rate
    at which a member of group i moves to group j. `reciprocal`: the matrix in force is
    C'[i][j] = (C[i][j] N[i] + C[j][i] N[j]) / (2 N[i]), N = `population` at the infection-free state.
    """

    name: str
    by: str
    blocks: tuple[tuple[tuple[Decimal, ...], ...], ...]
    population: Expression | None = None
    reciprocal: bool = False
    within: str | None = None
    file: str | tuple[str, ...] | None = None
    label: str | None = None
    source: str | None = None


@dataclass(frozen=True, slots=True)
class Flow:
    """One arrow. `rate` is the whole rate, individuals per time unit. None: from outside, or out of the system."""

    source: str | None
    target: str | None
    rate: Expression
    kind: Kind
    label: str | None = None


@dataclass(frozen=True, slots=True)
class Movement:
    """Members of the compartments `of` change group along the dimension of `matrix` and keep their compartment."""

    matrix: str
    of: tuple[str, ...]
    label: str | None = None


@dataclass(frozen=True, slots=True)
class Change:
    """One change of an intervention.

    `what` says which of the contract's forms it is and `name` what it acts on. `action` and `amount`: multiply, set or
    add by this number (own unit of the parameter), or reduce by this share. `groups`: dimension -> groups (empty: all),
    for parameters, susceptibility, infectivity and matrices given `within` another dimension; `rows`, `columns`: groups
    of a matrix (None: all).
    """

    what: Literal["parameter", "matrix", "susceptibility", "infectivity"]
    name: str
    action: Literal["multiply", "set", "add", "reduce"]
    amount: Expression
    groups: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    rows: tuple[str, ...] | None = None
    columns: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True)
class Intervention:
    """A named package of changes, applied in order."""

    name: str
    changes: tuple[Change, ...]
    note: str | None = None
    cost: float | None = None


@dataclass(frozen=True, slots=True)
class GivenMatrix:
    """A next-generation matrix as a paper or a survey gives it, in place of compartments and flows.

    `K`: row by row, [type infected][type that infects]. `sizes`: members of each type, empty where not given.
    """

    types: tuple[str, ...]
    K: tuple[tuple[Expression, ...], ...]
    sizes: tuple[Expression, ...] = ()


@dataclass(frozen=True, slots=True)
class Projection:
    """A population in age or stage classes, projected step by step, in place of compartments and flows.

    `births`[i][j]: new members of stage i by one member of stage j in a step; `transitions`[i][j]: share of stage j that is
    in stage i a step later.
    """

    stages: tuple[str, ...]
    births: tuple[tuple[Expression, ...], ...]
    transitions: tuple[tuple[Expression, ...], ...]


@dataclass(frozen=True, slots=True)
class Scenario:
    """One model, its values and the interventions compared on it: what one scenario file says.

    Mappings keep the order of the file. Built by `ngm.load` and `ngm.loads` only, which check everything first.
    `infection_free`: compartment -> one expression for all groups, or one for each copy (in the order of its `by`).
    `state_now`: the same for the state of today, at rest or not; a compartment left out is as without infection.
    `discrete`: one step is one `time_unit`, and a flow's rate is the number that moves in a step. `given`, `projection`: the
    matrices stand in the file; `compartments` and `flows` are then the arrows that make them (`ngm.scenario.stated`).
    `warnings`: what the reader noticed and did not refuse. `text`: the file.
    """

    title: str
    time_unit: str
    compartments: Mapping[str, Compartment]
    parameters: Mapping[str, Parameter]
    definitions: Mapping[str, Definition]
    flows: tuple[Flow, ...]
    dimensions: Mapping[str, Dimension] = field(default_factory=dict)
    matrices: Mapping[str, Matrix] = field(default_factory=dict)
    movements: tuple[Movement, ...] = ()
    infection_free: Mapping[str, tuple[Expression, ...]] = field(default_factory=dict)
    state_now: Mapping[str, tuple[Expression, ...]] = field(default_factory=dict)
    interventions: tuple[Intervention, ...] = ()
    report: Mapping[str, str | tuple[str, ...]] = field(default_factory=dict)
    summary: str | None = None
    strict_units: bool = False
    discrete: bool = False
    given: GivenMatrix | None = None
    projection: Projection | None = None
    warnings: tuple[str, ...] = ()
    text: str = ""
    folder: str | None = None

    @property
    def digest(self) -> str:
        """The first 16 hexadecimal characters of the SHA-256 of `text`: which content a result belongs to."""
        from hashlib import sha256

        return sha256(self.text.encode()).hexdigest()[:16]

    def with_values(self, **values: object) -> Scenario:
        """Return the scenario with other values for some parameters; see `ngm.scenario.values.with_values`."""
        from ngm.scenario.values import with_values

        return with_values(self, values)

    def copies(self, by: tuple[str, ...]) -> tuple[tuple[str, ...], ...]:
        """Return the groups of each copy of something grouped `by` these dimensions, the last one fastest."""
        out: tuple[tuple[str, ...], ...] = ((),)
        for name in by:
            out = tuple((*head, group) for head in out for group in self.dimensions[name].groups)
        return out

    def items(self, name: str, by: tuple[str, ...]) -> tuple[str, ...]:
        """Return the names that results give to the copies: ``("E[0-4,North]", …)``, or ``("E",)`` ungrouped."""
        if not by:
            # a type that shares its label with a parameter is a compartment under a marked name
            return (name.removesuffix("'"),)
        return tuple(f"{name}[{','.join(groups)}]" for groups in self.copies(by))


def number(value: Fraction) -> Expression:
    """Return a number as an expression, written as a decimal where that is short and exact."""
    text = str(value.numerator) if value.denominator == 1 else repr(float(value))
    if Fraction(text) != value:
        text = f"{value.numerator}/{value.denominator}"
    return Expression(text, Number(value, text))
