"""What the spread of the parameters does to R0: draws from their distributions or from a file, and which of them matter."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from fractions import Fraction
from statistics import NormalDist
from typing import Any

import numpy as np

from ngm.analysis.batch import draw_numbers
from ngm.engine.distributions import SamplingError, quantile
from ngm.engine.indices import sobol_indices
from ngm.engine.partial import prcc
from ngm.engine.sampling import Kind, design, saltelli_values
from ngm.engine.summary import Summary, convergence, summary
from ngm.errors import Problem, ScenarioError
from ngm.results_sensitivity import Assurance, DrawFigures, Driver, Uncertainty
from ngm.scenario.model import Distribution, Parameter, Scenario

__all__ = ["MOST_DRAWS", "Input", "inputs_of", "uncertainty"]

#: Draws at the most, and evaluations at the most for the Sobol indices.
MOST_DRAWS = 10_000_000
MOST_EVALUATIONS = 2_000_000
NO_INDICES = "No Sobol indices: they need independent parameters, and joint draws are not."
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
    correlation: Sequence[Sequence[float]] | None = None,
    interventions: bool = True,
    assurance: float = 0.9,
    executor: Executor | None = None,
) -> Uncertainty:
    """Return what the spread of the parameters does to R0.

    Parameters
    ----------
    scenario : Scenario
    draws : int or mapping of str to array
        How many draws from the parameters' distributions (uniform over the range where no distribution is named), or the
        draws themselves: joint draws, in each parameter's own unit.
    seed : int >= 0
        The same seed gives the same numbers, however the work is split.
    kind : "latin_hypercube" or "sobol"
    correlation : (d, d), optional
        Rank correlations of the inputs, in the order of `Uncertainty.drivers`.
    interventions : bool
        Also the chance that each intervention of the scenario brings the control reproduction number below 1.
    assurance : float
        The share of draws for which the effort in `Assurance` is enough.

    Raises
    ------
    ngm.ScenarioError
        No parameter has a range or distribution; a wrong number of draws, seed or correlation; a draw outside a
        parameter's domain.

    References
    ----------
    Marino et al (2008) J. Theor. Biol. 254:178-196 (Latin hypercube and PRCC); Saltelli et al (2010) Comput. Phys. Commun.
    181:259-270 (Sobol indices)
    """
    if isinstance(draws, int):
        return _from_distributions(scenario, draws, seed, kind, correlation, interventions, assurance, executor)
    return _from_draws(scenario, draws, seed, interventions, assurance, executor)


def _from_distributions(
    scenario: Scenario,
    n: int,
    seed: int,
    kind: Kind,
    correlation: Sequence[Sequence[float]] | None,
    interventions: bool,
    assurance: float,
    executor: Executor | None,
) -> Uncertainty:
    inputs = inputs_of(scenario)
    if not inputs:
        raise ScenarioError(
            Problem(
                "sensitivity, draws",
                "no parameter has a range or a distribution, so there is nothing to draw. Give at least one, for example "
                "range = [0.2, 0.6].",
            )
        )
    if not 1 <= n <= MOST_DRAWS:
        raise ScenarioError(
            Problem("sensitivity, draws", f"{n} draws: expected a whole number from 1 to {MOST_DRAWS:,}.")
        )
    warnings = [
        f"{i.name}: the normal distribution reaches below 0, where the parameter may not be; it is cut there."
        for i in inputs
        if i.is_cut
    ]
    try:
        shares = design(kind, n, len(inputs), seed, correlation=correlation)
        columns = {one.name: one.at(shares[:, k]) for k, one in enumerate(inputs)}
        found = draw_numbers(scenario, columns, executor)
        indices = None
        if correlation is None:
            rows = _rows_for_indices(n, len(inputs))

            def value(u: Any) -> Any:
                return draw_numbers(scenario, {i.name: i.at(u[:, k]) for k, i in enumerate(inputs)}, executor).values

            indices = sobol_indices(*saltelli_values(value, rows, len(inputs), seed), seed=seed)
            if indices.why is not None:
                warnings.append(f"No Sobol indices: {indices.why}")
        else:
            warnings.append("No Sobol indices: they are defined for independent parameters only.")
    except SamplingError as error:
        raise ScenarioError(Problem("sensitivity, draws", str(error))) from None
    drivers = _drivers([i.name for i in inputs], columns, found.values, indices)
    return _result(
        scenario,
        found,
        columns,
        drivers,
        seed,
        f"{kind.replace('_', ' ')} of {n:,}",
        interventions,
        assurance,
        executor,
        warnings,
    )


def _from_draws(
    scenario: Scenario,
    draws: Mapping[str, Any],
    seed: int,
    interventions: bool,
    assurance: float,
    executor: Executor | None,
) -> Uncertainty:
    columns = {name: np.asarray(draws[name], dtype=float) for name in draws}
    found = draw_numbers(scenario, columns, executor)
    flat = {name: values for name, values in columns.items() if values.ndim == 1}
    drivers = _drivers(list(flat), flat, found.values, None)
    return _result(
        scenario,
        found,
        columns,
        drivers,
        None,
        "joint draws",
        interventions,
        assurance,
        executor,
        ["No Sobol indices: joint draws."],
    )


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


def _result(
    scenario: Scenario,
    found: Any,
    columns: Mapping[str, Any],
    drivers: tuple[Driver, ...],
    seed: int | None,
    how: str,
    interventions: bool,
    assurance: float,
    executor: Executor | None,
    warnings: list[str],
) -> Uncertainty:
    values = found.values
    figures = _figures(summary(values))
    for reason, count in found.missing.items():
        warnings.append(f"{count:,} of {len(values):,} draws have no R0: {reason}")
    for driver in drivers:
        if driver.monotone is False:
            warnings.append(f"R0 both rises and falls with {driver.parameter}: its rank correlation misleads.")
    assured = []
    for one in scenario.interventions if interventions else ():
        under = draw_numbers(scenario, columns, executor, intervention=one)
        told = summary(under.values)
        share = None if told.probability_above is None else float(np.mean(under.values[np.isfinite(under.values)] < 1))
        assured.append(Assurance(one.name, _figures(told), share))
    finite = values[np.isfinite(values)]
    counts, edges = np.histogram(finite, bins=BARS) if len(finite) else (np.array([]), np.array([0.0]))
    effort = None
    if len(finite):
        high = float(np.quantile(finite, assurance))
        effort = max(0.0, 1 - 1 / high) if high > 0 else 0.0
    return Uncertainty(
        title=scenario.title,
        digest=scenario.digest,
        how=how,
        seed=seed,
        R0=figures,
        histogram=tuple(zip(edges[:-1].tolist(), edges[1:].tolist(), counts.tolist(), strict=True)),
        running=tuple(_figures(part) for part in convergence(values)),
        drivers=drivers,
        interventions=tuple(assured),
        assurance=assurance,
        uniform_effort=effort,
        warnings=tuple(dict.fromkeys([*scenario.warnings, *warnings])),
    )


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
