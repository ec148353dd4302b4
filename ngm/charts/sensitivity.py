"""Pictures of what R0 answers to and how far it is known: swings, draws, and which parameters drive the spread."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Literal

import altair as alt

from ngm.charts.draws import spread, upright
from ngm.charts.style import ink, short
from ngm.results_sensitivity import DrawFigures, Swing, Uncertainty

__all__ = ["convergence", "histogram", "indices", "ranking", "tornado"]

#: Bars at the most: past them a table is easier to read.
MOST_BARS = 20
BAR = 30
#: Height of axis and title together, and of a legend below them.
AROUND, LEGEND = 100, 75


def tornado(swings: Sequence[Swing], R0: float, *, over: str = "range", dark: bool = False) -> alt.LayerChart | None:
    """Draw R0 at both ends of each parameter as bars from where it is now, widest first, with the line at 1.

    The end that a bar leads to is written at it, so colour alone tells nothing. No unit. None without a bar to draw.
    """
    shown = [swing for swing in swings if swing.R0_low is not None or swing.R0_high is not None][:MOST_BARS]
    if not shown:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = []
    for swing in shown:
        ends = (("lower end", swing.low, swing.R0_low), ("upper end", swing.high, swing.R0_high))
        for end, value, number in ends:
            if number is not None:
                unit = f" {swing.unit}" if swing.unit else ("" if over == "range" else " times")
                rows.append(
                    {
                        "parameter": swing.parameter,
                        "end": end,
                        "R0": number,
                        "base": R0,
                        "shown": short(value, 3),
                        "told": f"{short(value)}{unit}",
                        "left": number < R0,
                    }
                )
    numbers = [row["R0"] for row in rows] + [R0, 1.0]
    room = 0.16 * (max(numbers) - min(numbers)) or 0.1
    x = alt.X(
        "R0:Q",
        title="R0 (no unit)",
        scale=alt.Scale(domain=[max(0.0, min(numbers) - room), max(numbers) + room], nice=False, zero=False),
        axis=alt.Axis(tickCount=6),
    )
    names = [swing.parameter for swing in shown]
    y = alt.Y("parameter:N", sort=names, title=None, axis=alt.Axis(labelLimit=130))
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        y=y,
        tooltip=[
            alt.Tooltip("parameter:N"),
            alt.Tooltip("end:N"),
            alt.Tooltip("told:N", title="value"),
            alt.Tooltip("R0:Q", format=".5g"),
        ],
    )
    bars = base.mark_bar(height={"band": 0.62}, stroke=colours.text, strokeWidth=0.6).encode(
        x=x,
        x2="base:Q",
        color=alt.Color(
            "end:N",
            scale=alt.Scale(domain=["lower end", "upper end"], range=[colours.first, colours.strong]),
            legend=alt.Legend(title="parameter at its", orient="bottom"),
        ),
    )
    # A bar too short to see has no words: two would stand on each other.
    seen = f"abs(datum.R0 - datum.base) > {0.004 * (max(numbers) - min(numbers))}"
    words = [
        base.transform_filter(f"{seen} && {'' if left else '!'}datum.left")
        .mark_text(align="right" if left else "left", dx=-5 if left else 5, color=colours.text)
        .encode(x=x, text="shown:N")
        for left in (True, False)
    ]
    layers = [bars, *upright([(R0, f"now {short(R0)}", False), (1.0, "1", True)], "R0", x, dark), *words]
    spoken = "; ".join(
        f"{swing.parameter} from {short(swing.low)} to {short(swing.high)} {swing.unit}".strip()
        + f": R0 from {short(swing.R0_low)} to {short(swing.R0_high)}"
        for swing in shown
    )
    return alt.LayerChart(layer=layers).properties(
        height=BAR * len(names) + AROUND + LEGEND,
        description=f"R0 with each parameter at either end, now {short(R0)}, widest first. {spoken}.",
    )


def histogram(found: Uncertainty, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw how many draws have R0 in each of the steps: see `ngm.charts.draws.spread`."""
    return spread(found.distributions[0], dark=dark)


