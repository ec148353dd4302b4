"""What becomes of an outbreak: how many in the end, whether it takes off by chance, and at what pace."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.final_size import final_size, kinds_of, susceptibles
from ngm.analysis.groups import host_groups
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.process import MOST_DENSE, Process, dense_F_and_V, dense_K, process
from ngm.engine.balls import nearest, precision
from ngm.engine.chance import Generations, Offspring, Steps, extinction
from ngm.engine.pace import pace as interval_of
from ngm.engine.perron import reproduction_number, reproductive_value, stable_distribution
from ngm.errors import Problem, ScenarioError
from ngm.expression.names import suggest
from ngm.results_outbreak import Chance, ChanceRow, FinalSizeResult, Outbreak, PaceResult, Vaccine
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.packages import combined

__all__ = ["outbreak"]

FloatArray = npt.NDArray[np.float64]
ByGroup = float | Mapping[str, float]

CONTROL = "control reproduction number"
#: Whether a growth rate is positive is known from here on.
CLEAR = 1e-9


def outbreak(
    scenario: Scenario,
    *,
    interventions: Sequence[str] = (),
    introduce: Mapping[str, float] | None = None,
    coverage: ByGroup = 0.0,
    efficacy: ByGroup = 1.0,
    against_spread: ByGroup = 0.0,
    kind: str = "leaky",
) -> Outbreak:
    """Return the final size, the chance of a large outbreak, and the generation interval.

    A part that does not apply to the model has the reason in its `why`.

    Parameters
    ----------
    scenario : Scenario
    interventions : sequence of str
        Names of interventions in force, in order. Infections that they prevent do not happen.
    introduce : mapping of str to number, optional
        Type (infected state) -> how many cases the outbreak may start from; their families are independent of each other.
    coverage : number or mapping
        Share vaccinated before the outbreak, of all or by group of hosts (or type at infection): 0 to 1.
    efficacy, against_spread : number or mapping
        Efficacy against infection, and against onward spread of a vaccinated case: 0 to 1.
    kind : {"leaky", "all-or-nothing"}
        Of vaccine.

    Raises
    ------
    ngm.ScenarioError
        An unknown intervention, type or group, or a number out of range.
    ngm.DerivationError
        As `ngm.solve`.

    Examples
    --------
    >>> import ngm
    >>> cough = ngm.load("scenarios/age-groups-ember-cough.toml")
    >>> found = ngm.outbreak(cough, introduce={"I[18-64]": 3})
    >>> round(found.final_size.attack_rate, 3), round(found.chance.large_outbreak, 3), round(found.pace.mean, 3)
    (0.631, 0.78, 8.0)
    """
    package: Intervention | None = combined(scenario, list(interventions)).intervention if interventions else None
    base = decided_numbers(scenario)
    found = base if package is None else decided_numbers(scenario, package)
    introduced = _introduced(found, introduce or {})
    vaccine = _vaccine(found, coverage, efficacy, against_spread, kind)
    warnings = [*scenario.warnings, *found.point.infection_free.warnings]
    with precision(found.bits):
        R, growth = _number(found), found.growth
    why = found.no_R0
    if len(found.template.types) > MOST_DENSE:
        why = f"the model has {len(found.template.types):,} types, and this is worked out for up to {MOST_DENSE:,}."
    elif R is not None and not len(found.at):
        why = "no flow makes new infections near the infection-free state."
    if why is not None:
        warnings += [f"No R0: {why}"] * (found.no_R0 is not None)
        parts = FinalSizeResult(why), Chance(why), PaceResult(why)
    else:
        if vaccine is not None:
            R, growth = _with_vaccine(found, vaccine), None
        parts = (
            final_size(found, susceptibles(found), vaccine),
            _chance(found, vaccine, introduced, warnings),
            _pace(found, growth) if vaccine is None else PaceResult("it is given without a vaccine only."),
        )
    controlled = package is not None or vaccine is not None
    return Outbreak(
        scenario.title,
        scenario.time_unit,
        scenario.digest,
        scenario.discrete,
        CONTROL if controlled else "R0",
        R,
        found.no_R0,
        tuple(interventions),
        *parts,
        tuple(dict.fromkeys(warnings)),
    )


def _number(found: Numbers) -> float | None:
    if found.no_R0 is not None:
        return None
    return 0.0 if found.spectrum is None else nearest(found.spectrum.root)


def _with_vaccine(found: Numbers, vaccine: Vaccine) -> float:
    """Return the control reproduction number: each column of K times what is left of a case's susceptibility and spread."""
    kinds = kinds_of(vaccine)
    left = (kinds.shares * kinds.susceptibility * kinds.infectivity).sum(axis=1)
    return reproduction_number(dense_K(found) * left)


