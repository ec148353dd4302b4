"""Units, splits, a formula and the difference of two models as text for a terminal."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.results_opinion import Difference, FormulaOpinion, Splits, Units

__all__ = ["conversions_text", "difference_text", "formula_text", "opinion_text", "splits_text", "units_text"]


def conversions_text(pairs: Sequence[tuple[str, str]], time_unit: str, doubts: Sequence[str] = ()) -> str:
    """Return what is converted, and likely slips, as lines that stand above every result; empty where there is nothing."""
    lines = [f"  {name}: {text}" for name, text in pairs[:MOST_CONVERTED]]
    if lines:
        lines = [f"Converted (time in {time_unit})", *lines]
    if len(pairs) > MOST_CONVERTED:
        lines.append(f"  and {len(pairs) - MOST_CONVERTED} more: python -m ngm units FILE")
    lines += [f"  ! {doubt}" for doubt in doubts[:MOST_CONVERTED]]
    return "\n".join([*lines, "", ""]) if lines else ""


def opinion_text(result: Units | Splits | FormulaOpinion | Difference) -> str:
    """Return any second opinion as text."""
    match result:
        case Units():
            return units_text(result)
        case Splits():
            return splits_text(result)
        case FormulaOpinion():
            return formula_text(result)
        case Difference():
            return difference_text(result)


#: Conversions that are listed.
MOST_CONVERTED = 12


def _heading(title: str) -> list[str]:
    return [title, "=" * min(len(title), WIDTH), ""]


def units_text(result: Units) -> str:
    """Return the result of `ngm.units` as text."""
    lines = _heading(result.title)
    if result.findings:
        lines += [
            f"{len(result.findings)} finding{'s' if len(result.findings) > 1 else ''}",
            *(f"  ! {note.where}: {note.message}" for note in result.findings),
        ]
    else:
        lines.append(result.fits)
    rows = []
    for p in result.parameters[:80]:
        rows.append(
            [
                p.parameter,
                ", ".join(p.typed[:4]) + (", …" if len(p.typed) > 4 else ""),
                p.unit or (f"none ({p.implied} would fit)" if p.implied is not None else "none"),
                (", ".join(p.in_force[:4]) + (", …" if len(p.in_force) > 4 else "")) if p.converted else "",
                p.reading or "",
            ]
        )
    head = ["parameter", "as typed", "unit", f"in force (time in {result.time_unit})", "reads as"]
    lines += ["", *table(rows, head)]
    if result.stays:
        lines += ["", "Mean stay in each stage, and how it ends (without infection)"]
        lines += [f"  {stay.words(result.time_unit)}" for stay in result.stays[:60]]
        if len(result.stays) > 60:
            lines.append(f"  … and {len(result.stays) - 60} more; use --json.")
    return squeezed([*lines, *closing(result.warnings)])


def splits_text(result: Splits) -> str:
    """Return the result of `ngm.splits` as text."""
    lines = _heading(result.title)
    if not result.choices:
        lines.append(result.none)
    else:
        lines += ["Flows whose kind is a choice", *(f"  flow {k}: {why}" for k, why in result.choices.items())]
        hosts = result.shown_hosts
        rows, refused = [], []
        for number, split in enumerate(result.splits, 1):
            name = f"{number}" + (" (the file)" if split.as_typed else "")
            if split.refused is not None:
                refused.append(f"  {name}: {split.refused}")
            rows.append(
                [
                    name,
                    *(kind for kind in split.kinds.values()),
                    "refused" if split.refused is not None else figure(split.R0),
                    figure(split.growth_rate),
                    *("none" if split.hosts.get(host) is None else figure(split.hosts[host]) for host in hosts),
                ]
            )
        head = ["split", *(f"flow {k}" for k in result.choices), "R0", f"growth per {result.time_unit}"]
        lines += ["", *table(rows, [*head, *(f"T({host})" for host in hosts)])]
        if refused:
            lines += ["", "No valid split", *refused]
        if result.agree:
            lines += ["", f"The same in all valid splits: {result.words(result.agree)}."]
        if result.differ:
            lines.append(f"Not to be compared between models that split differently: {result.words(result.differ)}.")
        lines.append("F, V and K of each split: use --json.")
    return squeezed([*lines, *closing(result.warnings)])


def formula_text(result: FormulaOpinion) -> str:
    """Return the result of `ngm.formula` as text."""
    lines = [*_heading(result.title), f"Formula: {result.formula}", f"Verdict: {result.verdict}", result.message]
    if result.counterexample is not None:
        lines += ["", "A point where the two differ (values in force, in the scenario's time unit)"]
        lines += [f"  {name} = {figure(value)}" for name, value in result.counterexample.items()]
        lines.append(f"  the model's R0 = {figure(result.R0_there)}, the formula = {figure(result.formula_there)}")
    if result.responses:
        rows = [[name, figure(a), figure(b)] for name, (a, b) in result.responses.items()]
        lines += ["", "They answer differently to (elasticities there)"]
        lines += table(rows, ["parameter", "the model's R0", "the formula"])
    return squeezed([*lines, *closing(result.warnings)])


def difference_text(result: Difference) -> str:
    """Return the result of `ngm.difference` as text."""
    lines = _heading(f"{result.first} -> {result.second}")
    lines.append(f"R0 {figure(result.R0[0])} -> {figure(result.R0[1])}")
    lines.append(f"growth rate {figure(result.growth_rate[0])} -> {figure(result.growth_rate[1])}")
    lines += ["", "What differs", *(f"  {change.words()}" for change in result.changes[:80])]
    if not result.changes:
        lines.append("  nothing")
    if result.entries:
        lines += ["", "Entries that moved"]
        for entry in result.entries[:80]:
            values = f"{figure(entry.before)} -> {figure(entry.after)}"
            lines.append(f"  {entry.matrix}[{entry.row}, {entry.column}]  {values}   ({'; '.join(entry.because)})")
    if result.contributions:
        rows = [[c.change, figure(c.in_order), figure(c.averaged)] for c in result.contributions]
        lines += ["", "What moved R0", *table(rows, ["change", "in this order", "mean over orders"])]
    return squeezed([*lines, *closing(result.warnings)])