def ranking(found: Uncertainty, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the partial rank correlation of each parameter with R0, from -1 to 1, largest first.

    A parameter that R0 both rises and falls with is marked in words. None without a value.
    """
    known = [d for d in found.drivers if d.prcc is not None]
    known = sorted(known, key=lambda d: -abs(d.prcc or 0.0))[:MOST_BARS]
    if not known:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = [
        {
            "parameter": d.parameter,
            "value": d.prcc,
            "base": 0.0,
            "shown": short(d.prcc, 3) + ("" if d.monotone is not False else "  (rises and falls)"),
            "left": (d.prcc or 0.0) < 0,
        }
        for d in known
    ]
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        x=alt.X(
            "value:Q",
            title="partial rank correlation with R0 (no unit)",
            scale=alt.Scale(domain=[-1.3, 1.3], nice=False),
            axis=alt.Axis(values=[-1, -0.5, 0, 0.5, 1]),
        ),
        y=alt.Y("parameter:N", sort=[d.parameter for d in known], title=None, axis=alt.Axis(labelLimit=130)),
        tooltip=[alt.Tooltip("parameter:N"), alt.Tooltip("value:Q", format=".4f")],
    )
    layers: list[Any] = [base.mark_bar(height={"band": 0.6}, color=colours.first).encode(x2="base:Q")]
    for left in (True, False):
        align: Literal["left", "right"] = "right" if left else "left"
        layers.append(
            base.transform_filter(f"{'' if left else '!'}datum.left")
            .mark_text(align=align, dx=-5 if left else 5, color=colours.text)
            .encode(text="shown:N")
        )
    zero = alt.Chart(alt.InlineData(values=[{"value": 0.0}])).mark_rule(color=colours.text)
    layers.append(zero.encode(x="value:Q"))
    spoken = "; ".join(f"{row['parameter']} {row['shown']}" for row in rows)
    return alt.LayerChart(layer=layers).properties(
        height=BAR * len(rows) + AROUND - 30,
        description=f"Partial rank correlation of each parameter with R0, largest first: {spoken}.",
    )


def indices(found: Uncertainty, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw first (bar) and total (diamond) Sobol indices, shares of R0's variance, each with its 95 % interval.

    None where there are none: for joint draws, say.
    """
    known = [d for d in found.drivers if d.total is not None and d.first is not None]
    known = sorted(known, key=lambda d: -(d.total or 0.0))[:MOST_BARS]
    if not known:
        return None
    colours = ink(dark)
    names = [d.parameter for d in known]
    first = [_interval(d.parameter, "first", d.first or 0.0, d.first_interval) for d in known]
    total = [_interval(d.parameter, "total", d.total or 0.0, d.total_interval) for d in known]
    ends = [row[end] for row in first + total for end in ("low", "high")]
    x = alt.X(
        "value:Q",
        title="share of the variance of R0 (no unit)",
        scale=alt.Scale(domain=[min(0.0, *ends), max(1.0, *ends) * 1.03], nice=False),
        axis=alt.Axis(tickCount=5),
    )
    y = alt.Y("parameter:N", sort=names, title=None, axis=alt.Axis(labelLimit=130))
    tips = [
        alt.Tooltip("parameter:N"),
        alt.Tooltip("index:N"),
        alt.Tooltip("value:Q", format=".4f"),
        alt.Tooltip("low:Q", format=".4f", title="95 % interval from"),
        alt.Tooltip("high:Q", format=".4f", title="to"),
    ]
    bars = alt.Chart(alt.InlineData(values=first)).encode(y=y, tooltip=tips)
    marks = alt.Chart(alt.InlineData(values=total)).encode(y=y, tooltip=tips)
    layers = [
        bars.mark_bar(height={"band": 0.5}, color=colours.first).encode(x=x),
        bars.mark_rule(color=colours.text, strokeWidth=1.6).encode(x=alt.X("low:Q"), x2="high:Q"),
        marks.mark_rule(color=colours.strong, strokeWidth=2, yOffset=-9).encode(x=alt.X("low:Q"), x2="high:Q"),
        marks.mark_point(
            shape="diamond", size=90, filled=True, color=colours.strong, stroke=colours.text, opacity=1, yOffset=-9
        ).encode(x=x),
    ]
    spoken = "; ".join(f"{d.parameter} {short(d.first, 3)} by itself, {short(d.total, 3)} in all" for d in known)
    return alt.LayerChart(layer=layers).properties(
        height=(BAR + 8) * len(names) + AROUND - 30,
        description=f"Sobol indices, first as bars and total as diamonds, with 95 % intervals: {spoken}.",
    )


def _interval(parameter: str, index: str, value: float, span: tuple[float, float] | None) -> dict[str, Any]:
    low, high = span if span is not None else (value, value)
    return {"parameter": parameter, "index": index, "value": value, "low": low, "high": high}


def convergence(found: Uncertainty, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw mean and P(R0 > 1) of the first draws against how many they are: level lines have settled.

    None with fewer than two sets that have figures.
    """
    known: list[DrawFigures] = sorted(
        (part for part in found.running if part.mean is not None and part.above_one is not None),
        key=lambda part: part.draws,
    )
    if len(known) < 2:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = []
    for part in known:
        error = 1.96 * (part.mean_error or 0.0)
        low, high = part.above_one_interval or (part.above_one, part.above_one)
        mean = part.mean or 0.0
        rows.append(
            {"what": "mean of R0", "draws": part.draws, "value": mean, "low": mean - error, "high": mean + error}
        )
        rows.append({"what": "P(R0 > 1)", "draws": part.draws, "value": part.above_one, "low": low, "high": high})
    kinds = ["mean of R0", "P(R0 > 1)"]
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        x=alt.X(
            "draws:Q",
            title="first draws",
            scale=alt.Scale(type="log", nice=False, padding=14),
            axis=alt.Axis(values=[part.draws for part in known][-6:], format=",", labelOverlap=True),
        ),
        y=alt.Y("value:Q", title="mean, probability", scale=alt.Scale(zero=False), axis=alt.Axis(tickCount=5)),
        color=alt.Color(
            "what:N",
            scale=alt.Scale(domain=kinds, range=[colours.first, colours.strong]),
            legend=alt.Legend(title=None, orient="bottom"),
        ),
        tooltip=[
            alt.Tooltip("what:N"),
            alt.Tooltip("draws:Q", format=","),
            alt.Tooltip("value:Q", format=".5g"),
            alt.Tooltip("low:Q", format=".5g", title="95 % interval from"),
            alt.Tooltip("high:Q", format=".5g", title="to"),
        ],
    )
    shape = alt.Shape("what:N", scale=alt.Scale(domain=kinds, range=["circle", "square"]), legend=None)
    layers = [
        base.mark_rule(strokeWidth=2).encode(y=alt.Y("low:Q"), y2="high:Q"),
        base.mark_line(strokeWidth=1.6),
        base.mark_point(filled=True, size=70, opacity=1).encode(shape=shape),
    ]
    spoken = "; ".join(f"{p.draws:,} draws: mean {short(p.mean)}, above 1 {short(p.above_one)}" for p in known)
    return alt.LayerChart(layer=layers).properties(
        height=300, description=f"Mean of R0 and share above 1 against the number of draws: {spoken}."
    )
