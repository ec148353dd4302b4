"""What the analyses of sensitivity return: local indices, entries of K, swings, draws, planes, a calibrated value.

As in `ngm.results`, what does not exist is `None`, with the reason in `warnings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.results import Matrix
from ngm.results_draws import Assurance, Assured, DrawFigures, DrawTable, Driver, Spread, Uncertainty
from ngm.results_mixing import Piece, Scale

if TYPE_CHECKING:
    import pandas

__all__ = [
    "Assurance",
    "Assured",
    "Calibration",
    "DrawFigures",
    "DrawTable",
    "Driver",
    "LocalIndex",
    "Plane",
    "Sensitivity",
    "Spread",
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
    formula, elasticity_formula : str or None
        dR0/dp and (p/R0) dR0/dp in the expression syntax, every name as converted to the scenario's units; None where R0 has
        no closed form. `derivative` is the first times `factor`, the parameter's own unit in these.
    factor : float
    """

    parameter: str
    value: float
    derivative: float | None
    elasticity: float | None
    growth_derivative: float | None
    growth_elasticity: float | None
    formula: str | None = None
    elasticity_formula: str | None = None
    factor: float = 1.0


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
        formulas = [
            {"parameter": i.parameter, "derivative": i.formula, "elasticity": i.elasticity_formula, "factor": i.factor}
            for i in self.local
            if i.formula is not None
        ]
        return {
            "local": [
                {"parameter": i.parameter, "derivative": i.derivative, "elasticity": i.elasticity} for i in self.local
            ],
            "entries": {
                "sensitivity": None if self.entry_sensitivity is None else [list(r) for r in self.entry_sensitivity],
                "elasticity": None if self.entry_elasticity is None else [list(r) for r in self.entry_elasticity],
            },
            "global": None if self.uncertainty is None else self.uncertainty.to_json(),
            **({} if self.uncertainty is None else self.uncertainty.more_json()),
            **({"formulas": formulas} if formulas else {}),
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

    `R0` is the wanted one; where a growth rate is wanted, the one that goes with it, None where there is none. `values`: all
    that were found, `value` the smallest; `attainable`: what the number goes from and to over the search.
    """

    parameter: str
    value: float
    R0: float | None
    warnings: tuple[str, ...]
    growth_rate: float | None = None
    values: tuple[float, ...] = ()
    attainable: tuple[float, float] | None = None

    def to_json(self) -> dict[str, Any]:
        """Return the object that `calibrate --json` prints."""
        wanted = {} if self.growth_rate is None else {"growth_rate": self.growth_rate}
        return {
            "parameter": self.parameter,
            "value": self.value,
            "R0": self.R0,
            **wanted,
            "values": list(self.values),
            "attainable": None if self.attainable is None else list(self.attainable),
            "warnings": list(self.warnings),
        }
