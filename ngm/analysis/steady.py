"""What is computed for a steady year only, and is refused for a scenario with a season."""

from __future__ import annotations

from ngm.errors import DerivationError, Problem
from ngm.scenario.model import Scenario
from ngm.scenario.season import seasonal_parameters

__all__ = ["refuse_season"]


def refuse_season(scenario: Scenario, what: str) -> None:
    """Refuse a scenario with a season where only the averaged one could be computed.

    Raises
    ------
    DerivationError
        Naming the seasonal parameters and what is computed with them.
    """
    seasons = seasonal_parameters(scenario)
    if seasons:
        first = next(iter(seasons))
        raise DerivationError(
            Problem(
                f"parameters.{first}, season",
                f"{what} is not computed with a season: it would be that of the averaged year and not of R0. solve, compare, "
                f"control, course and report take the season of {', '.join(seasons)} into account; without season it is that "
                "of a steady year.",
                key=("parameters", first, "season"),
                applies=False,
            )
        )
