"""Start the app: `streamlit run app.py`.

The slow libraries are imported in a thread while the first page is on its way, and then taken out of the garbage
collector's sight: Streamlit collects after every rerun, and walking through their objects each time costs more than
most pages do.
"""

from __future__ import annotations

import contextlib
import gc
import importlib
import logging
import threading
from collections.abc import AsyncIterator

import streamlit as st

#: What the pages import when they first need it; a name that is missing is reported by the page that needs it.
HEAVY = (
    "numpy",
    "pandas",
    "altair",
    "scipy.sparse.csgraph",
    "sympy",
    "ngm",
    "ngm.charts.bars",
    "ngm.charts.control",
    "ngm.charts.graphs",
    "ngm.charts.mixing",
    "ngm.charts.outbreak",
    "ngm.charts.plane",
    "ngm.charts.sensitivity",
    "ngm.charts.spectrum",
    "ngm.expression.typeset",
    "ngm.analysis.solve",
    "ngm.analysis.control",
    "ngm.analysis.compare",
    "ngm.analysis.strength",
    "ngm.analysis.allocation",
    "ngm.analysis.mixing_scan",
    "ngm.analysis.plane",
    "ngm.analysis.uncertainty",
)


def warm_up() -> None:
    """Import the slow libraries, then freeze what is in memory out of later collections."""
    for name in HEAVY:
        try:
            importlib.import_module(name)
        except ImportError:
            logging.getLogger("ngm").exception("could not import %s ahead of time", name)
    gc.collect()
    gc.freeze()


def report_error(error: Exception) -> bool:
    """Log a mistake of the program and say so in plain words; True keeps Streamlit's own message away."""
    logging.getLogger("ngm").error("a page failed", exc_info=error)
    st.error(
        "**This page could not be finished.** That is a mistake of the program, not of your scenario; the server's log "
        "says more. Nothing you typed is lost: it can be downloaded on the page **Scenario**."
    )
    return True


@contextlib.asynccontextmanager
async def lifespan(_app: st.App) -> AsyncIterator[None]:
    """Warm up in the background for as long as the server starts."""
    threading.Thread(target=warm_up, name="warm-up", daemon=True).start()
    yield


app = st.App("ngm/screens/main.py", lifespan=lifespan, on_script_error=report_error)
