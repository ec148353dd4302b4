"""Pictures of what happens beside the infection-free state: endemic states, the first weeks, a season."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import altair as alt

from ngm.charts.style import PALETTE, ink, short
from ngm.results_course import Course, SeedCourse, Threshold
from ngm.results_season import Seasonal

__all__ = ["MOST_LINES", "endemic_curve", "first_weeks", "season"]

#: Types drawn as lines of one picture; the table beside it has them all.
MOST_LINES = 6
DASHES = ([1, 0], [7, 3], [2, 2], [8, 3, 2, 3], [4, 4], [10, 2])
HIGH = 320


def endemic_curve(result: Threshold, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the endemic states along what is moved: solid where stable, dashed where not; None without a curve."""
    if len(result.branch) < 2:
        return None
    colours = ink(dark)
    title = f"{result.along} ({result.unit})" if result.unit else result.along
    x = alt.X("value:Q", title=title, scale=alt.Scale(zero=False, nice=False))
    y = alt.Y("infected:Q", title="infected at rest (individuals)")
    layers: list[Any] = []
    for stable, points in _pieces(result):
        rows = [{"value": p.value, "infected": p.infected, "k": k} for k, p in enumerate(points)]
        layers.append(
            alt.Chart(alt.InlineData(values=rows))
            .mark_line(
                color=colours.first if stable else colours.strong,
                strokeWidth=2.6 if stable else 2.0,
                strokeDash=[1, 0] if stable else [5, 4],
            )
            .encode(x=x, y=y, order="k:Q")
        )
    tips = [
        {"value": p.value, "infected": p.infected, "state": "stable" if p.stable else "unstable"} for p in result.branch
    ]
    layers.append(
        alt.Chart(alt.InlineData(values=tips))
        .mark_point(opacity=0, size=60)
        .encode(
            x=x,
            y=y,
            tooltip=[
                alt.Tooltip("value:Q", title=title, format=".5g"),
                alt.Tooltip("infected:Q", format=".5g"),
                alt.Tooltip("state:N"),
            ],
        )
    )
    marks = [
        (result.now, "now", [1, 0]),
        (result.at_one, "number 1", [6, 4]),
        (result.turning, "turns", [2, 3]),
    ]
    low, high = min(p.value for p in result.branch), max(p.value for p in result.branch)
    shown = [(at, word, dash) for at, word, dash in marks if at is not None and low <= at <= high]
    for k, (at, word, dash) in enumerate(sorted(shown, key=lambda mark: mark[0])):
        one = alt.Chart(alt.InlineData(values=[{"value": at, "shown": word}])).encode(x=x)
        layers.append(one.mark_rule(color=colours.text, strokeDash=dash, strokeWidth=1.4))
        # Words beside each other in two heights, so that lines that are close do not write over each other.
        layers.append(
            one.mark_text(color=colours.text, baseline="bottom", dy=-4 - 13 * (k % 2)).encode(
                y=alt.value(0), text="shown:N"
            )
        )
    spoken = f"Endemic states along {title}: {result.direction} at {short(result.at_one)}, where the number is 1"
    spoken += f"; turning point at {short(result.turning)}" if result.turning is not None else ""
    spoken += f"; now {short(result.now)} with " + (
        ", ".join(f"{short(e.infected)} infected ({'stable' if e.stable else 'unstable'})" for e in result.endemic)
        or "no endemic state"
    )
    return alt.LayerChart(layer=layers).properties(height=HIGH, description=f"{spoken}. Dashed: unstable.")


def _pieces(result: Threshold) -> list[tuple[bool, list[Any]]]:
    """Return the curve in pieces of one stability; neighbours share a point."""
    out: list[tuple[bool, list[Any]]] = []
    for before, point in zip(result.branch[:-1], result.branch[1:], strict=True):
        if out and out[-1][0] == point.stable:
            out[-1][1].append(point)
        else:
            out.append((point.stable, [before, point]))
    return out


