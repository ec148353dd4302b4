"""The eigenvalues of K in the complex plane, with the circle of radius R0."""

from __future__ import annotations

import math
from typing import Any

import altair as alt

from ngm.charts.style import ink, short
from ngm.results import Solution

__all__ = ["eigenvalues"]

#: Corners of the polygon that draws a circle: enough to look round at 270 pixels.
CORNERS = 120


def eigenvalues(solution: Solution, *, dark: bool = False, size: int = 270) -> alt.LayerChart | None:
    """Draw the eigenvalues of K, the circle of radius R0 and the circle of radius 1.

    Every eigenvalue lies on the circle of radius R0 or inside it; those on it besides R0 itself belong to a periodic
    class (or to classes that tie). Both axes have the same scale, so that circles are circles.

    Parameters
    ----------
    solution : Solution
    dark : bool
        For a dark background.
    size : int
        Width and height of the plane, pixels.

    Returns
    -------
    altair.LayerChart or None
        None where there is no R0, or no eigenvalue is listed (K too large).
    """
    if solution.R0 is None or not solution.eigenvalues:
        return None
    colours = ink(dark)
    reach = 1.12 * max(1.0, solution.R0, *(math.hypot(*pair) for pair in solution.eigenvalues))
    scale = alt.Scale(domain=[-reach, reach], nice=False, zero=False)
    x = alt.X("re:Q", scale=scale, title="real part (no unit)")
    y = alt.Y("im:Q", scale=scale, title="imaginary part (no unit)")
    of_R0 = f"radius R0 = {short(solution.R0)}"
    names = [of_R0, "radius 1"]
    circles: list[dict[str, Any]] = [
        *_circle(solution.R0, of_R0),
        *_circle(1.0, "radius 1"),
    ]
    points = [
        {
            "re": re,
            "im": im,
            "what": _kind(re, im, solution.R0),
            "eigenvalue": _complex(re, im),
            "modulus": short(math.hypot(re, im)),
        }
        for re, im in solution.eigenvalues
    ]
    kinds = ["R0 itself", "on the circle", "inside"]
    rings = (
        alt.Chart(alt.InlineData(values=circles))
        .mark_line(strokeWidth=1.8)
        .encode(
            x=x,
            y=y,
            order="order:Q",
            strokeDash=alt.StrokeDash(
                "circle:N", scale=alt.Scale(domain=names, range=[[1, 0], [5, 4]]), legend=_legend("Circle")
            ),
            color=alt.Color(
                "circle:N",
                scale=alt.Scale(domain=names, range=[colours.first, colours.faint]),
                legend=_legend("Circle"),
            ),
        )
    )
    marks = (
        alt.Chart(alt.InlineData(values=points))
        .mark_point(size=110, filled=True, opacity=1, stroke=colours.text, strokeWidth=0.8)
        .encode(
            x=x,
            y=y,
            shape=alt.Shape(
                "what:N",
                scale=alt.Scale(domain=kinds, range=["diamond", "square", "circle"]),
                legend=_legend("Eigenvalue", symbolFillColor=colours.faint, symbolStrokeColor=colours.text),
            ),
            fill=alt.Fill(
                "what:N",
                scale=alt.Scale(domain=kinds, range=[colours.strong, colours.first, colours.faint]),
                legend=None,
            ),
            tooltip=["eigenvalue:N", "modulus:N", "what:N"],
        )
    )
    return alt.LayerChart(layer=[rings, marks]).properties(
        width=size,
        height=size,
        autosize=alt.AutoSizeParams(type="pad", contains="content"),
        description=_alt(solution),
    )


def _circle(radius: float, name: str) -> list[dict[str, Any]]:
    return [
        {
            "re": radius * math.cos(2 * math.pi * k / CORNERS),
            "im": radius * math.sin(2 * math.pi * k / CORNERS),
            "order": k,
            "circle": name,
        }
        for k in range(CORNERS + 1)
    ]


def _kind(re: float, im: float, R0: float) -> str:
    near = 1e-9 * R0
    if abs(re - R0) <= near and abs(im) <= near:
        return "R0 itself"
    return "on the circle" if abs(math.hypot(re, im) - R0) <= near else "inside"


def _complex(re: float, im: float) -> str:
    if im == 0:
        return short(re)
    return f"{short(re)} {'+' if im > 0 else '-'} {short(abs(im))} i"


def _legend(title: str, **more: Any) -> alt.Legend:
    return alt.Legend(title=title, orient="bottom", direction="vertical", labelLimit=260, **more)


def _alt(solution: Solution) -> str:
    listed = ", ".join(_complex(re, im) for re, im in solution.eigenvalues[:8])
    more = len(solution.eigenvalues) - 8
    tail = f" and {more} more" if more > 0 else ""
    return (
        f"Complex plane with the {len(solution.eigenvalues)} eigenvalues of K: {listed}{tail}. "
        f"All lie on or inside the circle of radius R0 = {short(solution.R0)}; "
        "the circle of radius 1 is drawn for comparison."
    )
