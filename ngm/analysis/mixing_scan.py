"""How R0 and the case mix answer to mixing: along assortativity and settings, by pair, and over two quantities at once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

import numpy as np

from ngm.analysis.mixing import Chosen, Shares, choose, rows_of, shares
from ngm.analysis.steady import refuse_season
from ngm.analysis.variation import MOST_VARIED, Outcome, Variation, contact_matrices
from ngm.engine.contacts import ContactError, FloatArray
from ngm.engine.level import level_line
from ngm.engine.mixing import assortativity_index, with_assortativity
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.results import Vector
from ngm.results_mixing import Curve, MixingMap, MixingResponses, Scale
from ngm.scenario.fields import closest, short
from ngm.scenario.model import Change, Intervention, Parameter, Scenario, number
from ngm.scenario.values import intervened, with_values

__all__ = ["mixing_map", "mixing_responses"]

#: Points along a curve, and on each side of a map.
POINTS = 21
SIDE = 15
#: Factors go from 0 to this.
LARGEST_FACTOR = 1.5
#: Groups up to which every entry has its elasticity.
MOST_GROUPS = 40
#: The kinds of an axis.
KINDS = ("factor", "assortativity", "parameter")


def mixing_responses(
    scenario: Scenario, matrix: str | None = None, within: str | None = None, *, sizes: Sequence[float] | None = None
) -> MixingResponses:
    """Return how R0 and the case mix answer to assortativity, to a factor on each setting, and to each pair's contacts.

    Elasticities are of the matrix in force, so of C' where it is balanced, taken as fixed. They are those of R0 with the
    rest of the model as it is: the derivative by C_ij is v (dF - K dV) V^-1 w / (v w) with the Perron vectors of K.

    Parameters
    ----------
    matrix, within : str, optional
        As for `ngm.mixing`.
    sizes : sequence of float, optional
        Members of each group, which the path of assortativity downwards needs: those of `ngm.mixing` where left out.

    Raises
    ------
    ngm.ScenarioError
        As `ngm.mixing`; more than 300 types.
    """
    refuse_season(scenario, "what R0 answers to mixing")
    chosen = choose(scenario, matrix, within)
    varied = _varied(scenario)
    by = shares(varied, chosen.matrix.by)
    if sizes is None:
        sizes = _own_sizes(scenario, chosen)
    here = varied.outcome()
    warnings = list(scenario.warnings)
    if here.R0 is None:
        warnings.append(f"No R0: {here.why}")
    along, no_path = _assortativity(varied, chosen, by, sizes)
    settings = []
    losses: list[float | None] = []
    for name in contact_matrices(scenario):
        slope = varied.slopes(name, [varied.tables[name]]) if here.R0 else None
        curve = _factor(varied, name, by)
        settings.append(replace(curve, elasticity=None if slope is None or not here.R0 else slope[0] / here.R0))
        without = curve.R0[0]
        losses.append(None if without is None or not here.R0 else 1 - without / here.R0)
    entries, why = _entries(varied, chosen, here)
    pairs = None if entries is None else np.where(np.eye(len(entries), dtype=bool), entries, entries + entries.T)
    return MixingResponses(
        title=scenario.title,
        digest=scenario.digest,
        matrix=chosen.name,
        within=chosen.within,
        groups=chosen.groups,
        mix_labels=by.labels,
        R0=here.R0,
        assortativity=along,
        no_assortativity=no_path,
        settings=tuple(settings),
        losses=tuple(losses),
        entries=None if entries is None else rows_of(entries),
        pairs=None if pairs is None else rows_of(pairs),
        by_group=None if pairs is None else tuple(pairs.sum(axis=1).tolist()),
        no_elasticities=why,
        exact=not varied.moves_state(chosen.name),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _varied(scenario: Scenario) -> Variation:
    varied = Variation(scenario)
    count = len(varied.template.types)
    if count > MOST_VARIED:
        raise ScenarioError(
            Problem(
                "", f"the scenario has {count} types: it is evaluated again and again for up to {MOST_VARIED} only."
            )
        )
    return varied


def _own_sizes(scenario: Scenario, chosen: Chosen) -> Vector | None:
    from ngm.analysis.mixing import mixing

    return mixing(scenario, chosen.name, chosen.within).sizes


def _curve(kind: str, name: str, now: float, points: list[tuple[float, Outcome]], by: Shares) -> Curve:
    return Curve(
        name,
        kind,
        now,
        tuple(x for x, _ in points),
        tuple(outcome.R0 for _, outcome in points),
        tuple(by.of(outcome.right) for _, outcome in points),
    )


def _assortativity(
    varied: Variation, chosen: Chosen, by: Shares, sizes: Sequence[float] | None
) -> tuple[Curve | None, str | None]:
    if sizes is None:
        return None, "the sizes of the groups are not known"
    table = chosen.table_of(varied.tables)
    now = assortativity_index(table)
    if now is None:
        return None, _no_index(chosen, table)
    start = min(0.0, now)
    points = []
    for Q in sorted({*(start + (1 - start) * k / (POINTS - 1) for k in range(POINTS)), now}):
        moved = with_assortativity(table, np.array(sizes), Q)
        points.append((Q, varied.outcome({chosen.name: chosen.put_into(varied.tables, moved)})))
    return _curve("assortativity", chosen.name, now, points, by), None


def _no_index(chosen: Chosen, table: FloatArray) -> str:
    """Return why a table has no assortativity index."""
    idle = [group for group, row in zip(chosen.groups, table, strict=True) if not np.any(row > 0)]
    if not idle:
        return "a single group has no assortativity"
    named = ", ".join(idle[:6]) + (", …" if len(idle) > 6 else "")
    return f"{chosen.name} has no assortativity index: {named} makes no contacts there, so has no shares of them"


def _factor(varied: Variation, name: str, by: Shares) -> Curve:
    """Return R0 and the case mix along a factor on one matrix, from 0 to 1.5 in steps of 0.05."""
    steps = 31
    factors = [LARGEST_FACTOR * k / (steps - 1) for k in range(steps)]
    points = [(factor, varied.outcome({name: factor * varied.tables[name]})) for factor in factors]
    return _curve("factor", name, 1.0, points, by)


def _entries(varied: Variation, chosen: Chosen, here: Outcome) -> tuple[FloatArray | None, str | None]:
    """Return the elasticity of R0 by every entry of one table."""
    if not here.R0:
        return None, "there is no R0, or it is 0"
    table = chosen.table_of(varied.tables)
    size = len(table)
    if size > MOST_GROUPS:
        return None, f"{size} groups: elasticities by pair are computed for up to {MOST_GROUPS}"
    places = [(i, j) for i in range(size) for j in range(size) if table[i, j] > 0]
    directions = []
    for i, j in places:
        single = np.zeros_like(table)
        single[i, j] = table[i, j]
        directions.append(chosen.put_into({chosen.name: np.zeros_like(varied.tables[chosen.name])}, single))
    found = varied.slopes(chosen.name, directions)
    if found is None:
        return None, "R0 has no slope here: classes tie, or it is undefined nearby"
    out = np.zeros_like(table)
    for (i, j), slope in zip(places, found, strict=True):
        out[i, j] = slope / here.R0
    return out, None


# --- two quantities at once ---------------------------------------------------------------------------------------------


def mixing_map(
    scenario: Scenario,
    x: tuple[str, str],
    y: tuple[str, str],
    *,
    within: str | None = None,
    side: int = SIDE,
    ranges: tuple[tuple[float, float] | None, tuple[float, float] | None] = (None, None),
) -> MixingMap:
    """Return R0 over two quantities at once, with the line R0 = 1.

    Parameters
    ----------
    x, y : (kind, name)
        ``("factor", matrix)``: what multiplies a matrix of contacts; ``("assortativity", matrix)``: its index Q;
        ``("parameter", name)``: a value in the parameter's own unit, or a factor where it is grouped or follows others.
    within : str, optional
        The group whose matrix changes its assortativity, for one given within another dimension.
    side : int
        Points along each axis.
    ranges : pair of (low, high) or None
        Where each axis runs. None: a factor from 0 to 1.5, Q from 0 (or where it is, if lower) to 1, a parameter over
        its range, or from 0 to twice its value.

    Raises
    ------
    ngm.ScenarioError
        A quantity that is none, twice the same, or a range that is none or out of reach.
    """
    refuse_season(scenario, "a map of R0")
    if x == y:
        raise ScenarioError(Problem("", "both axes are the same quantity. Choose two."))
    base = _varied(scenario)
    axes = [_axis(base, *wanted, within, limits, side) for wanted, limits in zip((x, y), ranges, strict=True)]
    grid_of = _Grid(base, axes, within)
    rows = [[grid_of.at((a, b)) for a in axes[0].values] for b in axes[1].values]
    grid = [[outcome.R0 for outcome in row] for row in rows]
    missing = next((outcome.why for row in rows for outcome in row if outcome.R0 is None), None)
    values = np.array([[np.nan if R0 is None else R0 for R0 in row] for row in grid])
    return MixingMap(
        scenario.title,
        scenario.digest,
        axes[0],
        axes[1],
        tuple(tuple(row) for row in grid),
        base.outcome().R0,
        level_line(axes[0].values, axes[1].values, values, 1.0),
        missing,
    )


def _axis(
    base: Variation, kind: str, name: str, within: str | None, limits: tuple[float, float] | None, side: int
) -> Scale:
    scenario = base.scenario
    if kind not in KINDS:
        raise ScenarioError(Problem("", f"'{short(kind)}' is no kind of axis: factor, assortativity or parameter."))
    now: float | None = 1.0
    low, high, lowest, highest = 0.0, LARGEST_FACTOR, 0.0, np.inf
    title = f"factor on {name}"
    if kind == "parameter":
        if name not in scenario.parameters:
            hint = closest(name, list(scenario.parameters))
            raise ScenarioError(Problem("", f"'{short(name)}' is no parameter of this scenario.{hint}"))
        parameter = scenario.parameters[name]
        if _is_single(parameter):
            now = _number(scenario, name) / float(parameter.factor)
            low, high = parameter.range or (min(0.0, 2 * now), max(0.0, 2 * now) or 1.0)
            lowest = -np.inf if parameter.any_sign else 0.0
            title = f"{name} ({parameter.unit.text})" if parameter.unit is not None else name
    else:
        chosen = choose(scenario, name, within if kind == "assortativity" else None) if kind != "factor" else None
        if chosen is None:
            choose(scenario, name, _some_group(scenario, name))
        else:
            now = assortativity_index(chosen.table_of(base.tables))
            if now is None or _own_sizes(scenario, chosen) is None:
                raise ScenarioError(
                    Problem(
                        "", f"{name} has no assortativity to vary: sizes, several groups, contacts in each are needed."
                    )
                )
            lowest, highest = min(0.0, now), 1.0
            low, high, title = lowest, 1.0, f"assortativity of {name} (index Q)"
    if limits is not None:
        low, high = limits
    if not (np.isfinite(low) and np.isfinite(high) and lowest <= low < high <= highest):
        raise ScenarioError(Problem(title, f"from {low:g} to {high:g} is no range for it."))
    values = tuple(float(v) for v in np.linspace(low, high, side))
    return Scale(kind, name, title, values, now)


def _some_group(scenario: Scenario, name: str) -> str | None:
    """Return a group for a matrix given within another dimension: a factor acts on all of its tables."""
    matrix = scenario.matrices.get(name)
    return None if matrix is None or matrix.within is None else scenario.dimensions[matrix.within].groups[0]


def _is_single(parameter: Parameter) -> bool:
    return not parameter.follows and len({value.tree for value in parameter.values}) == 1


def _number(scenario: Scenario, name: str) -> float:
    from ngm.derivation.evaluate import FLOATS
    from ngm.derivation.template import Template

    return float(Template(scenario).evaluator(FLOATS, {}).name(name).ravel()[0])


class _Grid:
    """Evaluations over two axes; what both share is made once."""

    def __init__(self, base: Variation, axes: Sequence[Scale], within: str | None) -> None:
        self.base, self.axes = base, axes
        self.chosen: dict[str, tuple[Chosen, FloatArray]] = {}
        for axis in axes:
            if axis.kind == "assortativity":
                chosen = choose(base.scenario, axis.name, within)
                # The path leads through the sizes as they are, whatever a parameter on the other axis makes of them.
                self.chosen[axis.name] = chosen, np.array(_own_sizes(base.scenario, chosen))
        self.varied: dict[tuple[float, ...], Variation | Outcome] = {(): base}

    def at(self, values: tuple[float, float]) -> Outcome:
        """Return what holds at one point."""
        pairs = list(zip(self.axes, values, strict=True))
        varied = self._with_parameters([(axis, value) for axis, value in pairs if axis.kind == "parameter"])
        if isinstance(varied, Outcome):
            return varied
        replaced: dict[str, FloatArray] = {}
        # Assortativity first: a factor leaves it as it is.
        for axis, value in pairs:
            if axis.kind == "assortativity":
                chosen, sizes = self.chosen[axis.name]
                try:
                    moved = with_assortativity(chosen.table_of(varied.tables), sizes, value)
                except ContactError as error:
                    return Outcome(None, why=str(error))
                replaced[axis.name] = chosen.put_into(varied.tables, moved)
        for axis, value in pairs:
            if axis.kind == "factor":
                replaced[axis.name] = value * replaced.get(axis.name, varied.tables[axis.name])
        return varied.outcome(replaced)

    def _with_parameters(self, wanted: Sequence[tuple[Scale, float]]) -> Variation | Outcome:
        """Return the scenario at other values of parameters, or why there is none."""
        key = tuple(value for _, value in wanted)
        if key not in self.varied:
            scenario = self.base.scenario
            try:
                for axis, value in wanted:
                    if _is_single(scenario.parameters[axis.name]):
                        scenario = with_values(scenario, {axis.name: value}, rewrite=False)
                    else:
                        scenario = intervened(scenario, _times(axis.name, value))
                self.varied[key] = Variation(scenario)
            except NgmError as error:
                self.varied[key] = Outcome(None, why=str(error.problems[0]))
        return self.varied[key]


def _times(name: str, value: float) -> Intervention:
    return Intervention(name, (Change("parameter", name, "multiply", number(Fraction(value))),))
