"""What draws say: the distribution of R0 and of other numbers, what drives it, how much is enough in a share of the draws.

As in `ngm.results`, what does not exist is `None`, with the reason in `warnings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.spreadsheet import csv_text

if TYPE_CHECKING:
    import pandas

__all__ = [
    "Assurance",
    "Assured",
    "DrawFigures",
    "DrawTable",
    "Driver",
    "Spread",
    "Uncertainty",
]


@dataclass(frozen=True, slots=True)
class DrawFigures:
    """What a set of draws says of one number; None where there are too few values.

    `rejected` of `draws` have no value; the figures are of the rest. `quantiles`: 0.025, 0.25, 0.5, 0.75, 0.975.
    `above_one`: share of the values above 1 (of a growth rate: above 0), with Wilson's 95 % interval for independent draws.
    """

    draws: int
    rejected: int
    mean: float | None
    sd: float | None
    quantiles: Mapping[str, float] | None
    above_one: float | None
    mean_error: float | None
    above_one_interval: tuple[float, float] | None


@dataclass(frozen=True, eq=False, slots=True)
class Spread:
    """The distribution of one number over the draws.

    Attributes
    ----------
    number : str
        ``R0``, ``growth_rate``, ``T(E_h)``, ``T(E_h <- E_v)``.
    threshold : float
        `figures.above_one` is the share of values above it: 1, and 0 for the growth rate.
    unit : str
        Of the values; empty where they have none.
    figures : DrawFigures
    histogram : tuple of (low, high, draws)
    missing : mapping of str to int
        Why a draw has no value -> at how many draws.
    """

    number: str
    threshold: float
    unit: str
    figures: DrawFigures
    histogram: tuple[tuple[float, float, float], ...]
    missing: Mapping[str, int]

    def to_json(self) -> dict[str, Any]:
        """Return the object as it stands in the list `distributions` that `sensitivity --draws --json` prints."""
        told = self.figures
        return {
            "number": self.number,
            "unit": self.unit or None,
            "draws": told.draws,
            "without": told.rejected,
            "mean": told.mean,
            "sd": told.sd,
            "quantiles": None if told.quantiles is None else dict(told.quantiles),
            "threshold": self.threshold,
            "probability_above": told.above_one,
            "histogram": [list(step) for step in self.histogram],
        }


@dataclass(frozen=True, slots=True)
class Driver:
    """How much one parameter drives the spread: partial rank correlation, first and total Sobol index.

    `monotone` is False where R0 both rises and falls with the parameter: then the rank correlation misleads.
    """

    parameter: str
    prcc: float | None
    why: str | None
    monotone: bool | None
    first: float | None
    first_interval: tuple[float, float] | None
    total: float | None
    total_interval: tuple[float, float] | None


@dataclass(frozen=True, slots=True)
class Assurance:
    """The control reproduction number of an intervention over the draws, and the share of them in which it is below 1."""

    intervention: str
    figures: DrawFigures
    below_one: float | None


@dataclass(frozen=True, eq=False, slots=True)
class Uncertainty:
    """What the spread of the parameters does to R0: the result of `ngm.uncertainty`.

    `running`: the same figures at a half, a quarter, … of the draws, to see whether they have settled. `uniform_effort`:
    the share of all infections to prevent, in all types alike, that is enough in the share `assurance` of the draws.
    `others`: the distributions of the other numbers that were asked for.
    """

    title: str
    digest: str
    how: str
    seed: int | None
    R0: DrawFigures
    histogram: tuple[tuple[float, float, float], ...]
    running: tuple[DrawFigures, ...]
    drivers: tuple[Driver, ...]
    interventions: tuple[Assurance, ...]
    assurance: float
    uniform_effort: float | None
    warnings: tuple[str, ...]
    others: tuple[Spread, ...] = ()

    @property
    def distributions(self) -> tuple[Spread, ...]:
        """R0 and the other numbers asked for."""
        return Spread("R0", 1.0, "", self.R0, self.histogram, {}), *self.others

    def more_json(self) -> dict[str, Any]:
        """Return what `sensitivity --draws --json` prints beside `global`."""
        return {
            "distributions": [spread.to_json() for spread in self.distributions],
            "control_numbers": [
                {
                    "intervention": one.intervention,
                    "mean": one.figures.mean,
                    "quantiles": None if one.figures.quantiles is None else dict(one.figures.quantiles),
                    "probability_below_one": one.below_one,
                }
                for one in self.interventions
            ],
        }

    def to_json(self) -> dict[str, Any]:
        """Return the `global` object that `sensitivity --draws --json` prints."""
        told = self.R0
        return {
            "draws": told.draws,
            "rejected": told.rejected,
            "seed": self.seed,
            "R0": {
                "mean": told.mean,
                "sd": told.sd,
                "quantiles": None if told.quantiles is None else dict(told.quantiles),
            },
            "probability_above_one": told.above_one,
            "prcc": {d.parameter: d.prcc for d in self.drivers},
            "sobol_first": {d.parameter: d.first for d in self.drivers},
            "sobol_total": {d.parameter: d.total for d in self.drivers},
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a parameter, largest total index (or rank correlation) first."""
        import pandas

        columns = ["parameter", "prcc", "monotone", "first", "total"]
        rows = [{name: getattr(driver, name) for name in columns} for driver in self.drivers]
        rows.sort(key=lambda row: -abs(row["total"] if row["total"] is not None else row["prcc"] or 0.0))
        return pandas.DataFrame(rows, columns=columns)

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


