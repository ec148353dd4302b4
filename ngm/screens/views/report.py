"""The report: its words, a choice of parts, downloads in five forms, and a preview."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Callable

import streamlit as st

from ngm.reporting.forms import FORMS
from ngm.reporting.make import Report
from ngm.screens import parts, report_cache, report_choices, state
from ngm.screens.parts import Shown


def downloads(made: Report, name: str) -> None:
    """Place a button for each form; the form is written when its button is pressed."""
    places = [place for _ in range(2) for place in st.columns(3)]
    for place, (ending, label) in zip(places, FORMS.items(), strict=False):
        packed = ending in {".md", ".tex"}
        place.download_button(
            f"{label}, with figures (zip)" if packed else label,
            content(made, ending, name),
            f"{name}.zip" if packed else f"{name}{ending}",
            on_click="ignore",
            key=f"report.download{ending}",
            width="stretch",
        )
    places[-1].download_button(
        "All numbers (JSON)",
        made.companion_text,
        f"{name}.json",
        on_click="ignore",
        key="report.companion",
        width="stretch",
    )


def content(made: Report, ending: str, name: str) -> Callable[[], bytes]:
    """Return a function that writes a form; one with figures beside it comes as a zip file."""

    def write() -> bytes:
        files = made.files(ending, name)
        if not files.beside:
            return files.main
        packed = io.BytesIO()
        with zipfile.ZipFile(packed, "w", zipfile.ZIP_DEFLATED) as archive:
            archive.writestr(f"{name}{ending}", files.main)
            for file, data in files.beside.items():
                archive.writestr(file, data)
        return packed.getvalue()

    return write


def show(shown: Shown) -> None:
    """Place the choice, the downloads and the preview."""
    without = report_choices.left_out()
    asked = report_choices.asked()
    if asked is None:
        return
    made = report_cache.compose(shown.text, shown.folder, without, asked)
    if not isinstance(made, Report):
        parts.problem_box(made, "that keep the report from being written")
        return
    now = state.current().now
    name = "".join(
        c if c.isalnum() or c in "-_" else "-" for c in (now.name if now else "report").removesuffix(".toml")
    )
    st.subheader("Save it")
    downloads(made, name or "report")
    st.subheader("Preview")
    if parts.switch("Show the preview", "report.preview"):
        st.iframe(report_cache.page(shown.text, shown.folder, without, asked), height=900, alt="The report")


def page() -> None:
    """Show the page."""
    st.title("Report")
    st.markdown("The derivation, ready to hand in: every number in it is one of those on the other pages.")
    report_choices.words()
    shown = parts.results()
    if shown is not None:
        parts.headline(shown.solution)
        show(shown)
    parts.cautions()


page()
