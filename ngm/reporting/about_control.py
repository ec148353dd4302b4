"""The fourth part of the report: what control must reach, interventions, allocation, sensitivity, uncertainty."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.reporting.by_hand import target_formulas
from ngm.reporting.document import Block, Line, Maths, Note, Number, Paragraph, Section, Strong, Table
from ngm.reporting.material import Material, listed, name_of, term
from ngm.reporting.numbers import number, share
from ngm.results import StateNumber, TargetNumber, TypeNumber
from ngm.results_control import Compared

__all__ = ["allocation", "control", "interventions", "sensitivity", "uncertainty"]

MOST_ROWS = 60
_Target = TypeNumber | TargetNumber | StateNumber


def control(m: Material) -> Section:
    """Show type, target and state numbers with the critical efforts."""
    title, c = "What control must reach", m.control
    if c is None or c.R0 is None:
        why = "not computed" if c is None else "there is no R0 at these values"
        return Section("control", title, (), "absent", why)
    blocks: list[Block] = [
        Paragraph(
            (
                "T is what control of the targets alone must undo; the critical effort is the share to prevent, "
                "1 − 1/T where T is "
                "above 1 and 0 otherwise. It is 1 − 1/R0 only where all types are treated alike. Each T is per "
                "round among its "
                "targets, so it can be a number per cycle where R0 is one per generation. At a point estimate an "
                "effort is too "
                "small about half the time. Where there is no T, no effort on these targets is enough: the rest "
                "sustains the "
                "infection.",
            )
        )
    ]
    blocks += target_formulas(m)
    types: list[tuple[Line, _Target]] = [(term(t.types), t) for t in c.type_reproduction]
    entries: list[tuple[Line, _Target]] = [
        ((name_of(t.entry[0]), " ← ", name_of(t.entry[1])), t) for t in c.target_reproduction
    ]
    states: list[tuple[Line, _Target]] = [((name_of(t.state),), t) for t in c.state_reproduction]
    told = (
        ("Types: preventing infections of these types.", "type_reproduction", "types", types),
        (
            "Entries of K: preventing infections of the first by the second.",
            "target_reproduction",
            "infected ← by",
            entries,
        ),
        ("States: removing the infectivity of a state.", "state_reproduction", "state", states),
    )
    for caption, key, head, rows in told:
        blocks += _targets(caption, f"control.{key}", head, rows)
    if not any(rows for *_, rows in told):
        blocks.append(Paragraph(("The model is too large for these numbers, or has no type at infection.",)))
    return Section("control", title, tuple(blocks))


def _targets(caption: str, key: str, head: str, rows: Sequence[tuple[Line, _Target]]) -> list[Block]:
    if not rows:
        return []
    out: tuple[tuple[Line, ...], ...] = tuple(
        (
            label,
            (number(t.T, f"{key}[{k}].T"),),
            share(t.critical_effort, f"{key}[{k}].critical_effort"),
            (t.why or "",),
        )
        for k, (label, t) in enumerate(rows[:MOST_ROWS])
    )
    heads: tuple[str, ...] = (head, "T", "critical effort", "why none")
    if not any(row[3][0] for row in out):
        out, heads = tuple(row[:3] for row in out), heads[:3]
    return [Table((caption,), heads, out, frozenset({1, 2})), *listed(len(rows), len(out), "targets")]


def _below_one(m: Material) -> str:
    if m.solution.form == "projection":
        return "Below one the population dies out while births and survival stay as they are."
    return "Below one the infection cannot take off where nobody is infected; it need not mean elimination."


def interventions(m: Material) -> Section:
    """Show the interventions of the scenario beside the baseline."""
    title, c = "Interventions compared", m.comparison
    if not m.scenario.interventions:
        return Section("interventions", title, (), "missing", "the scenario has no interventions")
    if c is None:
        return Section("interventions", title, (), "absent", m.why.get("interventions", "not computed"))

    def row(x: Compared, key: str, first: bool) -> tuple[Line, ...]:
        none: Line = (f"none: {x.no_R0}",)
        return (
            (x.name,),
            none if x.R0 is None else (number(x.R0, f"{key}.R0"),),
            (number(x.growth_rate, f"{key}.growth_rate"),),
            ("–",) if first else share(x.reduction, f"{key}.reduction"),
            ("yes" if x.below_one else "no",),
            ("–",) if first else (number(x.cost, f"{key}.cost"),),
        )

    rows = [row(c.baseline, "compare.baseline", True)]
    rows += [row(x, f"compare.interventions[{k}]", False) for k, x in enumerate(c.interventions)]
    heads = ("intervention", "number", f"growth per {m.unit}", "removed", "below 1", "cost")
    blocks: list[Block] = [
        Paragraph(
            (
                "The baseline's number is R0; with an intervention in force it is a control reproduction number. "
                "Removed: the share of R0 that is taken away. " + _below_one(m),
            )
        ),
        Table(("Interventions beside the baseline.",), heads, tuple(rows[:MOST_ROWS]), frozenset({1, 2, 3, 5})),
        *listed(len(rows), min(len(rows), MOST_ROWS), "interventions"),
    ]
    notes = [(x.name, x.note) for x in c.interventions if x.note]
    if notes:
        blocks.append(
            Table(
                ("What they are, as the scenario says.",),
                ("intervention", "note"),
                tuple(((a,), (b,)) for a, b in notes),
            )
        )
    said = [w for x in c.interventions for w in x.warnings]
    blocks += [Note((w,)) for w in [*c.warnings, *said][:10] if w not in m.solution.warnings]
    return Section("interventions", title, tuple(blocks))


def allocation(m: Material) -> Section:
    """Show the best share of a supply beside simple rules, and the smallest supply that is enough."""
    title, a = "Allocation of a supply", m.allocation
    if a is None:
        return Section("allocation", title, (), "absent", m.why.get("allocation", "not computed: no supply was given"))
    rules: list[tuple[Line, ...]] = [(("none",), (number(a.R0, "allocate.R0"),), ("0",))]
    for key, way in [("best", a.best), *((f"rules[{k}]", rule) for k, rule in enumerate(a.rules))]:
        spent = number(way.spent, f"allocate.{key}.spent")
        rules.append(((way.rule,), (number(way.R0, f"allocate.{key}.R0"),), (spent,)))
    costs = any(cost != 1 for cost in a.costs)
    best: list[tuple[Line, ...]] = []
    for k, group in enumerate(a.groups[:MOST_ROWS]):
        best.append(
            (
                (group,),
                (number(a.sizes[k], f"allocate.sizes[{k}]"),),
                (number(a.efficacies[k], f"allocate.efficacies[{k}]"),),
                *([(number(a.costs[k], f"allocate.costs[{k}]"),)] if costs else []),
                share(a.best.coverage[k], f"allocate.best.coverage[{k}]"),
                (number(a.best.doses[k], f"allocate.best.doses[{k}]"),),
            )
        )
    asked: Line = ("A supply of ", number(a.supply, "allocate.supply"))
    if not m.supplied:
        asked = (
            "No supply was given, so this is the smallest one found that brings the number to ",
            number(a.smallest.target, "allocate.smallest.target"),
            ", ",
            number(a.supply, "allocate.supply"),
        )
    blocks: list[Block] = [
        Paragraph(
            (
                *asked,
                ", shared among the groups so that the control reproduction number is as small as possible. No share "
                "of it leaves less than ",
                number(a.lower_bound, "allocate.lower_bound"),
                f". {a.proof}",
            )
        ),
        Paragraph(
            (
                "Efficacy: against infection and onward spread together; what it is here is an assumption"
                + ("." if m.supplied else ", full protection unless said otherwise.")
                + " The vaccinated are drawn from the whole group, immune or not.",
            )
        ),
        Table(
            ("Ways to share the supply, and the control reproduction number that each leaves.",),
            ("share", "number left", "spent"),
            tuple(rules),
            frozenset({1, 2}),
        ),
        Table(
            ("The best share found.",),
            ("group", "members", "efficacy", *(["cost a head"] if costs else []), "coverage", "doses"),
            tuple(best),
            frozenset(range(1, 6 + costs)),
        ),
        *listed(len(a.groups), len(best), "groups"),
    ]
    least = a.smallest
    if m.supplied and least.supply is not None:
        blocks.append(
            Paragraph(
                (
                    "The smallest supply found that brings the number to ",
                    number(least.target, "allocate.smallest.target"),
                    " is ",
                    number(least.supply, "allocate.smallest.supply"),
                    ".",
                )
            )
        )
    elif m.supplied:
        blocks.append(Paragraph((f"No supply brings the number to {least.target:g}: {least.why}",)))
    blocks += [Note((w,)) for w in a.warnings if w not in m.solution.warnings]
    return Section("allocation", title, tuple(blocks))


def sensitivity(m: Material) -> Section:
    """Show local sensitivity, the largest elasticity first."""
    title, s = "Sensitivity", m.sensitivity
    if s is None or not any(i.derivative is not None for i in s.local):
        why = (
            m.why.get("sensitivity", "not computed")
            if s is None
            else "; ".join(w for w in s.warnings if w not in m.solution.warnings) or "R0 has no slope at these values"
        )
        return Section("sensitivity", title, (), "absent", why)
    order = sorted(range(len(s.local)), key=lambda k: -abs(s.local[k].elasticity or 0.0))
    shown = order[:MOST_ROWS]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (name_of(s.local[k].parameter),),
            (number(s.local[k].value, f"report.sensitivity[{k}].value"),),
            (number(s.local[k].derivative, f"sensitivity.local[{k}].derivative"),),
            (number(s.local[k].elasticity, f"sensitivity.local[{k}].elasticity"),),
        )
        for k in shown
    )
    heads = ("parameter", "value (own unit)", "slope of R0", "elasticity of R0")
    blocks: list[Block] = [
        Paragraph(
            (
                "How R0 answers to a small change of one parameter p, the infection-free state following. Elasticity, ",
                Maths(r"(p / \mathcal{R}_0) \, \partial \mathcal{R}_0 / \partial p"),
                ": the change of R0 in per cent when the parameter rises by one per cent. It says how R0 depends on a "
                "value, not how uncertain that value is.",
            )
        ),
        Table(("Local sensitivity, largest elasticity first.",), heads, rows, frozenset({1, 2, 3})),
        *listed(len(order), len(shown), "parameters"),
    ]
    blocks += [Note((w,)) for w in s.warnings if w not in m.solution.warnings]
    return Section("sensitivity", title, tuple(blocks))


def uncertainty(m: Material) -> Section:
    """Show what draws from the distributions say, with their number and seed."""
    title = "Uncertainty"
    g = m.spread
    if not g:
        return Section("uncertainty", title, (), "absent", "not computed: no draws were made")
    blocks: list[Block] = [
        Paragraph(
            (
                Strong(f"{g['draws']} draws"),
                f" from the ranges and distributions of the parameters, seed {g['seed']}; {g['rejected']} of them "
                "have no R0.",
            )
        )
    ]
    told = (g["R0"]["mean"], "mean"), (g["R0"]["sd"], "sd")
    rows: list[tuple[Line, ...]] = [((word,), (number(v, f"sensitivity.global.R0.{word}"),)) for v, word in told]
    rows += [
        ((f"quantile {q}",), (number(v, f'sensitivity.global.R0.quantiles["{q}"]'),))
        for q, v in (g["R0"]["quantiles"] or {}).items()
    ]
    above = g.get("probability_above_one")
    rows.append((("share of draws with R0 above 1",), (number(above, "sensitivity.global.probability_above_one"),)))
    blocks.append(Table(("R0 over the draws.",), ("of R0", "value"), tuple(rows), frozenset({1})))
    kinds = [k for k in ("prcc", "sobol_first", "sobol_total") if any(v is not None for v in (g.get(k) or {}).values())]
    names = list(g[kinds[0]]) if kinds else []
    if names:
        body = tuple(
            ((name_of(n),), *((_index(g[k].get(n), f'sensitivity.global.{k}["{n}"]'),) for k in kinds))
            for n in names[:MOST_ROWS]
        )
        heads = (
            "parameter",
            *(
                {"prcc": "partial rank correlation", "sobol_first": "first-order share", "sobol_total": "total share"}[
                    k
                ]
                for k in kinds
            ),
        )
        blocks.append(Table(("Which parameter's uncertainty matters.",), heads, body, frozenset(range(1, len(heads)))))
    return Section("uncertainty", title, tuple(blocks))


def _index(value: float | None, name: str) -> str | Number:
    found = number(value, name)
    return found if isinstance(found, str | Number) else "–"
