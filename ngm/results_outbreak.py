"""What becomes of an outbreak: how many in the end, whether it takes off, at what pace; and a model's twin in the other time.

Results of `ngm.outbreak` and `ngm.twin`. A part that does not apply is there with its reason in `why` and nothing else.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.results import Vector

if TYPE_CHECKING:
    import pandas

__all__ = [
    "Chance",
    "ChanceRow",
    "FinalSizeResult",
    "FinalSizeRow",
    "Outbreak",
    "PaceResult",
    "Twin",
    "TwinStay",
    "TwinVersion",
    "Vaccine",
]


@dataclass(frozen=True, slots=True)
class Vaccine:
    """Who is vaccinated before the outbreak: by type at infection, shares from 0 to 1.

    `kind`: "leaky" (each exposure is prevented with chance `efficacy`) or "all-or-nothing" (that share of the vaccinated is
    immune, the others not at all). `against_spread`: by how much less a vaccinated case infects.
    """

    kind: str
    coverage: Vector
    efficacy: Vector
    against_spread: Vector


@dataclass(frozen=True, slots=True)
class FinalSizeRow:
    """One type at infection.

    Attributes
    ----------
    susceptible : float
        Members who can be infected before the outbreak (with vaccine: the vaccinated among them).
    attack_rate : float
        Share of them infected in the end; `bounds` enclose it.
    infected : float
        attack_rate times susceptible.
    unvaccinated, vaccinated : float or None
        Attack rates of either, where there is a vaccine.
    """

    type: str
    susceptible: float
    attack_rate: float
    bounds: tuple[float, float]
    infected: float
    unvaccinated: float | None = None
    vaccinated: float | None = None


@dataclass(frozen=True, slots=True)
class FinalSizeResult:
    """How many are infected in the end; no rows, with the reason, where the equation does not apply."""

    why: str | None
    rows: tuple[FinalSizeRow, ...] = ()
    susceptible: float | None = None
    infected: float | None = None
    attack_rate: float | None = None
    vaccine: Vaccine | None = None


@dataclass(frozen=True, slots=True)
class ChanceRow:
    """The chance that the family of one case of a type dies out, and that it starts a large outbreak: they add up to 1."""

    type: str
    dies_out: float
    large_outbreak: float


@dataclass(frozen=True, slots=True)
class Chance:
    """Whether cases start a large outbreak. `how`: what the chances are taken from. `introduced`: type -> number of cases."""

    why: str | None
    how: str = ""
    rows: tuple[ChanceRow, ...] = ()
    introduced: Mapping[str, float] | None = None
    large_outbreak: float | None = None


@dataclass(frozen=True, slots=True)
class PaceResult:
    """The generation interval of the class that attains R0, in time units.

    Attributes
    ----------
    mean, sd : float or None
    mean_by_type : tuple of (str, float or None)
        Mean age at infecting of a case of each type of the class; None where it infects nobody.
    ages, density, cumulative : tuple of float
        Per time unit; in discrete time the share in each step.
    total : float or None
        All of the density added up, 1 but for the rounding of the sum.
    R0_by_growth : float or None
        1 / (sum of exp(-r a) times the density): R0 found from growth and intervals; where there is one type at infection.
    """

    why: str | None
    types: tuple[str, ...] = ()
    mean: float | None = None
    sd: float | None = None
    mean_by_type: tuple[tuple[str, float | None], ...] = ()
    ages: Vector = ()
    density: Vector = ()
    cumulative: Vector = ()
    total: float | None = None
    growth_rate: float | None = None
    doubling_time: float | None = None
    R0_by_growth: float | None = None


@dataclass(frozen=True, eq=False, slots=True)
class Outbreak:
    """The result of `ngm.outbreak`.

    `label`: what `R` is, "R0" or, with interventions or a vaccine, "control reproduction number". `interventions`: those in
    force, in order.
    """

    title: str
    time_unit: str
    digest: str
    discrete: bool
    label: str
    R: float | None
    no_R: str | None
    interventions: tuple[str, ...]
    final_size: FinalSizeResult
    chance: Chance
    pace: PaceResult
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `outbreak --json` prints."""
        size, chance, pace = self.final_size, self.chance, self.pace
        vaccine = size.vaccine
        return {
            "label": self.label,
            "R": self.R,
            "no_R": self.no_R,
            "interventions": list(self.interventions),
            "final_size": {
                "why": size.why,
                "types": [
                    {
                        "type": row.type,
                        "susceptible": row.susceptible,
                        "attack_rate": row.attack_rate,
                        "bounds": list(row.bounds),
                        "infected": row.infected,
                        "unvaccinated": row.unvaccinated,
                        "vaccinated": row.vaccinated,
                    }
                    for row in size.rows
                ],
                "susceptible": size.susceptible,
                "infected": size.infected,
                "attack_rate": size.attack_rate,
                "vaccine": (
                    None
                    if vaccine is None
                    else {
                        "kind": vaccine.kind,
                        "coverage": list(vaccine.coverage),
                        "efficacy": list(vaccine.efficacy),
                        "against_spread": list(vaccine.against_spread),
                    }
                ),
            },
            "chance": {
                "why": chance.why,
                "how": chance.how,
                "types": [
                    {"type": row.type, "dies_out": row.dies_out, "large_outbreak": row.large_outbreak}
                    for row in chance.rows
                ],
                "introduced": None if chance.introduced is None else dict(chance.introduced),
                "large_outbreak": chance.large_outbreak,
            },
            "pace": {
                "why": pace.why,
                "types": list(pace.types),
                "mean": pace.mean,
                "sd": pace.sd,
                "mean_by_type": dict(pace.mean_by_type),
                "ages": list(pace.ages),
                "density": list(pace.density),
                "cumulative": list(pace.cumulative),
                "growth_rate": pace.growth_rate,
                "doubling_time": pace.doubling_time,
                "R0_by_growth": pace.R0_by_growth,
            },
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a type: chance of a large outbreak, attack rate, mean age at infecting."""
        import pandas

        rows: dict[str, dict[str, float | None]] = {}
        for chance in self.chance.rows:
            rows.setdefault(chance.type, {})["large_outbreak"] = chance.large_outbreak
        for size in self.final_size.rows:
            rows.setdefault(size.type, {})["attack_rate"] = size.attack_rate
        for name, mean in self.pace.mean_by_type:
            rows.setdefault(name, {})["mean_age_at_infecting"] = mean
        heads = ["large_outbreak", "attack_rate", "mean_age_at_infecting"]
        return pandas.DataFrame(list(rows.values()), index=pandas.Index(list(rows), name="type"), columns=heads)

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


@dataclass(frozen=True, slots=True)
class TwinVersion:
    """One of the versions of a model that are compared: its time, and the numbers that follow."""

    name: str
    discrete: bool
    R0: float | None
    no_R0: str | None
    growth_rate: float | None
    growth_factor: float | None
    doubling_time: float | None


@dataclass(frozen=True, slots=True)
class TwinStay:
    """Mean stay in one infected state, in time units: counted in whole steps, and as a time."""

    type: str
    share_leaving: float
    hazard: float | None
    steps: float | None
    time: float | None


@dataclass(frozen=True, eq=False, slots=True)
class Twin:
    """A model beside its twins in the other time: the result of `ngm.twin`.

    `versions`: as typed first. `differ`: why the numbers differ, in sentences; `report`: which to report.
    """

    title: str
    time_unit: str
    digest: str
    discrete: bool
    versions: tuple[TwinVersion, ...]
    stays: tuple[TwinStay, ...]
    differ: tuple[str, ...]
    report: str
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `twin --json` prints."""
        return {
            "discrete": self.discrete,
            "versions": [
                {
                    "name": v.name,
                    "discrete": v.discrete,
                    "R0": v.R0,
                    "no_R0": v.no_R0,
                    "growth_rate": v.growth_rate,
                    "growth_factor": v.growth_factor,
                    "doubling_time": v.doubling_time,
                }
                for v in self.versions
            ],
            "stays": [
                {"type": s.type, "share_leaving": s.share_leaving, "hazard": s.hazard, "steps": s.steps, "time": s.time}
                for s in self.stays
            ],
            "differ": list(self.differ),
            "report": self.report,
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a version."""
        import pandas

        return pandas.DataFrame(self.to_json()["versions"])

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))
