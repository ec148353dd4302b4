"""Pictures of control: interventions side by side, strength needed, effort by target, a supply shared."""

from __future__ import annotations

from collections.abc import Sequence
from textwrap import wrap
from typing import Any, Literal

import altair as alt

from ngm.charts.style import ink, short
from ngm.results import ControlResult
from ngm.results_control import Allocation, Compared, Strength

__all__ = ["MOST_BARS", "TargetKind", "coverages", "efforts", "interventions", "shares", "strength"]

#: More bars than this are no picture; the table beside it has them all.
MOST_BARS = 60

#: Height of one bar with its gap, and of the axis with its title, pixels; characters in a line of a name.
STEP = 34
AXIS = 76
LINE = 24
TALL = 48

TargetKind = Literal["types", "entries", "states"]


def interventions(rows: Sequence[Compared], *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the number under each row as a bar, with a line at 1; words say which of them lie below it.

    Parameters
    ----------
    rows : sequence of Compared
        The baseline and the interventions, in the order in which they are to stand.
    dark : bool
        For a dark background.

    Returns
    -------
    altair.LayerChart or None
        None where no row has a number, or there are more than `MOST_BARS`.
    """
    data: list[dict[str, Any]] = [
        {
            "name": row.name + (" (R0)" if not row.parts else ""),
            "value": row.R0 or 0.0,
            "shown": "no number" if row.R0 is None else short(row.R0) + (", below 1" if row.below_one else ""),
            "what": row.label,
            "kind": "baseline" if not row.parts else "intervention",
        }
        for row in rows
    ]
    if len(data) > MOST_BARS or all(row.R0 is None for row in rows):
        return None
    told = "; ".join(f"{row['name']} {row['shown']}" for row in data)
    # The number stands below the name: beside its bar it would run into the line at 1.
    for row in data:
        row["name"] = f"{_wrapped(row['name'])}\n{row['shown']}"
    reach = 1.06 * max(1.0, *(row["value"] for row in data))
    base = _base(data, "reproduction number", alt.Scale(domain=[0, reach], nice=False))
    colours = ink(dark)
    bars = base.mark_bar(height={"band": 0.6}).encode(
        color=alt.Color(
            "kind:N",
            scale=alt.Scale(domain=["baseline", "intervention"], range=[colours.faint, colours.first]),
            legend=None,
        )
    )
    layers = [bars, *_threshold(1.0, "1", dark, down=True)]
    spoken = f"Reproduction number of the baseline and of each intervention, line at 1: {told}."
    return _layered(layers, len(data), spoken, TALL)


def strength(result: Strength, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the number against the strength of an intervention, with a line at the target and the strength needed.

    Strength runs from 0 (not there) to 1 (in full). None where no strength has a number.
    """
    data: list[dict[str, Any]] = [{"strength": x, "value": value} for x, value in result.curve if value is not None]
    if not data:
        return None
    colours = ink(dark)
    top = 1.12 * max(result.target, *(row["value"] for row in data))
    x = alt.X(
        "strength:Q",
        scale=alt.Scale(domain=[0, 1], nice=False),
        title="strength (0: not there, 1: in full)",
        axis=alt.Axis(tickCount=5),
    )
    y = alt.Y(
        "value:Q", scale=alt.Scale(domain=[0, top], nice=False), title="reproduction number", axis=alt.Axis(tickCount=5)
    )
    base = alt.Chart(alt.InlineData(values=data)).encode(
        x=x, y=y, tooltip=[alt.Tooltip("strength:Q", format=".3f"), alt.Tooltip("value:Q", format=".4f")]
    )
    layers: list[Any] = [
        base.mark_line(color=colours.first, strokeWidth=2),
        base.mark_point(color=colours.first, filled=True, size=30, opacity=1),
        *_threshold(result.target, f"{result.target:g}", dark, down=False),
    ]
    told = f"{result.name}: from {short(data[0]['value'])} at strength {data[0]['strength']:g} to "
    told += f"{short(data[-1]['value'])} at strength {data[-1]['strength']:g}"
    if result.strength is not None:
        needed = f"needed: {short(result.strength)}"
        mark = alt.Chart(
            alt.InlineData(values=[{"strength": result.strength, "value": result.target, "shown": needed}])
        ).encode(x=x, y=y)
        right = result.strength > 0.6
        layers += [
            mark.mark_point(shape="diamond", size=140, filled=True, opacity=1, color=colours.strong),
            mark.mark_text(
                align="right" if right else "left", dx=-9 if right else 9, dy=12, color=colours.text, fontWeight="bold"
            ).encode(text="shown:N"),
        ]
        told += f"; {short(result.target)} is reached at strength {short(result.strength)}"
    else:
        told += f"; {short(result.target)} is not reached"
    return alt.LayerChart(layer=layers).properties(height=300, description=f"Number against strength of {told}.")


def efforts(result: ControlResult, kind: TargetKind, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the critical effort of each target acted on alone: the share to remove, 1 - 1/T, from 0 to 1.

    Where there is no T the words "cannot work alone" stand in place of a bar. None where there is no target of this kind
    or there are more than `MOST_BARS`.

    Parameters
    ----------
    result : ControlResult
    kind : "types", "entries" or "states"
        Sets of types at infection, entries of K, or the infectivity of states.
    """
    if kind == "types":
        found = [(" + ".join(t.types), t.critical_effort) for t in result.type_reproduction]
    elif kind == "entries":
        found = [(f"{t.entry[1]} infecting {t.entry[0]}", t.critical_effort) for t in result.target_reproduction]
    else:
        found = [(t.state, t.critical_effort) for t in result.state_reproduction]
    if not 0 < len(found) <= MOST_BARS:
        return None
    data: list[dict[str, Any]] = [
        {
            "name": _wrapped(name),
            "value": effort or 0.0,
            "shown": "cannot work alone"
            if effort is None
            else "0: nothing needed"
            if effort == 0
            else short(effort, 3),
            "what": "critical effort",
        }
        for name, effort in found
    ]
    colours = ink(dark)
    base = _base(data, "critical effort: share to prevent (0 to 1)", alt.Scale(domain=[0, 1], nice=False))
    fits = "datum.value <= 0.75"
    layers = [
        base.mark_bar(color=colours.first, height={"band": 0.6}),
        base.mark_text(align="left", dx=5, color=colours.text).encode(text="shown:N").transform_filter(fits),
        base.mark_text(align="right", dx=-5, color="#10141c" if dark else "#ffffff")
        .encode(text="shown:N")
        .transform_filter(f"!({fits})"),
    ]
    told = "; ".join(f"{row['name']} {row['shown']}" for row in data[:20])
    more = f"; and {len(data) - 20} more" if len(data) > 20 else ""
    return _layered(layers, len(data), f"Critical effort of each target acted on alone, 0 to 1: {told}{more}.")


def shares(result: Allocation, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the number that each way of sharing the supply leaves, as points: the axis need not start at 0.

    None where there are more than `MOST_BARS` ways.
    """
    ways = [("without the supply", result.R0), *((share.rule, share.R0) for share in (result.best, *result.rules))]
    if len(ways) > MOST_BARS:
        return None
    data: list[dict[str, Any]] = [
        {
            "name": _wrapped(name),
            "value": value,
            "shown": short(value, 5),
            "what": result.label,
            "kind": "best" if name == result.best.rule else "other",
        }
        for name, value in ways
    ]
    low, high = min(value for _, value in ways), max(value for _, value in ways)
    room = (high - low) or 0.1 * (high or 1.0)
    # Room on the right for the number beside the last point.
    scale = alt.Scale(domain=[low - 0.1 * room, high + 0.45 * room], nice=False, zero=False)
    colours = ink(dark)
    base = _base(data, "number left (axis not from 0)", scale)
    points = base.mark_point(filled=True, size=120, opacity=1).encode(
        shape=alt.Shape("kind:N", scale=alt.Scale(domain=["best", "other"], range=["diamond", "circle"]), legend=None),
        color=alt.Color(
            "kind:N", scale=alt.Scale(domain=["best", "other"], range=[colours.strong, colours.first]), legend=None
        ),
    )
    texts = base.mark_text(align="left", dx=9, color=colours.text).encode(text="shown:N")
    told = "; ".join(f"{name} {short(value, 5)}" for name, value in ways)
    return _layered([points, texts], len(data), f"Number that each way of sharing the supply leaves: {told}.")


def coverages(result: Allocation, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the coverage of each group in the best share beside that of an even one, in per cent.

    None where there are more than `MOST_BARS` groups.
    """
    if len(result.groups) > MOST_BARS:
        return None
    even = next((share for share in result.rules if share.rule == "by population"), None)
    ways = [("best found", result.best), *([("by population", even)] if even is not None else [])]
    data: list[dict[str, Any]] = [
        {
            "name": _wrapped(group),
            "value": 100 * share.coverage[k],
            "shown": f"{100 * share.coverage[k]:.3g} % ({share.doses[k]:,.0f} doses)",
            "what": rule,
        }
        for rule, share in ways
        for k, group in enumerate(result.groups)
    ]
    colours = ink(dark)
    kinds = ["best found", "by population"]
    # A little room on both sides: a point at 0 would cover the name beside it.
    most = max(1e-9, *(row["value"] for row in data))
    base = _base(data, "coverage, %", alt.Scale(domain=[-0.05 * most, 1.06 * most], nice=False))
    points = base.mark_point(size=130, opacity=1, strokeWidth=2).encode(
        shape=alt.Shape(
            "what:N",
            scale=alt.Scale(domain=kinds, range=["diamond", "circle"]),
            legend=alt.Legend(title=None, orient="bottom", symbolFillColor="transparent", labelLimit=200),
        ),
        stroke=alt.Stroke(
            "what:N",
            scale=alt.Scale(domain=kinds, range=[colours.strong, colours.first]),
            legend=alt.Legend(title=None),
        ),
    )
    told = "; ".join(f"{row['name']}, {row['what']} {row['shown']}" for row in data[:24])
    return _layered([points], len(result.groups) + 1, f"Coverage of each group: {told}.")


def _wrapped(name: str) -> str:
    """Return a name over one or two lines that an axis has room for."""
    lines = wrap(name, LINE) or [name]
    return "\n".join(lines if len(lines) <= 2 else [lines[0], lines[1][: LINE - 1] + "…"])


def _apart(data: list[dict[str, Any]]) -> None:
    """Give names that were cut to the same text their numbers: one name is one place on the axis."""
    taken: set[tuple[str, str]] = set()
    for row in data:
        name, k = row["name"], 2
        while (row["name"], row["what"]) in taken:
            row["name"], k = f"{name} ({k})", k + 1
        taken.add((row["name"], row["what"]))


def _base(data: list[dict[str, Any]], axis: str, scale: alt.Scale) -> alt.Chart:
    _apart(data)
    return alt.Chart(alt.InlineData(values=data)).encode(
        y=alt.Y(
            "name:N",
            sort=None,
            title=None,
            axis=alt.Axis(labelLimit=170, labelExpr=r"split(datum.label, '\n')", labelPadding=6),
        ),
        x=alt.X("value:Q", scale=scale, title=axis, axis=alt.Axis(tickCount=5)),
        tooltip=[
            alt.Tooltip("name:N", title="name"),
            alt.Tooltip("what:N", title="what"),
            alt.Tooltip("shown:N", title="value"),
        ],
    )


def _threshold(at: float, word: str, dark: bool, *, down: bool) -> list[alt.Chart]:
    """Return a dashed line at the target, with its number: down the page on the x axis, else across on the y axis."""
    colours = ink(dark)
    chart = alt.Chart(alt.InlineData(values=[{"at": at, "word": word}]))
    rule = chart.mark_rule(strokeDash=[5, 4], strokeWidth=1.5, color=colours.text)
    text = chart.mark_text(color=colours.text, fontWeight="bold")
    if down:
        return [rule.encode(x="at:Q"), text.encode(x="at:Q", y=alt.value(-8), text="word:N")]
    return [rule.encode(y="at:Q"), text.encode(y="at:Q", x=alt.value(12), yOffset=alt.value(-9), text="word:N")]


def _layered(layers: Sequence[Any], bars: int, description: str, step: int = STEP) -> alt.LayerChart:
    return alt.LayerChart(layer=list(layers)).properties(
        height=step * bars + AXIS, description=description.replace("\n", " ")
    )
