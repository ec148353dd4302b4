"""Diagrams of arrows as DOT text: the flows of a model, and who infects whom.

Names and labels are the user's text. They occur in quoted strings only, with backslashes and quotes escaped, and never
as the identifier of a node, so that no label can end its string or become an attribute.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

from ngm.charts.style import Ink, ink, short
from ngm.results import Solution

__all__ = ["Arrow", "Graph", "Stage", "flow_diagram", "quoted", "who_infects_whom"]

#: Past these a diagram is a ball of wool: a table is better.
MOST_NODES = 60
MOST_EDGES = 250

#: A diagram with more stages in a row than this is folded, like lines of text; with more arrows than this, arrows bear
#: the numbers of their flows and not their words.
MOST_IN_A_ROW = 6
MOST_WORDED = 40

#: A label is cut to this many letters.
MOST_LETTERS = 66


@dataclass(frozen=True, slots=True)
class Stage:
    """A compartment to draw. `infected` None: not said yet."""

    name: str
    label: str = ""
    infected: bool | None = None


@dataclass(frozen=True, slots=True)
class Arrow:
    """A flow to draw; `source` or `target` empty: from or to the outside. `kind` may be unknown text."""

    source: str
    target: str
    kind: str
    rate: str
    label: str = ""


@dataclass(frozen=True, slots=True)
class Graph:
    """A diagram as DOT text, with the words for who cannot see it."""

    dot: str
    alt: str


def quoted(text: str, most: int = 40) -> str:
    """Return text as a DOT string: cut to `most` characters, white space to blanks, quotes and backslashes escaped."""
    plain = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    if len(plain) > most:
        plain = plain[: most - 1] + "…"
    return '"' + plain.replace("\\", "\\\\").replace('"', '\\"') + '"'


def flow_diagram(
    stages: Sequence[Stage], arrows: Sequence[Arrow], *, dark: bool = False, down: bool = False
) -> Graph | None:
    """Draw the compartments and flows of a model, finished or not.

    Transmission: thick, dashed, labelled "transmission". Transition: thin and solid. An infected compartment has a
    double border. `down`: from top to bottom instead of left to right. None where there is nothing to draw or too much.
    """
    # A name that only a flow mentions is drawn too, dotted: the diagram shows what is typed.
    known = {stage.name for stage in stages}
    mentioned = dict.fromkeys(n for arrow in arrows for n in (arrow.source, arrow.target) if n and n not in known)
    if not known or len(known) + len(mentioned) > MOST_NODES or len(arrows) > MOST_EDGES:
        return None
    colours = ink(dark)
    lines = _head(colours, down)
    ids = {name: f"n{k}" for k, name in enumerate([*(stage.name for stage in stages), *mentioned])}
    for stage in stages:
        border = "peripheries=2" if stage.infected else "peripheries=1"
        lines.append(f"{ids[stage.name]} [label={_caption(stage.name, stage.label)} {border}]")
    lines += [f'{ids[name]} [label={quoted(name + " ?")} style="dotted,rounded"]' for name in mentioned]
    loose, firsts = _folded([*ids], arrows, {stage.name for stage in stages if stage.infected}, fold=not down)
    crowded = len(arrows) > MOST_WORDED
    if crowded:
        # Arrows on the same way share it.
        lines.append('graph [concentrate="true" nodesep="0.15"]')
    for k, arrow in enumerate(arrows):
        if arrow.source or arrow.target:
            lines += _arrow(k, arrow, ids, colours, numbered=crowded, loose=k in loose)
    if len(firsts) > 1:
        # The first stages of all lines stand below each other.
        order = " -> ".join(ids[name] for name in firsts)
        lines.append(f'{{ rank=same; edge [style="invis"]; {order} }}')
    infected = [stage.name for stage in stages if stage.infected]
    told = "; ".join(
        f"{arrow.source or 'outside'} to {arrow.target or 'outside'}, {arrow.kind or 'kind not given'}"
        for arrow in arrows[:40]
    )
    alt = (
        f"Flow diagram. Compartments: {', '.join(stage.name for stage in stages)}. "
        f"Infected: {', '.join(infected) or 'none'}. Flows: {told or 'none'}."
    )
    return Graph("\n".join([*lines, "}"]), alt)


def who_infects_whom(solution: Solution, *, dark: bool = False) -> Graph | None:
    """Draw K as a graph: an arrow from the type that infects to the type infected, with the entry of K; a box a class.

    None where there is no K, or it is too large to draw.
    """
    K, structure, types = solution.K, solution.structure, solution.types_at_infection
    if K is None or structure is None or not types or len(types) > MOST_NODES:
        return None
    edges = [(j, i, K[i][j]) for i in range(len(types)) for j in range(len(types)) if K[i][j] != 0]
    if len(edges) > MOST_EDGES:
        return None
    colours = ink(dark)
    lines = _head(colours)
    position = {name: k for k, name in enumerate(types)}
    for k, group in enumerate(structure.classes):
        attains = solution.R0 is not None and solution.R0 > 0 and group.R0 == solution.R0
        title = f"class {k + 1}, R0 = {short(group.R0)}" + (" (the largest)" if attains else "")
        lines.append(f"subgraph cluster_{k} {{")
        lines.append(
            f'label={quoted(title, 60)} labeljust="l" fontcolor="{colours.text}" color="{colours.faint}" '
            f'style="{"bold" if attains else "dashed"},rounded"'
        )
        for name in group.types:
            caption = _caption(name, solution.type_labels.get(name, ""))
            lines.append(f"t{position[name]} [label={caption}]")
        lines.append("}")
    for j, i, value in edges:
        lines.append(f'  t{j} -> t{i} [label={quoted(" " + short(value, 3))} color="{colours.first}"]')
    told = "; ".join(f"{types[j]} infects {short(value, 3)} {types[i]}" for j, i, value in edges[:40])
    alt = f"Who infects whom, {len(structure.classes)} class(es). One case of {told or 'no type infects anyone'}."
    return Graph("\n".join([*lines, "}"]), alt)


def _caption(name: str, label: str) -> str:
    """Return the name, and its label on lines of their own, so that boxes stay narrow."""
    return _lines([name, *_wrapped(label, 18)] if label and label != name else [name])


def _wrapped(text: str, width: int) -> list[str]:
    return textwrap.wrap(text[:MOST_LETTERS], width)


def _lines(texts: Sequence[str]) -> str:
    """Return texts, one below the other, as one DOT string; each is escaped by itself, after it was wrapped."""
    return '"' + "\\n".join(quoted(text)[1:-1] for text in texts) + '"'


def _head(colours: Ink, down: bool = False) -> list[str]:
    font = f'fontname="Helvetica,Arial,sans-serif" fontcolor="{colours.text}"'
    return [
        "digraph {",
        f'rankdir="{"TB" if down else "LR"}" bgcolor="transparent" pad="0.2" nodesep="0.3" ranksep="0.35"',
        f'graph [{font} fontsize="13"]',
        f'node [shape="box" style="filled,rounded" fillcolor="{colours.fill}" color="{colours.text}" {font} '
        'fontsize="15"]',
        f'edge [color="{colours.text}" {font} fontsize="13"]',
    ]


def _folded(
    names: Sequence[str], arrows: Sequence[Arrow], infected: set[str], *, fold: bool
) -> tuple[set[int], list[str]]:
    """Return the arrows that place no compartment, and the first compartment of each line of the diagram.

    Compartments stand in columns along the course of infection. What leads back, into an infection after the first, or
    from one line into the next, is drawn but moves nothing.
    """
    moves: dict[str, list[tuple[int, str]]] = {name: [] for name in names}
    for k, arrow in enumerate(arrows):
        if arrow.source and arrow.target and arrow.source != arrow.target:
            moves[arrow.source].append((k, arrow.target))
    # Who was first reached by way of an infected compartment has been infected before.
    after: set[str] = set()
    seen: set[str] = set()
    for start in sorted(names, key=lambda name: name in infected):
        reached = [] if start in seen else [start]
        seen.update(reached)
        for here in reached:
            for _, target in moves[here]:
                if target not in seen:
                    seen.add(target)
                    reached.append(target)
                    if here in infected or here in after:
                        after.add(target)
    loose = {k for name in after - infected for k, _ in moves[name] if arrows[k].kind == "transmission"}
    column, back = _columns(names, moves, loose)
    loose |= back
    most = 1 + max(column.values(), default=0)
    if not fold or most <= MOST_IN_A_ROW:
        return loose, []
    lines = -(-most // (MOST_IN_A_ROW - 1))
    long = -(-most // lines)
    for name in names:
        loose |= {k for k, target in moves[name] if column[name] // long != column[target] // long}
    firsts = [next((name for name in names if column[name] == line * long), "") for line in range(lines)]
    return loose, [name for name in firsts if name]


def _columns(
    names: Sequence[str], moves: dict[str, list[tuple[int, str]]], loose: set[int]
) -> tuple[dict[str, int], set[int]]:
    """Return the longest way to each compartment in steps, and the arrows that lead back to where a way came from."""
    back: set[int] = set()
    done: list[str] = []
    on_the_way: set[str] = set()
    for start in names:
        ways = [(start, iter(moves[start]))] if start not in done else []
        on_the_way.update(name for name, _ in ways)
        while ways:
            here, rest = ways[-1]
            for k, target in rest:
                if k in loose:
                    continue
                if target in on_the_way:
                    back.add(k)
                elif target not in done:
                    on_the_way.add(target)
                    ways.append((target, iter(moves[target])))
                    break
            else:
                ways.pop()
                on_the_way.discard(here)
                done.append(here)
    column = dict.fromkeys(names, 0)
    for name in reversed(done):
        for k, target in moves[name]:
            if k not in loose and k not in back:
                column[target] = max(column[target], column[name] + 1)
    return column, back


def _arrow(
    k: int, arrow: Arrow, ids: dict[str, str], colours: Ink, *, numbered: bool = False, loose: bool = False
) -> list[str]:
    words = [str(k + 1)] if numbered else _wrapped(arrow.label or arrow.rate, 20)
    if arrow.kind == "transmission":
        look = f'style="dashed" penwidth="2.4" color="{colours.strong}" arrowhead="normal"'
        words = [f"T {k + 1}"] if numbered else ["transmission:", *words]
    elif arrow.kind == "transition":
        look = 'style="solid" penwidth="1.1" arrowhead="vee"'
    else:
        look = f'style="dotted" penwidth="1.1" color="{colours.faint}" arrowhead="odot"'
        words = ["kind?", *words]
    if arrow.source and arrow.target:
        # Words of what moves nothing take no room either: they are put where there is some.
        told = f'constraint="false" xlabel={_lines(words)}' if loose else f"label={_lines(words)}"
        return [f"{ids[arrow.source]} -> {ids[arrow.target]} [{told} {look}]"]
    # Outside has no box: the words of the flow stand there, above or below the compartment.
    outside, inside = f"o{k}", ids[arrow.source or arrow.target]
    ends = f"{outside} -> {inside}" if arrow.target else f"{inside} -> {outside}"
    return [
        f'{outside} [shape="plaintext" style="" margin="0.04" height="0.2" fontsize="13" label={_lines(words or ["outside"])}]',
        f"{{ rank=same; {inside}; {outside} }}",
        f"{ends} [{look}]",
    ]
