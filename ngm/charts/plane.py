"""R0 over two quantities at once, as a map with its lines."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Literal

import altair as alt

from ngm.charts.style import short
from ngm.charts.tiles import tiles
from ngm.results_sensitivity import Plane

__all__ = ["plane"]

#: What stands on the cells is the same on a dark background: they have colours of their own.
BLACK, WHITE = "#10141c", "#ffffff"


def plane(found: Plane) -> alt.LayerChart | None:
    """Draw R0 over two quantities: purple below 1, orange above, the line at 1 thick, other levels thin and dashed.

    Each line carries its value. Axes in the quantities' own units. None without a number.
    """
    xs, ys = found.x.values, found.y.values
    rows = tiles(xs, ys, found.R0)
    if not rows:
        return None
    # Near a rate of 0 the numbers have no end: past this they share the last colour.
    largest = max(2.0, sorted(row["R0"] for row in rows)[int(0.97 * (len(rows) - 1))])
    x = alt.X("x:Q", title=found.x.title, scale=alt.Scale(domain=[xs[0], xs[-1]], nice=False))
    y = alt.Y("y:Q", title=found.y.title, scale=alt.Scale(domain=[ys[0], ys[-1]], nice=False))
    colour = alt.Color(
        "R0:Q",
        scale=alt.Scale(scheme="purpleorange", domain=[0, largest], domainMid=1, clamp=True),
        legend=alt.Legend(title="R0", orient="bottom", gradientLength=180),
    )
    import pandas

    # As a table: each row of a plain list is looked at one by one, which takes half a second for a plane.
    cells = (
        alt.Chart(pandas.DataFrame(rows))
        .mark_rect(clip=True)
        .encode(
            x=x,
            x2="x2:Q",
            y=y,
            y2="y2:Q",
            color=colour,
            stroke=colour,
            tooltip=[
                alt.Tooltip("ax:Q", title=found.x.title, format=".4g"),
                alt.Tooltip("ay:Q", title=found.y.title, format=".4g"),
                alt.Tooltip("R0:Q", format=".5g"),
            ],
        )
    )
    layers: list[Any] = [cells]
    for level, pieces in found.lines:
        if not pieces:
            continue
        data = [{"x": a[0], "y": a[1], "x2": b[0], "y2": b[1]} for a, b in pieces]
        one = level == 1
        layers.append(
            alt.Chart(alt.InlineData(values=data))
            .mark_rule(
                color=BLACK,
                strokeWidth=2.8 if one else 1.4,
                strokeDash=[1, 0] if one else [4, 3],
                clip=True,
                strokeCap="round" if one else "butt",
            )
            .encode(x=x, y=y, x2="x2:Q", y2="y2:Q")
        )
        at = _middle(data, xs, ys)
        word = alt.Chart(alt.InlineData(values=[{**at, "shown": f"R0 = {short(level)}"}])).encode(
            x=x, y=y, text="shown:N"
        )
        # A white edge around the letters keeps them readable on every colour.
        layers.append(word.mark_text(fontWeight="bold", stroke=WHITE, strokeWidth=3, dy=-9))
        layers.append(word.mark_text(fontWeight="bold", color=BLACK, dy=-9))
    layers += _here(found, x, y)
    one_line = dict(found.lines).get(1.0, ())
    told = "" if one_line else " R0 does not pass 1 on it."
    corners = ", ".join(f"{short(found.R0[i][j])} at {short(xs[j])}, {short(ys[i])}" for i in (0, -1) for j in (0, -1))
    return alt.LayerChart(layer=layers).properties(
        height=400,
        description=f"R0 over {found.x.title} (across) and {found.y.title} (upward), now {short(found.now)}. At the four "
        f"corners: {corners}.{told}",
    )


def _middle(data: Sequence[dict[str, float]], xs: Sequence[float], ys: Sequence[float]) -> dict[str, float]:
    """Return the piece of a line nearest to the middle of the plane, where its word has room."""
    width, height = xs[-1] - xs[0], ys[-1] - ys[0]
    at = min(
        data,
        key=lambda p: ((p["x"] - xs[0]) / width - 0.5) ** 2 + ((p["y"] - ys[0]) / height - 0.5) ** 2,
    )
    return {"x": at["x"], "y": at["y"]}


def _here(found: Plane, x: alt.X, y: alt.Y) -> list[Any]:
    """Return the mark where the scenario stands; none where that is outside."""
    xs, ys = found.x.values, found.y.values
    if found.x.now is None or found.y.now is None:
        return []
    if not (xs[0] <= found.x.now <= xs[-1] and ys[0] <= found.y.now <= ys[-1]):
        return []
    at = {"x": found.x.now, "y": found.y.now, "shown": f"now {short(found.now)}"}
    here = alt.Chart(alt.InlineData(values=[at])).encode(x=x, y=y)
    align: Literal["left", "right"] = "left" if found.x.now < (xs[0] + 3 * xs[-1]) / 4 else "right"
    aside = 11 if align == "left" else -11
    return [
        here.mark_point(shape="diamond", size=130, filled=True, fill=WHITE, stroke=BLACK, opacity=1),
        here.mark_text(align=align, dx=aside, stroke=WHITE, strokeWidth=3).encode(text="shown:N"),
        here.mark_text(align=align, dx=aside, color=BLACK).encode(text="shown:N"),
    ]
