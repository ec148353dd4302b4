"""Pictures of mixing: contacts as heat maps, the case mix, and what R0 answers to."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import Any, Literal

import altair as alt

from ngm.charts.style import PALETTE, ink, short
from ngm.charts.tiles import tiles
from ngm.results import Matrix
from ngm.results_mixing import Curve, Mixing, MixingMap, MixingResponses

__all__ = ["MOST_GROUPS", "SMALL", "case_mix", "contacts", "gaps", "map_of_two", "mix_along", "pairs", "response"]

#: More groups than this are no picture with values in its cells; the table beside it has them all.
MOST_GROUPS = 40

#: Up to so many groups a heat map has cells of a fixed size; larger ones take the width that there is.
SMALL = 8

#: Marks of the cases beside the one in force.
SHAPES = ("diamond", "triangle-up", "square", "cross")


def contacts(found: Mixing, *, given: bool = False, dark: bool = False) -> alt.LayerChart | None:
    """Draw the matrix in force (or `given`: as the file has it), with its values in the cells.

    Row: the group that makes the contacts; column: the group it makes them with; per member and time unit.
    """
    table = found.given if given else found.table
    return _heat(
        found.groups,
        table,
        title=f"Contacts per member and {found.time_unit}",
        value="contacts",
        dark=dark,
    )


def gaps(found: Mixing, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw what each group counts more of its contacts with another than that one does, in % of the mean of both."""
    if found.gaps is None:
        return None
    table = tuple(tuple(100 * value for value in row) for row in found.gaps.table)
    return _heat(
        found.groups,
        table,
        title="Counted by the row's group beyond the mean of both counts, twice over, in %",
        value="gap, %",
        dark=dark,
        signed=True,
        digits=2,
    )


def pairs(found: MixingResponses, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the elasticity of R0 by each pair's contacts, each pair once: % that R0 moves by for 100 % of them."""
    if found.pairs is None:
        return None
    table = tuple(tuple(100 * value for value in row) for row in found.pairs)
    return _heat(
        found.groups,
        table,
        title="Elasticity of R0 by the contacts of a pair, both directions together, in %",
        value="elasticity, %",
        dark=dark,
        lower=True,
        digits=2,
    )


def _heat(
    groups: Sequence[str],
    table: Matrix,
    *,
    title: str,
    value: str,
    dark: bool,
    signed: bool = False,
    lower: bool = False,
    digits: int = 3,
) -> alt.LayerChart | None:
    size = len(groups)
    if size > MOST_GROUPS:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = [
        {"from": groups[i], "to": groups[j], "value": table[i][j], "shown": _cell(table[i][j], digits)}
        for i in range(size)
        for j in range(size)
        if not lower or j <= i
    ]
    largest = max((abs(row["value"]) for row in rows), default=0.0) or 1.0
    names = list(groups)
    if signed:
        scale = alt.Scale(scheme="purpleorange", domain=[-largest, largest])
        bright = f"abs(datum.value) > {0.75 * largest}"
    else:
        scale = alt.Scale(scheme="viridis", reverse=True, domain=[0, largest])
        bright = f"datum.value > {largest / 2}"
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        x=alt.X(
            "to:N",
            sort=names,
            title="with",
            axis=alt.Axis(orient="top", labelAngle=-90, labelLimit=110, labelOverlap=False),
        ),
        y=alt.Y("from:N", sort=names, title="group", axis=alt.Axis(labelLimit=110, labelOverlap=False)),
        tooltip=[
            alt.Tooltip("from:N", title="group"),
            alt.Tooltip("to:N", title="with"),
            alt.Tooltip("value:Q", title=value, format=".6g"),
        ],
    )
    cells = base.mark_rect(stroke=colours.faint, strokeWidth=0.3).encode(
        color=alt.Color("value:Q", scale=scale, legend=alt.Legend(title=value, orient="bottom", gradientLength=180))
    )
    # On a narrow screen the cells are too small for numbers: these then stand in the table only.
    letters: Any = 12 if size <= SMALL else alt.ExprRef(f"width < {24 * size} ? 0 : {10 if size <= 20 else 8}")
    texts = base.mark_text(fontSize=letters).encode(
        text="shown:N", color=alt.condition(bright, alt.value("#ffffff"), alt.value("#10141c"))
    )
    top = sorted(rows, key=lambda row: -abs(row["value"]))[:5]
    spoken = "; ".join(f"{row['from']} with {row['to']} {row['shown']}" for row in top)
    told = f"{title}: a table of {size} by {size} groups. The largest: {spoken}."
    chart = alt.LayerChart(layer=[cells, texts])
    if size <= SMALL:
        pad = alt.AutoSizeParams(type="pad", contains="content")
        return chart.properties(width=46 * size, height=46 * size, autosize=pad, description=told)
    # Wide ones take the width that the page gives them; the height holds labels, axis and legend too.
    return chart.properties(height=(24 if size <= 20 else 18) * size + 170, description=told)


