"""What the sections of the page on control ask: fields that are kept, a button before long work, the same command line."""

from __future__ import annotations

import hashlib
import math
import shlex
from collections.abc import Sequence
from typing import Any

import streamlit as st

from ngm.errors import NgmError, Problem
from ngm.screens import parts, state
from ngm.typed import number

__all__ = ["Entries", "asked", "cautions", "choice", "command", "common", "option", "picked", "several"]

#: What is said below a strength or a coverage.
ASSURANCE = "This holds at the values of the scenario. Page Sensitivity finds how much is enough in most of the draws."


class Entries:
    """Fields for numbers, and what is wrong with what is typed in them."""

    def __init__(self) -> None:
        self.problems: list[Problem] = []

    def number(self, label: str, field: str, default: str, place: Any, hint: str = "") -> float | None:
        """Place a field; return the number typed there, None (and a problem) where it is none; empty means `default`."""
        typed = place.text_input(label, value=state.recall(field, default), key=field, help=hint or None)
        state.remember(field, typed)
        return self.read(typed if typed.strip() else default, label)

    def positive(self, label: str, field: str, default: str, place: Any, hint: str = "") -> float | None:
        """As `number`, for what must be above 0."""
        value = self.number(label, field, default, place, hint)
        if value is not None and not (0 < value < math.inf):
            self.problems.append(Problem(label, "a number above 0 is needed."))
            return None
        return value

    def read(self, text: str, label: str) -> float | None:
        """Return the number that a text says; None, with the problem kept, where it is none."""
        try:
            return number(text, label)
        except NgmError as error:
            self.problems.extend(error.problems)
            return None


def choice(label: str, options: Sequence[str], field: str) -> str:
    """Place a choice of one that stays as it is left, also on other pages."""
    held = state.recall(field)
    index = options.index(held) if held in options else 0
    chosen = st.selectbox(label, options, index=index, key=field)
    state.remember(field, chosen)
    return chosen


def picked(label: str, options: Sequence[str], field: str, nothing: str) -> tuple[str, ...]:
    """Place a choice of several that stays as it is left, also on other pages. `nothing`: what an empty one means."""
    held = [name for name in state.recall(field).split("\n") if name in options]
    chosen = st.multiselect(label, options, default=held, key=field, placeholder=nothing)
    state.remember(field, "\n".join(chosen))
    return tuple(chosen)


def common(names: Sequence[str]) -> tuple[float, tuple[str, ...]] | None:
    """Ask for the number to be reached and for the interventions in force besides; None where it is no number."""
    entries = Entries()
    left, right = st.columns([1, 2])
    target = entries.number("Number to be reached", "control.target", "1", left, "1: from there on it dies out.")
    with right:
        besides = picked("In force besides", names, "control.besides", "nothing") if names else ()
    parts.problem_box(entries.problems)
    return None if target is None else (target, besides)


def asked(field: str, label: str, question: object) -> bool:
    """Place a button; return whether it was pressed for this very question.

    What takes long is computed when it is asked for, and shown again on every later visit until the question changes.
    """
    token = hashlib.sha256(repr(question).encode()).hexdigest()[:16]
    if st.button(label, key=f"{field}.go", type="primary"):
        state.remember(field, token)
    held = state.recall(field)
    if held and held != token:
        st.caption("The scenario or an entry has changed since: press the button for the new result.")
    return held == token


def cautions(form: str = "flows") -> None:
    """Say what numbers about control are not. Stands below all of them."""
    parts.cautions(form)
    if form == "projection":
        st.info(
            "**Before anybody acts on these numbers**\n"
            "- What each intervention does was typed in: it is an assumption of the scenario, and only as good as its source.\n"
            "- An effort computed at point estimates is too small about half the time: leave a margin.\n"
            "- Below 1 the population dies out in the end, while all stays as it is; how soon is not said here."
        )
        return
    st.info(
        "**Before anybody acts on these numbers**\n"
        "- What each intervention does was typed in: it is an assumption of the scenario, and only as good as its source.\n"
        "- With anything in force the number is a control reproduction number, not R0.\n"
        "- An effort or coverage computed at point estimates is too small about half the time: leave a margin.\n"
        "- Below 1 the infection dies out in the end; how soon, and how many fall ill until then, is not said here.\n"
        "- The best share lowers the reproduction number most. It weighs neither severity nor deaths, fairness, rights or "
        "what can be delivered: who gets a vaccine first is decided by the authority responsible, on all of these."
    )


def option(name: str, value: float, default: float = 1.0) -> list[str]:
    """Return an option of the command line; nothing where it has its default."""
    return [] if value == default else [name, f"{value!r}".removesuffix(".0")]


def several(name: str, values: Sequence[str]) -> list[str]:
    """Return an option of the command line with several values; nothing where there is none."""
    return [name, *values] if values else []


def command(verb: str, *arguments: str) -> None:
    """Show the command that prints the same figures."""
    now = state.current().now
    name = now.name if now is not None else "FILE"
    st.caption("The same figures on the command line, for this scenario downloaded:")
    st.code(shlex.join(["python", "-m", "ngm", verb, name, *arguments]), language=None, wrap_lines=True)
