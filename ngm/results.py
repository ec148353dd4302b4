"""What the analyses return: labelled, immutable, and the same for every reader.

A page, the command line and the report all show fields of these objects; none of them computes. What does not exist is
`None`, with the reason in the field beside it or in `warnings`. Matrices are in the order of their labels, as tuples of
rows of floats. `to_json` gives the command line's object (and nothing more than that contract names).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Literal

from ngm.results_season import Seasonal

if TYPE_CHECKING:
    import pandas

__all__ = [
    "BlockForm",
    "Class",
    "Condition",
    "ControlResult",
    "Effective",
    "EntrySetNumber",
    "EntryTerm",
    "Projected",
    "Solution",
    "StateNumber",
    "Step",
    "Structure",
    "Symbolic",
    "TargetNumber",
    "TypeNumber",
]

Vector = tuple[float, ...]
Matrix = tuple[Vector, ...]
TextMatrix = tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Condition:
    """One of the conditions A1 to A5 of van den Driessche & Watmough (2002), tested and worded."""

    name: str
    holds: bool
    detail: str


@dataclass(frozen=True, slots=True)
class Class:
    """A strongly connected class of types of K: each infects each, directly or through others of the class."""

    types: tuple[str, ...]
    R0: float
    period: int | None
    growth_rate: float | None


@dataclass(frozen=True, slots=True)
class Structure:
    """The class structure of K by its zeros at these values; classes in topological order."""

    irreducible: bool
    period: int | None
    classes: tuple[Class, ...]


@dataclass(frozen=True, slots=True)
class EntryTerm:
    """One flow's share in an entry of F or V.

    `matrix`: "F" or "V". `row`, `column`: infected compartments of the template (without groups). `flow`: number of the
    flow in the file from 1, or None for a movement. `label`: what to call it. `sign`: 1 or -1. `share`: the derivative
    of the rate in the expression syntax, at the infection-free state; for grouped models with `C(…)` and `sum(…)`
    around a column's own values.
    """

    matrix: str
    row: str
    column: str
    flow: int | None
    label: str
    sign: int
    share: str


@dataclass(frozen=True, slots=True)
class Step:
    """One step of the derivation, as data. `kind` is stable and worded by whoever shows it.

    kind "elimination": `name` = `formula`, an abbreviation, with `about` saying what it stands for.
    kind "residence": mean stay in `name` of one who enters at `about`.
    kind "class": `name` lists the types of a class, `formula` its reproduction number or None, `about` the rule by
    which it was found ("one type", "rank one", "two types", "period 2, …", "no closed form").
    """

    kind: str
    name: str
    formula: str | None
    about: str


@dataclass(frozen=True, slots=True)
class Effective:
    """The number at the state now, with that state: called effective, never R0. None with the reason where there is none."""

    R: float | None
    no_R: str | None
    state: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class BlockForm:
    """F, V and K of a grouped model on its template: one block for each pair of compartments, whatever the groups.

    A block is a sum of products such as ``diag(beta*S) C diag(1/N)``: numbers by group on a diagonal, contact matrices,
    and ``1 1'`` for a sum over groups. Keys are (row, column) compartments. `K` is None where members move between groups
    (then V^-1 has no formula), `root` says what R0 is the spectral radius of, `closed_form` is R0 in the expression
    syntax where mixing has rank one. `infection_free`: compartment -> formula by group, or its own name.
    """

    F: Mapping[tuple[str, str], str]
    V: Mapping[tuple[str, str], str]
    K: Mapping[tuple[str, str], str] | None
    infection_free: Mapping[str, str]
    root: str | None = None
    closed_form: str | None = None


@dataclass(frozen=True, slots=True)
class Symbolic:
    """The derivation in the expression syntax; any part None where the model is too large to write out."""

    F: TextMatrix | None = None
    V: TextMatrix | None = None
    K: TextMatrix | None = None
    infection_free: Mapping[str, str] | None = None
    characteristic_polynomial: str | None = None
    polynomial_variable: str = "x"
    abbreviations: Mapping[str, str] = field(default_factory=dict)
    closed_form: str | None = None
    steps: tuple[Step, ...] = ()
    blocks: BlockForm | None = None


@dataclass(frozen=True, slots=True)
class Projected:
    """What A = F + T, births and transitions, says of a population projected step by step.

    Attributes
    ----------
    stages : tuple of str
    stable_structure : tuple of float or None
        Right vector of A, sums to 1: the shares of the stages in the long run. None where it is not unique.
    reproductive_values : tuple of float or None
        Left vector of A, 1 for the first stage that is not 0: what a member is worth for the size in the long run.
    period : int or None
        Of the stages that decide on the growth factor: past 1 the structure keeps oscillating. None where classes of
        different periods share it, or where it is 0.
    elasticity_births, elasticity_transitions : Matrix or None
        (a/l) dl/da for each entry a of F and of T, l the growth factor; together they add up to 1.
    notes : tuple of str
        What must be said of them.
    """

    stages: tuple[str, ...]
    stable_structure: Vector | None
    reproductive_values: Vector | None
    period: int | None
    elasticity_births: Matrix | None
    elasticity_transitions: Matrix | None
    notes: tuple[str, ...] = ()

    @staticmethod
    def fate(growth_factor: float | None) -> str:
        """Return what becomes of the population in the long run, in words."""
        if growth_factor is None or growth_factor == 1:
            return "neither grows nor dies out"
        return "grows in the long run" if growth_factor > 1 else "dies out in the long run"


@dataclass(frozen=True, eq=False, slots=True)
class Solution:
    """The derivation and the numbers of a scenario at its values: the result of `ngm.solve`.

    Units: F, V and `growth_rate` per time unit (`time_unit`); K and R0 have none. `growth_rate` is None in discrete time where
    a step leaves nothing. `types` labels rows and columns of F,
    V and K_large, `types_at_infection` those of K and both Perron vectors.
    """

    title: str
    time_unit: str
    digest: str
    types: tuple[str, ...]
    type_labels: Mapping[str, str]
    infection_free: Mapping[str, float] | None
    residual: float
    F: Matrix | None
    V: Matrix | None
    K_large: Matrix | None
    types_at_infection: tuple[str, ...]
    K: Matrix | None
    R0: float | None
    no_R0: str | None
    R0_bounds: tuple[float, float] | None
    per_cycle: float | None
    closed_form: str | None
    symbolic: Symbolic
    right: Vector | None
    left: Vector | None
    structure: Structure | None
    growth_rate: float | None
    doubling_time: float | None
    conditions: tuple[Condition, ...]
    warnings: tuple[str, ...]
    #: eigenvalues of K as (real, imaginary) pairs, largest modulus first; empty where there is no K or it is too large
    eigenvalues: tuple[tuple[float, float], ...] = ()
    #: what each entry of F and V is made of, flow by flow
    terms: tuple[EntryTerm, ...] = ()
    #: whether one step is one time unit; then `growth_factor` is rho(F + T), and None elsewhere
    discrete: bool = False
    growth_factor: float | None = None
    #: where the matrices come from; of a K as given F, V and K_large are None, and so is what has time in it
    form: Literal["flows", "K as given", "projection"] = "flows"
    #: of a projection; and the members of each type, where a K as given has them
    projected: Projected | None = None
    sizes: Vector | None = None
    #: the number at the state now, where the file gives one
    effective: Effective | None = None
    #: where a parameter has a season: R0 and growth are those over a period, all else is that of the averaged season
    season: Seasonal | None = None

    def to_json(self) -> dict[str, Any]:
        """Return the object that `solve --json` prints."""
        symbolic = self.symbolic
        now = self.effective
        return {
            "title": self.title,
            "types": list(self.types),
            "infection_free": None if self.infection_free is None else dict(self.infection_free),
            "F": _rows(self.F),
            "V": _rows(self.V),
            "K_large": _rows(self.K_large),
            "types_at_infection": list(self.types_at_infection),
            "K": _rows(self.K),
            "R0": self.R0,
            "no_R0": self.no_R0,
            "R0_bounds": None if self.R0_bounds is None else list(self.R0_bounds),
            "per_cycle": self.per_cycle,
            "closed_form": self.closed_form,
            "symbolic": {
                "F": _rows(symbolic.F),
                "V": _rows(symbolic.V),
                "K": _rows(symbolic.K),
                "infection_free": None if symbolic.infection_free is None else dict(symbolic.infection_free),
                "characteristic_polynomial": symbolic.characteristic_polynomial,
                "abbreviations": dict(symbolic.abbreviations),
            },
            "perron": (
                None
                if self.right is None or self.left is None
                else {"right": list(self.right), "left": list(self.left)}
            ),
            "structure": (
                None
                if self.structure is None
                else {
                    "irreducible": self.structure.irreducible,
                    "period": self.structure.period,
                    "classes": [
                        {"types": list(c.types), "R0": c.R0, "period": c.period, "growth_rate": c.growth_rate}
                        for c in self.structure.classes
                    ],
                }
            ),
            **({"growth_factor": self.growth_factor} if self.discrete else {}),
            "growth_rate": self.growth_rate,
            "doubling_time": self.doubling_time,
            "conditions": [{"name": c.name, "holds": c.holds, "detail": c.detail} for c in self.conditions],
            "warnings": list(self.warnings),
            **({} if self.projected is None else _projected(self.projected)),
            **({} if now is None else {"effective": {"R": now.R, "state": dict(now.state)}}),
            **({} if self.season is None else {"season": self.season.to_json()}),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return K as a labelled table (rows: the type infected, columns: the type that infects); empty without K."""
        import pandas

        names = list(self.types_at_infection)
        return pandas.DataFrame(
            [list(row) for row in self.K] if self.K is not None else None,
            index=pandas.Index(names, name="infected") if self.K is not None else None,
            columns=pandas.Index(names, name="by one case of") if self.K is not None else None,
        )

    def _repr_html_(self) -> str:
        """Show the headline and K in a notebook."""
        from html import escape

        if self.R0 is None or self.R0_bounds is None:
            head = f"no R<sub>0</sub>: {escape(self.no_R0 or '')}"
        else:
            low, high = self.R0_bounds
            how = "proven" if self.season is None else "over the season, estimated"
            head = f"R<sub>0</sub> = {self.R0:.6g} ({how}: {low!r} to {high!r})"
        table = self.to_frame().to_html(escape=True) if self.K is not None else ""
        return f"<p><b>{escape(self.title)}</b>: {head}</p>{table}"


