"""What the second opinions return: units, other splits, a formula compared, two models compared."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from typing import Any

__all__ = [
    "Contribution",
    "Difference",
    "EntryChange",
    "Exit",
    "FormulaMatch",
    "FormulaOpinion",
    "ModelChange",
    "ParameterUnit",
    "Split",
    "Splits",
    "Stay",
    "UnitNote",
    "Units",
]

#: Type numbers that are listed beside each other.
MOST_HOSTS = 4


@dataclass(frozen=True, slots=True)
class UnitNote:
    """One finding about the units: what does not fit, where. `kind` is stable (see `ngm.scenario.unit_check`)."""

    kind: str
    where: str
    message: str


@dataclass(frozen=True, slots=True)
class ParameterUnit:
    """A parameter as typed and as it is computed with.

    `typed`, `in_force`: one number a group, or the expression that a parameter follows; `converted`: whether they differ;
    `implied`: the unit that the flows need where none is given; `reading`: a rate as a mean time, in words, or None.
    """

    parameter: str
    unit: str | None
    typed: tuple[str, ...]
    in_force: tuple[str, ...]
    converted: bool
    implied: str | None
    reading: str | None


@dataclass(frozen=True, slots=True)
class Exit:
    """One way out of a stage: the flow (None: a move between groups), where it leads (None: out), and how likely it is."""

    flow: int | None
    label: str
    to: str | None
    rate: float
    probability: float


@dataclass(frozen=True, slots=True)
class Stay:
    """How long a member stays in a stage, on the mean, and by which way it leaves. None where nothing leaves."""

    compartment: str
    infected: bool
    mean: float | None
    exits: tuple[Exit, ...]

    def words(self, time_unit: str) -> str:
        """Return the stay as a line: mean stay in I 5 day; 98 % Recovery (R), 2 % Death (out)."""
        if self.mean is None:
            return f"{self.compartment}: nothing leaves"
        ways = ", ".join(f"{100 * way.probability:.3g} % {way.label} ({way.to or 'out'})" for way in self.exits)
        return f"mean stay in {self.compartment} {self.mean:.6g} {time_unit}; {ways}"


@dataclass(frozen=True, slots=True)
class Units:
    """The result of `ngm.units`."""

    title: str
    time_unit: str
    strict: bool
    findings: tuple[UnitNote, ...]
    parameters: tuple[ParameterUnit, ...]
    compartments: Mapping[str, str]
    expressions: Mapping[str, str | None]
    stays: tuple[Stay, ...]
    warnings: tuple[str, ...] = ()
    #: what there is to say where there is no finding
    fits: str = "The units fit: every flow is in its compartment's unit per time, and no sum mixes units."

    def to_json(self) -> dict[str, Any]:
        """Return the object that `units --json` prints."""
        return _record(asdict(self))


@dataclass(frozen=True, slots=True)
class Split:
    """One way to divide the same flows into new infections and the rest.

    `kinds`: flow number -> "transmission" or "transition", for the flows that are a choice. `refused`: why it is no
    valid split, or None; then the numbers are None. `hosts`: type -> its type-reproduction number, None where there is
    none, for the types at infection of the split as typed.
    """

    kinds: Mapping[str, str]
    as_typed: bool
    refused: str | None
    types_at_infection: tuple[str, ...] = ()
    F: tuple[tuple[float, ...], ...] | None = None
    V: tuple[tuple[float, ...], ...] | None = None
    K: tuple[tuple[float, ...], ...] | None = None
    R0: float | None = None
    growth_rate: float | None = None
    hosts: Mapping[str, float | None] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Splits:
    """The result of `ngm.splits`.

    `choices`: flow number -> why its kind is a choice. `agree`, `differ`: the figures that are the same in all valid
    splits, and those that must not be compared between papers that split differently.
    """

    title: str
    time_unit: str
    types: tuple[str, ...]
    choices: Mapping[str, str]
    splits: tuple[Split, ...]
    agree: tuple[str, ...]
    differ: tuple[str, ...]
    warnings: tuple[str, ...] = ()
    #: what there is to say where there is no choice
    none: str = "No flow's kind is a choice: nothing enters an infected compartment but by infection of the uninfected."

    @property
    def shown_hosts(self) -> tuple[str, ...]:
        """The hosts whose type numbers fit beside each other: all together and a few."""
        hosts = list(self.splits[0].hosts)
        return tuple(hosts) if len(hosts) <= MOST_HOSTS else tuple(hosts[:3])

    def words(self, names: tuple[str, ...]) -> str:
        """Return `agree` or `differ` as words; many type numbers are counted and not listed."""
        numbers = [name for name in names if name.startswith("T(")]
        if len(numbers) <= MOST_HOSTS:
            return ", ".join(names)
        return ", ".join([*(n for n in names if n not in numbers), f"{len(numbers)} type numbers of hosts"])

    def to_json(self) -> dict[str, Any]:
        """Return the object that `splits --json` prints."""
        return _record(asdict(self))


@dataclass(frozen=True, slots=True)
class FormulaMatch:
    """One number of the model that the formula was compared with, and in how many of the points they agree."""

    name: str
    agrees: int
    points: int


@dataclass(frozen=True, slots=True)
class FormulaOpinion:
    """The result of `ngm.formula`.

    `verdict`: "equal", "square", "root", "type number", "target number", "other split", "threshold only",
    "different" or "undecided" (too few points with an R0). `exact`: whether the agreement was shown without rounding;
    `proof`: how, as "symbols" (the difference of the two is 0 as an expression) or "fractions" (at every point), else None.
    `counterexample`: values in force of the parameters at a point where the
    two differ, with both numbers; None where none was found. `responses`: parameters to which they respond
    differently there: name -> (elasticity of R0, elasticity of the formula).
    """

    title: str
    formula: str
    verdict: str
    message: str
    exact: bool
    proof: str | None
    points: int
    largest_difference: float | None
    counterexample: Mapping[str, float] | None
    R0_there: float | None
    formula_there: float | None
    responses: Mapping[str, tuple[float, float]]
    compared: tuple[FormulaMatch, ...]
    warnings: tuple[str, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """Return the object that `formula --json` prints."""
        return _record(asdict(self))


@dataclass(frozen=True, slots=True)
class ModelChange:
    """One thing that differs: `how` is "added", "removed", "renamed" or "changed"."""

    what: str
    how: str
    name: str
    before: str | None
    after: str | None
    note: str | None = None

    def words(self) -> str:
        """Return the change as a line: parameter gamma changed: 1.4 1/week -> 1.4 1/day."""
        if self.how == "renamed":
            return f"{self.before} is renamed {self.after}"
        text = f"{self.name} {self.how}" if self.what == "flow" else f"{self.what} {self.name} {self.how}"
        if self.before is not None or self.after is not None:
            text += f": {self.before or '-'} -> {self.after or '-'}"
        return text + (f" ({self.note})" if self.note else "")


@dataclass(frozen=True, slots=True)
class EntryChange:
    """An entry of F, V or K that moved, with what moved it."""

    matrix: str
    row: str
    column: str
    before: float | None
    after: float | None
    because: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Contribution:
    """How much of the change in R0 one change made: in the order listed, and averaged over all orders (None: too many)."""

    change: str
    in_order: float | None
    averaged: float | None


@dataclass(frozen=True, slots=True)
class Difference:
    """The result of `ngm.difference`."""

    first: str
    second: str
    R0: tuple[float | None, float | None]
    growth_rate: tuple[float | None, float | None]
    changes: tuple[ModelChange, ...]
    entries: tuple[EntryChange, ...]
    contributions: tuple[Contribution, ...]
    warnings: tuple[str, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """Return the object that `difference --json` prints."""
        return _record(asdict(self))


def _record(value: dict[str, Any]) -> dict[str, Any]:
    """Return a record as JSON knows it."""
    return {key: _plain(item) for key, item in value.items()}


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return _record(value)
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return value
