"""Units, splits, a formula and the difference of two models as text for a terminal."""

from __future__ import annotations

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.results_opinion import Stay, Units

__all__ = ["opinion_text", "stay_words", "units_text"]


def opinion_text(result: Units) -> str:
    """Return any second opinion as text."""
    return units_text(result)


def _heading(title: str) -> list[str]:
    return [title, "=" * min(len(title), WIDTH), ""]


def units_text(result: Units) -> str:
    """Return the result of `ngm.units` as text."""
    lines = _heading(result.title)
    if result.findings:
        lines += [
            f"{len(result.findings)} findings",
            *(f"  ! {note.where}: {note.message}" for note in result.findings),
        ]
    else:
        lines.append("The units fit: every flow is in its compartment's unit per time, and no sum mixes units.")
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
        lines += [f"  {stay_words(stay, result.time_unit)}" for stay in result.stays[:60]]
        if len(result.stays) > 60:
            lines.append(f"  … and {len(result.stays) - 60} more; use --json.")
    return squeezed([*lines, *closing(result.warnings)])


def stay_words(stay: Stay, time_unit: str) -> str:
    """Return a stay as a sentence: mean stay in I 5 day; 98 % Recovery, 2 % Death."""
    if stay.mean is None:
        return f"{stay.compartment}: nothing leaves"
    ways = ", ".join(
        f"{100 * way.probability:.3g} % {way.label}" + (f" ({way.to})" if way.to else " (out)") for way in stay.exits
    )
    return f"mean stay in {stay.compartment} {figure(stay.mean)} {time_unit}; {ways}"
