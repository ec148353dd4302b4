"""What a season does to R0: the number over a whole period, beside those of the averaged and of the worst season."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

__all__ = ["Seasonal", "SeasonalClass"]


@dataclass(frozen=True, slots=True)
class SeasonalClass:
    """One class of types over the period: its reproduction number, and its Floquet exponent as if it were alone."""

    types: tuple[str, ...]
    R0: float | None
    growth_rate: float | None


@dataclass(frozen=True, eq=False, slots=True)
class Seasonal:
    """The number over a period (Wang & Zhao 2008) and what stands beside it.

    Attributes
    ----------
    R0, no_R0, error
        The number, or why there is none; `error` is the change at the last halving of the steps, enlarged: an estimate, no
        proof.
    growth_rate
        The Floquet exponent per time unit: what the logarithm of infection gains in a period, over its length.
    period, parameters
        In time units; the parameters with a season.
    averaged, worst, mildest
        R0 of the averaged season, and the largest and smallest number that a moment of the year would give if it lasted
        for ever, `worst_at` and `mildest_at` being those moments.
    moments, frozen
        The course of the number of the moment over the period: none of these is R0.
    state_moves, state
        Whether the state without infection itself changes over the period, and its course: compartment -> values at
        `moments`.
    multipliers
        Course of what each seasonal parameter is multiplied by.
    """

    R0: float | None
    no_R0: str | None
    error: float
    growth_rate: float
    period: float
    parameters: tuple[str, ...]
    averaged: float | None
    worst: float | None
    worst_at: float | None
    mildest: float | None
    mildest_at: float | None
    moments: tuple[float, ...]
    frozen: tuple[float, ...]
    state_moves: bool
    state: Mapping[str, tuple[float, ...]]
    multipliers: Mapping[str, tuple[float, ...]]
    classes: tuple[SeasonalClass, ...] = ()
    warnings: tuple[str, ...] = ()

    def to_json(self) -> dict[str, Any]:
        """Return what `solve --json` adds for a scenario with a season."""
        return {
            "period": self.period,
            "parameters": list(self.parameters),
            "error": self.error,
            "averaged": self.averaged,
            "worst": self.worst,
            "worst_at": self.worst_at,
            "mildest": self.mildest,
            "mildest_at": self.mildest_at,
            "state_moves": self.state_moves,
        }
