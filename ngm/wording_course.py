"""Below one, the first weeks and the season in plain sentences: one wording for pages, command line and report."""

from __future__ import annotations

from ngm.results_course import Course, Threshold

__all__ = ["course_words", "endemic_words", "quantity", "threshold_words"]


def _figure(value: float | None) -> str:
    return "-" if value is None else f"{value:.6g}"


def quantity(result: Threshold, value: float | None) -> str:
    """Return a value of what is moved, with its name and unit."""
    unit = f" {result.unit}" if result.unit else ""
    return f"{result.along} = {_figure(value)}{unit}"


def threshold_words(result: Threshold) -> list[str]:
    """Return what the result says, the main sentence first."""
    number = f"the {result.label}" if result.label != "R0" else "R0"
    upper = number[0].upper() + number[1:]
    if result.direction is None:
        return [f"Not computed whether infection can persist below a number of 1: {result.why}"]
    if result.direction == "forward":
        return [
            f"Forward at 1 as {result.along} moves: endemic states appear where {number} passes 1, at "
            f"{quantity(result, result.at_one)}, and not before. Near 1, below one means that infection dies out.",
            *_far(result),
        ]
    out = [
        f"Backward at 1 as {result.along} moves: infection that is there already can persist although {number} is below 1."
    ]
    if result.turning is not None:
        side = "below" if result.rising else "above"
        other = "above" if result.rising else "below"
        out.append(
            f"It cannot persist {side} {quantity(result, result.turning)}, where {number} is {_figure(result.R_turning)}. From "
            f"there to {quantity(result, result.at_one)}, where {number} is 1, two outcomes are possible: a few cases die out, "
            f"many stay; {other} that it spreads from a single case."
        )
    if result.R_now is not None and result.R_now < 1:
        persists = any(e.stable for e in result.endemic)
        if persists:
            out.insert(
                0,
                f"{upper} is {_figure(result.R_now)}, below one, yet infection can persist: at "
                f"{quantity(result, result.now)} there is a stable endemic state with "
                f"{_figure(max(e.infected for e in result.endemic))} infected.",
            )
        elif result.turning is not None:
            out.insert(
                0,
                f"{upper} is {_figure(result.R_now)}, below one, and at {quantity(result, result.now)} no endemic state is "
                "left on the curve that leaves the infection-free state: here below one is enough.",
            )
    return out


def _far(result: Threshold) -> list[str]:
    """Return a sentence where a forward curve turns back further on."""
    below = [e for e in result.endemic if e.stable] if result.R_now is not None and result.R_now < 1 else []
    if below:
        return [
            f"Further on the curve turns back: at {quantity(result, result.now)} there is a stable endemic state although the "
            f"number is {_figure(result.R_now)}."
        ]
    return []


def endemic_words(result: Threshold) -> list[str]:
    """Return a line for each endemic state at the values in force."""
    return [
        f"{'stable' if e.stable else 'unstable'}: {_figure(e.infected)} infected ("
        + ", ".join(f"{name} = {_figure(value)}" for name, value in list(e.state.items())[:12])
        + (", …" if len(e.state) > 12 else "")
        + ")"
        for e in result.endemic
    ]


def course_words(result: Course) -> list[str]:
    """Return what the first weeks show, beside what was expected."""
    unit = result.time_unit
    if result.growth_rate is None:
        return ["Nothing is expected to be left after a step."]
    rate = f"{_figure(result.growth_rate)} per {unit}"
    settled = [c for c in result.courses if c.settled]
    if len(settled) == len(result.courses):
        seen = "From every seed, growth and mix come to what is expected"
    elif settled:
        named = ", ".join(c.seed for c in result.courses if not c.settled)
        seen = f"From most seeds growth and mix come to what is expected; not yet, or never, from {named}"
    else:
        seen = "Growth and mix have not come to what is expected by then"
    out = [f"Expected: growth at {rate}. {seen} ({_figure(result.horizon)} {unit})."]
    if result.depleted > 0.01:
        out.append(
            f"By the end up to {100 * result.depleted:.3g} % of the susceptible are used up: growth slows for want of them."
        )
    return out
