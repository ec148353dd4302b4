"""Bars over the types: the stable distribution, the reproductive values, the critical efforts."""

from __future__ import annotations

from typing import Any

import altair as alt

from ngm.charts.style import ink, short
from ngm.results import ControlResult, Projected, Solution

__all__ = ["MOST_BARS", "efforts", "reproductive_values", "stable_distribution", "stage_shares", "stage_values"]

#: More bars than this are no picture; the table beside it has them all.
MOST_BARS = 60

#: Height of one bar with its gap, and of the axis with its title (the height given to a page includes it), pixels.
STEP = 30
AXIS = 62


def stable_distribution(solution: Solution, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the share of each type among new infections, generation after generation (right Perron vector of K).

    Shares have no unit and sum to 1. None where the vector does not exist or has more than `MOST_BARS` entries.
    """
    if solution.right is None or len(solution.right) > MOST_BARS:
        return None
    rows = _rows(solution, solution.right)
    return _bars(rows, "share of new infections", "Stable distribution over the types at infection", dark)


def reproductive_values(solution: Solution, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw what one infection of each type counts for all later generations (left Perron vector of K).

    Relative values without unit, scaled so that their mean over the stable distribution is 1. None where the vector
    does not exist or has more than `MOST_BARS` entries.
    """
    if solution.left is None or len(solution.left) > MOST_BARS:
        return None
    rows = _rows(solution, solution.left)
    return _bars(rows, "reproductive value (relative)", "Reproductive value of each type", dark)


def stage_shares(about: Projected, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw the share of each stage of a population in the long run (right vector of F + T).

    Shares have no unit and sum to 1. None where the vector does not exist or has more than `MOST_BARS` entries.
    """
    return _stages(about, about.stable_structure, "share in the long run", "Stable structure of the population", dark)


def stage_values(about: Projected, *, dark: bool = False) -> alt.LayerChart | None:
    """Draw what one member of each stage counts for the size in the long run (left vector of F + T).

    Relative values without unit, 1 for the first stage that is not 0. None where the vector does not exist or has more
    than `MOST_BARS` entries.
    """
    title = "Reproductive value of each stage"
    return _stages(about, about.reproductive_values, "reproductive value (relative)", title, dark)


def _stages(
    about: Projected, vector: tuple[float, ...] | None, axis: str, title: str, dark: bool
) -> alt.LayerChart | None:
    if vector is None or len(vector) > MOST_BARS:
        return None
    rows = [{"type": s, "value": v, "shown": short(v)} for s, v in zip(about.stages, vector, strict=True)]
    return _bars(rows, axis, title, dark)


def efforts(result: ControlResult, *, dark: bool = False, births: bool = False) -> alt.LayerChart | None:
    """Draw the critical effort of each type, and of each state, acted on alone; `births`: of a projected population.

    The critical effort is the share to remove, 1 - 1/T, from 0 to 1. Where T does not exist no effort on this target
    is enough, and the bar is replaced by the words "not enough alone". None where no bar would be left, or too many.
    """
    rows: list[dict[str, Any]] = []
    for single in result.type_reproduction:
        if len(single.types) == 1:
            what = "births into" if births else "infections of"
            rows.append(_effort(f"{what} {single.types[0]}", single.critical_effort))
    for state in result.state_reproduction:
        rows.append(_effort(f"{'births by' if births else 'infectivity of'} {state.state}", state.critical_effort))
    if len(rows) > MOST_BARS or not any(row["value"] for row in rows):
        return None
    return _bars(
        rows, "critical effort: share to remove (0 to 1)", "Critical effort for each target alone", dark, top=1.0
    )


def _effort(name: str, effort: float | None) -> dict[str, Any]:
    shown = "not enough alone" if effort is None else short(effort, 3)
    return {"type": name, "value": 0.0 if effort is None else effort, "shown": shown}


def _rows(solution: Solution, vector: tuple[float, ...]) -> list[dict[str, Any]]:
    rows: list[dict[str, Any]] = []
    for name, value in zip(solution.types_at_infection, vector, strict=True):
        label = solution.type_labels.get(name, name)
        rows.append({"type": name if label == name else f"{name}: {label}", "value": value, "shown": short(value)})
    return rows


def _bars(rows: list[dict[str, Any]], axis: str, title: str, dark: bool, top: float | None = None) -> alt.LayerChart:
    colours = ink(dark)
    scale = alt.Scale(domain=[0, top]) if top is not None else alt.Scale(domain=[0, 1.15 * _largest(rows)], nice=False)
    base = alt.Chart(alt.InlineData(values=rows)).encode(
        y=alt.Y("type:N", sort=None, title=None, axis=alt.Axis(labelLimit=150)),
        x=alt.X("value:Q", scale=scale, title=axis, axis=alt.Axis(tickCount=5)),
        tooltip=[alt.Tooltip("type:N", title="type"), alt.Tooltip("shown:N", title="value")],
    )
    marks = base.mark_bar(color=colours.first, height={"band": 0.6})
    # The number stands at the end of its bar, or inside it where the bar fills the axis.
    texts = base.mark_text(align="left", dx=4, color=colours.text).encode(text="shown:N")
    if top is not None:
        small = f"datum.value <= {0.8 * top}"
        inside = base.mark_text(align="right", dx=-4, color="#10141c" if dark else "#ffffff").encode(text="shown:N")
        layers: tuple[Any, ...] = (marks, texts.transform_filter(small), inside.transform_filter(f"!({small})"))
    else:
        layers = (marks, texts)
    spoken = "; ".join(f"{row['type']} {row['shown']}" for row in rows[:20])
    more = f"; and {len(rows) - 20} more" if len(rows) > 20 else ""
    return alt.LayerChart(layer=list(layers)).properties(
        height=STEP * len(rows) + AXIS, description=f"{title}, {axis}: {spoken}{more}."
    )


def _largest(rows: list[dict[str, Any]]) -> float:
    return max((row["value"] for row in rows), default=1.0) or 1.0
