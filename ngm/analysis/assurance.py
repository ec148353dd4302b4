"""How much of an intervention, or of a vaccine, is enough in a wanted share of the draws.

What is enough at point estimates is too little about half the time. Here every draw is asked.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import Executor
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.batch import TASK, draw_numbers, next_generation_matrices
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.strength import (
    check_target,
    chosen_groups,
    coverage_needed,
    lasting_of,
    shares_of,
    strength_needed,
)
from ngm.analysis.uncertainty import Correlation, drawn_columns
from ngm.engine.batch import perron_roots
from ngm.engine.drawn_numbers import target_numbers
from ngm.engine.sampling import Kind
from ngm.engine.vaccination import overall_efficacy
from ngm.errors import Problem, ScenarioError
from ngm.progress import advance, expect
from ngm.results_draws import Assured
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.packages import find_intervention, scaled

__all__ = ["assured_coverage", "assured_strength"]

FloatArray = npt.NDArray[np.float64]

#: Strengths tried before halving begins, and halvings: the strength is found to 1 part in 10 million.
POINTS = 11
HALVINGS = 20
#: Halvings of a draw's coverage where efficacies differ.
FINER = 46
#: Doubles of K that are held at a time.
MOST_HELD = 1 << 22


def assured_strength(
    scenario: Scenario,
    intervention: Intervention | str,
    draws: int | Mapping[str, Any],
    *,
    assurance: float = 0.95,
    target: float = 1.0,
    with_also: Intervention | None = None,
    seed: int = 0,
    kind: Kind = "latin_hypercube",
    correlation: Correlation | None = None,
    executor: Executor | None = None,
) -> Assured:
    r"""Return the least strength of an intervention at which the number is below a target in a wanted share of the draws.

    Strength s in [0, 1] as for `strength_needed`. The share of the draws in which the control reproduction number is below
    the target is worked out at eleven strengths; between the last one at which it is too small and the next one, halving
    goes on. The strength returned was tried: there the share is large enough.

    Parameters
    ----------
    scenario : Scenario
    intervention : Intervention or str
        One of the scenario's by name, or any other.
    draws, seed, kind, correlation
        As for `uncertainty`.
    assurance : float in (0, 1)
        The wanted share of draws.
    target : float
        The number to fall below.
    with_also : Intervention, optional
        What is in force at full strength besides, before it.

    Raises
    ------
    ngm.ScenarioError
        As for `uncertainty` and `strength_needed`; an assurance outside of (0, 1).

    Examples
    --------
    >>> import ngm
    >>> fever = ngm.load("scenarios/seir-velmar-fever.toml")
    >>> rest = '[[intervention]]\nname = "Rest"\nchange = [{ parameter = "beta", multiply = 0.2 }]'
    >>> fever = ngm.loads(fever.text + rest)
    >>> found = ngm.assured_strength(fever, "Rest", {"beta": [0.3, 0.4, 0.5, 0.6]}, assurance=0.75)
    >>> round(found.needed, 3)          # beta = 0.5 must fall to 0.2001: 1 - 0.8 s = 0.4002
    0.75
    """
    package = find_intervention(scenario, intervention) if isinstance(intervention, str) else intervention
    check_target(target)
    _check_assurance(assurance)
    columns, warnings = drawn_columns(scenario, draws, seed=seed, kind=kind, correlation=correlation)
    before = () if with_also is None else with_also.changes
    size = max(np.shape(values)[-1] for values in columns.values())
    expect(size * (POINTS + HALVINGS))
    rejected = 0

    def share(s: float) -> float:
        nonlocal rejected
        part = Intervention(package.name, (*before, *(scaled(package, s).changes if s > 0 else ())))
        found = draw_numbers(scenario, columns, executor, intervention=part if part.changes else None, passing=True)
        rejected = max(rejected, found.rejected)
        with np.errstate(invalid="ignore"):
            return float(np.mean(found.values < target))

    curve = [(k / (POINTS - 1), share(k / (POINTS - 1))) for k in range(POINTS)]
    needed = _least(share, curve, assurance)
    if any(after < before for (_, before), (_, after) in pairwise(curve)):
        warnings.append(
            f"The share of draws below {target:g} does not rise all the way as {package.name} gets stronger. The strength "
            "given is that from which on it is large enough."
        )
    alone = strength_needed(scenario, package, target=target, with_also=with_also)
    return _assured(
        scenario,
        f"strength of {package.name}",
        target,
        assurance,
        needed,
        alone.strength,
        curve,
        size,
        rejected,
        warnings,
    )


def _least(share: Callable[[float], float], curve: Sequence[tuple[float, float]], assurance: float) -> float | None:
    """Return the least point from which on the share is large enough; None where it is not at the end."""
    if curve[-1][1] < assurance:
        return None
    last = max((k for k, (_, value) in enumerate(curve) if value < assurance), default=-1)
    if last < 0:
        return 0.0
    low, high = curve[last][0], curve[last + 1][0]
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        low, high = (low, middle) if share(middle) >= assurance else (middle, high)
    return high


def assured_coverage(
    scenario: Scenario,
    draws: int | Mapping[str, Any],
    groups: Sequence[str] | None = None,
    *,
    efficacy: float | Mapping[str, float] = 1.0,
    against_spread: float | Mapping[str, float] = 0.0,
    turnover: float | None = None,
    waning: float = 0.0,
    assurance: float = 0.95,
    target: float = 1.0,
    intervention: Intervention | None = None,
    seed: int = 0,
    kind: Kind = "latin_hypercube",
    correlation: Correlation | None = None,
    executor: Executor | None = None,
) -> Assured:
    """Return the least coverage of chosen groups that is enough in a wanted share of the draws.

    Each draw has a coverage x_d of its own at which the number reaches the target: (1 - 1/T)/(e l) as for
    `coverage_needed`, none where T does not exist or x_d > 1. The coverage returned is the smallest x with x_d <= x in the
    wanted share of all draws, those without a number among them.

    Parameters
    ----------
    scenario : Scenario
    draws, seed, kind, correlation
        As for `uncertainty`.
    groups, efficacy, against_spread, turnover, waning, target, intervention
        As for `coverage_needed`. The vaccine itself is not drawn.
    assurance : float in (0, 1)

    Raises
    ------
    ngm.ScenarioError
        As for `uncertainty` and `coverage_needed`; an assurance outside of (0, 1).

    Examples
    --------
    One draw has R0 = 1.6, one 2.5: 1 - 1/1.6 is enough in half of the draws, 1 - 1/2.5 in all.

    >>> import ngm
    >>> fever = ngm.load("scenarios/seir-velmar-fever.toml")
    >>> beta = [ngm.calibrate(fever, "beta", R0).value for R0 in (1.6, 2.5)]
    >>> [round(ngm.assured_coverage(fever, {"beta": beta}, assurance=a).needed, 6) for a in (0.5, 0.95)]
    [0.375, 0.6]
    """
    _check_assurance(assurance)
    lasting = lasting_of(turnover, waning)
    alone = coverage_needed(
        scenario,
        groups,
        efficacy=efficacy,
        against_spread=against_spread,
        turnover=turnover,
        waning=waning,
        target=target,
        intervention=intervention,
    )
    columns, warnings = drawn_columns(scenario, draws, seed=seed, kind=kind, correlation=correlation)
    found = decided_numbers(scenario, intervention)
    if found.K is None and found.spectrum is not None:
        told = f"{len(found.template.types)} types: coverage is computed where K can be written out."
        raise ScenarioError(Problem("coverage", told))
    chosen = chosen_groups(found, groups)
    effects = overall_efficacy(
        shares_of(efficacy, chosen, "efficacy"), shares_of(against_spread, chosen, "against_spread")
    )
    share = np.zeros(len(found.at))
    for group, effect in zip(chosen, effects.tolist(), strict=True):
        share[list(group.members)] = effect * lasting
    size = max(np.shape(values)[-1] for values in columns.values())
    expect(size)
    members = np.isin(np.arange(len(share)), [k for group in chosen for k in group.members])
    width = TASK if executor is not None else max(256, min(TASK, MOST_HELD // max(1, len(share) ** 2)))
    required = np.empty(size)
    rejected = 0
    for start in range(0, size, width):
        part = slice(start, start + width)
        chunk = {name: values[..., part] for name, values in columns.items()}
        K = next_generation_matrices(scenario, chunk, executor, intervention=intervention)
        rejected += int((~np.isfinite(K).all(axis=(0, 1))).sum())
        required[part] = _required(K / target, share, members)
    points = [k / 20 for k in range(21)]
    curve = [(x, float(np.mean(required <= x))) for x in points]
    order = np.sort(required)
    place = int(np.ceil(assurance * size - 1e-9)) - 1
    needed = float(order[place]) if order[place] <= 1 else None
    names = ", ".join(alone.groups[:6]) + (", …" if len(alone.groups) > 6 else "")
    return _assured(
        scenario, f"coverage of {names}", target, assurance, needed, alone.coverage, curve, size, rejected, warnings
    )


def _required(K: FloatArray, share: FloatArray, members: npt.NDArray[np.bool_]) -> FloatArray:
    """Return the coverage at which the root of (1 - x share) K falls to 1 in each draw; infinite where none does."""
    with np.errstate(invalid="ignore", divide="ignore"):
        roots = perron_roots(K)
        out = np.where(roots <= 1, 0.0, np.inf)
        open_ = np.flatnonzero(roots > 1)
    if not len(open_):
        return out
    K = K[:, :, open_]
    effects = np.unique(share[members])
    if len(effects) == 1:
        if effects[0] > 0:
            T = target_numbers(K, np.repeat(members[:, None], len(share), axis=1))
            needed = (1 - 1 / T) / effects[0]
            out[open_] = np.where(np.isnan(needed), np.inf, needed)
        return out
    low, high = np.zeros(len(open_)), np.ones(len(open_))
    for _ in range(FINER):
        advance(0)
        middle = (low + high) / 2
        above = perron_roots((1 - share[:, None] * middle)[:, None, :] * K) > 1
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    full = perron_roots((1 - share)[:, None, None] * K)
    out[open_] = np.where(full > 1, np.inf, high)
    return out


def _check_assurance(assurance: float) -> None:
    if not 0 < assurance < 1:
        hint = f" For {assurance:g} % write {assurance / 100:g}." if 1 < assurance < 100 else ""
        raise ScenarioError(Problem("assurance", f"{assurance:g} is no share of the draws between 0 and 1.{hint}"))


def _assured(
    scenario: Scenario,
    what: str,
    target: float,
    assurance: float,
    needed: float | None,
    at_values: float | None,
    curve: Sequence[tuple[float, float]],
    draws: int,
    rejected: int,
    warnings: list[str],
) -> Assured:
    why = None
    if needed is None:
        why = f"Unattainable: with all of it the number is below {target:g} in {100 * curve[-1][1]:.4g} % of the draws."
    if rejected:
        warnings = [*warnings, f"{rejected:,} of {draws:,} draws have no number; they count as not below {target:g}."]
    return Assured(
        title=scenario.title,
        digest=scenario.digest,
        what=what,
        target=target,
        assurance=assurance,
        needed=needed,
        at_values=at_values,
        share_at_none=curve[0][1],
        share_at_full=curve[-1][1],
        draws=draws,
        rejected=rejected,
        why=why,
        curve=tuple(curve),
        warnings=tuple(dict.fromkeys([*scenario.warnings, *warnings])),
    )
