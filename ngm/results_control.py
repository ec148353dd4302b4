"""What the analyses of control return: interventions side by side, strength and coverage needed, a shared supply.

With an intervention in force the number is a control reproduction number and is labelled so; R0 is the baseline's
alone. As in `ngm.results`, what does not exist is `None` with the reason beside it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.results import Vector

if TYPE_CHECKING:
    import pandas

__all__ = [
    "BASELINE_LABEL",
    "CONTROL_LABEL",
    "Allocation",
    "Compared",
    "Comparison",
    "Coverage",
    "Share",
    "SmallestSupply",
    "Strength",
    "Waning",
]

BASELINE_LABEL = "R0"
CONTROL_LABEL = "control reproduction number"


@dataclass(frozen=True, eq=False, slots=True)
class Compared:
    """One row of a comparison: the baseline, an intervention, or several of them together.

    Attributes
    ----------
    label : str
        What `R0` is: "R0" for the baseline, "control reproduction number" for everything else.
    parts : tuple of str
        The interventions in force, in order; empty for the baseline.
    R0 : float or None
        The number, with `bounds` that enclose it; None where there is none, and `no_R0` says why.
    growth_rate : float or None
        Per time unit; None only where the intervention leaves no F and V at all.
    doubling_time, halving_time : float or None
        ln 2 / |growth rate|, in time units, for a positive and a negative growth rate.
    reduction : float or None
        1 - number / R0 of the baseline: the share removed, negative where the number rises.
    below_one : bool
    cost : float or None
    effective : float or None
        The number at the state now, under the same changes; None where the file gives no such state.
    case_mix : tuple of float or None
        Share of each type at infection among new infections; None where it is not unique or there is no number.
    warnings : tuple of str
        What is to be said of this row alone.
    """

    name: str
    label: str
    parts: tuple[str, ...]
    R0: float | None
    no_R0: str | None
    bounds: tuple[float, float] | None
    growth_rate: float | None
    doubling_time: float | None
    halving_time: float | None
    reduction: float | None
    below_one: bool
    cost: float | None
    case_mix: Vector | None
    note: str | None = None
    warnings: tuple[str, ...] = ()
    effective: float | None = None


@dataclass(frozen=True, eq=False, slots=True)
class Comparison:
    """Every intervention of a scenario beside the baseline: the result of `ngm.compare`.

    `types` labels every `case_mix`. `interventions` come in the order of the file, combinations after them.
    """

    title: str
    time_unit: str
    digest: str
    types: tuple[str, ...]
    baseline: Compared
    interventions: tuple[Compared, ...]
    warnings: tuple[str, ...]

    def by_number(self) -> tuple[Compared, ...]:
        """Return the interventions, the smallest number first; those without a number come last."""
        return tuple(sorted(self.interventions, key=lambda row: (row.R0 is None, row.R0 or 0.0)))

    def to_json(self) -> dict[str, Any]:
        """Return the object that `compare --json` prints."""
        base = self.baseline
        return {
            "baseline": {"R0": base.R0, "no_R0": base.no_R0, "growth_rate": base.growth_rate},
            "interventions": [
                {
                    "name": row.name,
                    "R0": row.R0,
                    "no_R0": row.no_R0,
                    "growth_rate": row.growth_rate,
                    "reduction": row.reduction,
                    "below_one": row.below_one,
                    "cost": row.cost,
                }
                for row in self.interventions
            ],
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row an intervention, the baseline first."""
        import pandas

        return pandas.DataFrame(
            [
                {
                    "intervention": row.name,
                    "number": row.R0,
                    "what": row.label,
                    "effective_now": row.effective,
                    "reduction": row.reduction,
                    "below_one": row.below_one,
                    "growth_rate": row.growth_rate,
                    "doubling_time": row.doubling_time,
                    "halving_time": row.halving_time,
                    "cost": row.cost,
                    "why_none": row.no_R0,
                }
                for row in (self.baseline, *self.interventions)
            ]
        )

    def mix_frame(self) -> pandas.DataFrame:
        """Return the share of each type among new infections: a row a type, a column the baseline or an intervention."""
        import pandas

        rows = (self.baseline, *self.interventions)
        return pandas.DataFrame(
            {row.name: row.case_mix for row in rows if row.case_mix is not None},
            index=pandas.Index(list(self.types), name="type"),
        )

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


