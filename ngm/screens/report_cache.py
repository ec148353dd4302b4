"""Reports, kept by content like the results that they are written from."""

from __future__ import annotations

import streamlit as st

import ngm
from ngm.errors import NgmError, Problem
from ngm.reporting.make import Report
from ngm.reporting.make import compose as make
from ngm.reporting.narrative import SECTIONS

__all__ = ["compose", "page"]


@st.cache_resource(max_entries=16, show_spinner="Writing the report …")
def compose(text: str, folder: str | None, without: tuple[str, ...]) -> Report | tuple[Problem, ...]:
    """Return the report on a scenario text without some parts, or the problems that stand in its way."""
    sections = [key for key in SECTIONS if key not in without]
    try:
        return make(ngm.loads(text, folder=folder), sections=sections)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=8, show_spinner="Writing the preview …")
def page(text: str, folder: str | None, without: tuple[str, ...]) -> str:
    """Return the report as one HTML page; it runs nothing and fetches nothing."""
    made = compose(text, folder, without)
    return made.files(".html").main.decode("utf-8") if isinstance(made, Report) else ""