def _cell(value: float, digits: int) -> str:
    """Return a number for a cell: no exponent, no more places than its neighbours can show."""
    if value == 0:
        return "0"
    places = max(0, digits - len(str(int(abs(value)))))
    text = f"{value:.{places}f}"
    if float(text) == 0:
        return "0" if abs(value) < 1e-12 else f"<{10.0**-places:.{places}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def case_mix(
    labels: Sequence[str], cases: Sequence[tuple[str, Sequence[float]]], *, dark: bool = False
) -> alt.LayerChart:
    """Draw the share of each group among new infections: bars for the first case, marks for the others.

    Shares have no unit and sum to 1 in each case.
    """
    colours = ink(dark)
    first, others = cases[0], cases[1:]
    names = list(labels)
    reach = 1.12 * max((max(mix) for _, mix in cases if mix), default=1.0)
    x = alt.X(
        "share:Q", title="share of new infections (they sum to 1)", scale=alt.Scale(domain=[0, reach], nice=False)
    )
    y = alt.Y("group:N", sort=names, title=None, axis=alt.Axis(labelLimit=130))
    tips = [
        alt.Tooltip("group:N"),
        alt.Tooltip("case:N"),
        alt.Tooltip("share:Q", format=".4f", title="share"),
    ]
    bars = (
        alt.Chart(alt.InlineData(values=_mix_rows(labels, [first])))
        .mark_bar(color=colours.first, opacity=0.75, height={"band": 0.7})
        .encode(x=x, y=y, tooltip=tips)
    )
    layers: list[Any] = [bars]
    if others:
        known = [name for name, _ in others]
        marks = [colours.strong, colours.text, PALETTE[2], PALETTE[5]]
        # One legend for shape and colour: the same settings for both.
        legend = alt.Legend(title=f"Bars: {first[0]}. Marks:", orient="bottom", direction="vertical", labelLimit=260)
        layers.append(
            alt.Chart(alt.InlineData(values=_mix_rows(labels, others)))
            .mark_point(size=95, filled=True, opacity=1, stroke=colours.text, strokeWidth=0.8)
            .encode(
                x=x,
                y=y,
                tooltip=tips,
                shape=alt.Shape(
                    "case:N",
                    scale=alt.Scale(domain=known, range=list(SHAPES[: len(known)])),
                    legend=legend,
                ),
                fill=alt.Fill("case:N", scale=alt.Scale(domain=known, range=marks[: len(known)]), legend=legend),
            )
        )
    spoken = "; ".join(
        f"{name}: " + ", ".join(f"{group} {short(share, 3)}" for group, share in zip(labels, mix, strict=True))
        for name, mix in cases
    )
    return alt.LayerChart(layer=layers).properties(
        height=24 * len(names) + 100, description=f"Share of each group among new infections. {spoken}."
    )


def _mix_rows(labels: Sequence[str], cases: Sequence[tuple[str, Sequence[float]]]) -> list[dict[str, Any]]:
    return [
        {"group": group, "case": name, "share": share}
        for name, mix in cases
        for group, share in zip(labels, mix, strict=True)
    ]