# --- what was asked -------------------------------------------------------------------------------------------------------


def _introduced(found: Numbers, introduce: Mapping[str, float]) -> dict[str, float]:
    types = found.template.types
    problems = []
    for name, count in introduce.items():
        if name not in types:
            near = suggest(name, list(types))
            hint = (
                f" Did you mean '{near}'?"
                if near
                else f" The types: {', '.join(types[:12])}{', …' * (len(types) > 12)}."
            )
            problems.append(Problem("introduce", f"'{name}' is no infected type of the model.{hint}"))
        elif not (math.isfinite(count) and count >= 0 and count == int(count)):
            problems.append(
                Problem("introduce", f"{name} = {count:g} is no number of cases. Give a whole number, 0 or more.")
            )
    if problems:
        raise ScenarioError(problems)
    return dict(introduce)


def _vaccine(
    found: Numbers, coverage: ByGroup, efficacy: ByGroup, against_spread: ByGroup, kind: str
) -> Vaccine | None:
    """Return the vaccine by type at infection; None where nobody gets one."""
    if kind not in ("leaky", "all-or-nothing"):
        raise ScenarioError(Problem("vaccine, kind", f"'{kind}' is not known. Write leaky or all-or-nothing."))
    if not isinstance(coverage, Mapping) and coverage == 0:
        return None
    groups = host_groups(found)
    names: dict[str, tuple[int, ...]] = {found.template.types[int(k)]: (row,) for row, k in enumerate(found.at)}
    names |= {group.label: group.members for group in groups}
    columns = {
        what: _spread(what, given, names, len(found.at), missing)
        for what, given, missing in (
            ("coverage", coverage, 0.0),
            ("efficacy", efficacy, 1.0),
            ("against_spread", against_spread, 0.0),
        )
    }
    return Vaccine(kind, **columns)


def _spread(
    what: str, given: ByGroup, names: Mapping[str, tuple[int, ...]], size: int, missing: float
) -> tuple[float, ...]:
    items = given.items() if isinstance(given, Mapping) else [(None, given)]
    out = [missing] * size
    for name, value in items:
        if not 0 <= value <= 1:
            raise ScenarioError(Problem(f"vaccine, {what}", f"{value:g} lies outside 0 to 1. For 30 % write 0.30."))
        if name is not None and name not in names:
            near = suggest(name, list(names))
            hint = f" Did you mean '{near}'?" if near else f" The groups: {', '.join(list(names)[-12:])}."
            raise ScenarioError(Problem(f"vaccine, {what}", f"'{name}' is no group of hosts.{hint}"))
        for row in range(size) if name is None else names[name]:
            out[row] = float(value)
    return tuple(out)


# --- by chance ------------------------------------------------------------------------------------------------------------


def _chance(found: Numbers, vaccine: Vaccine | None, introduced: Mapping[str, float], warnings: list[str]) -> Chance:
    scenario, template = found.scenario, found.template
    seasonal = [name for name, p in scenario.parameters.items() if p.season is not None]
    if seasonal:
        return Chance(
            f"{', '.join(seasonal[:4])} changes with the season: the chance then depends on the day it starts."
        )
    if vaccine is not None and any(vaccine.against_spread):
        return Chance("vaccinated cases infect less than others, and the states of the model do not tell them apart.")
    amounts = _amounts(scenario)
    offspring: Offspring
    if scenario.given is not None:
        how = "each case infects a Poisson number with the means of K, all at once"
        K = dense_K(found)
        offspring = Generations(K if vaccine is None else _thinned(K, np.arange(len(K)), vaccine))
    elif scenario.projection is not None:
        F, V = dense_F_and_V(found)
        T = np.eye(len(V)) - V
        dies = 1 - T.sum(axis=0)
        if np.any(dies < -1e-12) or np.any(T < -1e-12):
            return Chance("shares of T add up to more than 1, so they are no chances of one member.")
        offspring = Steps(
            F if vaccine is None else _thinned(F, found.at, vaccine), np.maximum(T, 0.0), np.maximum(dies, 0.0)
        )
        how = (
            f"in each {scenario.time_unit} a member stays, moves on or dies with the shares of T, and "
            "has a Poisson number of young; what may last is its line of descendants"
        )
    else:
        if amounts:
            return Chance(
                f"{', '.join(amounts[:4])} is an amount and no number of hosts: it has no chance events of its own."
            )
        events = process(found)
        if vaccine is not None:
            events = _prevented(events, found.at, vaccine)
        if events.sources.any():
            made = [template.types[k] for k in np.flatnonzero(events.sources.any(axis=1))]
            warnings.append(
                f"{', '.join(made[:4])} arises by flows that are no infections; each unit of it "
                "counts as one that may die out, so "
                "the chances depend on what it is counted in."
            )
        offspring = events.offspring(scenario.discrete)
        how = (
            f"in each {scenario.time_unit} a case stays, moves on or leaves with the shares of the "
            "flows, and infects a Poisson number"
            if scenario.discrete
            else "what happens next to a case, with chances in proportion to the rates of the flows (stays are exponential)"
        )
    q = extinction(offspring, len(template.types)).q
    rows = tuple(ChanceRow(name, float(x), float(1 - x)) for name, x in zip(template.types, q, strict=True))
    if not introduced:
        return Chance(None, how, rows)
    logs = [
        count * math.log(row.dies_out)
        for row in rows
        if (count := introduced.get(row.type, 0)) > 0 and row.dies_out > 0
    ]
    sure = any(introduced.get(row.type, 0) > 0 and row.dies_out == 0 for row in rows)
    return Chance(None, how, rows, dict(introduced), 1.0 if sure else -math.expm1(sum(logs)))


