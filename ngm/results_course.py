"""What happens beside the infection-free state: below a number of 1, and in the first weeks.

As in `ngm.results`, what does not exist is None with the reason beside it, and nothing here is computed by whoever shows it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    import pandas

__all__ = ["BranchPoint", "Course", "Endemic", "SeedCourse", "Threshold"]

Direction = Literal["forward", "backward"]


@dataclass(frozen=True, slots=True)
class Endemic:
    """A state at rest with infection: every compartment that some rate depends on, and whether it is stable."""

    state: Mapping[str, float]
    infected: float
    stable: bool


@dataclass(frozen=True, slots=True)
class BranchPoint:
    """One point of the curve of endemic states: the parameter, all infected together, stable or not."""

    value: float
    infected: float
    stable: bool


@dataclass(frozen=True, eq=False, slots=True)
class Threshold:
    """Whether a number below 1 is safe: the result of `ngm.threshold`.

    Attributes
    ----------
    label : str
        What the number is: "R0" for the baseline, "control reproduction number" with an intervention.
    along : str
        What is moved: a parameter, "values of NAME" (its values by group, all multiplied), or "all transmission" (the rate of
        every transmission flow multiplied). `unit`: of a parameter's values, "" where none is given.
    now, R_now : float or None
        The value in force and the number there.
    at_one : float or None
        The value at which the number is 1, `rising` telling whether the number rises with it there.
    direction : "forward", "backward" or None
        How the endemic states leave the infection-free one at a number of 1; None where it was not computed, and `why`.
    a, b : float or None
        The coefficients of Castillo-Chavez & Song (2004), theorem 4.1, with the parameter turned so that b > 0: backward
        where a > 0, forward where a < 0. Right vector: infected types sum to 1; left.right = 1.
    formula_a, formula_b : str or None
        The same as expressions, where they are short.
    turning, R_turning : float or None
        Where the endemic states end below 1: the value, and the number there.
    endemic : tuple of Endemic
        The endemic states at the value in force, by infected.
    branch : tuple of BranchPoint
        The curve, from the infection-free state on.
    """

    title: str
    digest: str
    time_unit: str
    label: str
    intervention: str | None
    along: str
    unit: str
    now: float | None
    R_now: float | None
    at_one: float | None
    rising: bool
    direction: Direction | None
    why: str | None
    a: float | None
    b: float | None
    formula_a: str | None
    formula_b: str | None
    turning: float | None
    R_turning: float | None
    endemic: tuple[Endemic, ...]
    branch: tuple[BranchPoint, ...]
    reached: str
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `threshold --json` prints."""
        return {
            "along": self.along,
            "unit": self.unit,
            "intervention": self.intervention,
            "now": self.now,
            "number": self.R_now,
            "at_one": self.at_one,
            "rising": self.rising,
            "direction": self.direction,
            "why": self.why,
            "a": self.a,
            "b": self.b,
            "formula_a": self.formula_a,
            "formula_b": self.formula_b,
            "turning": None if self.turning is None else {"value": self.turning, "number": self.R_turning},
            "endemic": [{"state": dict(e.state), "infected": e.infected, "stable": e.stable} for e in self.endemic],
            "branch": [{"value": p.value, "infected": p.infected, "stable": p.stable} for p in self.branch],
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return the curve of endemic states: value, infected, stable."""
        import pandas

        return pandas.DataFrame(
            [(p.value, p.infected, p.stable) for p in self.branch], columns=[self.along, "infected", "stable"]
        )


@dataclass(frozen=True, eq=False, slots=True)
class SeedCourse:
    """The first weeks after a few cases of one type.

    Attributes
    ----------
    seed : str
        The type that was seeded, with `cases` of it.
    infected : tuple of tuple of float
        At each of the course's times, how many there are of each type.
    growth : float or None
        Growth rate seen over the last part of the course, per time unit; None where none is left.
    mix : tuple of float or None
        Share of each type among the infected at the end.
    mix_gap : float or None
        Half of the sum of the differences from the mix expected: 0 the same, 1 nothing in common.
    settled : bool
        Whether growth and mix have come to what is expected.
    """

    seed: str
    cases: float
    infected: tuple[tuple[float, ...], ...]
    growth: float | None
    mix: tuple[float, ...] | None
    mix_gap: float | None
    settled: bool


@dataclass(frozen=True, eq=False, slots=True)
class Course:
    """The flows followed from a few cases of each type, beside growth rate, stable mix and generations: `ngm.course`.

    Attributes
    ----------
    times : tuple of float
        In time units.
    growth_rate : float
        Expected: of F - V (over a season the Floquet exponent).
    stable_mix : tuple of float or None
        Expected shares of the types: the right eigenvector of F - V; None over a season, or where classes tie.
    generations : tuple of tuple of tuple of float
        For each type at infection that is seeded with one case: expected new cases of each type at infection in
        generation 0, 1, 2, ...: K, K^2, ...
    depleted : float
        The largest share of the susceptible hosts that any course uses up.
    """

    title: str
    digest: str
    time_unit: str
    label: str
    intervention: str | None
    discrete: bool
    types: tuple[str, ...]
    types_at_infection: tuple[str, ...]
    times: tuple[float, ...]
    horizon: float
    courses: tuple[SeedCourse, ...]
    number: float | None
    growth_rate: float | None
    doubling_time: float | None
    stable_mix: tuple[float, ...] | None
    generations: tuple[tuple[tuple[float, ...], ...], ...]
    depleted: float
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `course --json` prints."""
        return {
            "types": list(self.types),
            "types_at_infection": list(self.types_at_infection),
            "intervention": self.intervention,
            "times": list(self.times),
            "number": self.number,
            "growth_rate": self.growth_rate,
            "doubling_time": self.doubling_time,
            "stable_mix": None if self.stable_mix is None else list(self.stable_mix),
            "courses": [
                {
                    "seed": c.seed,
                    "cases": c.cases,
                    "infected": [list(row) for row in c.infected],
                    "growth": c.growth,
                    "mix": None if c.mix is None else list(c.mix),
                    "mix_gap": c.mix_gap,
                    "settled": c.settled,
                }
                for c in self.courses
            ],
            "generations": [[list(row) for row in seeded] for seeded in self.generations],
            "depleted": self.depleted,
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a time and seeded type: how many there are of each type."""
        import pandas

        rows = [
            (course.seed, t, *row)
            for course in self.courses
            for t, row in zip(self.times, course.infected, strict=True)
        ]
        return pandas.DataFrame(rows, columns=["seed", "time", *self.types])
