"""What the results about control mean, in sentences: the same on the page and on the command line."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from ngm.results_control import Allocation, Coverage, Strength, Waning
from ngm.results_draws import Assured

__all__ = [
    "allocation_words",
    "assured_words",
    "coverage_words",
    "figure",
    "share",
    "strength_words",
    "waning_words",
    "whole",
]


def figure(value: float | None) -> str:
    """Return a number as people read it: six significant digits."""
    return "-" if value is None else f"{value:.6g}"


def share(value: float | None) -> str:
    """Return a share in per cent, four significant digits; never "100 %" for one that is not whole."""
    if value is None:
        return "-"
    # What an optimiser leaves of a bound of 0 is 0.
    text = f"{100 * value:.4g}" if abs(value) > 1e-8 else "0"
    return f"{100 * value:.10g} %" if float(text) == 100 and value != 1 else f"{text} %"


def whole(value: float) -> str:
    """Return a count of doses or people, rounded, with thousands apart."""
    return f"{value:,.0f}" if abs(value) >= 10 or abs(value - round(value)) < 1e-6 else f"{value:.3g}"


def strength_words(result: Strength) -> str:
    """Return whether an intervention brings the number to its target, and at which strength."""
    if result.why is not None:
        return result.why
    if result.strength is None:
        return f"There is no strength at which {result.name} brings the number to {result.target:g}."
    if result.strength == 0:
        return f"The number is at or below {result.target:g} without {result.name}: none of it is needed."
    return (
        f"{result.name} must reach {share(result.strength)} of its full strength for the {result.label} to fall to "
        f"{result.target:g}. At full strength it is {figure(result.at_full)}."
    )


def coverage_words(result: Coverage) -> str:
    """Return the coverage needed in a sentence, or why no coverage will do."""
    who = _listed(result.groups)
    if result.why is not None:
        return result.why
    if result.coverage is None:
        return f"No coverage of {who} brings the number to {result.target:g}."
    if result.coverage == 0:
        return f"The number is at or below {result.target:g} already: nobody has to be vaccinated."
    each = ", the same share in each," if len(result.groups) > 1 else ""
    return (
        f"{share(result.coverage)} of {who}{each} must be vaccinated for the {result.label} to fall to {result.target:g}. "
        f"With all of them vaccinated it is {figure(result.at_full)}."
    )


def waning_words(result: Waning) -> str:
    """Return what the loss of protection means for a coverage."""
    unit = result.time_unit
    stay = f"1/{figure(result.fastest)} = {figure(1 / result.fastest)} {unit}s on average"
    if result.fastest > result.slowest * (1 + 1e-9):
        stay = f"{figure(1 / result.fastest)} to {figure(1 / result.slowest)} {unit}s on average, by group"
    who = result.compartment if result.label == result.compartment else f"{result.compartment} ({result.label})"
    told = f"Immunity of {who} wanes: {result.flow} leads back to {result.back_to}, after {stay}."
    if result.kind == "vaccine":
        return (
            f"{told} The coverage holds only while it is kept up: those who lose protection must be vaccinated again."
        )
    return f"{told} Past infection does not last in place of vaccination: the coverage is of the whole group, immune or not."


def allocation_words(result: Allocation) -> list[str]:
    """Return what the best share is worth: beside an even one, beside the bound, and the smallest supply that is enough."""
    best = result.best.R0
    out = [
        f"Shared in the best way found, the supply leaves a {result.label} of {figure(best)}; without it the number is "
        f"{figure(result.R0)}."
    ]
    even = next((rule for rule in result.rules if rule.rule == "by population"), None)
    if even is not None and len(result.groups) > 1:
        if best * (1 + 1e-9) >= even.R0:
            out.append(f"Sharing by population leaves as little: {figure(even.R0)}.")
        else:
            more = f"Sharing by population leaves {figure(even.R0)}, {share(even.R0 / best - 1)} more"
            fall, lost = result.R0 - best, even.R0 - best
            out.append(f"{more}: it gives away {share(lost / fall)} of what the best share takes off.")
    if result.gap <= 1e-12:
        out.append(f"No other share does better. {result.proof}")
    else:
        out.append(
            f"No share of this supply leaves less than {figure(result.lower_bound)}: what was found lies within "
            f"{'0.0001' if result.gap < 1e-6 else f'{100 * result.gap:.2g}'} % of the best there is. {result.proof}"
        )
    smallest = result.smallest
    if smallest.supply is None:
        out.append(f"No supply brings the number to {smallest.target:g}. {smallest.why or ''}".strip())
    elif smallest.supply == 0:
        out.append(f"The number is at or below {smallest.target:g} without any supply.")
    else:
        bound = ""
        if smallest.lower_bound is not None:
            bound = f" Less than {_rounded(smallest.lower_bound, math.floor)} is proven not to be enough."
        out.append(
            f"The smallest supply found that brings the number to {smallest.target:g} is "
            f"{_rounded(smallest.supply, math.ceil)}.{bound}"
        )
    return out


def assured_words(result: Assured) -> str:
    """Return what is enough in the wanted share of the draws, beside what would do at the scenario's own values."""
    wanted = f"in {share(result.assurance)} of the draws"
    if result.needed is None:
        out = result.why or f"No {result.what} brings the number below {result.target:g} {wanted}."
        return f"{out} Wanted: {share(result.assurance)}."
    if result.needed == 0:
        return f"The number is below {result.target:g} {wanted} or more without any of it."
    out = f"A {result.what} of {share(result.needed)} brings the number below {result.target:g} {wanted}."
    if result.at_values is None:
        return f"{out} At the scenario's own values not even all of it does."
    return f"{out} At the scenario's own values {share(result.at_values)} would do."


def _rounded(value: float, to: Callable[[float], int]) -> str:
    return f"{to(value):,}" if value >= 1000 else figure(value)


def _listed(names: Sequence[str]) -> str:
    shown = list(names[:8])
    more = f" and {len(names) - 8} more" if len(names) > 8 else ""
    if len(shown) > 1 and not more:
        return f"{', '.join(shown[:-1])} and {shown[-1]}"
    return ", ".join(shown) + more
