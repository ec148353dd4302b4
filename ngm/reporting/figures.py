"""Pictures for the report, drawn as SVG by ourselves: no other program, no font from elsewhere.

Kinds of arrows differ by dash and thickness, not by colour alone; every picture is told in words beside it.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from html import escape
from typing import Any

from ngm.charts.style import LIGHT, short
from ngm.errors import printable
from ngm.reporting.document import Figure
from ngm.results import Solution
from ngm.scenario.model import Flow, Scenario

__all__ = ["MOST_BOXES", "chart", "flow_diagram", "who_infects_whom"]

#: More boxes than this are no picture that fits a page.
MOST_BOXES = 24
MOST_ARROWS = 60
_WIDE, _HIGH, _STEP_X, _STEP_Y = 118.0, 46.0, 190.0, 112.0
_FONT = 'font-family="Liberation Sans, Arial, sans-serif"'

Point = tuple[float, float]


def flow_diagram(scenario: Scenario) -> Figure | None:
    """Draw compartments and flows; each arrow bears the number of its flow. None where there are too many to draw."""
    names = list(scenario.compartments)
    if len(names) > MOST_BOXES or len(scenario.flows) > MOST_ARROWS:
        return None
    places = _places(names, scenario.flows)
    marks: list[str] = []
    arrows: dict[tuple[str | None, str | None, str], list[int]] = {}
    for k, flow in enumerate(scenario.flows, 1):
        arrows.setdefault((flow.source, flow.target, flow.kind), []).append(k)
    stubs: dict[tuple[str, bool], int] = {}
    taken: list[Point] = []
    for (source, target, kind), numbers in arrows.items():
        told = ", ".join(map(str, numbers))
        if source is not None and target is not None:
            twice = any((s, t) == (source, target) and k != kind for s, t, k in arrows) and kind == "transmission"
            marks += _arrow(places[source], places[target], told, kind, taken, extra=38.0 if twice else 0.0)
        else:
            box = source or target
            assert box is not None
            side = stubs.get((box, source is None), 0)
            stubs[box, source is None] = side + 1
            marks += _stub(places[box], told, kind, arriving=source is None, side=side, taken=taken)
    for name, place in places.items():
        compartment = scenario.compartments[name]
        marks += _box(place, name, compartment.label or "", compartment.infected)
    infected = [n for n, c in scenario.compartments.items() if c.infected]
    told = "; ".join(
        f"flow {k} from {f.source or 'outside'} to {f.target or 'outside'}, {f.kind}"
        for k, f in enumerate(scenario.flows, 1)
    )
    alt = f"Flow diagram. Compartments: {', '.join(names)}. Infected: {', '.join(infected) or 'none'}. {told}."
    caption = (
        "Flow diagram. Numbers are those of the flows in the table of flows. Thick dashed arrows: transmission; "
        "thin solid "
        "arrows: transition. A double border: infected. An arrow without a box at one end comes from outside or leaves."
    )
    return Figure("flow-diagram", _svg(places.values(), marks), alt, caption)


def _places(names: Sequence[str], flows: Sequence[Flow]) -> dict[str, Point]:
    """Place boxes in columns along the flows, those of a column below each other in the order of the file."""
    leads: dict[str, list[str]] = {name: [] for name in names}
    for flow in flows:
        if flow.source is not None and flow.target is not None and names.index(flow.source) < names.index(flow.target):
            leads[flow.source].append(flow.target)
    rank = dict.fromkeys(names, 0)
    for name in names:
        for other in leads[name]:
            rank[other] = max(rank[other], rank[name] + 1)
    columns: dict[int, int] = {}
    out: dict[str, Point] = {}
    for name in names:
        row = columns.get(rank[name], 0)
        columns[rank[name]] = row + 1
        column = rank[name]
        # A long chain goes on in the next band of the page.
        band, column = divmod(column, 6)
        out[name] = (column * _STEP_X, row * _STEP_Y + band * 1000.0)
    return _packed(out)


def _packed(places: dict[str, Point]) -> dict[str, Point]:
    """Move the bands of a long chain up below each other."""
    bands = sorted({int(y // 1000) for _, y in places.values()})
    start = 0.0
    offset = {}
    for band in bands:
        offset[band] = start
        start += max(y % 1000 for _, y in places.values() if int(y // 1000) == band) + _STEP_Y * 1.15
    return {name: (x, y % 1000 + offset[int(y // 1000)]) for name, (x, y) in places.items()}


def who_infects_whom(solution: Solution) -> Figure | None:
    """Draw K: an arrow from the type that infects to the type infected, with the entry. None without K or with too many."""
    K, types = solution.K, solution.types_at_infection
    if K is None or not types or len(types) > 10:
        return None
    edges = [(j, i, K[i][j]) for i in range(len(types)) for j in range(len(types)) if K[i][j] != 0]
    if len(edges) > 30:
        return None
    count = len(types)
    radius = 0.0 if count == 1 else 100.0 + 36.0 * count
    places = [
        (
            radius * 1.25 * math.cos(math.pi + 2 * math.pi * k / count),
            radius * math.sin(math.pi + 2 * math.pi * k / count),
        )
        for k in range(count)
    ]
    marks: list[str] = []
    taken: list[Point] = []
    for j, i, value in edges:
        if i == j:
            marks += _loop(places[i], short(value, 3), taken)
        else:
            marks += _arrow(places[j], places[i], short(value, 3), "transition", taken, extra=26.0, plain=True)
    for place, name in zip(places, types, strict=True):
        marks += _box(place, name, solution.type_labels.get(name, ""), infected=False)
    told = "; ".join(f"one case of {types[j]} infects {short(value, 3)} of {types[i]}" for j, i, value in edges)
    alt = f"Who infects whom: {told or 'no type infects anyone'}."
    caption = "Who infects whom: an arrow leads from the type that infects to the type infected, with the entry of K."
    margin = 90.0 if any(i == j for j, i, _ in edges) else 40.0
    return Figure("who-infects-whom", _svg(places, marks, margin), alt, caption)


def chart(name: str, spec: Mapping[str, object], alt: str, caption: str) -> Figure:
    """Return a chart, given as the plain data of its specification, as a figure."""
    import vl_convert

    return Figure(name, str(vl_convert.vegalite_to_svg(_drawable(dict(spec)))), alt, caption)


def _drawable(part: Any) -> Any:
    """Return a specification with each sign that no picture can hold as a box: one of them would end the process."""
    if isinstance(part, str):
        return printable(part)
    if isinstance(part, Mapping):
        return {_drawable(key): _drawable(value) for key, value in part.items()}
    return [_drawable(value) for value in part] if isinstance(part, list | tuple) else part


def _svg(points: Iterable[Point], marks: Sequence[str], margin: float = 62.0) -> str:
    places = list(points)
    left = min(x for x, _ in places) - _WIDE / 2 - margin
    top = min(y for _, y in places) - _HIGH / 2 - margin
    wide = max(x for x, _ in places) + _WIDE / 2 + margin - left
    high = max(y for _, y in places) + _HIGH / 2 + margin - top
    body = "\n".join(marks)
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{wide:.0f}" height="{high:.0f}" '
        f'viewBox="{left:.1f} {top:.1f} {wide:.1f} {high:.1f}">\n'
        f'<rect x="{left:.1f}" y="{top:.1f}" width="{wide:.1f}" height="{high:.1f}" fill="#ffffff"/>\n{body}\n</svg>\n'
    )


def _box(place: Point, name: str, label: str, infected: bool) -> list[str]:
    x, y = place
    out = [_rect(x, y, _WIDE, _HIGH, LIGHT.fill)]
    if infected:
        out.append(_rect(x, y, _WIDE - 6, _HIGH - 6, "none"))
    shown = "" if label == name else label
    out.append(_text((x, y + (-2 if shown else 5)), _cut(name, 16), 15, bold=True))
    if shown:
        out.append(_text((x, y + 14), _cut(shown, 20), 10))
    return out


def _rect(x: float, y: float, wide: float, high: float, fill: str) -> str:
    return (
        f'<rect x="{x - wide / 2:.1f}" y="{y - high / 2:.1f}" width="{wide:.1f}" height="{high:.1f}" rx="6" '
        f'fill="{fill}" stroke="{LIGHT.text}" stroke-width="1.2"/>'
    )


def _cut(text: str, most: int) -> str:
    line = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    return line if len(line) <= most else line[: most - 1] + "…"


def _text(place: Point, text: str, size: int, bold: bool = False) -> str:
    weight = ' font-weight="bold"' if bold else ""
    return (
        f'<text x="{place[0]:.1f}" y="{place[1]:.1f}" font-size="{size}"{weight} text-anchor="middle" '
        f'fill="{LIGHT.text}" {_FONT}>{escape(printable(text))}</text>'
    )


def _arrow(
    start: Point, end: Point, told: str, kind: str, taken: list[Point], *, extra: float = 0.0, plain: bool = False
) -> list[str]:
    dx, dy = end[0] - start[0], end[1] - start[1]
    length = math.hypot(dx, dy) or 1.0
    # What runs back, or passes over other boxes, is bent out of the way.
    far = max(abs(dx) / _STEP_X, abs(dy) / _STEP_Y)
    bend = extra if plain else extra + (0.0 if dx > 0 and far <= 1.5 else 34.0 * max(far, 1.0))
    middle = ((start[0] + end[0]) / 2 + bend * dy / length, (start[1] + end[1]) / 2 - bend * dx / length)
    first, last = _border(start, middle), _border(end, middle)
    path = f"M {first[0]:.1f} {first[1]:.1f} Q {middle[0]:.1f} {middle[1]:.1f} {last[0]:.1f} {last[1]:.1f}"
    return [*_line(path, kind), *_head(middle, last, kind), *_tag(first, middle, last, told, taken)]


def _border(box: Point, towards: Point) -> Point:
    """Return where the line from the middle of a box leaves it."""
    dx, dy = towards[0] - box[0], towards[1] - box[1]
    if dx == dy == 0:
        return box
    scale = min(
        (_WIDE / 2 + 3) / abs(dx) if dx else math.inf,
        (_HIGH / 2 + 3) / abs(dy) if dy else math.inf,
    )
    return (box[0] + dx * scale, box[1] + dy * scale)


def _line(path: str, kind: str) -> list[str]:
    look = (
        f'stroke="{LIGHT.strong}" stroke-width="3" stroke-dasharray="9 5"'
        if kind == "transmission"
        else f'stroke="{LIGHT.text}" stroke-width="1.2"'
    )
    return [f'<path d="{path}" fill="none" {look}/>']


def _head(before: Point, tip: Point, kind: str) -> list[str]:
    angle = math.atan2(tip[1] - before[1], tip[0] - before[0])
    size = 13 if kind == "transmission" else 10
    corners = [tip] + [
        (tip[0] - size * math.cos(angle + turn), tip[1] - size * math.sin(angle + turn)) for turn in (0.4, -0.4)
    ]
    points = " ".join(f"{x:.1f},{y:.1f}" for x, y in corners)
    return [f'<polygon points="{points}" fill="{LIGHT.strong if kind == "transmission" else LIGHT.text}"/>']


def _tag(first: Point, middle: Point, last: Point, told: str, taken: list[Point]) -> list[str]:
    """Put a label on a curve where no other one lies."""
    best: Point | None = None
    for t in (0.5, 0.38, 0.62, 0.28, 0.72):
        place = (
            (1 - t) ** 2 * first[0] + 2 * t * (1 - t) * middle[0] + t**2 * last[0],
            (1 - t) ** 2 * first[1] + 2 * t * (1 - t) * middle[1] + t**2 * last[1],
        )
        best = best or place
        if all(abs(place[0] - x) > 30 or abs(place[1] - y) > 18 for x, y in taken):
            best = place
            break
    assert best is not None
    taken.append(best)
    return _label(best, told)


def _label(place: Point, told: str) -> list[str]:
    wide = 9.0 + 7.0 * len(told)
    x, y = place
    return [
        f'<rect x="{x - wide / 2:.1f}" y="{y - 9:.1f}" width="{wide:.1f}" height="18" rx="8" fill="#ffffff" '
        f'stroke="{LIGHT.faint}" stroke-width="0.7"/>',
        _text((x, y + 4.5), told, 12),
    ]


def _stub(place: Point, told: str, kind: str, *, arriving: bool, side: int, taken: list[Point]) -> list[str]:
    x = place[0] + (-26.0 if arriving else 26.0) + 30.0 * side
    edge = place[1] - _HIGH / 2 if arriving else place[1] + _HIGH / 2
    far = edge + (-34.0 if arriving else 34.0)
    start, end = ((x, far), (x, edge - 2)) if arriving else ((x, edge), (x, far))
    path = f"M {start[0]:.1f} {start[1]:.1f} L {end[0]:.1f} {end[1]:.1f}"
    tag = (x, (start[1] + end[1]) / 2 - 3)
    taken.append(tag)
    return [*_line(path, kind), *_head(start, end, kind), *_label(tag, told)]


def _loop(place: Point, told: str, taken: list[Point]) -> list[str]:
    x, y = place[0], place[1] - _HIGH / 2
    path = f"M {x - 24:.1f} {y:.1f} C {x - 44:.1f} {y - 58:.1f} {x + 44:.1f} {y - 58:.1f} {x + 24:.1f} {y - 2:.1f}"
    taken.append((x, y - 44))
    return [
        *_line(path, "transition"),
        *_head((x + 32, y - 28), (x + 24, y - 2), "transition"),
        *_label((x, y - 44), told),
    ]
