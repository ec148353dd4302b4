"""Pictures of an outbreak: attack rates, chances by type, and the generation interval."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import altair as alt

from ngm.charts.style import ink, short
from ngm.results_outbreak import Chance, FinalSizeResult, PaceResult

__all__ = ["MOST_BARS", "attack_rates", "chances", "intervals"]

#: More bars than this are no picture; the table beside it has them all.
MOST_BARS = 40
#: Height of one bar with its gap, and of the axis with its title, pixels.
STEP = 30
AXIS = 62


def attack_rates(size: FinalSizeResult, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the share of the susceptible of each type that is infected in the end (0 to 1)."""
    names = [row.type for row in size.rows]
    return _shares(names, [row.attack_rate for row in size.rows], "share infected in the end (0 to 1)", dark)


def chances(chance: Chance, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the probability that one case of each type starts a large outbreak (0 to 1)."""
    names = [row.type for row in chance.rows]
    values = [row.large_outbreak for row in chance.rows]
    return _shares(names, values, "probability of a large outbreak (0 to 1)", dark)


def _shares(names: Sequence[str], values: Sequence[float], axis: str, dark: bool) -> alt.LayerChart | None:
    if not 0 < len(names) <= MOST_BARS:
        return None
    colours = ink(dark)
    rows: list[dict[str, Any]] = [
        {"type": name, "value": value, "shown": short(value, 3)} for name, value in zip(names, values, strict=True)
    ]
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        y=alt.Y("type:N", sort=None, title=None, axis=alt.Axis(labelLimit=150)),
        x=alt.X("value:Q", scale=alt.Scale(domain=[0, 1]), title=axis, axis=alt.Axis(tickCount=5)),
        tooltip=[alt.Tooltip("type:N"), alt.Tooltip("shown:N", title="value")],
    )
    small = "datum.value <= 0.8"
    layers = (
        base.mark_bar(color=colours.first, height={"band": 0.6}),
        base.mark_text(align="left", dx=4, color=colours.text).encode(text="shown:N").transform_filter(small),
        base.mark_text(align="right", dx=-4, color="#10141c" if dark else "#ffffff")
        .encode(text="shown:N")
        .transform_filter(f"!({small})"),
    )
    spoken = "; ".join(f"{row['type']} {row['shown']}" for row in rows[:20])
    more = f"; and {len(rows) - 20} more" if len(rows) > 20 else ""
    return alt.LayerChart(layer=list(layers)).properties(
        height=STEP * len(rows) + AXIS, description=f"Bars: {axis}: {spoken}{more}."
    )


def intervals(pace: PaceResult, unit: str, *, discrete: bool = False, dark: bool = False) -> alt.LayerChart | None:
    """Draw the density of the age at infecting, per time unit (in steps: the share in each), with its mean."""
    if pace.mean is None or not pace.ages:
        return None
    colours = ink(dark)
    rows = [
        {"age": age, "density": value, "made": made}
        for age, value, made in zip(pace.ages, pace.density, pace.cumulative, strict=True)
    ]
    what = f"share made in a {unit}" if discrete else f"share made per {unit}"
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        x=alt.X("age:Q", title=f"age of the infection, {unit}s", axis=alt.Axis(tickCount=8)),
        y=alt.Y("density:Q", title=what, axis=alt.Axis(tickCount=5)),
        tooltip=[
            alt.Tooltip("age:Q", title=f"age, {unit}s", format=".4g"),
            alt.Tooltip("density:Q", title=what, format=".4g"),
            alt.Tooltip("made:Q", title="share made by then", format=".4g"),
        ],
    )
    marks = (
        base.mark_bar(color=colours.first, width={"band": 0.8} if len(rows) < 2 else max(2, 360 // len(rows)))
        if discrete
        else base.mark_area(color=colours.first, opacity=0.35, line={"color": colours.first})
    )
    mean = [{"age": pace.mean, "words": f"mean {short(pace.mean)}"}]
    line = alt.Chart(alt.InlineData(values=mean)).mark_rule(color=colours.strong, strokeDash=[5, 3])
    word = alt.Chart(alt.InlineData(values=mean)).mark_text(
        align="left", dx=5, dy=8, baseline="top", color=colours.text
    )
    return alt.LayerChart(
        layer=[marks, line.encode(x="age:Q"), word.encode(x="age:Q", y=alt.value(0), text="words:N")]
    ).properties(
        height=260,
        description=(
            f"Curve: {what} over the age of the infection in {unit}s; mean {short(pace.mean)}, standard deviation "
            f"{short(pace.sd)} {unit}s."
        ),
    )
