"""Strength, coverage and allocation as text for a terminal."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.results_control import Allocation, Coverage, Strength
from ngm.wording import allocation_words, coverage_words, share, strength_words, waning_words, whole

__all__ = ["allocation_text", "coverage_text", "needs_text", "strength_text"]

#: Groups up to which a column stands for each way of sharing; past it only for the best.
MOST_GROUPS = 40


def needs_text(result: Strength | Coverage | Allocation, besides: Sequence[str] = (), more: Sequence[str] = ()) -> str:
    """Return one of the three as text. `besides`: the interventions in force with it; `more`: lines that follow it."""
    match result:
        case Strength():
            return strength_text(result, besides, more)
        case Coverage():
            return coverage_text(result, besides, more)
        case Allocation():
            return allocation_text(result, besides)


def strength_text(result: Strength, besides: Sequence[str] = (), more: Sequence[str] = ()) -> str:
    """Return the result of `ngm.strength_needed` as text."""
    lines = [*_heading(result.title, result.R0, besides), strength_words(result), ""]
    lines += [f"Strength of {result.name}, from 0 (not there) to 1 (as the file has it)"]
    step = max(1, (len(result.curve) - 1) // 10)
    rows = [[figure(x), "none" if value is None else figure(value)] for x, value in result.curve[::step]]
    lines += table(rows, ["strength", result.label])
    return squeezed([*lines, *more, *closing(result.warnings)])


def coverage_text(result: Coverage, besides: Sequence[str] = (), more: Sequence[str] = ()) -> str:
    """Return the result of `ngm.coverage_needed` as text."""
    lines = [*_heading(result.title, result.R0, besides), coverage_words(result), ""]
    effects = dict.fromkeys(result.efficacies)
    told = share(result.efficacies[0]) if len(effects) == 1 else "by group"
    lines.append(f"vaccine: {result.kind}; efficacy against infection and onward spread together: {told}")
    if result.lasting != 1:
        lines.append(f"protection wanes: {share(result.lasting)} of coverage protects")
    if len(effects) > 1:
        rows = [[group, share(effect)] for group, effect in zip(result.groups, result.efficacies, strict=True)]
        lines += table(rows[:MOST_GROUPS], ["group", "efficacy"])
    shown = ", ".join(result.types[:12]) + (", …" if len(result.types) > 12 else "")
    lines.append(f"acts on {shown}")
    lines += [
        f"T = {figure(result.T)}",
        f"share of their infections to prevent = {figure(result.critical_effort)}",
        f"coverage needed = {figure(result.coverage)}",
    ]
    lines += [waning_words(one) for one in result.waning]
    if result.required is not None and result.coverage is None:
        lines.append(f"coverage that would be needed = {figure(result.required)}")
    lines.append(f"{result.label}, all of them vaccinated = {figure(result.at_full)}")
    return squeezed([*lines, *more, *closing(result.warnings)])


def allocation_text(result: Allocation, besides: Sequence[str] = ()) -> str:
    """Return the result of `ngm.allocate` as text."""
    lines = [*_heading(result.title, result.R0, besides), f"supply: {whole(result.supply)}", ""]
    lines += allocation_words(result)
    ways = [result.best, *result.rules]
    rows = [[way.rule, figure(way.R0), whole(way.spent)] for way in ways]
    lines += ["", *table(rows, ["shared", result.label, "spent"])]
    lines += ["", "Coverage of each group"]
    shown = ways if len(result.groups) <= MOST_GROUPS else ways[:1]
    heads = ["group", "members", *(way.rule for way in shown)]
    rows = [
        [group, whole(result.sizes[k]), *(share(way.coverage[k]) for way in shown)]
        for k, group in enumerate(result.groups[:MOST_GROUPS])
    ]
    lines += table(rows, heads)
    smallest = result.smallest
    lines += ["", "Doses for each group"]
    heads = ["group", *(way.rule for way in shown)]
    if smallest.doses is not None:
        heads.append("smallest supply")
    rows = [
        [
            group,
            *(whole(way.doses[k]) for way in shown),
            *([whole(smallest.doses[k])] if smallest.doses is not None else []),
        ]
        for k, group in enumerate(result.groups[:MOST_GROUPS])
    ]
    lines += table(rows, heads)
    if len(result.groups) > MOST_GROUPS:
        lines.append(f"  … and {len(result.groups) - MOST_GROUPS} more groups; use --json.")
    return squeezed([*lines, *closing(result.warnings)])


def _heading(title: str, number: float | None, besides: Sequence[str]) -> list[str]:
    """Return the title and the number before anything is done: R0, or a control number where something is in force."""
    lines = [title, "=" * min(len(title), WIDTH), ""]
    if besides:
        lines.append(f"with {', '.join(besides)} in force: control reproduction number = {figure(number)}")
    else:
        lines.append("No R0" if number is None else f"R0 = {figure(number)}")
    return lines
