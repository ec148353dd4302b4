"""Every intervention of a scenario beside the baseline."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from ngm.analysis.caution import below_one_caution
from ngm.analysis.effective import effective
from ngm.analysis.groups import host_groups
from ngm.analysis.matrices import RECIPROCAL, as_floats, reciprocity_gap
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.point import MOST_WRITTEN
from ngm.analysis.season_results import row_over_the_year
from ngm.engine.balls import nearest, outward, precision
from ngm.engine.growth import doubling_time
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.results import Vector
from ngm.results_control import BASELINE_LABEL, CONTROL_LABEL, Compared, Comparison
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.packages import combined

__all__ = ["compare"]


def compare(scenario: Scenario, *, combinations: Sequence[Sequence[str]] = (), partial: bool = False) -> Comparison:
    """Return the number, growth and case mix under every intervention of a scenario beside the baseline's.

    Under an intervention the infection-free state is found anew, reciprocal matrices stay balanced at the sizes without
    it, and the number is a control reproduction number.

    Parameters
    ----------
    scenario : Scenario
    combinations : sequence of sequences of str
        Names of interventions to be applied together, in order: a row each, after those of the file.
    partial : bool
        What to do with an intervention under which the model has no infection-free state, a negative parameter or no F
        and V. False: refuse the whole, naming each. True: keep the others; the row has no number, and says why.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`, for the baseline.
    ngm.ScenarioError
        An intervention cannot be evaluated (without `partial`), or a combination names an unknown one or one twice.
    """
    packages: list[tuple[Intervention, tuple[str, ...], tuple[str, ...]]] = [
        (intervention, (intervention.name,), ()) for intervention in scenario.interventions
    ]
    problems: list[Problem] = []
    for names in combinations:
        try:
            made = combined(scenario, names)
        except ScenarioError as error:
            problems.extend(error.problems)
        else:
            packages.append((made.intervention, made.parts, made.notes))
    if problems:
        raise ScenarioError(problems)
    base = decided_numbers(scenario)
    with precision(base.bits):
        baseline = _row(base, None, "Baseline", (), BASELINE_LABEL, None)
    rows = []
    for intervention, parts, notes in packages:
        try:
            row = _under(base, baseline, intervention, parts)
        except NgmError as error:
            problems.extend(_named(intervention, problem) for problem in error.problems)
            why = " ".join(str(_named(intervention, problem)) for problem in error.problems[:3])
            row = _without_number(intervention, parts, why)
        rows.append(replace(row, warnings=(*row.warnings, *notes)))
    if problems and not partial:
        raise ScenarioError(problems)
    return Comparison(
        scenario.title,
        scenario.time_unit,
        scenario.digest,
        tuple(base.template.types[k] for k in base.at),
        baseline,
        tuple(rows),
        _warnings(base, baseline, rows),
    )


def _under(base: Numbers, baseline: Compared, intervention: Intervention, parts: tuple[str, ...]) -> Compared:
    found = decided_numbers(base.scenario, intervention)
    with precision(found.bits):
        row = _row(found, intervention, intervention.name, parts, CONTROL_LABEL, baseline.R0)
        already = base.point.infection_free.warnings
        said = [warning for warning in found.point.infection_free.warnings if warning not in already]
        return replace(row, warnings=(*row.warnings, *said, *_emptied(base, found), *_unbalanced(base, found)))


def _row(
    found: Numbers,
    intervention: Intervention | None,
    name: str,
    parts: tuple[str, ...],
    label: str,
    without: float | None,
) -> Compared:
    R0: float | None = None
    bounds: tuple[float, float] | None = None
    mix: Vector | None = None
    if found.no_R0 is None:
        R0, bounds = 0.0, (0.0, 0.0)
        if found.spectrum is not None:
            bounds = outward(found.spectrum.root)
            R0 = min(max(nearest(found.spectrum.root), bounds[0]), bounds[1])
            if found.spectrum.right is not None and len(found.template.types) <= MOST_WRITTEN:
                mix = tuple(as_floats(found.spectrum.right).tolist())
    now = effective(found)
    r = found.growth
    doubling, halving = (None, None) if r is None else (doubling_time(r), doubling_time(-r))
    row = Compared(
        name=name,
        label=label,
        parts=parts,
        R0=R0,
        no_R0=found.no_R0,
        bounds=bounds,
        growth_rate=r,
        doubling_time=None if doubling is None else nearest(doubling),
        halving_time=None if halving is None else nearest(halving),
        reduction=(without - R0) / without if R0 is not None and without else None,
        below_one=R0 is not None and R0 < 1,
        cost=None if intervention is None else intervention.cost,
        case_mix=mix,
        note=None if intervention is None else intervention.note,
        effective=None if now is None else now.R,
    )
    if row.below_one and row.R0:
        row = replace(row, warnings=(*row.warnings, *below_one_caution(found, label)))
    return row_over_the_year(found, row, without)


def _without_number(intervention: Intervention, parts: tuple[str, ...], why: str) -> Compared:
    return Compared(
        name=intervention.name,
        label=CONTROL_LABEL,
        parts=parts,
        R0=None,
        no_R0=why,
        bounds=None,
        growth_rate=None,
        doubling_time=None,
        halving_time=None,
        reduction=None,
        below_one=False,
        cost=intervention.cost,
        case_mix=None,
        note=intervention.note,
    )


def _named(intervention: Intervention, problem: Problem) -> Problem:
    """Return a problem that says under which intervention it arose."""
    where = f'intervention "{intervention.name}"'
    if problem.where.startswith(where):
        return problem
    return replace(problem, where=f"{where}, {problem.where}" if problem.where else where)


def _emptied(base: Numbers, found: Numbers) -> list[str]:
    """Return a warning for the groups that hold hosts in the baseline and none under the intervention."""
    empty = [
        before.label
        for before, after in zip(host_groups(base), host_groups(found), strict=True)
        if before.size and after.size == 0
    ]
    if not empty:
        return []
    named = ", ".join(empty[:6]) + (", …" if len(empty) > 6 else "")
    return [f"Nobody is left in {named} without infection: the number is that of a model without these hosts."]


def _unbalanced(base: Numbers, found: Numbers) -> list[str]:
    """Return a warning for each matrix whose two sides no longer agree, and that agreed better before."""
    out = []
    for name, matrix in found.scenario.matrices.items():
        if matrix.population is None:
            continue
        before, _ = reciprocity_gap(base.template, matrix, base.point.matrices[name], base.point.evaluator)
        after, pair = reciprocity_gap(found.template, matrix, found.point.matrices[name], found.point.evaluator)
        if after > max(RECIPROCAL, before * (1 + RECIPROCAL)):
            out.append(
                f"{name} is not reciprocal any more: contacts between {pair}, counted from either side, differ by "
                f"{100 * after:.3g} % of their mean. Change both sides of a pair alike, or take this number as a rough one."
            )
    return out


def _warnings(base: Numbers, baseline: Compared, rows: Sequence[Compared]) -> tuple[str, ...]:
    scenario = base.scenario
    out = [*scenario.warnings, *base.point.infection_free.warnings, *base.point.reciprocity_warnings()]
    out += baseline.warnings
    if not rows:
        out.append("The scenario has no intervention: there is nothing to compare.")
    if baseline.no_R0 is not None:
        out.append(f"No R0: {baseline.no_R0}")
    elif baseline.R0 == 0:
        out.append("R0 is 0 without any intervention: there is nothing to reduce.")
    if len(base.template.types) > MOST_WRITTEN:
        out.append(f"{len(base.template.types)} types: the case mix is not written out.")
    costs = [row.cost is not None for row in rows if len(row.parts) == 1]
    if any(costs) and not all(costs):
        out.append("Some interventions have a cost and some have none: compare costs with care.")
    for row in rows:
        if row.no_R0 is not None:
            said = row.no_R0 if row.growth_rate is None else f'No number under "{row.name}": {row.no_R0}'
            out.append(said)
        out += [f'"{row.name}": {warning}' for warning in row.warnings]
    return tuple(dict.fromkeys(out))