@dataclass(frozen=True, eq=False, slots=True)
class Strength:
    """How much of an intervention is needed: the result of `ngm.strength_needed`.

    Attributes
    ----------
    target : float
        The number to be reached.
    strength : float or None
        The least strength in [0, 1] from which on the number stays at or below the target; None where full strength
        does not reach it (`unattainable`), or where the number cannot be computed on the way (`why`).
    unattainable : bool
    R0 : float or None
        The number without the intervention.
    at_full : float or None
        The control reproduction number at full strength.
    lowest, lowest_at : float or None
        The least number met among the strengths tried, and where.
    monotone : bool
        Whether the number falls all the way among the strengths tried.
    curve : tuple of (strength, number or None)
        The strengths tried, in order.
    """

    title: str
    digest: str
    name: str
    target: float
    strength: float | None
    unattainable: bool
    R0: float | None
    at_full: float | None
    lowest: float | None
    lowest_at: float | None
    monotone: bool
    why: str | None
    curve: tuple[tuple[float, float | None], ...]
    warnings: tuple[str, ...] = ()
    label: str = CONTROL_LABEL

    def to_json(self) -> dict[str, Any]:
        """Return the object that `strength --json` prints; `curve` is a list of [strength, number]."""
        return {
            "intervention": self.name,
            "target": self.target,
            "strength": self.strength,
            "unattainable": self.unattainable,
            "R0": self.R0,
            "at_full": self.at_full,
            "lowest": self.lowest,
            "lowest_at": self.lowest_at,
            "why": self.why,
            "curve": [list(point) for point in self.curve],
            "warnings": list(self.warnings),
        }


@dataclass(frozen=True, slots=True)
class Waning:
    """A flow of the model by which protection is lost.

    Attributes
    ----------
    flow : str
        As messages name it: ``flow 3 "Protection lost"``.
    compartment, label, back_to : str
        Who is protected, and where they come back to.
    kind : "vaccine" or "infection"
        What protects them.
    slowest, fastest : float
        Rate per head, per time unit, over the groups.
    """

    flow: str
    compartment: str
    label: str
    back_to: str
    kind: str
    slowest: float
    fastest: float
    time_unit: str

    def to_json(self) -> dict[str, Any]:
        """Return the flow as it stands in the object that `coverage --json` prints."""
        return {
            "flow": self.flow,
            "compartment": self.compartment,
            "back_to": self.back_to,
            "kind": self.kind,
            "rate": [self.slowest, self.fastest],
        }


