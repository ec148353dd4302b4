"""How much of an intervention, or of a vaccine, it takes to bring the number down to a target."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from ngm.analysis.caution import below_one_caution
from ngm.analysis.groups import HostGroup, host_groups
from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.steady import refuse_season
from ngm.analysis.waning import waning_of
from ngm.engine.balls import nearest, precision
from ngm.engine.control import critical_effort, type_reproduction_number
from ngm.engine.roots import last_fall, respond, root_between
from ngm.engine.vaccination import critical_coverage, lasting_share, overall_efficacy, scaled_number
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.results_control import CONTROL_LABEL, Coverage, Strength
from ngm.scenario.fields import closest, listed, short
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.packages import find_intervention, scaled

__all__ = [
    "check_target",
    "chosen_groups",
    "coverage_needed",
    "lasting_of",
    "number_of",
    "shares_of",
    "strength_needed",
    "values_of",
]

#: Strengths tried before the root is looked for; fewer where each takes long.
SAMPLES = 21
FEWER_SAMPLES = 9
MOST_SAMPLED = 60


def strength_needed(
    scenario: Scenario, intervention: Intervention | str, *, target: float = 1.0, with_also: Intervention | None = None
) -> Strength:
    """Return the least strength of an intervention at which the control reproduction number falls to a target.

    At strength s a factor m is 1 - s (1 - m), a share to reduce r is s r, an amount a is s a, and a value x that is set
    to v is x + s (v - x). The number is sampled first: where it does not fall all the way, the strength is that from
    which on it stays at or below the target, and a warning says so.

    Parameters
    ----------
    scenario : Scenario
    intervention : Intervention or str
        One of the scenario's by name, or any other.
    target : float
        The number to be reached, above 0.
    with_also : Intervention, optional
        What is in force at full strength besides, before it.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`, for the scenario without the intervention.
    ngm.ScenarioError
        No intervention of this name, or a target that is none.
    """
    refuse_season(scenario, "the strength needed")
    package = find_intervention(scenario, intervention) if isinstance(intervention, str) else intervention
    check_target(target)
    before = () if with_also is None else with_also.changes
    reasons: dict[float, str] = {}

    def number(s: float) -> float | None:
        part = Intervention(package.name, (*before, *(scaled(package, s).changes if s > 0 else ())))
        try:
            found = decided_numbers(scenario, part if part.changes else None)
        except NgmError as error:
            reasons[s] = str(error.problems[0])
            return None
        if found.no_R0 is not None:
            reasons[s] = found.no_R0
            return None
        return number_of(found)

    base = decided_numbers(scenario, with_also)
    samples = SAMPLES if len(base.template.types) <= MOST_SAMPLED else FEWER_SAMPLES
    response = respond(number, [k / (samples - 1) for k in range(samples)])
    points = response.points
    at_full = points[-1][1]
    strength = last_fall(number, response, target)
    lowest = response.lowest
    warnings: list[str] = list(scenario.warnings)
    why: str | None = None
    unattainable = at_full is not None and at_full > target
    if at_full is None:
        why = f"At full strength {package.name} leaves no number: {reasons[1.0]}"
    elif unattainable:
        why = f"{package.name} alone does not reach {target:g}: at full strength the number is {at_full:.6g}."
        if lowest is not None and lowest[1] <= target:
            why += f" It is lower at part of it ({lowest[1]:.6g} at strength {lowest[0]:.3g}), and rises again."
    missing = [x for x, value in points if value is None]
    if missing and at_full is not None:
        warnings.append(
            f"At strengths from {min(missing):.3g} to {max(missing):.3g} there is no number: {reasons[missing[0]]}"
        )
    if not response.monotone:
        tail = "" if strength is None else " The strength given is that from which on it stays at or below the target."
        warnings.append(f"The number does not fall all the way as {package.name} gets stronger.{tail}")
    if strength == 0:
        warnings.append(f"The number is at or below {target:g} without {package.name}: none of it is needed.")
    if strength is not None and target <= 1:
        part = Intervention(package.name, (*before, *(scaled(package, strength).changes if strength > 0 else ())))
        warnings += below_one_caution(decided_numbers(scenario, part if part.changes else None), CONTROL_LABEL)
    return Strength(
        title=scenario.title,
        digest=scenario.digest,
        name=package.name,
        target=target,
        strength=strength,
        unattainable=unattainable,
        R0=points[0][1],
        at_full=at_full,
        lowest=None if lowest is None else lowest[1],
        lowest_at=None if lowest is None else lowest[0],
        monotone=response.monotone,
        why=why,
        curve=points,
        warnings=tuple(dict.fromkeys(warnings)),
    )


def number_of(found: Numbers) -> float:
    """Return R0, or the control reproduction number, of numbers that have one."""
    return 0.0 if found.spectrum is None else nearest(found.spectrum.root)


def check_target(target: float) -> None:
    """Raise ScenarioError where a target is no positive number."""
    if not (np.isfinite(target) and target > 0):
        raise ScenarioError(Problem("", f"a target of {target:g} is none: the number to be reached lies above 0."))


def coverage_needed(
    scenario: Scenario,
    groups: Sequence[str] | None = None,
    *,
    efficacy: float | Mapping[str, float] = 1.0,
    against_spread: float | Mapping[str, float] = 0.0,
    kind: str = "leaky",
    turnover: float | None = None,
    waning: float = 0.0,
    target: float = 1.0,
    intervention: Intervention | None = None,
) -> Coverage:
    """Return the share of chosen groups that must be vaccinated, the same in each, so that the number falls to a target.

    A vaccine of efficacy a against infection and b against onward spread, at coverage x, leaves 1 - x e of what a type
    does in K, e = 1 - (1 - a)(1 - b), whether it protects everybody in part (leaky) or a share wholly. So acting on a
    set of types needs x = (1 - 1/T) / e, T its type-reproduction number; with all types treated alike it is
    (1 - 1/R0) / e. The vaccinated are counted as drawn from the whole group, immune or not.

    Parameters
    ----------
    groups : sequence of str, optional
        Labels of groups of hosts (`host_groups`), or of types at infection; all where left out.
    efficacy, against_spread : float in [0, 1], or one for each group
    kind : {"leaky", "all-or-nothing"}
        Told with the result: the threshold is the same.
    turnover, waning : float, per time unit
        Vaccination of newborns with protection that wanes: only turnover / (turnover + waning) of coverage protects.
    target : float
        The number to be reached.
    intervention : Intervention, optional
        In force besides.

    Raises
    ------
    ngm.ScenarioError
        An unknown group, an efficacy or a target out of range, or waning without a turnover.

    References
    ----------
    Smith, Rodrigues & Fine (1984) Int. J. Epidemiol. 13:87-93 (from memory); Roberts & Heesterbeek (2003) Proc. R. Soc.
    B 270:1359
    """
    refuse_season(scenario, "the coverage needed")
    check_target(target)
    if kind not in ("leaky", "all-or-nothing"):
        raise ScenarioError(Problem("kind", f"'{short(kind)}' is no kind of vaccine. Write leaky or all-or-nothing."))
    lasting = lasting_of(turnover, waning)
    found = decided_numbers(scenario, intervention)
    with precision(found.bits):
        result = _coverage(found, groups, efficacy, against_spread, kind, lasting, target)
    return replace(result, waning=waning_of(found))


def _coverage(
    found: Numbers,
    groups: Sequence[str] | None,
    efficacy: float | Mapping[str, float],
    against_spread: float | Mapping[str, float],
    kind: str,
    lasting: float,
    target: float,
) -> Coverage:
    scenario = found.scenario
    chosen = chosen_groups(found, groups)
    effects = overall_efficacy(
        shares_of(efficacy, chosen, "efficacy"), shares_of(against_spread, chosen, "against_spread")
    )
    types = tuple(found.template.types[found.at[k]] for group in chosen for k in group.members)
    number: float | None = None
    T = effort = required = coverage = at_full = None
    why: str | None = None
    if found.no_R0 is not None:
        why = f"No R0: {found.no_R0}"
    else:
        number = number_of(found)
        if found.K is None and found.spectrum is not None:
            why = f"{len(found.template.types)} types: coverage is computed where K can be written out."
    if number is not None and why is None and found.spectrum is None:
        required = coverage = at_full = effort = 0.0
    elif number is not None and why is None:
        K = as_floats(found.K)
        share = np.zeros(len(K))
        for group, effect in zip(chosen, effects.tolist(), strict=True):
            share[list(group.members)] = effect * lasting
        at_full = scaled_number(K, 1 - share)
        T = type_reproduction_number(found.K / target, share_mask(len(K), chosen)).T
        named = ", ".join(group.label for group in chosen[:6]) + (", …" if len(chosen) > 6 else "")
        if number <= target:
            required = coverage = effort = 0.0
        elif T is None:
            why = f"Vaccinating {named} alone cannot be enough: without them the infection sustains itself."
        else:
            effort = critical_effort(T)
            if len(set(effects.tolist())) == 1:
                required = critical_coverage(T, float(effects[0]), lasting)
            elif at_full <= target:
                required = root_between(lambda x: scaled_number(K, 1 - x * share), 0.0, 1.0, target)
        if required is not None and required <= 1:
            coverage = required
        elif why is None:
            needs = "no coverage would do" if required is None else f"{100 * required:.4g} % would be needed"
            why = f"Unattainable: {needs}; with all of {named} vaccinated the number is {at_full:.6g}."
    return Coverage(
        title=scenario.title,
        digest=scenario.digest,
        groups=tuple(group.label for group in chosen),
        types=types,
        kind=kind,
        efficacies=tuple(effects.tolist()),
        lasting=lasting,
        target=target,
        R0=number,
        T=T,
        critical_effort=effort,
        coverage=coverage,
        required=required,
        unattainable=number is not None and coverage is None,
        at_full=at_full,
        why=why,
        warnings=tuple(
            dict.fromkeys(
                [*scenario.warnings, *found.point.infection_free.warnings, *below_one_caution(found, CONTROL_LABEL)]
            )
        ),
    )


def share_mask(size: int, chosen: Sequence[HostGroup]) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    """Return which types at infection belong to the groups."""
    mask = np.zeros(size, dtype=bool)
    for group in chosen:
        mask[list(group.members)] = True
    return mask


def lasting_of(turnover: float | None, waning: float) -> float:
    """Return the share of coverage that protects where protection wanes; 1 where it lasts."""
    if waning == 0:
        return 1.0
    if turnover is None or not (turnover > 0 and waning > 0):
        raise ScenarioError(
            Problem(
                "waning", "protection that wanes needs a turnover of the population above 0, per time unit, beside it."
            )
        )
    return lasting_share(turnover, waning)


def chosen_groups(found: Numbers, labels: Sequence[str] | None) -> tuple[HostGroup, ...]:
    """Return the groups of hosts of these labels, or single types where a label is that of a type; all without labels."""
    if found.scenario.projection is not None:
        raise ScenarioError(
            Problem(
                "groups",
                "a projected population is not vaccinated: nobody in it is infected. Write what lowers births or survival as "
                "an intervention, and ask for the strength that is needed.",
            )
        )
    every = host_groups(found)
    if labels is None:
        return every
    by_label = {group.label: group for group in every}
    for row, k in enumerate(found.at):
        by_label.setdefault(found.template.types[int(k)], HostGroup(found.template.types[int(k)], (row,), None))
    problems = []
    for label in labels:
        if label not in by_label:
            hint = closest(label, list(by_label)) or f" There are {listed([group.label for group in every])}."
            problems.append(Problem("groups", f"'{short(label)}' is no group of hosts and no type at infection.{hint}"))
    if not problems:
        members = [row for label in labels for row in by_label[label].members]
        if len(set(members)) < len(members):
            problems.append(Problem("groups", "some types are named twice. Name each group once."))
    if not labels:
        problems.append(Problem("groups", "no group is named. Name one or more, or leave them out for all."))
    if problems:
        raise ScenarioError(problems)
    return tuple(by_label[label] for label in labels)


def values_of(
    given: float | Mapping[str, float], groups: Sequence[HostGroup], what: str
) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """Return one finite number for each group; a mapping must name every group and no other."""
    problems = []
    if isinstance(given, Mapping):
        labels = [group.label for group in groups]
        for label in given:
            if label not in labels:
                problems.append(
                    Problem(what, f"'{short(label)}' is none of the groups chosen.{closest(label, labels)}")
                )
        for label in labels:
            if label not in given:
                problems.append(Problem(what, f"has no value for {label}. Give one for each group, or one for all."))
        values = [float(given.get(label, 0.0)) for label in labels]
    else:
        values = [float(given)] * len(groups)
    if not np.all(np.isfinite(values)):
        problems.append(Problem(what, "is not finite. Give a number."))
    if problems:
        raise ScenarioError(problems)
    return np.array(values)


def shares_of(
    given: float | Mapping[str, float], groups: Sequence[HostGroup], what: str
) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """Return one share in [0, 1] for each group; a mapping must name every group and no other."""
    values = values_of(given, groups, what)
    for value in values.tolist():
        if not 0 <= value <= 1:
            advice = f" For {value:g} % write {value / 100:g}." if 1 < value <= 100 else ""
            raise ScenarioError(Problem(what, f"{value:g} lies outside [0, 1].{advice}"))
    return values