def _amounts(scenario: Scenario) -> list[str]:
    """Return the infected compartments that the file says are no number of individuals."""
    out = []
    for compartment in scenario.compartments.values():
        unit = (compartment.unit or "").strip().lower()
        hosts = ("individual", "person", "people", "host", "animal", "case", "member", "head")
        if compartment.infected and unit and not unit.rstrip("s").startswith(hosts):
            out.append(compartment.name)
    return out


def _left(vaccine: Vaccine) -> FloatArray:
    """Return the share of infections of each type that a vaccine does not prevent."""
    return np.asarray(1 - np.array(vaccine.coverage) * np.array(vaccine.efficacy))


def _thinned(matrix: FloatArray, rows: npt.NDArray[np.intp], vaccine: Vaccine) -> FloatArray:
    out = matrix.copy()
    out[rows] *= _left(vaccine)[:, None]
    return out


def _prevented(events: Process, at: npt.NDArray[np.intp], vaccine: Vaccine) -> Process:
    """Return the events without the infections that a vaccine prevents; who would have changed states by one leaves it."""
    swaps = _thinned(events.swaps, at, vaccine)
    lost = (events.swaps - swaps).sum(axis=0)
    return Process(_thinned(events.births, at, vaccine), events.sources, swaps, events.moves, events.exits + lost)


# --- pace -----------------------------------------------------------------------------------------------------------------


def _pace(found: Numbers, growth: float | None) -> PaceResult:
    """Return the generation interval of the class that attains R0."""
    scenario, spec = found.scenario, found.spectrum
    if scenario.given is not None:
        return PaceResult("K as given says how many, and nothing of when: there is no time in it.")
    seasonal: list[str] = [name for name, p in scenario.parameters.items() if p.season is not None]
    if seasonal:
        return PaceResult(
            f"{', '.join(seasonal[:4])} changes with the season: intervals then depend on the day of infection."
        )
    if spec is None or nearest(spec.root) == 0:
        return PaceResult("nobody infects anybody at these values.")
    if len(spec.leading) != 1:
        return PaceResult("several classes attain R0: each has intervals of its own.")
    number = spec.leading[0]
    members = np.asarray(spec.classes[number], dtype=np.intp)
    K = dense_K(found)[np.ix_(members, members)]
    right, left = stable_distribution(K), reproductive_value(K)
    rate = found.class_growth(number)
    if right is None or left is None or rate is None:
        return PaceResult("the mix of new cases is not settled at these values.")
    F, V = dense_F_and_V(found)
    at = found.at[members]
    own = np.zeros_like(F)
    own[at] = F[at]
    solved = interval_of(own, V, at, right, left, rate, discrete=scenario.discrete)
    names = [found.template.types[int(k)] for k in at]
    means: list[Any] = [None if math.isnan(x) else float(x) for x in solved.mean_by_type]
    return PaceResult(
        None,
        tuple(names),
        solved.mean,
        solved.sd,
        tuple(zip(names, means, strict=True)),
        tuple(solved.ages.tolist()),
        tuple(solved.density.tolist()),
        tuple(solved.cumulative.tolist()),
        solved.total,
        rate,
        math.log(2) / rate if rate > CLEAR * abs(1 / solved.mean) else None,
        1 / solved.transform if len(names) == 1 else None,
    )
