"""Results as text for a terminal: words and numbers only, nothing computed."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.results import ControlResult, Solution
from ngm.results_control import Compared, Comparison
from ngm.results_season import Seasonal
from ngm.results_sensitivity import Calibration, Sensitivity

__all__ = ["CAUTION", "closing", "compare_text", "control_text", "figure", "solve_text", "squeezed", "table"]

CAUTION = (
    "A model's number is no forecast, and says nothing of speed or severity. It holds for this model, at these values, near "
    "the infection-free state. Decisions belong to the responsible authority under local rules and licensed practice."
)
STATED_CAUTION = CAUTION.replace(
    "for this model, at these values, near the infection-free state", "for the matrix of this file, at these values"
)
#: Types up to which matrices are printed.
MOST_PRINTED = 12
WIDTH = 110


def figure(value: float | None) -> str:
    """Return a number as people read it: six significant digits."""
    return "-" if value is None else f"{value:.6g}"


def table(rows: Sequence[Sequence[str]], head: Sequence[str]) -> list[str]:
    """Return lines of right-aligned columns, the first one left-aligned; a name of several lines goes on one."""
    rows = [[cell.replace("\n", " ") for cell in row] for row in [head, *rows]]
    widths = [max(len(row[k]) for row in rows) for k in range(len(head))]
    lines = []
    for row in rows:
        cells = [row[0].ljust(widths[0]), *(cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True))]
        lines.append("  " + "  ".join(cells).rstrip())
    return lines


def _matrix(name: str, values: Sequence[Sequence[float]] | None, labels: Sequence[str]) -> list[str]:
    if values is None or not labels:
        return []
    if len(labels) > MOST_PRINTED:
        return [f"{name}: {len(labels)} x {len(labels)}; use --json for the numbers."]
    rows = [[label, *(figure(v) for v in row)] for label, row in zip(labels, values, strict=True)]
    return [f"{name} (row: the type infected or entered; column: the type that causes it)", *table(rows, ["", *labels])]


def _symbolic(name: str, entries: Sequence[Sequence[str]] | None, labels: Sequence[str]) -> list[str]:
    if entries is None:
        return []
    lines = [f"{name}, entry by entry"]
    for row, label in zip(entries, labels, strict=True):
        for entry, column in zip(row, labels, strict=True):
            if entry != "0":
                lines.append(f"  {name}[{label}, {column}] = {entry}")
    return lines if len(lines) <= 60 else [f"{name}: {len(lines) - 1} entries; use --json to see them."]


def solve_text(result: Solution) -> str:
    """Return the derivation and the numbers of `ngm.solve` as text."""
    unit = result.time_unit
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    if result.R0 is None:
        lines.append(f"No R0: {result.no_R0}")
    else:
        assert result.R0_bounds is not None
        low, high = result.R0_bounds
        proven = [f"R0 = {figure(result.R0)}   proven: {low!r} <= R0 <= {high!r}"]
        lines += proven if result.season is None else _season(result.season, unit)
        if result.form == "projection":
            lines.append("   the net reproduction number: new members by one new member in its life")
        if result.closed_form is not None:
            lines.append(f"   = {result.closed_form}")
        elif result.season is None:
            lines.append("   no closed form worth printing; the number is certified by its bounds")
        period = result.structure.period if result.structure is not None else None
        if result.per_cycle is not None and result.per_cycle != result.R0 and result.R0 > 0:
            lines.append(
                f"R0 per cycle = {figure(result.per_cycle)} (R0 is per generation; a cycle takes {period or 'several'})"
            )
        elif result.per_cycle is None:
            lines.append("R0 per cycle: classes of different periods attain R0, so there is no one number per cycle")
    if result.effective is not None and result.effective.R is not None:
        lines.append(
            f"effective number at the state now = {figure(result.effective.R)} (not R0: it holds at today's immunity)"
        )
    if result.growth_factor is not None:
        lines.append(f"growth factor = {figure(result.growth_factor)} per step of one {unit}, rho(F + T), T = I - V")
    if result.form == "K as given":
        lines.append(
            "K as given: there are no flows behind it, so there is no growth rate and no infection-free state."
        )
    else:
        lines.append(f"growth rate = {figure(result.growth_rate)} per {unit}")
    if result.doubling_time is not None:
        lines.append(f"doubling time = {figure(result.doubling_time)} {unit}")
    lines += _population(result)
    lines += _infection_free(result)
    lines += ["", "What F and V are made of"] if result.terms else []
    for term in result.terms[:80]:
        sign = "+" if term.sign > 0 else "-"
        source = f"flow {term.flow} " if term.flow is not None else ""
        lines.append(f"  {term.matrix}[{term.row}, {term.column}]  {sign} {term.share}   ({source}{term.label})")
    if len(result.terms) > 80:
        lines.append(f"  … and {len(result.terms) - 80} more; use --json.")
    for name, values in (("F", result.F), ("V", result.V)):
        lines += ["", *_matrix(name, values, result.types)]
    lines += ["", *_symbolic("K", result.symbolic.K, result.types_at_infection)]
    if result.symbolic.abbreviations:
        lines += ["", "where"]
        lines += [f"  {name} = {line}" for name, line in list(result.symbolic.abbreviations.items())[:80]]
    lines += ["", *_matrix("K", result.K, result.types_at_infection)]
    if result.symbolic.characteristic_polynomial is not None:
        name = result.symbolic.polynomial_variable
        lines += ["", f"det({name} I - K) = {result.symbolic.characteristic_polynomial}"]
    lines += _blocks(result)
    lines += _structure(result)
    lines += ["", "Conditions (van den Driessche & Watmough 2002)"] if result.conditions else []
    lines += [f"  {c.name} {'holds' if c.holds else 'DOES NOT HOLD'}: {c.detail}" for c in result.conditions]
    lines += closing(result.warnings, CAUTION if result.form == "flows" else STATED_CAUTION)
    return squeezed(lines)


def _infection_free(result: Solution) -> list[str]:
    """Return the infection-free state, nothing where the matrices stand in the file."""
    if result.infection_free is None:
        return []
    lines = ["", "Infection-free state"]
    symbolic = result.symbolic.infection_free or {}
    shown = list(result.infection_free.items())
    for name, value in shown[:40]:
        formula = symbolic.get(name)
        tail = f" = {formula}" if formula is not None and not _is_number(formula) else ""
        lines.append(f"  {name}{tail} = {figure(value)}")
    if len(shown) > 40:
        lines.append(f"  … and {len(shown) - 40} more; use --json.")
    return lines


def _population(result: Solution) -> list[str]:
    """Return what the vectors of F + T say of a projected population."""
    about = result.projected
    if about is None:
        return []
    lines = [f"The population {about.fate(result.growth_factor)}."]
    if about.stable_structure is None or about.reproductive_values is None:
        return lines
    rows = [
        [stage, figure(share), figure(value)]
        for stage, share, value in zip(about.stages, about.stable_structure, about.reproductive_values, strict=True)
    ]
    lines += ["", *table(rows[:40], ["stage", "share in the long run", "reproductive value"])]
    for name, entries in (("births", about.elasticity_births), ("transitions", about.elasticity_transitions)):
        if entries is not None and len(about.stages) <= MOST_PRINTED:
            rows = [
                [stage, *(figure(round(v, 9)) for v in row)] for stage, row in zip(about.stages, entries, strict=True)
            ]
            lines += ["", f"Elasticity of the growth factor by entry of {name}", *table(rows, ["", *about.stages])]
    return lines


def _season(year: Seasonal, unit: str) -> list[str]:
    """Return R0 over a season with the numbers that mislead."""
    moments = [("mildest", year.mildest, year.mildest_at), ("worst", year.worst, year.worst_at)]
    return [
        f"R0 over the season of {year.period:g} {unit} = {figure(year.R0)}   (error about {year.error:.1g})",
        f"   averaged season: {figure(year.averaged)} (not R0)",
        *(f"   {name} moment, time {figure(at)}: {figure(value)} (not R0)" for name, value, at in moments),
    ]


def _blocks(result: Solution) -> list[str]:
    """Return the block form of a grouped model."""
    blocks = result.symbolic.blocks
    if blocks is None:
        return []
    lines = ["", "On the template (each block for all groups; diag: a number in each group; C': the matrix transposed)"]
    for name, entries in (("F", blocks.F), ("V", blocks.V), ("K", blocks.K)):
        if entries is None:
            lines.append(f"  {name} = F V^-1, solved group by group and along the moves; it has no formula by group")
            continue
        lines += [f"  {name}[{row}, {column}] = {entry}" for (row, column), entry in entries.items()]
    if blocks.root is not None:
        lines.append(f"  R0 = {blocks.root}")
    return lines


def _structure(result: Solution) -> list[str]:
    structure = result.structure
    if structure is None or not structure.classes:
        return []
    lines = ["", "Structure of K"]
    if structure.irreducible:
        lines.append(f"  irreducible: every type leads to every other; period {structure.period}")
    else:
        lines.append(f"  reducible: {len(structure.classes)} classes, a class before those that it infects")
    rows = [
        [
            ", ".join(c.types[:8]) + (", …" if len(c.types) > 8 else ""),
            figure(c.R0),
            "-" if c.period is None else str(c.period),
            figure(c.growth_rate),
        ]
        for c in structure.classes[:40]
    ]
    head = ["class", "R0", "period", f"growth per {result.time_unit}"]
    lines += table(rows, head) if result.form != "K as given" else table([row[:3] for row in rows], head[:3])
    if result.right is not None and result.left is not None and len(result.right) <= 40:
        rows = [
            [name, figure(share), figure(value)]
            for name, share, value in zip(result.types_at_infection, result.right, result.left, strict=True)
        ]
        new = "births" if result.form == "projection" else "new infections"
        lines += ["", *table(rows, ["type", f"share of {new}", "reproductive value"])]
    return lines


def control_text(result: ControlResult) -> str:
    """Return the numbers of `ngm.control` as text."""
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    lines.append(f"No R0: {result.no_R0}" if result.R0 is None else f"R0 = {figure(result.R0)}")
    lines.append("The share to remove is 1 - 1/T where T > 1; 1 - 1/R0 is it only where all types are treated alike.")
    reasons: list[str] = []
    for title, rows in (
        ("Types", [(", ".join(t.types), t) for t in result.type_reproduction]),
        (
            "Entries of K (who is infected <- by whom)",
            [(f"{t.entry[0]} <- {t.entry[1]}", t) for t in result.target_reproduction],
        ),
        ("Groups", [(t.types[0], t) for t in result.groups]),
        ("Infectivity of states", [(t.state, t) for t in result.state_reproduction]),
    ):
        if not rows:
            continue
        cells = []
        for name, item in rows:
            effort = "cannot work alone" if item.T is None else figure(item.critical_effort)
            cells.append([name, figure(item.T), effort])
            if item.why is not None:
                reasons.append(item.why)
        lines += ["", title, *table(cells[:80], ["acts on", "T", "share to remove"])]
        if len(cells) > 80:
            lines.append(f"  … and {len(cells) - 80} more; use --json.")
    chosen = result.entry_set
    if chosen is not None:
        effort = (
            "cannot work"
            if chosen.T is None
            else f"T = {figure(chosen.T)}, share to remove {figure(chosen.critical_effort)}"
        )
        named = ", ".join(f"{row} <- {column}" for row, column in chosen.entries)
        lines += ["", f"Together: {named}: {effort}"]
        reasons += [chosen.why] if chosen.why is not None else []
    if reasons:
        lines += ["", *(f"  {why}" for why in reasons[:20])]
    lines += closing(result.warnings)
    return squeezed(lines)


def compare_text(result: Comparison) -> str:
    """Return the rows of `ngm.compare` as text, the smallest number first."""
    base, unit = result.baseline, result.time_unit
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    lines.append(f"No R0: {base.no_R0}" if base.R0 is None else f"R0 = {figure(base.R0)} with no intervention")
    if base.growth_rate is not None:
        lines.append(f"growth rate = {figure(base.growth_rate)} per {unit}{_time(base, unit)}")
    if result.interventions:
        lines += ["With an intervention in force the number is a control reproduction number; the smallest first.", ""]
    if base.effective is not None:
        lines.insert(4, f"effective number at the state now = {figure(base.effective)}")
    head = ["intervention", "number", "below 1", "share of R0 removed", f"growth per {unit}", "doubles in", "halves in"]
    rows = []
    for row in result.by_number():
        rows.append(
            [
                row.name,
                "none" if row.R0 is None else figure(row.R0),
                "yes" if row.below_one else "no" if row.R0 is not None else "-",
                "-" if row.reduction is None else f"{100 * row.reduction:.4g} %",
                figure(row.growth_rate),
                figure(row.doubling_time),
                figure(row.halving_time),
                figure(row.cost),
                *([figure(row.effective)] if base.effective is not None else []),
            ]
        )
    head += ["cost", *(["effective now"] if base.effective is not None else [])]
    if all(row.growth_rate is None for row in (base, *result.interventions)):
        # of a K as given: it has no time in it
        head, rows = [*head[:4], *head[7:]], [[*row[:4], *row[7:]] for row in rows]
    lines += table(rows, head) if rows else []
    lines += _mixes(result)
    lines += closing(result.warnings)
    return squeezed(lines)


def _time(row: Compared, unit: str) -> str:
    if row.doubling_time is not None:
        return f", doubling time = {figure(row.doubling_time)} {unit}"
    return "" if row.halving_time is None else f", halving time = {figure(row.halving_time)} {unit}"


def _mixes(result: Comparison) -> list[str]:
    """Return the shares of the types among new infections, a row each, where that fits on a page."""
    shown = [row for row in (result.baseline, *result.by_number()) if row.case_mix is not None]
    if not 1 < len(result.types) <= MOST_PRINTED or not shown:
        return []
    rows = [[row.name, *(figure(round(share, 6)) for share in row.case_mix or ())] for row in shown]
    return ["", "Share of new infections", *table(rows, ["", *result.types])]


def result_text(result: Solution | Comparison | ControlResult | Sensitivity | Calibration) -> str:
    """Return any result as text."""
    match result:
        case Solution():
            return solve_text(result)
        case Comparison():
            return compare_text(result)
        case ControlResult():
            return control_text(result)
        case Sensitivity():
            from ngm.console_sensitivity import sensitivity_text

            return sensitivity_text(result)
        case Calibration():
            from ngm.console_sensitivity import calibrate_text

            return calibrate_text(result)


def closing(warnings: Sequence[str], caution: str = CAUTION) -> list[str]:
    """Return the lines that every text ends in: warnings, and the caution."""
    lines: list[str] = []
    if warnings:
        lines += ["", "Warnings", *(f"  ! {warning}" for warning in warnings)]
    return [*lines, "", caution]


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def squeezed(lines: Sequence[str]) -> str:
    """Return the lines as text, without two blank ones in a row."""
    out: list[str] = []
    for line in lines:
        if line or (out and out[-1]):
            out.append(line)
    return "\n".join(out)
