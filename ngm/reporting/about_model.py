"""The first part of the report: the question, and the model as it was typed in."""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal

from ngm.reporting import figures
from ngm.reporting.document import Block, Bullets, Code, Inline, Line, Note, Number, Paragraph, Section, Strong, Table
from ngm.reporting.material import MOST_SQUARE, Material, inline, listed, name_of, square
from ngm.reporting.numbers import number, share
from ngm.reporting.width import spaced
from ngm.results_mixing import Mixing
from ngm.scenario.model import Distribution, Flow, Matrix, Parameter, Scenario

__all__ = ["compartments", "diagram", "flows", "groups", "parameters", "question"]

_WORDS = (
    ("question", "Question"),
    ("audience", "For"),
    ("place", "Place"),
    ("date", "Date"),
    ("author", "Author"),
    ("reviewer", "Reviewer"),
    ("reviewed_on", "Reviewed on"),
    ("comparison", "Compared with"),
    ("funding", "Funding"),
)
#: What a report should have; the others are said where they are given.
_WANTED = ("question", "place", "date", "author", "reviewer")
MOST_ROWS = 80


def question(m: Material) -> Section:
    """Say what was asked, where, when and by whom, in the words of the scenario; name what it does not say."""
    given = m.scenario.report
    items: list[Line] = []
    for key, word in _WORDS:
        text = given.get(key)
        if isinstance(text, str):
            items.append((Strong(f"{word}: "), text))
        elif key in _WANTED:
            items.append((Strong(f"{word}: "), "missing from the scenario"))
    blocks: list[Block] = [Paragraph((m.scenario.summary,))] if m.scenario.summary else []
    blocks.append(Bullets(tuple(items)))
    for key, word in (("assumptions", "Assumptions, as the author states them"), ("changes", "Changes")):
        texts = given.get(key)
        if isinstance(texts, tuple) and texts:
            blocks += [Paragraph((Strong(f"{word}:"),)), Bullets(tuple((text,) for text in texts))]
    missing = [word.lower() for key, word in _WORDS if key in _WANTED and not isinstance(given.get(key), str)]
    title = "Question, place, date and people"
    if missing:
        return Section("question", title, tuple(blocks), "missing", f"the scenario does not say: {', '.join(missing)}")
    return Section("question", title, tuple(blocks))


def diagram(m: Material) -> Section:
    """Show the flow diagram."""
    figure = figures.flow_diagram(m.scenario)
    if figure is None:
        why = "the model has too many compartments or flows to draw; the tables of compartments and flows have them all"
        return Section("diagram", "Flow diagram", (Paragraph((why[0].upper() + why[1:] + ".",)),), "absent", why)
    return Section("diagram", "Flow diagram", (figure,))


def compartments(m: Material) -> Section:
    """List the compartments."""
    rows: list[tuple[Line, ...]] = []
    for name, c in m.scenario.compartments.items():
        rows.append(
            (
                (name_of(name),),
                (c.label or "–",),
                ("infected" if c.infected else "not infected",),
                (", ".join(c.by) or "–",),
            )
        )
    heads: tuple[str, ...] = ("name", "meaning", "state", "grouped by")
    if not m.scenario.dimensions:
        rows, heads = [row[:3] for row in rows], heads[:3]
    return Section("compartments", "Compartments", (Table(("Compartments.",), heads, tuple(rows)),))


def flows(m: Material) -> Section:
    """List the flows with their kind, rate, and why they are of this kind; then definitions and movements."""
    scenario = m.scenario
    rows = tuple(
        (
            (str(k),),
            _ends(flow),
            (inline(flow.rate.text, 16),),
            (Strong("transmission") if flow.kind == "transmission" else "transition",),
            (_reason(scenario, flow),),
        )
        for k, flow in enumerate(scenario.flows[:MOST_ROWS], 1)
    )
    blocks: list[Block] = [
        Paragraph(
            (
                f"A rate is the whole flow, in individuals per {m.unit}. The kind is the modeller's decision: "
                "transmission is what is counted as a new infection, transition is everything else.",
            )
        ),
        Table(("Flows.",), ("no.", "from → to", "rate", "kind", "why of this kind"), rows),
        *listed(len(scenario.flows), len(rows), "flows"),
    ]
    if scenario.definitions:
        made = tuple(((name_of(name),), (inline(d.expression.text),)) for name, d in scenario.definitions.items())
        blocks.append(Table(("Definitions used in the rates.",), ("name", "stands for"), made))
    if scenario.movements:
        blocks.append(
            Bullets(
                tuple(
                    (
                        f"{mv.label or 'Movement'}: members of {', '.join(mv.of)} change their group at the rates "
                        "of matrix ",
                        Code(mv.matrix),
                        " and keep their compartment.",
                    )
                    for mv in scenario.movements
                )
            )
        )
    return Section("flows", "Flows", tuple(blocks))


