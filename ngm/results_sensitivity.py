"""What the analyses of sensitivity return: local indices, entries of K, swings, draws, planes, a calibrated value.

As in `ngm.results`, what does not exist is `None`, with the reason in `warnings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.results import Matrix
from ngm.results_mixing import Piece, Scale

if TYPE_CHECKING:
    import pandas

__all__ = [
    "Assurance",
    "Calibration",
    "DrawFigures",
    "Driver",
    "LocalIndex",
    "Plane",
    "Sensitivity",
    "Swing",
    "Swings",
    "Uncertainty",
]


@dataclass(frozen=True, slots=True)
class LocalIndex:
    """How R0 and the growth rate answer to a small change of one parameter (one row a group).

    Attributes
    ----------
    parameter : str
        With its group, where it has one: ``sigma[65+]``.
    value : float
        In the parameter's own unit.
    derivative, elasticity : float or None
        dR0/dp, by the parameter's own unit, and (p/R0) dR0/dp.
    growth_derivative, growth_elasticity : float or None
        The same of the growth rate r; the elasticity is (p/r) dr/dp, None where r is 0.
    """

    parameter: str
    value: float
    derivative: float | None
    elasticity: float | None
    growth_derivative: float | None
    growth_elasticity: float | None


@dataclass(frozen=True, eq=False, slots=True)
class Sensitivity:
    """Local indices of every parameter given as a number, and of the entries of K: the result of `ngm.sensitivity`."""

    title: str
    time_unit: str
    digest: str
    R0: float | None
    growth_rate: float | None
    types_at_infection: tuple[str, ...]
    local: tuple[LocalIndex, ...]
    entry_sensitivity: Matrix | None
    entry_elasticity: Matrix | None
    warnings: tuple[str, ...]
    uncertainty: Uncertainty | None = None

    def to_json(self) -> dict[str, Any]:
        """Return the object that `sensitivity --json` prints."""
        return {
            "local": [
                {"parameter": i.parameter, "derivative": i.derivative, "elasticity": i.elasticity} for i in self.local
            ],
            "entries": {
                "sensitivity": None if self.entry_sensitivity is None else [list(r) for r in self.entry_sensitivity],
                "elasticity": None if self.entry_elasticity is None else [list(r) for r in self.entry_elasticity],
            },
            "global": None if self.uncertainty is None else self.uncertainty.to_json(),
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Return one row a parameter, largest elasticity of R0 first."""
        import pandas

        columns = ["parameter", "value", "derivative", "elasticity", "growth_derivative", "growth_elasticity"]
        rows = [{name: getattr(index, name) for name in columns} for index in self.local]
        rows.sort(key=lambda row: -abs(row["elasticity"] or 0.0))
        return pandas.DataFrame(rows, columns=columns)

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


@dataclass(frozen=True, slots=True)
class DrawFigures:
    """What a set of draws says of one number; None where there are too few values.

    `rejected` of `draws` have no value; the figures are of the rest. `quantiles`: 0.025, 0.25, 0.5, 0.75, 0.975.
    `above_one`: share of the values above 1, with Wilson's 95 % interval for independent draws.
    """

    draws: int
    rejected: int
    mean: float | None
    sd: float | None
    quantiles: Mapping[str, float] | None
    above_one: float | None
    mean_error: float | None
    above_one_interval: tuple[float, float] | None


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


@dataclass(frozen=True, slots=True)
class Swing:
    """R0 with one parameter at either end, the others as they are.

    Attributes
    ----------
    parameter : str
        With its group where the ends are given by group: ``sigma[65+]``; else all groups are moved together.
    low, high : float
        The ends, in the parameter's own unit; factors on its values where it has several.
    unit : str
        Of the ends; empty where they have none or are factors.
    R0_low, R0_high : float or None
        None where there is no R0 at that end.
    """

    parameter: str
    low: float
    high: float
    unit: str
    R0_low: float | None
    R0_high: float | None

    @property
    def width(self) -> float:
        """How far apart R0 is at both ends; 0 where one of them has none."""
        return 0.0 if self.R0_low is None or self.R0_high is None else abs(self.R0_high - self.R0_low)


@dataclass(frozen=True, eq=False, slots=True)
class Swings:
    """R0 at both ends of each parameter's range, and at 10 % less and more: the result of `ngm.swings`, widest first.

    `ranges` holds the parameters with a range, or with a distribution: then its central 95 %. `missing`: why there is no R0
    at some ends -> how many.
    """

    title: str
    digest: str
    R0: float | None
    ranges: tuple[Swing, ...]
    tenth: tuple[Swing, ...]
    missing: Mapping[str, int]

    def to_frame(self) -> pandas.DataFrame:
        """Return a row an end pair; `over` says whether it is the range or 10 %."""
        import pandas

        columns = ["over", "parameter", "low", "high", "unit", "R0_low", "R0_high"]
        rows = [
            {"over": over, **{name: getattr(swing, name) for name in columns[1:]}}
            for over, swings in (("range", self.ranges), ("10 %", self.tenth))
            for swing in swings
        ]
        return pandas.DataFrame(rows, columns=columns)


@dataclass(frozen=True, eq=False, slots=True)
class Plane:
    """R0 over two quantities at once, with the lines on which it has given values: the result of `ngm.plane`.

    Attributes
    ----------
    R0 : tuple of rows
        Row: y, column: x; None where there is no R0.
    now : float or None
        R0 of the scenario as it is.
    lines : tuple of (level, pieces)
        Straight pieces of the line R0 = level, between neighbours on the grid.
    missing : mapping of str to int
        Why there is no R0 -> at how many points.
    """

    title: str
    digest: str
    x: Scale
    y: Scale
    R0: tuple[tuple[float | None, ...], ...]
    now: float | None
    lines: tuple[tuple[float, tuple[Piece, ...]], ...]
    missing: Mapping[str, int]

    def to_frame(self) -> pandas.DataFrame:
        """Return a row a point: x, y, R0."""
        import pandas

        rows = [
            (x, y, R0)
            for y, row in zip(self.y.values, self.R0, strict=True)
            for x, R0 in zip(self.x.values, row, strict=True)
        ]
        return pandas.DataFrame(rows, columns=[self.x.title, self.y.title, "R0"])


@dataclass(frozen=True, slots=True)
class Calibration:
    """The value of a parameter at which R0 (or the growth rate) is what is wanted: the result of `ngm.calibrate`.

    `R0` is the wanted one; where a growth rate is wanted, the one that goes with it, None where there is none.
    """

    parameter: str
    value: float
    R0: float | None
    warnings: tuple[str, ...]
    growth_rate: float | None = None

    def to_json(self) -> dict[str, Any]:
        """Return the object that `calibrate --json` prints."""
        wanted = {} if self.growth_rate is None else {"growth_rate": self.growth_rate}
        return {
            "parameter": self.parameter,
            "value": self.value,
            "R0": self.R0,
            **wanted,
            "warnings": list(self.warnings),
        }
