"""Sensitivity, draws and a calibrated value as text for a terminal."""

from __future__ import annotations

from ngm.console import MOST_PRINTED, WIDTH, closing, figure, squeezed, table
from ngm.results_draws import Uncertainty
from ngm.results_sensitivity import Calibration, Sensitivity

__all__ = ["calibrate_text", "sensitivity_text"]

#: Parameters whose formulas are printed.
MOST_FORMULAS = 20


def sensitivity_text(result: Sensitivity) -> str:
    """Return the local indices of `ngm.sensitivity` as text, largest first."""
    unit = result.time_unit
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    lines.append("No R0" if result.R0 is None else f"R0 = {figure(result.R0)}")
    timeless = result.growth_rate is None and all(index.growth_derivative is None for index in result.local)
    if not timeless:
        lines.append(f"growth rate r = {figure(result.growth_rate)} per {unit}")
    lines.append("An elasticity e: 1 % more of the parameter moves the number by e %, all others held.")
    order = sorted(result.local, key=lambda index: -abs(index.elasticity or 0.0))
    rows = [
        [
            index.parameter,
            figure(index.value),
            figure(index.elasticity),
            figure(index.derivative),
            figure(index.growth_elasticity),
        ]
        for index in order[:80]
    ]
    head = ["parameter", "value", "elasticity of R0", "dR0/dp", "elasticity of r"]
    lines += ["", *(table([row[:4] for row in rows], head[:4]) if timeless else table(rows, head))]
    if len(order) > 80:
        lines.append(f"  … and {len(order) - 80} more; use --json.")
    names = result.types_at_infection
    if result.entry_elasticity is not None and len(names) <= MOST_PRINTED:
        lines += ["", "Elasticity of R0 by entry of K (they add up to 1)"]
        rows = [[name, *(figure(v) for v in row)] for name, row in zip(names, result.entry_elasticity, strict=True)]
        lines += table(rows, ["", *names])
    lines += _formulas(result)
    if result.uncertainty is not None:
        lines += _uncertainty(result.uncertainty, unit)
    lines += closing(result.warnings)
    return squeezed(lines)


def _uncertainty(result: Uncertainty, unit: str) -> list[str]:
    """Return what the draws say."""
    told = result.R0
    seed = "" if result.seed is None else f", seed {result.seed}"
    lines = ["", f"Draws: {result.how}{seed}; {told.rejected:,} of {told.draws:,} without an R0"]
    for spread in result.distributions:
        figures = spread.figures
        name = f"{spread.number} per {unit}" if spread.unit else spread.number
        if figures.quantiles is None:
            lines.append(f"  {name}: no draw has a value")
            continue
        quantiles = ", ".join(f"{100 * float(level):g} %: {figure(v)}" for level, v in figures.quantiles.items())
        lines += [f"  {name}: mean {figure(figures.mean)}, sd {figure(figures.sd)}; quantiles {quantiles}"]
        lines += [f"  share of draws with {spread.number} > {spread.threshold:g}: {figure(figures.above_one)}"]
    rows = []
    for driver in sorted(result.drivers, key=lambda d: -abs(d.total if d.total is not None else d.prcc or 0.0)):
        monotone = "-" if driver.monotone is None else "yes" if driver.monotone else "NO"
        rows.append([driver.parameter, figure(driver.prcc), monotone, figure(driver.first), figure(driver.total)])
    lines += ["", *table(rows, ["parameter", "PRCC", "one direction", "Sobol first", "Sobol total"])]
    if result.interventions:
        shares = [[a.intervention, figure(a.figures.mean), figure(a.below_one)] for a in result.interventions]
        lines += ["", *table(shares, ["intervention", "mean control number", "share of draws below 1"])]
    return lines


def _formulas(result: Sensitivity) -> list[str]:
    """Return derivatives and elasticities of R0 as formulas, where there are some."""
    known = [index for index in result.local if index.formula is not None]
    if not known:
        return []
    lines = ["", "As formulas, in values as converted"]
    for index in known[:MOST_FORMULAS]:
        lines.append(f"  dR0/d{index.parameter} = {index.formula}")
        lines.append(f"  elasticity by {index.parameter} = {index.elasticity_formula}")
    if len(known) > MOST_FORMULAS:
        lines.append(f"  … and {len(known) - MOST_FORMULAS} more; use --json.")
    return lines


def calibrate_text(result: Calibration) -> str:
    """Return the value found by `ngm.calibrate` as text."""
    R0 = "no R0" if result.R0 is None else f"R0 = {result.R0:g}"
    rate = "" if result.growth_rate is None else f"a growth rate of {result.growth_rate:g}, and "
    lines = [f"{result.parameter} = {result.value!r} gives {rate}{R0}."]
    if len(result.values) > 1:
        lines.append(f"All values: {', '.join(repr(value) for value in result.values)}.")
    if result.attainable is not None:
        low, high = result.attainable
        what = "R0" if result.growth_rate is None else "the growth rate"
        lines.append(f"Over the values searched, {what} goes from {figure(low)} to {figure(high)}.")
    return squeezed([*lines, *closing(result.warnings)])
