"""Long work as a page shows it: how far it is and a way to stop it, and then the answer."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import streamlit as st

from ngm.screens import long_work, parts

__all__ = ["worked"]

#: Seconds between two looks at how far the work is.
POLL = 0.5


def worked(
    field: str, what: str, question: tuple[object, ...], function: Callable[[], Any], title: str = "with these draws"
) -> Any:
    """Return the answer to a question, worked out in the background; None, with how far it is and a stop, until then.

    `field`: of the widgets; `what`: what is under way, in words; `title`: above what is wrong with the question.
    """
    work = long_work.start(question, function)
    if work.stopped and not work.abandoned:
        st.info(f"Stopped: {what}.")
        if st.button("Begin again", key=f"{field}.again"):
            long_work.forget(question)
            st.rerun()
        return None
    if not work.wait(long_work.GRACE):
        _waiting(field, what, question, function)
        return None
    if work.failed is not None:
        long_work.forget(question)
        raise work.failed
    if work.problems:
        parts.problem_box(work.problems, title)
        return None
    return work.result


@st.fragment(run_every=POLL)
def _waiting(field: str, what: str, question: tuple[object, ...], function: Callable[[], Any]) -> None:
    work = long_work.start(question, function)
    if work.wait(0) or work.stopped:
        st.rerun()
    share = work.progress.share
    st.progress(share, text=f"{what}: {share:.0%}")
    if st.button("Stop", key=f"{field}.stop"):
        work.stop()
        st.rerun()
