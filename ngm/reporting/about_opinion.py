"""What contradicts or confirms: units and mean stays, other splits, a formula from elsewhere, another version of the model."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.reporting.document import Block, Bullets, Code, Inline, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import MOST_ROWS, Material, listed, name_of, term
from ngm.reporting.numbers import number, share
from ngm.results_opinion import EntryChange, Split, Stay

__all__ = ["difference", "formula", "splits", "units"]


def units(m: Material) -> Section:
    """Show what does not fit among the units, rates read as times, and the mean stay in every stage."""
    title, u = "Units and mean stays", m.units
    if u is None:
        return Section("units", title, (), "absent", "not computed")
    blocks: list[Block] = []
    heads: tuple[str, ...]
    if u.findings:
        blocks.append(Paragraph((Strong("What does not fit:"),)))
        shown = u.findings[:MOST_ROWS]
        blocks.append(Bullets(tuple((Strong(f"{note.where}: "), note.message) for note in shown)))
        blocks += listed(len(u.findings), len(shown), "findings")
    else:
        blocks.append(Paragraph((u.fits,)))
    read = [p for p in u.parameters if p.converted or p.reading]
    if read:
        rows = tuple(
            (
                (name_of(p.parameter),),
                (Code(_some(p.typed)), f" {p.unit}" if p.unit else ""),
                (_some(p.in_force) if p.converted else "as given",),
                (p.reading or "–",),
            )
            for p in read[:MOST_ROWS]
        )
        heads = ("parameter", "as given", f"with time in {m.unit}s", "reads as")
        blocks.append(Table(("Values that are converted, and rates read as times.",), heads, rows))
        blocks += listed(len(read), len(rows), "parameters")
    if u.stays:
        blocks.append(
            Paragraph(
                (
                    "What the rates say of each stage, without infection: a mean stay that surprises is the quickest "
                    "sign of a slip.",
                )
            )
        )
        alike = _alike(u.stays)
        stays: tuple[tuple[Line, ...], ...] = tuple(
            (
                (name_of(where[0]), f" and {len(where) - 1} other groups" if len(where) > 1 else ""),
                (number(u.stays[k].mean, f"units.stays[{k}].mean"),),
                _exits(u.stays[k], f"units.stays[{k}].exits"),
            )
            for k, where in alike[:MOST_ROWS]
        )
        heads = ("stage", f"mean stay ({m.unit}s)", "how it ends, with the probability of each way")
        blocks.append(Table(("Mean stays.",), heads, stays, frozenset({1})))
        blocks += listed(len(alike), len(stays), "stages")
    return Section("units", title, tuple(blocks))


def _alike(stays: Sequence[Stay]) -> list[tuple[int, list[str]]]:
    """Return the first of the stays of a compartment that are the same in several groups, and where they are."""
    found: dict[tuple[object, ...], tuple[int, list[str]]] = {}
    for k, stay in enumerate(stays):
        plain = stay.compartment.partition("[")[0]
        ways = tuple((way.flow, way.label, (way.to or "").partition("[")[0], way.probability) for way in stay.exits)
        found.setdefault((plain, stay.mean, ways), (k, []))[1].append(stay.compartment)
    return list(found.values())


def _some(texts: Sequence[str]) -> str:
    return ", ".join(texts[:3]) + (", …" if len(texts) > 3 else "")


def _exits(stay: Stay, key: str) -> Line:
    out: list[Inline] = []
    for k, way in enumerate(stay.exits[:6]):
        out += ["; "] * (k > 0)
        out += [*share(way.probability, f"{key}[{k}].probability"), f" {way.label}, to {way.to or 'outside'}"]
    if len(stay.exits) > 6:
        out.append(f"; and {len(stay.exits) - 6} more ways")
    return tuple(out) or ("nothing leaves",)


def splits(m: Material) -> Section:
    """Show the numbers of every division of the flows into new infections and the rest."""
    title, s = "Other splits of the flows", m.splits
    if s is None:
        return Section("splits", title, (), "absent", m.why.get("splits", "not computed"))
    if not s.choices:
        why = "no flow's kind is a choice: nothing enters an infected compartment but by infection"
        return Section("splits", title, (), "absent", why)
    hosts = list(s.splits[0].hosts)[:5]
    blocks: list[Block] = [
        Paragraph(
            (
                "What counts as a new infection is the modeller's choice. These flows could be counted otherwise; the "
                "table has the numbers of every combination.",
            )
        ),
        Bullets(tuple((Strong(f"Flow {key}: "), why) for key, why in s.choices.items())),
    ]
    shown = s.splits[:MOST_ROWS]
    rows = tuple(_split(split, k, hosts) for k, split in enumerate(shown))
    heads = (
        "split",
        *(f"flow {key}" for key in s.choices),
        "R0",
        f"growth per {m.unit}",
        *(f"T({host})" for host in hosts),
    )
    first = len(s.choices) + 1
    blocks.append(
        Table(
            ("The numbers of each split. Inf.: counted as new infection; tr.: as transition; T: type numbers.",),
            heads,
            rows,
            frozenset(range(first, len(heads))),
            wide=len(heads) > 8,
        )
    )
    refused = [(k, split.refused) for k, split in enumerate(shown) if split.refused is not None]
    if refused:
        blocks.append(Paragraph((Strong("No valid split:"),)))
        blocks.append(Bullets(tuple((f"{k + 1}: {why}",) for k, why in refused)))
    if s.agree:
        blocks.append(Paragraph((Strong("The same in all valid splits: "), ", ".join(s.agree), ".")))
    if s.differ:
        blocks.append(
            Note((Strong("Not to be compared between models that split differently: "), ", ".join(s.differ), "."))
        )
    return Section("splits", title, tuple(blocks))


def _split(split: Split, k: int, hosts: Sequence[str]) -> tuple[Line, ...]:
    key = f"splits.splits[{k}]"
    kinds: list[Line] = [("inf." if kind == "transmission" else "tr.",) for kind in split.kinds.values()]
    name = f"{k + 1}" + (" (this report)" if split.as_typed else "")
    if split.refused is not None:
        return ((name,), *kinds, ("refused",), *(("–",) for _ in range(len(hosts) + 1)))
    return (
        (name,),
        *kinds,
        (number(split.R0, f"{key}.R0"),),
        (number(split.growth_rate, f"{key}.growth_rate"),),
        *((number(split.hosts.get(host), f'{key}.hosts["{host}"]'),) for host in hosts),
    )


def formula(m: Material) -> Section:
    """Show whether a formula from elsewhere is the model's R0."""
    title, f = "A formula compared", m.formula
    if f is None:
        return Section("formula", title, (), "absent", m.why.get("formula", "not computed: no formula was given"))
    blocks: list[Block] = [
        Paragraph((Strong("Formula: "), Code(f.formula))),
        Paragraph((Strong(f"Verdict: {f.verdict}. "), f.message)),
        Paragraph(
            (
                f"Compared at {f.points} points of the parameters' ranges"
                + (", and exactly, with symbols." if f.exact else "."),
            )
        ),
    ]
    if f.counterexample is not None:
        blocks.append(
            Paragraph(
                (
                    "A point where the two differ: the model's R0 is ",
                    number(f.R0_there, "formula.R0_there"),
                    ", the formula gives ",
                    number(f.formula_there, "formula.formula_there"),
                    ". Values in force there:",
                )
            )
        )
        values = list(f.counterexample.items())
        rows = tuple(
            ((name_of(name),), (number(value, f'formula.counterexample["{name}"]'),))
            for name, value in values[:MOST_ROWS]
        )
        blocks.append(Table(("The point where they differ.",), ("parameter", "value"), rows, frozenset({1})))
        blocks += listed(len(values), len(rows), "values")
    if f.responses:
        answers: tuple[tuple[Line, ...], ...] = tuple(
            (
                (name_of(name),),
                (number(a, f'formula.responses["{name}"][0]'),),
                (number(b, f'formula.responses["{name}"][1]'),),
            )
            for name, (a, b) in list(f.responses.items())[:MOST_ROWS]
        )
        heads = ("parameter", "elasticity of the model's R0", "of the formula")
        blocks.append(Table(("Parameters to which they answer differently.",), heads, answers, frozenset({1, 2})))
    blocks += [Note((warning,)) for warning in f.warnings if warning not in m.solution.warnings]
    return Section("formula", title, tuple(blocks))