@dataclass(frozen=True, slots=True)
class TypeNumber:
    """Type-reproduction number T of a set of types; None with the reason where the rest sustains the infection."""

    types: tuple[str, ...]
    T: float | None
    critical_effort: float | None
    why: str | None


@dataclass(frozen=True, slots=True)
class TargetNumber:
    """Target reproduction number of one entry (row type, column type) of K."""

    entry: tuple[str, str]
    T: float | None
    critical_effort: float | None
    why: str | None


@dataclass(frozen=True, slots=True)
class EntrySetNumber:
    """Target reproduction number of a set of entries (row type, column type) of K acted on together."""

    entries: tuple[tuple[str, str], ...]
    T: float | None
    critical_effort: float | None
    why: str | None


@dataclass(frozen=True, slots=True)
class StateNumber:
    """What removing one state's infectivity must undo."""

    state: str
    T: float | None
    critical_effort: float | None
    why: str | None


@dataclass(frozen=True, eq=False, slots=True)
class ControlResult:
    """Type-, target- and state-reproduction numbers with the share to remove: the result of `ngm.control`."""

    title: str
    digest: str
    R0: float | None
    no_R0: str | None
    type_reproduction: tuple[TypeNumber, ...]
    target_reproduction: tuple[TargetNumber, ...]
    state_reproduction: tuple[StateNumber, ...]
    warnings: tuple[str, ...]
    #: by group of a dimension, where that was asked for
    groups: tuple[TypeNumber, ...] = ()
    #: of a set of entries of K, where one was asked for
    entry_set: EntrySetNumber | None = None

    def to_json(self) -> dict[str, Any]:
        """Return the object that `control --json` prints."""
        return {
            "R0": self.R0,
            "type_reproduction": [
                {"types": list(t.types), "T": t.T, "critical_effort": t.critical_effort, "why": t.why}
                for t in self.type_reproduction
            ],
            "target_reproduction": [
                {"entry": list(t.entry), "T": t.T, "critical_effort": t.critical_effort, "why": t.why}
                for t in self.target_reproduction
            ],
            "state_reproduction": [
                {"state": t.state, "T": t.T, "critical_effort": t.critical_effort, "why": t.why}
                for t in self.state_reproduction
            ],
            "warnings": list(self.warnings),
            **(
                {
                    "group_reproduction": [
                        {"group": t.types[0], "T": t.T, "critical_effort": t.critical_effort, "why": t.why}
                        for t in self.groups
                    ]
                }
                if self.groups
                else {}
            ),
            **({} if self.entry_set is None else {"entry_set": _entry_set(self.entry_set)}),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a target: what is acted on, T, the critical effort, and why there is none."""
        import pandas

        rows = [
            *({"acts on": "types " + ", ".join(t.types), **_numbers(t)} for t in self.type_reproduction),
            *({"acts on": f"entry {t.entry[0]} <- {t.entry[1]}", **_numbers(t)} for t in self.target_reproduction),
            *({"acts on": f"state {t.state}", **_numbers(t)} for t in self.state_reproduction),
        ]
        return pandas.DataFrame(rows, columns=["acts on", "T", "critical_effort", "why"])

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


def _projected(about: Projected) -> dict[str, Any]:
    """Return what `solve --json` prints of a projected population besides."""
    return {
        "stable_structure": None if about.stable_structure is None else list(about.stable_structure),
        "reproductive_values": None if about.reproductive_values is None else list(about.reproductive_values),
        "growth_factor_period": about.period,
        "growth_factor_elasticity": {
            "births": _rows(about.elasticity_births),
            "transitions": _rows(about.elasticity_transitions),
        },
    }


def _numbers(item: TypeNumber | TargetNumber | StateNumber) -> dict[str, Any]:
    return {"T": item.T, "critical_effort": item.critical_effort, "why": item.why}


def _entry_set(number: EntrySetNumber) -> dict[str, Any]:
    return {
        "entries": [list(entry) for entry in number.entries],
        "T": number.T,
        "critical_effort": number.critical_effort,
        "why": number.why,
    }


def _rows(matrix: Matrix | TextMatrix | None) -> list[list[Any]] | None:
    return None if matrix is None else [list(row) for row in matrix]
