"""One or two quantities moved away from where they are: R0 at the ends of each parameter's range, and over a plane."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ngm.analysis.batch import draw_numbers
from ngm.analysis.sensitivity import number_rows, own_values
from ngm.analysis.steady import refuse_season
from ngm.analysis.uncertainty import inputs_of
from ngm.engine.level import level_line
from ngm.errors import Problem, ScenarioError
from ngm.progress import expect
from ngm.results_mixing import Scale
from ngm.results_sensitivity import Plane, Swing, Swings
from ngm.scenario.fields import closest, short
from ngm.scenario.model import Parameter, Scenario

__all__ = ["plane", "swings"]

#: Points on each side of a plane of parameters; of contacts, where each point is derived by itself.
SIDE = 41
CONTACT_SIDE = 15
MOST_SIDE = 401
#: Levels at the most, so that their lines can be told apart.
MOST_LEVELS = 12
#: The share of a distribution that stands for a range.
CENTRAL = (0.025, 0.975)
TENTH = 0.1


@dataclass(frozen=True)
class _Moved:
    """A parameter, or one group of it, that can be moved.

    `items`: its numbers by name, in the parameter's own unit. `single`: the value where they are all the same, else None:
    then a factor on all of them is moved.
    """

    name: str
    parameter: Parameter
    items: Mapping[str, float]

    @property
    def single(self) -> float | None:
        values = set(self.items.values())
        return values.pop() if len(values) == 1 else None

    @property
    def unit(self) -> str:
        return "" if self.parameter.unit is None else self.parameter.unit.text

    @property
    def title(self) -> str:
        if self.single is None:
            return f"factor on {self.name}"
        return f"{self.name} ({self.unit})" if self.unit else self.name

    def at(self, value: float) -> dict[str, float]:
        """Return the numbers with the value in force, or with the factor where there are several."""
        return {item: value if self.single is not None else value * own for item, own in self.items.items()}


def _movable(scenario: Scenario) -> dict[str, _Moved]:
    """Return all that can be moved: each parameter given by numbers, and each group of one."""
    values = own_values(scenario)
    owned: dict[str, dict[str, float]] = {}
    out: dict[str, _Moved] = {}
    for parameter, _, item in number_rows(scenario):
        owned.setdefault(parameter.name, {})[item] = values[item]
    for name, items in owned.items():
        parameter = scenario.parameters[name]
        out[name] = _Moved(name, parameter, items)
        if len(items) > 1:
            out |= {item: _Moved(item, parameter, {item: value}) for item, value in items.items()}
    return out


def _span(scenario: Scenario, moved: _Moved) -> tuple[float, float] | None:
    """Return the range of a parameter, the central 95 % of its distribution, or None where it has neither."""
    if moved.parameter.range is not None:
        low, high = moved.parameter.range
        return (low, high) if low < high else None
    for one in inputs_of(scenario):
        if one.name in (moved.name, moved.parameter.name):
            low, high = (float(v) for v in one.at(np.array(CENTRAL)))
            return (low, high) if low < high else None
    return None


def swings(scenario: Scenario) -> Swings:
    """Return R0 with each parameter in turn at either end of its range, and 10 % below and above its value.

    A parameter with a distribution and no range goes over the central 95 % of the distribution. One given by group is moved
    in all groups together, but over ranges where it has a distribution for each group.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`.
    """
    refuse_season(scenario, "R0 over ranges")
    known = _movable(scenario)
    values = own_values(scenario)
    wanted: list[tuple[str, _Moved, float, float, str, dict[str, float], dict[str, float]]] = []
    drawn = {one.name for one in inputs_of(scenario)} | {p.name for p in scenario.parameters.values() if p.range}
    for name, moved in known.items():
        span = _span(scenario, moved) if name in drawn else None
        if span is not None:
            # A range is one of values, so all groups take the end, as they do in draws.
            ends = [dict.fromkeys(moved.items, end) for end in span]
            wanted.append(("range", moved, span[0], span[1], moved.unit, ends[0], ends[1]))
        if name == moved.parameter.name and any(moved.items.values()):
            single = moved.single
            low, high = 1 - TENTH, 1 + TENTH
            if single is not None:
                low, high = sorted((low * single, high * single))
            unit = moved.unit if single is not None else ""
            wanted.append(("tenth", moved, low, high, unit, moved.at(low), moved.at(high)))
    points: list[Mapping[str, float]] = [{}]
    for one in wanted:
        points += [one[5], one[6]]
    varied = {item for point in points for item in point}
    if not varied:
        return Swings(scenario.title, scenario.digest, None, (), (), {})
    columns = {item: np.array([point.get(item, values[item]) for point in points]) for item in values if item in varied}
    found = draw_numbers(scenario, columns, passing=True)
    R0 = [None if math.isnan(value) else float(value) for value in found.values]
    out: dict[str, list[Swing]] = {"range": [], "tenth": []}
    for k, (over, moved, low, high, unit, _, _) in enumerate(wanted):
        out[over].append(Swing(moved.name, low, high, unit, R0[2 * k + 1], R0[2 * k + 2]))
    for rows in out.values():
        rows.sort(key=lambda swing: -swing.width)
    return Swings(scenario.title, scenario.digest, R0[0], tuple(out["range"]), tuple(out["tenth"]), found.missing)


def plane(
    scenario: Scenario,
    x: str | tuple[str, str],
    y: str | tuple[str, str],
    *,
    levels: Sequence[float] = (1.0,),
    side: int | None = None,
    ranges: tuple[tuple[float, float] | None, tuple[float, float] | None] = (None, None),
    within: str | None = None,
) -> Plane:
    """Return R0 over two quantities at once, with the lines on which it has given values.

    Parameters
    ----------
    x, y : str or (kind, name)
        A parameter, ``"sigma[65+]"`` for one group of it, or ``("parameter", name)``: its value in its own unit, a factor on
        its values where they differ by group. ``("factor", matrix)``: what multiplies a matrix of contacts;
        ``("assortativity", matrix)``: its index Q.
    levels : sequence of float > 0
        Values of R0 whose lines are drawn.
    side : int
        Points along each axis: 41, with contacts 15.
    ranges : pair of (low, high) or None
        Where each axis runs. None: a parameter over its range or the central 95 % of its distribution, else from 0 to twice
        its value; a factor on one from 0 to 2; contacts as in `ngm.mixing_map`.
    within : str, optional
        As in `ngm.mixing_map`.

    Raises
    ------
    ngm.ScenarioError
        A quantity that is none or follows others, twice the same, a level or range that is none.
    """
    refuse_season(scenario, "R0 over a plane")
    wanted = [("parameter", axis) if isinstance(axis, str) else axis for axis in (x, y)]
    _check_levels(levels)
    if side is not None and not 2 <= side <= MOST_SIDE:
        raise ScenarioError(Problem("plane", f"{side} points on a side: expected 2 to {MOST_SIDE}."))
    if wanted[0] == wanted[1]:
        raise ScenarioError(Problem("plane", "both axes are the same quantity. Choose two."))
    if any(kind != "parameter" for kind, _ in wanted):
        return _with_contacts(scenario, wanted, levels, side or CONTACT_SIDE, ranges, within)
    known = _movable(scenario)
    moved = [_find(scenario, known, name) for _, name in wanted]
    shared = set(moved[0].items) & set(moved[1].items)
    if shared:
        raise ScenarioError(Problem("plane", f"both axes move {sorted(shared)[0]}. Choose two that are apart."))
    axes = [
        _axis(scenario, one, limits, SIDE if side is None else side) for one, limits in zip(moved, ranges, strict=True)
    ]
    across, upward = np.meshgrid(axes[0].values, axes[1].values)
    columns: dict[str, Any] = {}
    for one, values in zip(moved, (across.ravel(), upward.ravel()), strict=True):
        for item, own in one.items.items():
            columns[item] = values if one.single is not None else values * own
    expect(across.size)
    found = draw_numbers(scenario, columns, passing=True)
    table = found.values.reshape(across.shape)
    here = {item: np.array([own]) for one in moved for item, own in one.items.items()}
    now = float(draw_numbers(scenario, here, passing=True).values[0])
    return Plane(
        scenario.title,
        scenario.digest,
        axes[0],
        axes[1],
        tuple(tuple(None if math.isnan(v) else v for v in row) for row in table.tolist()),
        None if math.isnan(now) else now,
        tuple((float(level), level_line(axes[0].values, axes[1].values, table, level)) for level in levels),
        found.missing,
    )


def _check_levels(levels: Sequence[float]) -> None:
    bad = [level for level in levels if not (math.isfinite(level) and level > 0)]
    if bad:
        raise ScenarioError(Problem("plane, levels", f"{bad[0]:g} is no value of R0 to draw a line at: it is above 0."))
    if len(levels) > MOST_LEVELS:
        raise ScenarioError(Problem("plane, levels", f"{len(levels)} levels: {MOST_LEVELS} at the most."))


def _find(scenario: Scenario, known: Mapping[str, _Moved], name: str) -> _Moved:
    if name in known:
        return known[name]
    if name in scenario.parameters:
        raise ScenarioError(
            Problem("plane", f"{name} follows other parameters. Choose one that it follows, or give it a number.")
        )
    raise ScenarioError(
        Problem("plane", f"'{short(name)}' is no parameter of this scenario.{closest(name, list(known))}")
    )


def _axis(scenario: Scenario, moved: _Moved, limits: tuple[float, float] | None, side: int) -> Scale:
    single = moved.single
    if limits is not None:
        low, high = limits
    elif single is None:
        low, high = 0.0, 2.0
    else:
        low, high = _span(scenario, moved) or (min(0.0, 2 * single), max(0.0, 2 * single) or 1.0)
    lowest = -math.inf if moved.parameter.any_sign else 0.0
    if not (math.isfinite(low) and math.isfinite(high) and lowest <= low < high):
        raise ScenarioError(Problem(f"plane, {moved.title}", f"from {low:g} to {high:g} is no range for it."))
    values = tuple(np.linspace(low, high, side).tolist())
    return Scale("parameter", moved.name, moved.title, values, 1.0 if single is None else single)


def _with_contacts(
    scenario: Scenario,
    wanted: Sequence[tuple[str, str]],
    levels: Sequence[float],
    side: int,
    ranges: tuple[tuple[float, float] | None, tuple[float, float] | None],
    within: str | None,
) -> Plane:
    """Return the plane where a matrix of contacts is on an axis: each point is a derivation with other contacts in force."""
    from ngm.analysis.mixing_scan import mixing_map

    found = mixing_map(scenario, wanted[0], wanted[1], within=within, side=side, ranges=ranges)
    table = np.array([[np.nan if R0 is None else R0 for R0 in row] for row in found.R0])
    count = int(np.isnan(table).sum())
    return Plane(
        found.title,
        found.digest,
        found.x,
        found.y,
        found.R0,
        found.now,
        tuple((float(level), level_line(found.x.values, found.y.values, table, level)) for level in levels),
        {} if not count else {found.missing or "no R0": count},
    )