def difference(m: Material) -> Section:
    """Show what differs from another version of the model, and how much of the change in R0 each change made."""
    title, d = "Difference from another version", m.difference
    if d is None:
        return Section("difference", title, (), "absent", "not computed: no other version was given")
    heads: tuple[str, ...]
    blocks: list[Block] = [
        Paragraph(
            (
                f"From the other version, “{d.first}”, to this one: R0 from ",
                number(d.R0[0], "difference.R0[0]"),
                " to ",
                number(d.R0[1], "difference.R0[1]"),
                f"; growth rate per {m.unit} from ",
                number(d.growth_rate[0], "difference.growth_rate[0]"),
                " to ",
                number(d.growth_rate[1], "difference.growth_rate[1]"),
                ".",
            )
        )
    ]
    changes = d.changes[:MOST_ROWS]
    if changes:
        blocks += [Paragraph((Strong("What differs:"),)), Bullets(tuple((change.words(),) for change in changes))]
        blocks += listed(len(d.changes), len(changes), "changes")
    else:
        blocks.append(Paragraph(("Nothing differs.",)))
    if d.contributions:
        rows: tuple[tuple[Line, ...], ...] = tuple(
            (
                (c.change,),
                (number(c.in_order, f"difference.contributions[{k}].in_order"),),
                (number(c.averaged, f"difference.contributions[{k}].averaged"),),
            )
            for k, c in enumerate(d.contributions[:MOST_ROWS])
        )
        heads = ("change", "change of R0, in this order", "mean over all orders")
        blocks.append(Table(("What moved R0.",), heads, rows, frozenset({1, 2})))
    if d.entries:
        shown = d.entries[:MOST_ROWS]
        moved = tuple(_entry(entry, k) for k, entry in enumerate(shown))
        heads = ("entry", "before", "now", "because of")
        blocks.append(Table(("Entries of F, V and K that moved.",), heads, moved, frozenset({1, 2})))
        blocks += listed(len(d.entries), len(shown), "entries")
    blocks += [Note((warning,)) for warning in d.warnings if warning not in m.solution.warnings]
    return Section("difference", title, tuple(blocks))


def _entry(entry: EntryChange, k: int) -> tuple[Line, ...]:
    key = f"difference.entries[{k}]"
    place = (entry.matrix, "[", *term((entry.row,)), ", ", *term((entry.column,)), "]")
    moved: list[Line] = [(number(entry.before, f"{key}.before"),), (number(entry.after, f"{key}.after"),)]
    return (place, *moved, ("; ".join(entry.because),))