def _ends(flow: Flow) -> Line:
    ends: list[Inline] = [name_of(flow.source) if flow.source else "outside", " → "]
    ends.append(name_of(flow.target) if flow.target else "outside")
    return (*ends, f" ({flow.label})") if flow.label else tuple(ends)


def _reason(scenario: Scenario, flow: Flow) -> str:
    def infected(name: str | None) -> bool:
        return name is not None and scenario.compartments[name].infected

    if flow.kind == "transmission":
        if infected(flow.source):
            return "counted as a new infection where it arrives, although those it concerns are infected already"
        if flow.source is None:
            return "those who arrive are infected by others: counted as new infections"
        return "the susceptible become infected by others: new infections"
    if infected(flow.source) and infected(flow.target):
        return "those infected already change their stage: nobody is newly infected"
    if infected(flow.target):
        return "enters an infected compartment; the modeller does not count it as a new infection"
    if infected(flow.source):
        return "an infected one leaves the infected compartments: the end of an infection"
    return "concerns nobody infected"


def parameters(m: Material) -> Section:
    """List the parameters; say which have no source."""
    scenario, blocks = m.scenario, list[Block]()
    rows: tuple[tuple[Line, ...], ...]
    plain = [p for p in scenario.parameters.values() if not _spread(p)]
    spread = [p for p in scenario.parameters.values() if _spread(p)]
    if plain:
        rows = tuple(
            (
                (name_of(p.name),),
                (p.label or "–",),
                (Code(spaced(p.values[0].text)), f" {p.unit.text}" if p.unit else ""),
                _in_force(m, p, 0),
                _range(p),
                _source(p),
            )
            for p in plain
        )
        heads = ("symbol", "meaning", "value, as given", f"in force (in {m.unit}s)", "range or distribution", "source")
        blocks.append(Table(("Parameters.",), heads, rows, frozenset({3})))
    for p in spread:
        items = scenario.items(p.name, p.by)
        rows = tuple(
            ((name_of(item),), (Code(spaced(value.text)),), _in_force(m, p, k))
            for k, (item, value) in enumerate(zip(items, p.values, strict=False))
        )[:40]
        caption: Line = (
            name_of(p.name),
            f": {p.label or 'no meaning given'}; unit {p.unit.text if p.unit else 'not given'}; "
            f"range or distribution: {_range(p)[0]}; source: ",
            *_source(p),
        )
        blocks.append(Table(caption, ("group", "value, as given", "in force"), rows, frozenset({2})))
        blocks += listed(len(p.values), len(rows), f"values of {p.name}")
    missing = [p.name for p in scenario.parameters.values() if not (p.source or p.follows)]
    title = "Parameters"
    if not scenario.parameters:
        return Section("parameters", title, (), "absent", "the scenario has none")
    if missing:
        told = ", ".join(missing[:20]) + (" and more" if len(missing) > 20 else "")
        return Section("parameters", title, tuple(blocks), "missing", f"no source is given for {told}")
    return Section("parameters", title, tuple(blocks))


def _spread(parameter: Parameter) -> bool:
    return len({value.text for value in parameter.values}) > 1


def _in_force(m: Material, parameter: Parameter, index: int) -> Line:
    values = m.values.get(parameter.name)
    if values is None or index >= len(values):
        return ("–",)
    return (number(values[index], f'report.parameters["{parameter.name}"][{index}]'),)


def _source(p: Parameter) -> Line:
    if p.source:
        return (p.source,)
    return ("those of what it follows",) if p.follows else (Strong("missing"),)


def _range(p: Parameter) -> Line:
    told = [_distribution(d) for d in p.distributions[:4]]
    if len(p.distributions) > 4:
        told.append(f"and {len(p.distributions) - 4} more")
    if p.range is not None:
        told.append(f"{p.range[0]:g} to {p.range[1]:g}")
    if p.follows:
        told.append("follows other parameters")
    return ("; ".join(told) or "none",)


def _distribution(d: Distribution) -> str:
    return f"{d.name} ({', '.join(f'{key} {value:g}' for key, value in d.arguments.items())})"


def groups(m: Material) -> Section:
    """Show dimensions and matrices with their orientation, balance and row sums."""
    scenario, title = m.scenario, "Groups and contacts"
    if not scenario.dimensions:
        return Section("groups", title, (), "absent", "the model has no groups")
    moved = {movement.matrix for movement in scenario.movements}
    blocks: list[Block] = [
        Bullets(tuple((Strong(f"{d.name}: "), _some(d.groups)) for d in scenario.dimensions.values())),
    ]
    for matrix in scenario.matrices.values():
        told = (
            "Entry (row, column): the rate at which a member of the row's group moves to the column's group."
            if matrix.name in moved
            else "Entry (row, column): contacts that one member of the row's group makes with the column's group, "
            f"per {m.unit}, as the file gives them."
        )
        words: list[Inline] = [
            Strong(f"Matrix {matrix.name}"),
            f" ({matrix.label})" if matrix.label else "",
            f". {told} ",
        ]
        found = m.mixing.get(matrix.name, ())
        words += _balance(matrix)
        words += ["Source: ", *((matrix.source,) if matrix.source else (Strong("missing"),)), "."]
        blocks.append(Paragraph(tuple(words)))
        blocks += _squares(scenario, matrix)
        for b, mixing in enumerate(found):
            blocks += _balanced(m, mixing, b)
    missing = [x.name for x in scenario.matrices.values() if not x.source]
    if missing:
        return Section("groups", title, tuple(blocks), "missing", f"no source is given for matrix {', '.join(missing)}")
    return Section("groups", title, tuple(blocks))