def response(curve: Curve, title: str, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw R0 along one quantity, with the line R0 = 1 and a mark where the scenario stands; None without a number."""
    colours = ink(dark)
    rows = [{"x": x, "R0": R0} for x, R0 in zip(curve.x, curve.R0, strict=True) if R0 is not None]
    if not rows:
        return None
    top = 1.1 * max(1.0, *(row["R0"] for row in rows))
    x = alt.X("x:Q", title=title, scale=alt.Scale(domain=[min(curve.x), max(curve.x)], nice=False))
    y = alt.Y("R0:Q", title="R0 (no unit)", scale=alt.Scale(domain=[0, top], nice=False))
    line = (
        alt.Chart(alt.InlineData(values=rows))
        .mark_line(color=colours.first, strokeWidth=2.4)
        .encode(x=x, y=y, tooltip=[alt.Tooltip("x:Q", format=".4g", title=title), alt.Tooltip("R0:Q", format=".5g")])
    )
    one = alt.Chart(alt.InlineData(values=[{"R0": 1.0, "shown": "R0 = 1", "x": min(curve.x)}]))
    threshold = one.mark_rule(color=colours.faint, strokeDash=[5, 4], strokeWidth=1.6).encode(y=y)
    word = one.mark_text(align="left", dx=6, dy=-8, color=colours.text).encode(x=x, y=y, text="shown:N")
    layers: list[Any] = [threshold, word, line]
    at = min(rows, key=lambda row: abs(row["x"] - curve.now))
    layers.append(
        alt.Chart(alt.InlineData(values=[{**at, "shown": "now"}]))
        .mark_point(shape="diamond", size=130, filled=True, color=colours.strong, opacity=1)
        .encode(x=x, y=y)
    )
    layers.append(
        alt.Chart(alt.InlineData(values=[{**at, "shown": f"now: {short(at['R0'])}"}]))
        .mark_text(dy=16, dx=4, align="left", color=colours.text)
        .encode(x=x, y=y, text="shown:N")
    )
    return alt.LayerChart(layer=layers).properties(
        height=260,
        description=f"R0 along {title}: from {short(rows[0]['R0'])} at {short(rows[0]['x'])} to "
        f"{short(rows[-1]['R0'])} at {short(rows[-1]['x'])}; now {short(at['R0'])} at {short(at['x'])}.",
    )


def mix_along(labels: Sequence[str], curve: Curve, title: str) -> alt.LayerChart | None:
    """Draw the case mix along one quantity: a column a value, a row a group, the darker the larger the share."""
    known = [(x, mix) for x, mix in zip(curve.x, curve.case_mix, strict=True) if mix is not None]
    if len(known) < 2 or len(labels) > MOST_GROUPS:
        return None
    edges = [known[0][0], *((a[0] + b[0]) / 2 for a, b in pairwise(known)), known[-1][0]]
    rows: list[dict[str, Any]] = [
        {"x": edges[k], "x2": edges[k + 1], "at": x, "group": group, "share": share}
        for k, (x, mix) in enumerate(known)
        for group, share in zip(labels, mix, strict=True)
    ]
    largest = max(row["share"] for row in rows)
    scale = alt.Scale(scheme="viridis", reverse=True, domain=[0, largest])
    legend = alt.Legend(title="share of new infections", tickCount=3, orient="bottom", gradientLength=180)
    cells = (
        alt.Chart(alt.InlineData(values=rows))
        .mark_rect()
        .encode(
            x=alt.X("x:Q", title=title, scale=alt.Scale(domain=[edges[0], edges[-1]], nice=False)),
            x2="x2:Q",
            y=alt.Y("group:N", sort=list(labels), title=None, axis=alt.Axis(labelLimit=130, labelOverlap=False)),
            color=alt.Color("share:Q", scale=scale, legend=legend),
            # Without a line of its own colour each cell would show a seam.
            stroke=alt.Stroke("share:Q", scale=scale, legend=None),
            tooltip=[
                alt.Tooltip("group:N"),
                alt.Tooltip("at:Q", title=title, format=".4g"),
                alt.Tooltip("share:Q", format=".4f"),
            ],
        )
    )
    return alt.LayerChart(layer=[cells]).properties(
        height=20 * len(labels) + 110,
        description=f"Share of each group among new infections along {title}. First: {_spoken(labels, known[0][1])}. "
        f"Last: {_spoken(labels, known[-1][1])}.",
    )


def _spoken(labels: Sequence[str], mix: Sequence[float]) -> str:
    return ", ".join(f"{group} {short(share, 3)}" for group, share in zip(labels, mix, strict=True))


def map_of_two(found: MixingMap) -> alt.LayerChart | None:
    """Draw R0 over two quantities, with the line R0 = 1 and a mark where the scenario stands; None without a number.

    Its cells have colours of their own, so what stands on them is the same on a dark background.
    """
    xs, ys = found.x.values, found.y.values
    rows = tiles(xs, ys, found.R0)
    if not rows:
        return None
    largest = max(1.0, *(row["R0"] for row in rows))
    x = alt.X("x:Q", title=found.x.title, scale=alt.Scale(domain=[xs[0], xs[-1]], nice=False))
    y = alt.Y("y:Q", title=found.y.title, scale=alt.Scale(domain=[ys[0], ys[-1]], nice=False))
    # Below 1 purple, above 1 orange; the middle of the scale is the threshold.
    scale = alt.Scale(scheme="purpleorange", domain=[0, largest], domainMid=1)
    cells = (
        alt.Chart(alt.InlineData(values=rows))
        .mark_rect(clip=True)
        .encode(
            x=x,
            x2="x2:Q",
            y=y,
            y2="y2:Q",
            color=alt.Color(
                "R0:Q", scale=scale, legend=alt.Legend(title="R0", tickCount=3, orient="bottom", gradientLength=180)
            ),
            stroke=alt.Stroke("R0:Q", scale=scale, legend=None),
            tooltip=[
                alt.Tooltip("ax:Q", title=found.x.title, format=".4g"),
                alt.Tooltip("ay:Q", title=found.y.title, format=".4g"),
                alt.Tooltip("R0:Q", format=".5g"),
            ],
        )
    )
    layers: list[Any] = [cells]
    pieces = [{"x": a[0], "y": a[1], "x2": b[0], "y2": b[1]} for a, b in found.line]
    if pieces:
        layers.append(
            alt.Chart(alt.InlineData(values=pieces))
            .mark_rule(color="#10141c", strokeWidth=2.6, clip=True, strokeCap="round")
            .encode(x=x, y=y, x2="x2:Q", y2="y2:Q")
        )
        middle = pieces[len(pieces) // 2]
        layers.append(
            alt.Chart(alt.InlineData(values=[{"x": middle["x"], "y": middle["y"], "shown": "R0 = 1"}]))
            .mark_text(color="#10141c", dx=8, dy=-9, align="left", fontWeight="bold")
            .encode(x=x, y=y, text="shown:N")
        )
    now = None if found.x.now is None or found.y.now is None else (found.x.now, found.y.now)
    if now is not None and xs[0] <= now[0] <= xs[-1] and ys[0] <= now[1] <= ys[-1]:
        here = alt.Chart(alt.InlineData(values=[{"x": now[0], "y": now[1], "shown": f"now: {short(found.now)}"}]))
        layers.append(
            here.mark_point(shape="diamond", size=130, filled=True, fill="#ffffff", stroke="#10141c", opacity=1).encode(
                x=x, y=y
            )
        )
        align: Literal["left", "right"] = "left" if now[0] < (xs[0] + 3 * xs[-1]) / 4 else "right"
        layers.append(
            here.mark_text(align=align, dx=12 if align == "left" else -12, color="#10141c").encode(
                x=x, y=y, text="shown:N"
            )
        )
    told = "" if found.line else " R0 does not pass 1 on it."
    return alt.LayerChart(layer=layers).properties(
        height=360,
        description=f"R0 over {found.x.title} (across) and {found.y.title} (upward), now {short(found.now)}. At the four "
        f"corners: {', '.join(_corner(found, i, j) for i in (0, -1) for j in (0, -1))}.{told}",
    )


def _corner(found: MixingMap, i: int, j: int) -> str:
    return f"{short(found.R0[i][j])} at {short(found.x.values[j])}, {short(found.y.values[i])}"
