"""The best use of a limited supply: doses or a budget shared among groups of hosts."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt

from ngm.analysis.groups import HostGroup
from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.steady import refuse_season
from ngm.analysis.strength import check_target, chosen_groups, number_of, shares_of, values_of
from ngm.engine.allocation import Problem, best_share, least_supply
from ngm.engine.allocation_bounds import Bound, least_price_bound, lower_bound
from ngm.engine.allocation_rules import first_then_even, greedy, same_multiple
from ngm.engine.balls import precision
from ngm.engine.vaccination import overall_efficacy
from ngm.errors import Problem as Wrong
from ngm.errors import ScenarioError
from ngm.results_control import Allocation, Share, SmallestSupply
from ngm.scenario.fields import short
from ngm.scenario.model import Intervention, Scenario

__all__ = ["allocate"]

FloatArray = npt.NDArray[np.float64]

#: Groups up to which "this one first" is shown for each; past that for the best of them.
MOST_FIRST = 10

_PROOFS = {
    "convex": "The number is a convex function of coverage here, so the bound closes on the best share there is.",
    "nearly convex": "The number is nearly a convex function of coverage here: the bound is that of a convex one below it.",
    "divided": "The number is no convex function of coverage here: a search may end in a share that is only best among its "
    "neighbours. Several starts were followed, and the ranges of coverage divided until the bound was this.",
    "all": "The supply is enough for every group up to its limit: there is nothing to choose.",
    "none": "There is nothing to share, or nothing to lower.",
}


def allocate(
    scenario: Scenario,
    supply: float,
    *,
    groups: Sequence[str] | None = None,
    efficacy: float | Mapping[str, float] = 1.0,
    against_spread: float | Mapping[str, float] = 0.0,
    cost: float | Mapping[str, float] = 1.0,
    upper: float | Mapping[str, float] = 1.0,
    sizes: Mapping[str, float] | None = None,
    target: float = 1.0,
    intervention: Intervention | None = None,
) -> Allocation:
    """Return the share of a supply among groups that lowers the control reproduction number most, and what it is worth.

    Coverage x of a group leaves 1 - x e of what its types do in K, e = 1 - (1 - a)(1 - b) for efficacy a against infection
    and b against onward spread, and costs x times members times cost a head. The vaccinated are drawn from the whole
    group, immune or not. The number falls in coverage but need not be convex in it: the result comes with a lower bound
    that no share of the supply can beat, beside simple rules, and with the smallest supply that reaches the target.

    Parameters
    ----------
    supply : float
        Doses, or a budget in the unit of `cost`; 0 or more.
    groups : sequence of str, optional
        Labels of groups of hosts; where left out, all whose size is known.
    efficacy, against_spread, upper : float in [0, 1], or one for each group
    cost : float > 0, or one for each group
        Cost a head.
    sizes : mapping of str to float, optional
        Members of groups, in place of the uninfected in the infection-free state.
    target : float
        The number that the smallest supply is to reach.
    intervention : Intervention, optional
        In force besides.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`.
    ngm.ScenarioError
        An unknown group, one of unknown size, a value out of range; or there is no R0.
    """
    refuse_season(scenario, "the best share of a supply")
    check_target(target)
    if not (np.isfinite(supply) and supply >= 0):
        raise ScenarioError(Wrong("supply", f"{supply:g} is no supply. Give a number, 0 or more."))
    found = decided_numbers(scenario, intervention)
    with precision(found.bits):
        return _allocated(found, supply, groups, efficacy, against_spread, cost, upper, sizes, target)


def _allocated(
    found: Numbers,
    supply: float,
    groups: Sequence[str] | None,
    efficacy: float | Mapping[str, float],
    against_spread: float | Mapping[str, float],
    cost: float | Mapping[str, float],
    upper: float | Mapping[str, float],
    sizes: Mapping[str, float] | None,
    target: float,
) -> Allocation:
    scenario = found.scenario
    warnings = [*scenario.warnings, *found.point.infection_free.warnings]
    if found.no_R0 is not None:
        raise ScenarioError(Wrong("", f"there is no R0, so nothing to lower: {found.no_R0}"))
    if found.spectrum is None:
        raise ScenarioError(Wrong("", "no flow makes new infections near the infection-free state: nothing to lower."))
    if found.K is None:
        raise ScenarioError(
            Wrong("", f"{len(found.template.types)} types: a supply is shared where K can be written out.")
        )
    chosen = _sized(chosen_groups(found, groups), groups is None, sizes, warnings)
    members = np.array([group.size for group in chosen], dtype=float)
    a, b = shares_of(efficacy, chosen, "efficacy"), shares_of(against_spread, chosen, "against_spread")
    effects = overall_efficacy(a, b)
    limits = shares_of(upper, chosen, "upper")
    costs = values_of(cost, chosen, "cost")
    if not np.all(costs > 0):
        raise ScenarioError(
            Wrong("cost", "is not above 0. A group that costs nothing is an intervention, not a choice.")
        )
    K = as_floats(found.K)
    member = np.full(len(K), -1, dtype=np.intp)
    effect = np.zeros(len(K))
    for g, group in enumerate(chosen):
        member[list(group.members)] = g
        effect[list(group.members)] = effects[g]
    problem = Problem(K, member, effect, members * costs, limits)
    shares = _rules(problem, chosen, members, supply, _incidence(found, chosen))

    def share(rule: str, x: FloatArray) -> Share:
        return Share(rule, tuple(x.tolist()), tuple((x * members).tolist()), problem.spend(x), problem.number(x))

    rules = [share(name, x) for name, x in shares]
    if len(chosen) > MOST_FIRST:
        first = [k for k, (name, _) in enumerate(shares) if name.endswith(" first")]
        keep = min(first, key=lambda k: rules[k].R0)
        rules = [rule for k, rule in enumerate(rules) if k not in first or k == keep]
    starts = [x for _, x in shares]
    bound = _best(problem, supply, starts)
    best = share("best found", bound.x)
    low = min(bound.low, best.R0)
    return Allocation(
        title=scenario.title,
        digest=scenario.digest,
        groups=tuple(group.label for group in chosen),
        sizes=tuple(members.tolist()),
        costs=tuple(costs.tolist()),
        efficacies=tuple(effects.tolist()),
        upper=tuple(limits.tolist()),
        supply=float(supply),
        R0=number_of(found),
        best=best,
        lower_bound=low,
        gap=1 - low / best.R0 if best.R0 > 0 else 0.0,
        route=bound.route,
        proof=_PROOFS[bound.route],
        rules=tuple(rules),
        smallest=_smallest(problem, members, target, [*starts, bound.x]),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _sized(
    chosen: Sequence[HostGroup], every: bool, sizes: Mapping[str, float] | None, warnings: list[str]
) -> tuple[HostGroup, ...]:
    """Return the groups with their sizes; without a choice by the caller those of no or unknown size are left out."""
    given = dict(sizes or {})
    labels = [group.label for group in chosen]
    problems = [
        Wrong("sizes", f"'{short(label)}' is none of the groups chosen ({', '.join(labels[:8])}).")
        for label in given
        if label not in labels
    ]
    problems += [
        Wrong("sizes", f"{size:g} members of {label}: give a number, 0 or more.")
        for label, size in given.items()
        if not (np.isfinite(size) and size >= 0)
    ]
    out, left_out = [], []
    for group in chosen:
        size = given.get(group.label, group.size)
        if size:
            out.append(HostGroup(group.label, group.members, float(size)))
        elif every:
            left_out.append(group.label)
        else:
            what = "has no members" if size == 0 else "has no size that the model tells"
            problems.append(Wrong("sizes", f"{group.label} {what}. Give one by sizes, or leave the group out."))
    if not out and not problems:
        problems.append(Wrong("sizes", "no group has a size that the model tells. Give them by sizes."))
    if problems:
        raise ScenarioError(problems)
    if left_out:
        warnings.append(f"Left out, since the model tells no members: {', '.join(left_out[:8])}.")
    return tuple(out)


def _incidence(found: Numbers, chosen: Sequence[HostGroup]) -> FloatArray | None:
    """Return the share of each group among new infections without the supply; None where it is not unique."""
    assert found.spectrum is not None
    if found.spectrum.right is None:
        return None
    right = as_floats(found.spectrum.right)
    return np.array([right[list(group.members)].sum() for group in chosen])


def _rules(
    problem: Problem, chosen: Sequence[HostGroup], members: FloatArray, supply: float, incidence: FloatArray | None
) -> list[tuple[str, FloatArray]]:
    out = [("by population", same_multiple(problem, np.ones(len(chosen)), supply))]
    if incidence is not None:
        out.append(("by incidence", same_multiple(problem, incidence / members, supply)))
    out.append(("where the next dose does most", greedy(problem, supply)))
    out += [(f"{group.label} first", first_then_even(problem, g, supply)) for g, group in enumerate(chosen)]
    return out if len(chosen) > 1 else out[:1]


def _best(problem: Problem, supply: float, starts: Sequence[FloatArray]) -> Bound:
    nothing = np.zeros(len(problem.price))
    if supply == 0 or not problem.parts or not np.any(problem.effect * problem.factors(problem.upper) < problem.effect):
        return Bound(problem.number(nothing), "none", nothing)
    x = best_share(problem, supply, starts)
    bound = lower_bound(problem, supply, x)
    if bound.x is x or bound.route == "all":
        return bound
    # the search for the bound met a better share: it is improved in turn
    better = best_share(problem, supply, [bound.x])
    return Bound(bound.low, bound.route, better)


def _smallest(problem: Problem, members: FloatArray, target: float, starts: Sequence[FloatArray]) -> SmallestSupply:
    x = least_supply(problem, target, starts)
    if x is None:
        full = problem.number(problem.upper)
        why = f"Unattainable: with every group covered up to its limit the number is {full:.6g}."
        return SmallestSupply(target, None, None, None, None, why)
    spent = problem.spend(x)
    low = least_price_bound(problem, target, x) if spent > 0 else 0.0
    low = None if low is None else min(low, spent)
    return SmallestSupply(target, spent, low, tuple(x.tolist()), tuple((x * members).tolist()), None)
