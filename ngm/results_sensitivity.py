"""What the analyses of sensitivity return: local indices, entries of K, a calibrated value.

As in `ngm.results`, what does not exist is `None`, with the reason in `warnings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ngm.results import Matrix

if TYPE_CHECKING:
    import pandas

__all__ = ["Assurance", "Calibration", "DrawFigures", "Driver", "LocalIndex", "Sensitivity", "Uncertainty"]


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
    growth_rate: float
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
class Calibration:
    """The value of a parameter at which R0 (or the growth rate) is what is wanted: the result of `ngm.calibrate`."""

    parameter: str
    value: float
    R0: float
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `calibrate --json` prints."""
        return {"parameter": self.parameter, "value": self.value, "R0": self.R0, "warnings": list(self.warnings)}
