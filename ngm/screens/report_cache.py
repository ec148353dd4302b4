"""Reports, kept by content like the results that they are written from."""

from __future__ import annotations

from dataclasses import dataclass

import streamlit as st

import ngm
from ngm.errors import NgmError, Problem
from ngm.reporting.make import Report
from ngm.reporting.make import compose as make
from ngm.reporting.narrative import SECTIONS

__all__ = ["Asked", "compose", "page"]


@dataclass(frozen=True, slots=True)
class Asked:
    """What a report has only where it is asked for: draws (0: none), a supply, a formula, the text of another version."""

    draws: int = 0
    seed: int = 0
    supply: float | None = None
    efficacy: float = 1.0
    formula: str = ""
    before: tuple[str, str | None] | None = None


@st.cache_resource(max_entries=16, show_spinner="Writing the report …")
def compose(text: str, folder: str | None, without: tuple[str, ...], asked: Asked) -> Report | tuple[Problem, ...]:
    """Return the report on a scenario text without some parts, or the problems that stand in its way."""
    sections = [key for key in SECTIONS if key not in without]
    try:
        return make(
            ngm.loads(text, folder=folder),
            sections=sections,
            draws=asked.draws or None,
            seed=asked.seed,
            supply=asked.supply,
            sharing={} if asked.efficacy == 1 else {"efficacy": asked.efficacy},
            formula=asked.formula or None,
            before=None if asked.before is None else ngm.loads(asked.before[0], folder=asked.before[1]),
        )
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=8, show_spinner="Writing the preview …")
def page(text: str, folder: str | None, without: tuple[str, ...], asked: Asked) -> str:
    """Return the report as one HTML page; it runs nothing and fetches nothing."""
    made = compose(text, folder, without, asked)
    return made.files(".html").main.decode("utf-8") if isinstance(made, Report) else ""