def first_weeks(result: Course, seeded: SeedCourse, *, dark: bool = False) -> alt.LayerChart:
    """Draw how many there are of each type after one seed, on a scale of powers, beside the growth expected of all."""
    colours = ink(dark)
    names = list(result.types[:MOST_LINES])
    rows: list[dict[str, Any]] = []
    for t, row in zip(result.times, seeded.infected, strict=True):
        rows += [
            {"time": t, "infected": value, "type": name}
            for name, value in zip(names, row, strict=False)
            if value > seeded.cases * 1e-6
        ]
    x = alt.X("time:Q", title=f"time ({result.time_unit}s)")
    y = alt.Y(
        "infected:Q",
        title="infected (individuals)",
        scale=alt.Scale(type="log"),
        axis=alt.Axis(format="~g", tickCount=6),
    )
    scale = alt.Scale(domain=names, range=list(PALETTE[: len(names)]))
    dashes = alt.Scale(domain=names, range=[list(dash) for dash in DASHES[: len(names)]])
    lines = (
        alt.Chart(alt.InlineData(values=rows))
        .mark_line(strokeWidth=2.2)
        .encode(
            x=x,
            y=y,
            color=alt.Color("type:N", scale=scale, legend=alt.Legend(title="type", orient="bottom")),
            strokeDash=alt.StrokeDash("type:N", scale=dashes, legend=alt.Legend(title="type", orient="bottom")),
            tooltip=[
                alt.Tooltip("type:N"),
                alt.Tooltip("time:Q", format=".4g"),
                alt.Tooltip("infected:Q", format=".4g"),
            ],
        )
    )
    layers: list[Any] = [lines]
    total = sum(seeded.infected[-1])
    if result.growth_rate is not None and total > 0:
        expected = [
            {"time": t, "infected": value}
            for t in result.times
            if (value := total * 2.718281828459045 ** (result.growth_rate * (t - result.times[-1])))
            > seeded.cases * 1e-6
        ]
        layers.append(
            alt.Chart(alt.InlineData(values=expected))
            .mark_line(color=colours.faint, strokeDash=[2, 4], strokeWidth=1.6)
            .encode(x=x, y=y)
        )
    last = ", ".join(f"{name} {short(value)}" for name, value in zip(names, seeded.infected[-1], strict=False))
    return alt.LayerChart(layer=layers).properties(
        height=HIGH,
        description=f"Infected over {short(result.horizon)} {result.time_unit}s after {short(seeded.cases)} of {seeded.seed}, "
        f"on a scale of powers; at the end {last}. Dotted: all infected together, had they grown at "
        f"{short(result.growth_rate)} per {result.time_unit} all the while.",
    )


def season(year: Seasonal, unit: str, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the number that each moment of the season would have if it lasted, beside R0 of the season and the averaged one."""
    if not year.frozen:
        return None
    colours = ink(dark)
    rows = [{"time": t, "number": value} for t, value in zip(year.moments, year.frozen, strict=True)]
    x = alt.X("time:Q", title=f"time within the season ({unit}s)", scale=alt.Scale(nice=False))
    y = alt.Y("number:Q", title="number (no unit)", scale=alt.Scale(domainMin=0))
    layers: list[Any] = [
        alt.Chart(alt.InlineData(values=rows))
        .mark_line(color=colours.first, strokeWidth=2.2)
        .encode(
            x=x,
            y=y,
            tooltip=[
                alt.Tooltip("time:Q", format=".4g"),
                alt.Tooltip("number:Q", title="if this moment lasted", format=".5g"),
            ],
        )
    ]
    marks: Sequence[tuple[float | None, str, list[int], int]] = (
        (year.R0, f"R0 {short(year.R0)}", [1, 0], -6),
        (year.averaged, f"averaged {short(year.averaged)}", [6, 4], 14),
        (1.0, "1", [2, 3], -6),
    )
    for k, (value, word, dash, dy) in enumerate(marks):
        if value is None:
            continue
        one = alt.Chart(alt.InlineData(values=[{"number": value, "shown": word}])).encode(y=y)
        layers.append(one.mark_rule(color=colours.strong if k == 0 else colours.text, strokeDash=dash, strokeWidth=1.6))
        place = alt.value((4, 130, 280)[k])  # beside each other: the three may be close
        layers.append(one.mark_text(color=colours.text, align="left", dy=dy).encode(x=place, text="shown:N"))
    return alt.LayerChart(layer=layers).properties(
        height=HIGH,
        description=f"The number of each moment of the season if it lasted: from {short(year.mildest)} at time "
        f"{short(year.mildest_at)} to {short(year.worst)} at time {short(year.worst_at)}. R0 of the whole season is "
        f"{short(year.R0)}, that of the averaged season {short(year.averaged)}.",
    )
