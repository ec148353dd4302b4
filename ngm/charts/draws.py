"""Pictures of what draws say: the distribution of a number, and in how many draws so much is enough."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import altair as alt

from ngm.charts.style import ink, short
from ngm.results_draws import Assured, Spread

__all__ = ["assured", "spread", "upright"]

#: Where a step of a histogram lies.
SIDES = ("up to", "across", "above")


def spread(found: Spread, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw how many draws have the number in each of the steps, with the median, the middle 95 % and the threshold.

    Steps up to the threshold (1, or 0 for a growth rate), across it and above it have shades of their own and lie on either
    side of its line. None without a draw that has the number.
    """
    figures, at = found.figures, found.threshold
    if not found.histogram or figures.quantiles is None:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = [
        {"low": low, "high": high, "count": count, "zero": 0, "side": _side(low, high, at)}
        for low, high, count in found.histogram
    ]
    low, middle, high = (figures.quantiles[name] for name in ("0.025", "0.5", "0.975"))
    left, right = min(rows[0]["low"], at), max(rows[-1]["high"], at)
    room = 0.03 * (right - left) or 0.1
    least = left - room if left < 0 else max(0.0, left - room)
    name = found.number.replace("_", " ")
    # Above the bars there is room for the spread.
    most = 1.15 * max(row["count"] for row in rows)
    x = alt.X(
        "low:Q",
        title=f"{name} ({found.unit or 'no unit'})",
        scale=alt.Scale(domain=[least, right + room], nice=False, zero=False),
        axis=alt.Axis(tickCount=8),
    )
    bars = (
        alt.Chart(alt.InlineData(values=rows))
        .mark_rect(stroke=colours.fill, strokeWidth=0.4)
        .encode(
            x=x,
            x2="high:Q",
            y=alt.Y(
                "count:Q", title="draws", axis=alt.Axis(tickCount=4), scale=alt.Scale(domain=[0, most], nice=False)
            ),
            y2="zero:Q",
            color=alt.Color(
                "side:N",
                scale=alt.Scale(
                    domain=[f"{side} {at:g}" for side in SIDES], range=[colours.first, colours.faint, colours.strong]
                ),
                legend=alt.Legend(title=name, orient="bottom"),
            ),
            tooltip=[
                alt.Tooltip("low:Q", format=".4g", title="from"),
                alt.Tooltip("high:Q", format=".4g", title="to"),
                alt.Tooltip("count:Q", title="draws"),
            ],
        )
    )
    span = alt.Chart(alt.InlineData(values=[{"low": low, "high": high, "middle": middle}]))
    top = alt.value(10)
    layers = [
        bars,
        span.mark_rule(color=colours.text, strokeWidth=3).encode(x=x, x2="high:Q", y=top),
        span.mark_point(color=colours.text, fill=colours.fill, shape="diamond", size=110, opacity=1).encode(
            x=alt.X("middle:Q"), y=top
        ),
        *upright([(at, f"{at:g}", True)], "low", x, dark),
    ]
    chance = "" if figures.above_one is None else f" Share above {at:g}: {short(figures.above_one)}."
    return alt.LayerChart(layer=layers).properties(
        height=340,
        description=f"Distribution of {name} over {figures.draws:,} draws: median {short(middle)}, middle 95 % from "
        f"{short(low)} to {short(high)}.{chance} The bar at the top spans the middle 95 %, the diamond is the median.",
    )


def _side(low: float, high: float, at: float) -> str:
    side = SIDES[0] if high <= at else SIDES[2] if low >= at else SIDES[1]
    return f"{side} {at:g}"


def assured(result: Assured, *, dark: bool = False) -> alt.LayerChart:
    """Draw the share of draws below the target against how much there is of a measure, with the share that is wanted."""
    colours = ink(dark)
    data = [{"much": x, "share": share} for x, share in result.curve]
    x = alt.X(
        "much:Q",
        scale=alt.Scale(domain=[0, 1], nice=False),
        title=f"{result.what} (0: none, 1: all)",
        axis=alt.Axis(tickCount=5),
    )
    y = alt.Y(
        "share:Q",
        scale=alt.Scale(domain=[0, 1.08], nice=False),
        title=f"share of draws below {result.target:g}",
        axis=alt.Axis(values=[0, 0.25, 0.5, 0.75, 1], format="%"),
    )
    base = alt.Chart(alt.InlineData(values=data)).encode(
        x=x, y=y, tooltip=[alt.Tooltip("much:Q", format=".3f"), alt.Tooltip("share:Q", format=".2%")]
    )
    wanted = alt.Chart(
        alt.InlineData(values=[{"share": result.assurance, "shown": f"wanted: {100 * result.assurance:g} %"}])
    ).encode(y=y)
    layers: list[Any] = [
        base.mark_line(color=colours.first, strokeWidth=2),
        base.mark_point(color=colours.first, filled=True, size=30, opacity=1),
        wanted.mark_rule(color=colours.text, strokeDash=[5, 4], strokeWidth=1.8),
        wanted.mark_text(align="left", dx=4, dy=-8, color=colours.text, fontWeight="bold").encode(
            x=alt.value(0), text="shown:N"
        ),
    ]
    told = f"from {short(100 * data[0]['share'])} % at 0 to {short(100 * data[-1]['share'])} % at 1"
    if result.needed is not None:
        row = {"much": result.needed, "share": result.assurance, "shown": f"needed: {short(result.needed)}"}
        mark = alt.Chart(alt.InlineData(values=[row])).encode(x=x, y=y)
        right = result.needed > 0.75
        layers += [
            mark.mark_point(shape="diamond", size=140, filled=True, opacity=1, color=colours.strong),
            mark.mark_text(
                align="right" if right else "left", dx=-9 if right else 9, dy=22, color=colours.text, fontWeight="bold"
            ).encode(text="shown:N"),
        ]
        told += f"; the wanted {100 * result.assurance:g} % from {short(result.needed)} on"
    else:
        told += f"; the wanted {100 * result.assurance:g} % is not reached"
    return alt.LayerChart(layer=layers).properties(
        height=280, description=f"Share of draws below {result.target:g} by {result.what}: {told}."
    )


def upright(marks: Sequence[tuple[float, str, bool]], field: str, x: alt.X, dark: bool) -> list[Any]:
    """Return upright lines with words at their tops: dashed ones are thresholds."""
    colours = ink(dark)
    layers: list[Any] = []
    for at, word, dashed in marks:
        one = alt.Chart(alt.InlineData(values=[{field: at, "shown": word}])).encode(x=x)
        layers.append(one.mark_rule(color=colours.text, strokeWidth=1.8, strokeDash=[5, 4] if dashed else [1, 0]))
        layers.append(
            one.mark_text(color=colours.text, baseline="bottom", dy=-5, fontWeight="bold").encode(
                y=alt.value(0), text="shown:N"
            )
        )
    return layers
