"""What the spread of the parameters does to R0: draws from their distributions or from a file, and which of them matter."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from fractions import Fraction
from statistics import NormalDist
from typing import Any

import numpy as np

from ngm.analysis.batch import ReproductionNumbers, draw_numbers
from ngm.analysis.drawn import GROWTH, Drawn, drawn_numbers, read_numbers
from ngm.analysis.steady import refuse_season
from ngm.engine.distributions import SamplingError, quantile
from ngm.engine.indices import sobol_indices
from ngm.engine.partial import prcc
from ngm.engine.sampling import Kind, design, saltelli_values
from ngm.engine.summary import Summary, convergence, summary
from ngm.errors import Problem, ScenarioError
from ngm.expression.names import suggest
from ngm.progress import expect
from ngm.results_draws import Assurance, DrawFigures, DrawTable, Driver, Spread, Uncertainty
from ngm.scenario.model import Distribution, Parameter, Scenario

__all__ = ["MOST_DRAWS", "Correlation", "Input", "draw_table", "drawn_columns", "inputs_of", "spread_of", "uncertainty"]

#: Rank correlations of the inputs: a matrix in their order, or pairs of them, all others 0.
Correlation = Sequence[Sequence[float]] | Mapping[tuple[str, str], float]

#: Draws at the most, and evaluations at the most for the Sobol indices.
MOST_DRAWS = 10_000_000
MOST_EVALUATIONS = 2_000_000
#: Bars of the histogram.
BARS = 40


@dataclass(frozen=True)
class Input:
    """One column of draws: a parameter, or one group of it, with its distribution."""

    name: str
    parameter: Parameter
    distribution: Distribution

    def at(self, u: Any) -> Any:
        """Return the values below which the distribution holds the shares u."""
        upper = 100.0 if self.parameter.unit is not None and self.parameter.unit.factor == Fraction(1, 100) else 1.0
        name, arguments = self.distribution.name, self.distribution.arguments
        if name == "normal" and not self.parameter.any_sign:
            below = NormalDist(arguments["mean"], arguments["sd"]).cdf(0.0)
            u = below + np.asarray(u) * (1 - below)
        return quantile(name, arguments, u, upper=upper)

    @property
    def is_cut(self) -> bool:
        """True for a normal distribution of which a visible part lies below 0, where the parameter may not be."""
        mean, sd = self.distribution.arguments.get("mean", 0.0), self.distribution.arguments.get("sd", 0.0)
        return self.distribution.name == "normal" and not self.parameter.any_sign and mean < 4 * sd


def uncertainty(
    scenario: Scenario,
    draws: int | Mapping[str, Any],
    *,
    seed: int = 0,
    kind: Kind = "latin_hypercube",
    correlation: Correlation | None = None,
    of: Sequence[str] = (),
    interventions: bool = True,
    assurance: float = 0.9,
    executor: Executor | None = None,
) -> Uncertainty:
    """Return what the spread of the parameters does to R0, and to other numbers.

    Parameters
    ----------
    scenario : Scenario
    draws : int or mapping of str to array
        How many draws from the parameters' distributions (uniform over the range where no distribution is named), or the
        draws themselves: joint draws, in each parameter's own unit.
    seed : int >= 0
        The same seed gives the same numbers, however the work is split.
    kind : "latin_hypercube" or "sobol"
    correlation : (d, d), or mapping of pairs of names to a number in (-1, 1), optional
        Rank correlations of the inputs, in the order of `Uncertainty.drivers`; of pairs that are not named: 0.
    of : sequence of str
        Other numbers whose distributions are wanted: ``growth_rate``, ``T(E_h)``, ``T(E_h <- E_v)``; see `read_numbers`.
    interventions : bool
        Also the chance that each intervention of the scenario brings the control reproduction number below 1.
    assurance : float
        The share of draws for which the effort in `Uncertainty.uniform_effort` is enough.

    Raises
    ------
    ngm.ScenarioError
        No parameter has a range or distribution; a wrong number of draws, seed or correlation; a draw outside a
        parameter's domain; an unknown number.

    References
    ----------
    Marino et al (2008) J. Theor. Biol. 254:178-196 (Latin hypercube and PRCC); Saltelli et al (2010) Comput. Phys. Commun.
    181:259-270 (Sobol indices)
    """
    refuse_season(scenario, "R0 over draws")
    wanted = read_numbers(scenario, of)
    applied = scenario.interventions if interventions else ()
    columns, warnings = drawn_columns(scenario, draws, seed=seed, kind=kind, correlation=correlation)
    size = max((np.shape(values)[-1] for values in columns.values()), default=0)
    rows = 0
    if isinstance(draws, int) and correlation is None:
        rows = _rows_for_indices(draws, len(columns))
    expect(size * (1 + len(applied) + sum(one.targeted is None for one in wanted)) + rows * (len(columns) + 2))
    expect(size * any(one.targeted is not None for one in wanted))
    found = draw_numbers(scenario, columns, executor)
    indices = None
    if rows:
        indices = _indices(scenario, rows, seed, executor)
        if indices.why is not None:
            warnings.append(f"No Sobol indices: {indices.why}")
    else:
        what = "joint draws." if not isinstance(draws, int) else "they are defined for independent parameters only."
        warnings.append(f"No Sobol indices: {what}")
    flat = _flat(scenario, columns)
    drivers = _drivers(list(flat), flat, found.values, indices)
    values = found.values
    for reason, count in found.missing.items():
        warnings.append(f"{count:,} of {len(values):,} draws have no R0: {reason}")
    for driver in drivers:
        if driver.monotone is False:
            warnings.append(f"R0 both rises and falls with {driver.parameter}: its rank correlation misleads.")
    whole = spread_of(scenario, Drawn("R0"), found)
    others = tuple(
        spread_of(scenario, one, numbers)
        for one, numbers in zip(wanted, drawn_numbers(scenario, columns, wanted, executor), strict=True)
    )
    for one in others:
        for reason, count in one.missing.items():
            warnings.append(f"{one.number}: none at {count:,} of {len(values):,} draws: {reason}.")
    return Uncertainty(
        title=scenario.title,
        digest=scenario.digest,
        how=f"{kind.replace('_', ' ')} of {draws:,}" if isinstance(draws, int) else "joint draws",
        seed=seed if isinstance(draws, int) else None,
        R0=whole.figures,
        histogram=whole.histogram,
        running=tuple(_figures(part) for part in convergence(values)),
        drivers=drivers,
        interventions=tuple(_assurance(scenario, one.name, columns, executor) for one in applied),
        assurance=assurance,
        uniform_effort=_uniform_effort(values, assurance),
        warnings=tuple(dict.fromkeys([*scenario.warnings, *warnings])),
        others=others,
    )


def drawn_columns(
    scenario: Scenario,
    draws: int | Mapping[str, Any],
    *,
    seed: int = 0,
    kind: Kind = "latin_hypercube",
    correlation: Correlation | None = None,
) -> tuple[dict[str, Any], list[str]]:
    """Return the draws by parameter, in its own unit, and what is to be said of them; arguments as for `uncertainty`."""
    if not isinstance(draws, int):
        if correlation is not None:
            raise ScenarioError(
                Problem("sensitivity, correlation", "joint draws have their own correlations. Leave these out.")
            )
        return {name: np.asarray(draws[name], dtype=float) for name in draws}, []
    inputs = inputs_of(scenario)
    if not inputs:
        raise ScenarioError(
            Problem(
                "sensitivity, draws",
                "no parameter has a range or a distribution, so there is nothing to draw. Give at least one, for example "
                "range = [0.2, 0.6].",
            )
        )
    if not 1 <= draws <= MOST_DRAWS:
        raise ScenarioError(
            Problem("sensitivity, draws", f"{draws} draws: expected a whole number from 1 to {MOST_DRAWS:,}.")
        )
    warnings = [
        f"{i.name}: the normal distribution reaches below 0, where the parameter may not be; it is cut there."
        for i in inputs
        if i.is_cut
    ]
    table = _table_of(correlation, [one.name for one in inputs]) if isinstance(correlation, Mapping) else correlation
    try:
        shares = design(kind, draws, len(inputs), seed, correlation=table)
        return {one.name: one.at(shares[:, k]) for k, one in enumerate(inputs)}, warnings
    except SamplingError as error:
        where = "draws" if table is None else "correlation"
        raise ScenarioError(Problem(f"sensitivity, {where}", str(error))) from None


def _table_of(pairs: Mapping[tuple[str, str], float], names: list[str]) -> list[list[float]]:
    """Return the matrix of correlations that is 0 but for some pairs."""
    table = np.eye(len(names))
    problems: list[Problem] = []
    for pair, value in pairs.items():
        where = f"correlation of {pair[0][:40]} and {pair[1][:40]}"
        for name in pair:
            if name not in names:
                near = suggest(name, names)
                hint = f" Did you mean '{near}'?" if near else f" Drawn are: {', '.join(names[:12])}."
                problems.append(Problem(where, f"'{name[:40]}' is not drawn.{hint}"))
        if problems:
            continue
        i, j = names.index(pair[0]), names.index(pair[1])
        if i == j:
            problems.append(Problem(where, "a parameter goes with itself in any case. Name two."))
        elif table[i, j] not in (0.0, value):
            problems.append(Problem(where, "stands twice, with different numbers. Keep one."))
        table[i, j] = table[j, i] = value
    if problems:
        raise ScenarioError(problems)
    return [[float(value) for value in row] for row in table]


def draw_table(
    scenario: Scenario,
    draws: int | Mapping[str, Any],
    *,
    seed: int = 0,
    kind: Kind = "latin_hypercube",
    correlation: Correlation | None = None,
    of: Sequence[str] = (),
    interventions: bool = True,
    executor: Executor | None = None,
) -> DrawTable:
    """Return every draw with its R0, the other numbers asked for, and each control reproduction number.

    Arguments and errors as for `uncertainty`: with the same ones these are the draws behind its figures. For a grouped
    parameter with a row of draws for each group there is a column a group.
    """
    refuse_season(scenario, "R0 over draws")
    wanted = read_numbers(scenario, of)
    applied = scenario.interventions if interventions else ()
    columns, _ = drawn_columns(scenario, draws, seed=seed, kind=kind, correlation=correlation)
    out = _flat(scenario, columns)
    out["R0"] = draw_numbers(scenario, columns, executor).values
    for one, numbers in zip(wanted, drawn_numbers(scenario, columns, wanted, executor), strict=True):
        out[one.name] = numbers.values
    for change in applied:
        out[f"R with {change.name}"] = draw_numbers(scenario, columns, executor, intervention=change).values
    return DrawTable(scenario.title, scenario.digest, out)


def _flat(scenario: Scenario, columns: Mapping[str, Any]) -> dict[str, Any]:
    """Return a column a row of draws: ``sigma[65+]`` for each group of a parameter that has its own."""
    out: dict[str, Any] = {}
    for name, values in columns.items():
        if np.ndim(values) == 2:
            out |= dict(zip(scenario.items(name, scenario.parameters[name].by), values, strict=True))
        else:
            out[name] = values
    return out


def _indices(scenario: Scenario, rows: int, seed: int, executor: Executor | None) -> Any:
    inputs = inputs_of(scenario)

    def value(u: Any) -> Any:
        return draw_numbers(scenario, {i.name: i.at(u[:, k]) for k, i in enumerate(inputs)}, executor).values

    try:
        return sobol_indices(*saltelli_values(value, rows, len(inputs), seed), seed=seed)
    except SamplingError as error:
        raise ScenarioError(Problem("sensitivity, draws", str(error))) from None


def inputs_of(scenario: Scenario) -> list[Input]:
    """Return what is drawn: each parameter (or group of one) with a range or distribution."""
    out = []
    for parameter in scenario.parameters.values():
        given = parameter.distributions
        if not given and parameter.range is not None:
            low, high = parameter.range
            if low < high:
                given = (Distribution("uniform", {"low": low, "high": high}),)
        if len(given) == 1:
            out.append(Input(parameter.name, parameter, given[0]))
        elif given:
            items = scenario.items(parameter.name, parameter.by)
            out += [Input(item, parameter, d) for item, d in zip(items, given, strict=True)]
    return out


def _rows_for_indices(n: int, d: int) -> int:
    """Return rows of each Saltelli block: a power of two near n, within the evaluations allowed."""
    rows = int(2 ** max(6, (n - 1).bit_length()))
    while rows * (d + 2) > MOST_EVALUATIONS and rows > 64:
        rows //= 2
    return rows


def _drivers(names: list[str], columns: Mapping[str, Any], values: Any, indices: Any) -> tuple[Driver, ...]:
    ranks = prcc(np.column_stack([columns[name] for name in names]), values) if names else None
    out = []
    for k, name in enumerate(names):
        assert ranks is not None
        rank = ranks.coefficients[k]
        out.append(
            Driver(
                name,
                rank.value,
                rank.why,
                rank.monotone,
                None if indices is None else indices.first[k],
                None if indices is None else indices.first_interval[k],
                None if indices is None else indices.total[k],
                None if indices is None else indices.total_interval[k],
            )
        )
    return tuple(out)


def spread_of(scenario: Scenario, drawn: Drawn, numbers: ReproductionNumbers) -> Spread:
    """Return the distribution of a number over the draws."""
    values = numbers.values
    finite = values[np.isfinite(values)]
    counts, edges = np.histogram(finite, bins=BARS) if len(finite) else (np.array([]), np.array([0.0]))
    return Spread(
        number=drawn.name,
        threshold=drawn.threshold,
        unit=f"1/{scenario.time_unit}" if drawn.name == GROWTH else "",
        figures=_figures(summary(values, threshold=drawn.threshold)),
        histogram=tuple(zip(edges[:-1].tolist(), edges[1:].tolist(), counts.tolist(), strict=True)),
        missing=numbers.missing,
    )


def _assurance(scenario: Scenario, name: str, columns: Mapping[str, Any], executor: Executor | None) -> Assurance:
    under = draw_numbers(scenario, columns, executor, intervention=name)
    told = summary(under.values)
    share = None if told.probability_above is None else float(np.mean(under.values[np.isfinite(under.values)] < 1))
    return Assurance(name, _figures(told), share)


def _uniform_effort(values: Any, assurance: float) -> float | None:
    """Return 1 - 1/q, q the quantile of R0: what is enough in that share of the draws where all types are treated alike."""
    finite = values[np.isfinite(values)]
    if not len(finite):
        return None
    high = float(np.quantile(finite, assurance))
    return max(0.0, 1 - 1 / high) if high > 0 else 0.0


def _figures(told: Summary) -> DrawFigures:
    return DrawFigures(
        told.draws,
        told.rejected,
        told.mean,
        told.sd,
        told.quantiles,
        told.probability_above,
        told.mean_error,
        told.probability_interval,
    )
