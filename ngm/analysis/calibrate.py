"""The value of a parameter at which R0, or the growth rate, is what is wanted."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

from ngm.analysis.numbers import Numbers
from ngm.analysis.steady import refuse_season
from ngm.engine.balls import PRECISION, nearest, precision
from ngm.engine.roots import root_between
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.expression.names import suggest
from ngm.progress import advance, expect
from ngm.results_sensitivity import Calibration
from ngm.scenario.model import Scenario
from ngm.scenario.values import with_values

__all__ = ["calibrate"]

#: Points of the search, and how many decades it spans to either side of the value where the parameter has no range.
POINTS = 49
DECADES = 6.0


def calibrate(
    scenario: Scenario, parameter: str, R0: float | None = None, *, growth_rate: float | None = None
) -> Calibration:
    """Return the value of a parameter (own unit, all groups) at which R0, or the growth rate, is the one that is wanted.

    The search runs over the parameter's range where it has one, else from 0 up to a million times its value. Of several
    values the smallest is returned, and the others are named in `warnings`.

    Parameters
    ----------
    R0 : float > 0
    growth_rate : float
        Per time unit of the scenario, in place of R0.

    Raises
    ------
    ngm.ScenarioError
        The parameter is unknown, what is wanted is no such number, or it is not attained: with the interval that is.
    """
    refuse_season(scenario, "the value for a wanted R0")
    if parameter not in scenario.parameters:
        near = suggest(parameter, list(scenario.parameters))
        hint = f" Did you mean '{near}'?" if near else f" Parameters: {', '.join(list(scenario.parameters)[:20])}."
        raise ScenarioError(Problem("calibrate, parameter", f"'{parameter}' is not a parameter.{hint}"))
    if (R0 is None) == (growth_rate is None):
        raise ScenarioError(Problem("calibrate", "expected a wanted R0 or a wanted growth rate, one of the two."))
    if R0 is not None:
        name, wanted = "R0", R0
        if not (math.isfinite(wanted) and wanted > 0):
            raise ScenarioError(Problem("calibrate, R0", f"expected a number above 0, not {wanted!r}."))
    else:
        assert growth_rate is not None
        name, wanted = "growth rate", growth_rate
        if not math.isfinite(wanted):
            raise ScenarioError(Problem("calibrate, growth rate", f"expected a number, not {wanted!r}."))
    search = _Search(scenario, parameter, growth=R0 is None)
    grid = _grid(scenario, parameter, search.value)
    expect(len(grid))
    points = [(x, search.at(x)) for x in grid]
    found: list[float] = []
    for (a, fa), (b, fb) in pairwise(points):
        if fa is not None and fa == wanted:
            found.append(a)
        elif fa is not None and fb is not None and (fa - wanted) * (fb - wanted) < 0:
            sign = 1.0 if fa > fb else -1.0
            found.append(root_between(search.times(sign), a, b, sign * wanted))
    if points[-1][1] == wanted:
        found.append(points[-1][0])
    if not found:
        raise _unattained(parameter, name, wanted, points, search.problem)
    unit = scenario.parameters[parameter].unit
    shown = f" {unit.text}" if unit is not None else ""
    warnings = list(scenario.warnings)
    if len(found) > 1:
        warnings.append(
            f"{'R0' if R0 is not None else 'The growth rate'} is {wanted:g} at several values of {parameter}: also at "
            + ", ".join(f"{value:.9g}{shown}" for value in found[1:])
            + "."
        )
    if any(value is None for _, value in points):
        warnings.append(f"At some values of {parameter} in the search there is no {name}; they were passed over.")
    known = [value for _, value in points if value is not None]
    return Calibration(
        parameter,
        found[0],
        _Search(scenario, parameter).at(found[0]) if R0 is None else R0,
        tuple(warnings),
        growth_rate,
        values=tuple(found),
        attainable=(min(known), max(known)),
    )


class _Search:
    """R0, or the growth rate, as a function of one parameter's value."""

    def __init__(self, scenario: Scenario, parameter: str, *, growth: bool = False) -> None:
        from ngm.analysis.sensitivity import own_value

        self.scenario, self.parameter, self.growth = scenario, parameter, growth
        self.value = own_value(scenario, parameter)
        self.known: dict[float, float | None] = {}
        self.problem: NgmError | None = None

    def at(self, x: float) -> float | None:
        """Return the number at x, None where there is none."""
        if x not in self.known:
            self.known[x] = self._solve(x)
            advance()
        return self.known[x]

    def times(self, sign: float) -> Callable[[float], float | None]:
        """Return the number as a function of the value, with a sign."""

        def function(x: float) -> float | None:
            value = self.at(x)
            return None if value is None else sign * value

        return function

    def _solve(self, x: float) -> float | None:
        try:
            changed = with_values(self.scenario, {self.parameter: x}, rewrite=False)
            with precision(PRECISION):
                found = Numbers(changed)
                if self.growth:
                    return found.growth
                if found.no_R0 is not None:
                    return None
                return 0.0 if found.spectrum is None else nearest(found.spectrum.root)
        except NgmError as error:
            self.problem = error
            return None


def _grid(scenario: Scenario, parameter: str, value: float | None) -> list[float]:
    given = scenario.parameters[parameter].range
    if given is not None:
        low, high = given
        if low > 0 and high / low > 20:
            return [low * (high / low) ** (k / (POINTS - 1)) for k in range(POINTS - 1)] + [high]
        return [low + (high - low) * k / (POINTS - 1) for k in range(POINTS - 1)] + [high]
    scale = abs(value) if value else 1.0
    steps = [scale * 10 ** (DECADES * (2 * k / (POINTS - 1) - 1)) for k in range(POINTS)]
    return [0.0, *steps]


def _unattained(
    parameter: str, name: str, wanted: float, points: list[tuple[float, float | None]], problem: NgmError | None
) -> ScenarioError:
    values = [value for _, value in points if value is not None]
    if not values:
        reason = f" {problem.problems[0]}" if problem is not None else ""
        return ScenarioError(
            Problem(
                "calibrate",
                f"there is no {name} at any value of {parameter} from {points[0][0]:g} to {points[-1][0]:g}.{reason}",
            )
        )
    return ScenarioError(
        Problem(
            f"calibrate, {name}",
            f"{wanted:g} is not attained: for {parameter} from {points[0][0]:g} to {points[-1][0]:g}, {name} goes from "
            f"{min(values):.9g} to {max(values):.9g}. Ask for a number in this interval, or give the parameter another range.",
        )
    )