@dataclass(frozen=True, eq=False, slots=True)
class DrawTable:
    """Every draw with its numbers: the result of `ngm.draw_table`.

    `columns`: the drawn parameters in their own units, then R0, the other numbers asked for, and the control reproduction
    number of each intervention as ``R with Masks``; (N,) each, nan where there is none.
    """

    title: str
    digest: str
    columns: Mapping[str, Any]

    def to_frame(self) -> pandas.DataFrame:
        """Return a row a draw, counted from 1."""
        import pandas

        first = next(iter(self.columns.values()), ())
        return pandas.DataFrame({"draw": range(1, len(first) + 1), **self.columns})

    def to_csv(self) -> str:
        """Return the table as CSV, at full precision; what has no value is an empty cell."""
        return csv_text(self.to_frame())


@dataclass(frozen=True, eq=False, slots=True)
class Assured:
    """How much is needed for a number to fall below a target in a wanted share of the draws: `ngm.assured_strength`.

    Attributes
    ----------
    what : str
        What there is more or less of: ``strength of Masks``, ``coverage of 18-64``.
    target, assurance : float
        The number to fall below, and the share of draws in which it must.
    needed : float or None
        The least strength or coverage in [0, 1] from which on it does; None where even 1 does not (`why`).
    at_values : float or None
        What is needed at the scenario's own values, for comparison.
    share_at_full, share_at_none : float
        The share of draws in which the number is below the target at 1, and at 0.
    draws, rejected : int
        Draws, and those of them that have no number: they count as not below.
    curve : tuple of (strength or coverage, share of draws below the target)
    """

    title: str
    digest: str
    what: str
    target: float
    assurance: float
    needed: float | None
    at_values: float | None
    share_at_none: float
    share_at_full: float
    draws: int
    rejected: int
    why: str | None
    curve: tuple[tuple[float, float], ...]
    warnings: tuple[str, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """Return the object that `strength` and `coverage` print as `assured` where they are given draws."""
        return {
            "what": self.what,
            "target": self.target,
            "assurance": self.assurance,
            "needed": self.needed,
            "at_values": self.at_values,
            "share_at_none": self.share_at_none,
            "share_at_full": self.share_at_full,
            "draws": self.draws,
            "without": self.rejected,
            "why": self.why,
            "curve": [list(point) for point in self.curve],
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return the curve, a row a point."""
        import pandas

        return pandas.DataFrame(self.curve, columns=[self.what, f"share of draws below {self.target:g}"])