def _some(labels: tuple[str, ...]) -> str:
    return ", ".join(labels[:20]) + (f" and {len(labels) - 20} more ({len(labels)} in all)" if len(labels) > 20 else "")


def _balance(matrix: Matrix) -> list[Inline]:
    if matrix.population is None:
        return ["No sizes of groups are given with it, so its balance is not checked. "]
    if matrix.reciprocal:
        return [
            "Contacts of i with j must be as many as those of j with i: for the computation both are replaced by "
            "their mean "
            "(C[i][j] N[i] + C[j][i] N[j]) / (2 N[i]), N = ",
            Code(spaced(matrix.population.text)),
            ". ",
        ]
    return ["Its balance C[i][j] N[i] = C[j][i] N[j] is checked with N = ", Code(spaced(matrix.population.text)), ". "]


def _squares(scenario: Scenario, matrix: Matrix) -> list[Block]:
    outer = scenario.dimensions[matrix.within].groups if matrix.within else (None,)
    key = f'report.matrices["{matrix.name}"]'
    out: list[Block] = []
    for b, (block, group) in enumerate(zip(matrix.blocks, outer, strict=True)):
        if b == 3:
            return [*out, *listed(len(matrix.blocks), 3, f"tables of {matrix.name}")]
        where = f" in {matrix.within} {group}" if group is not None else ""
        labels = scenario.dimensions[matrix.by].groups
        sums = [_number(sum(row), f"{key}.row_sums[{b}][{i}]") for i, row in enumerate(block)]
        body = (
            [[_number(v, f"{key}.values[{b}][{i}][{j}]") for j, v in enumerate(row)] for i, row in enumerate(block)]
            if len(labels) <= MOST_SQUARE
            else []
        )
        out += _contacts(f"Matrix {matrix.name}{where}, as the file gives it", matrix.by, labels, body, sums)
    return out


def _contacts(
    caption: str, by: str, labels: Sequence[str], body: Sequence[Sequence[Inline]], sums: Sequence[Inline]
) -> list[Block]:
    """Return a square of contacts with its row sums; of one that is too large the row sums alone."""
    if len(labels) > MOST_SQUARE:
        rows = tuple(((label,), (total,)) for label, total in zip(labels[:MOST_SQUARE], sums, strict=False))
        table = Table((f"{caption}: row sums only.",), (by, "row sum"), rows, frozenset({1}))
        return [table, *listed(len(labels), len(rows), "rows")]
    whole = [[*row, total] for row, total in zip(body, sums, strict=True)]
    return square((caption,), by, (*labels, "row sum"), [(label,) for label in labels], whole)


def _balanced(m: Material, x: Mixing, b: int) -> list[Block]:
    """Say how far a matrix of contacts is from balance, and show it as it is used where it was balanced."""
    key = f'report.matrices["{x.matrix}"]'
    where = f" in {m.scenario.matrices[x.matrix].within} {x.within}" if x.within is not None else ""
    if x.gaps is None:
        return []
    if x.gaps.is_reciprocal:
        return [Paragraph((f"Balance of {x.matrix}{where}: both counts of every pair agree; there is no breach.",))]
    pair = f", in what {x.gaps.pair[0]} counts with {x.gaps.pair[1]} more than the other way" if x.gaps.pair else ""
    words: list[Inline] = [
        Strong(f"Breach of balance of {x.matrix}{where}, as given: "),
        "the largest gap between both counts of a pair is ",
        *share(x.gaps.largest, f"{key}.breach[{b}].largest"),
        f" of their mean{pair}; over all pairs it is ",
        *share(x.gaps.overall, f"{key}.breach[{b}].overall"),
        ".",
    ]
    if not x.reciprocal:
        words.append(f" It is used as it is. Sizes: {x.sizes_from}.")
        return [Note(tuple(words))]
    body = [[number(v, f"{key}.balanced[{b}][{i}][{j}]") for j, v in enumerate(row)] for i, row in enumerate(x.table)]
    sums = [number(total, f"{key}.balanced_row_sums[{b}][{i}]") for i, total in enumerate(x.row_sums)]
    caption = f"Matrix {x.matrix}′{where}: balanced, as it is used"
    return [Paragraph(tuple(words)), *_contacts(caption, x.by, x.groups, body, sums)]


def _number(value: Decimal | int, name: str) -> Number:
    found = number(float(value), name)
    assert isinstance(found, Number)
    return found
