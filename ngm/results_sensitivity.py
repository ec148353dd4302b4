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

__all__ = ["Calibration", "LocalIndex", "Sensitivity"]


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
    global_indices: Mapping[str, Any] | None = None

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
            "global": None if self.global_indices is None else dict(self.global_indices),
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
class Calibration:
    """The value of a parameter at which R0 (or the growth rate) is what is wanted: the result of `ngm.calibrate`."""

    parameter: str
    value: float
    R0: float
    warnings: tuple[str, ...]

    def to_json(self) -> dict[str, Any]:
        """Return the object that `calibrate --json` prints."""
        return {"parameter": self.parameter, "value": self.value, "R0": self.R0, "warnings": list(self.warnings)}