@dataclass(frozen=True, eq=False, slots=True)
class Coverage:
    """The coverage that a vaccine needs in chosen groups: the result of `ngm.coverage_needed`.

    Attributes
    ----------
    groups, types : tuple of str
        Who is vaccinated, and the types at infection that this acts on.
    kind : str
        "leaky" or "all-or-nothing". The threshold is the same, the size of an epidemic above it is not.
    efficacies : tuple of float
        Of each group, against infection and onward spread together: 1 - (1 - a)(1 - b). `lasting` is the share of
        coverage that protects where protection wanes, else 1.
    T, critical_effort : float or None
        Type-reproduction number of the types (relative to the target), and the share of their infections to prevent.
    coverage : float or None
        Share of the groups to be vaccinated, the same in each; None where it would exceed 1 (`unattainable`) or where
        there is no T (`why`).
    required : float or None
        critical_effort / (efficacy * lasting), above 1 where that is impossible; None where efficacies differ and full
        coverage is not enough.
    at_full : float or None
        The control reproduction number with everybody in the groups vaccinated.
    waning : tuple of Waning
        Where protection wanes in the model itself.
    """

    title: str
    digest: str
    groups: tuple[str, ...]
    types: tuple[str, ...]
    kind: str
    efficacies: Vector
    lasting: float
    target: float
    R0: float | None
    T: float | None
    critical_effort: float | None
    coverage: float | None
    required: float | None
    unattainable: bool
    at_full: float | None
    why: str | None
    warnings: tuple[str, ...] = ()
    label: str = CONTROL_LABEL
    waning: tuple[Waning, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """Return the object that `coverage --json` prints."""
        return {
            "groups": list(self.groups),
            "types": list(self.types),
            "kind": self.kind,
            "efficacies": list(self.efficacies),
            "lasting": self.lasting,
            "target": self.target,
            "R0": self.R0,
            "T": self.T,
            "critical_effort": self.critical_effort,
            "coverage": self.coverage,
            "required": self.required,
            "unattainable": self.unattainable,
            "at_full": self.at_full,
            "why": self.why,
            "waning": [one.to_json() for one in self.waning],
            "warnings": list(self.warnings),
        }


@dataclass(frozen=True, eq=False, slots=True)
class Share:
    """One way to share a supply: coverage and doses of each group, and the control reproduction number it leaves."""

    rule: str
    coverage: Vector
    doses: Vector
    spent: float
    R0: float

    def to_json(self) -> dict[str, Any]:
        """Return the share as it stands in the object that `allocate --json` prints."""
        return {
            "rule": self.rule,
            "R0": self.R0,
            "coverage": list(self.coverage),
            "doses": list(self.doses),
            "spent": self.spent,
        }


@dataclass(frozen=True, eq=False, slots=True)
class SmallestSupply:
    """The least supply found that brings the number to the target; None throughout where none does, with the reason.

    `lower_bound`: no smaller supply can do; None where that is not known.
    """

    target: float
    supply: float | None
    lower_bound: float | None
    coverage: Vector | None
    doses: Vector | None
    why: str | None

    def to_json(self) -> dict[str, Any]:
        """Return the supply as it stands in the object that `allocate --json` prints."""
        return {
            "target": self.target,
            "supply": self.supply,
            "lower_bound": self.lower_bound,
            "coverage": None if self.coverage is None else list(self.coverage),
            "doses": None if self.doses is None else list(self.doses),
            "why": self.why,
        }


@dataclass(frozen=True, eq=False, slots=True)
class Allocation:
    """A supply shared among groups so that the number is as small as possible: the result of `ngm.allocate`.

    Attributes
    ----------
    groups : tuple of str
        Labels every vector. `sizes` are members, `costs` a head, `efficacies` against infection and onward spread
        together, `upper` the highest coverage.
    supply : float
        In the unit of `costs`: doses where each costs 1.
    R0 : float
        The number without the supply.
    best : Share
        The best share found; `best.R0` is the control reproduction number that it leaves.
    lower_bound : float
        No share of this supply leaves less, but for rounding.
    gap : float
        1 - lower_bound / best.R0: the best share lies within it. It says what is proven, not what is lost.
    route, proof : str
        How the bound was found: a word ("convex", "nearly convex", "divided", "all") and a sentence.
    rules : tuple of Share
        Simple rules beside it.
    smallest : SmallestSupply
    """

    title: str
    digest: str
    groups: tuple[str, ...]
    sizes: Vector
    costs: Vector
    efficacies: Vector
    upper: Vector
    supply: float
    R0: float
    best: Share
    lower_bound: float
    gap: float
    route: str
    proof: str
    rules: tuple[Share, ...]
    smallest: SmallestSupply
    warnings: tuple[str, ...] = ()
    label: str = CONTROL_LABEL

    def to_json(self) -> dict[str, Any]:
        """Return the object that `allocate --json` prints; every list of numbers is in the order of `groups`."""
        return {
            "groups": list(self.groups),
            "sizes": list(self.sizes),
            "costs": list(self.costs),
            "efficacies": list(self.efficacies),
            "upper": list(self.upper),
            "supply": self.supply,
            "R0": self.R0,
            "best": self.best.to_json(),
            "lower_bound": self.lower_bound,
            "gap": self.gap,
            "proof": self.proof,
            "rules": [rule.to_json() for rule in self.rules],
            "smallest": self.smallest.to_json(),
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a group: members, and coverage and doses in the best share, by each rule, in the smallest supply."""
        import pandas

        columns: dict[str, Any] = {"members": self.sizes, "cost a head": self.costs, "efficacy": self.efficacies}
        for share in (self.best, *self.rules):
            columns[f"coverage, {share.rule}"] = share.coverage
            columns[f"doses, {share.rule}"] = share.doses
        if self.smallest.coverage is not None:
            columns["coverage, smallest supply"] = self.smallest.coverage
            columns["doses, smallest supply"] = self.smallest.doses
        return pandas.DataFrame(columns, index=pandas.Index(list(self.groups), name="group"))

    def numbers_frame(self) -> pandas.DataFrame:
        """Return one row a way to share: the number it leaves, and what it spends."""
        import pandas

        rows = [
            {"share": s.rule, "number": s.R0, "what": self.label, "spent": s.spent} for s in (self.best, *self.rules)
        ]
        return pandas.DataFrame(
            [{"share": "none", "number": self.R0, "what": "without the supply", "spent": 0.0}, *rows]
        )

    def _repr_html_(self) -> str:
        return str(self.numbers_frame().to_html(escape=True)) + str(self.to_frame().to_html(escape=True))
