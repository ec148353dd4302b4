"""Seasons of parameters: the common period, where factors jump, and the mean over the year.

A season multiplies a parameter's value in the course of a period. The *averaged season* is the scenario in which each
seasonal parameter stands at its mean over the period: what everything that knows no time computes with.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from fractions import Fraction

from ngm.expression.tree import names
from ngm.scenario.model import Scenario, Season

__all__ = [
    "MOST_REPEATS",
    "breaks",
    "common_period",
    "follows_a_season",
    "mean_factor",
    "repeats",
    "seasonal_parameters",
]

#: The longest season may fit into the common period this many times, and the shortest this many.
MOST_REPEATS = 400


def mean_factor(season: Season) -> Fraction:
    """Return the mean over a period of what the value is multiplied by: 1 for a wave, the mean of the listed factors."""
    return sum(season.values, Fraction(0)) / len(season.values) if season.values else Fraction(1)


def seasonal_parameters(scenario: Scenario) -> dict[str, Season]:
    """Return the seasons of a scenario, parameter by parameter; empty where there is none."""
    return {name: p.season for name, p in scenario.parameters.items() if p.season is not None}


def follows_a_season(scenario: Scenario) -> frozenset[str]:
    """Return the parameters that change in the course of the period: the seasonal ones and all that follow them."""
    changing = set(seasonal_parameters(scenario))
    while True:
        more = {
            name
            for name, parameter in scenario.parameters.items()
            if name not in changing and any(names(value.tree) & changing for value in parameter.values)
        }
        if not more:
            return frozenset(changing)
        changing |= more


def least_common_multiple(periods: Iterable[Fraction]) -> Fraction:
    """Return the shortest time that is a whole number of each of these periods.

    >>> least_common_multiple([Fraction(1, 2), Fraction(3, 4)])
    Fraction(3, 2)
    """
    out: Fraction | None = None
    for period in periods:
        if out is None:
            out = period
        else:
            out = Fraction(math.lcm(out.numerator, period.numerator), math.gcd(out.denominator, period.denominator))
    if out is None:
        raise ValueError("no period was given")
    return out


def repeats(periods: Iterable[Fraction]) -> Fraction:
    """Return how often the shortest of these periods fits into their least common multiple."""
    listed = list(periods)
    return least_common_multiple(listed) / min(listed)


def common_period(scenario: Scenario) -> Fraction:
    """Return the period after which all seasons of a scenario begin anew, in its time unit.

    Raises
    ------
    ValueError
        The scenario has no season.
    """
    return least_common_multiple(season.period for season in seasonal_parameters(scenario).values())


def breaks(scenario: Scenario) -> tuple[Fraction, ...]:
    """Return the moments within the common period, 0 and its end included, between which every factor is smooth."""
    period = common_period(scenario)
    out = {Fraction(0), period}
    for season in seasonal_parameters(scenario).values():
        if season.values:
            part = season.period / len(season.values)
            out |= {part * k for k in range(int(period / part) + 1)}
    return tuple(sorted(out))
