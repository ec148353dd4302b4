"""Import the slow libraries ahead of time, in a thread that steps back while somebody is served. No Streamlit here.

Importing keeps the interpreter to itself: whoever comes while the server starts would wait for numbers and charts that
the first page does not need. So what every page needs comes first, and the rest when nobody is being served.
"""

from __future__ import annotations

import contextlib
import gc
import importlib
import logging
import sys
import threading
import time
from collections.abc import Iterator

__all__ = ["HEAVY", "LIGHT", "asked", "served", "warm_up"]

#: What every page needs. No module that declares a component of the browser: that is for the first page to do.
LIGHT = (
    "ngm.screens.state",
    "ngm.screens.forms",
    "ngm.screens.shelf",
    "ngm.charts.graphs",
    "ngm.meanings",
)

#: What the pages import when they first need it; a name that is missing is reported by the page that needs it.
HEAVY = (
    "numpy",
    "pyarrow",
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

#: Seconds without a request after which nobody is being served: a browser takes a while between two of its requests.
QUIET = 1.0
#: Seconds that the slow libraries wait for such a moment, all in all.
PATIENCE = 10.0
#: Seconds after which a thread that wants the interpreter is let in, while something is imported; otherwise 0.005.
TURN = 0.0005


class _Visits:
    """Who is being served: pages under way, and the time of the last request."""

    def __init__(self) -> None:
        self.lock = threading.Lock()
        self.under_way = 0
        self.last = 0.0


_visits = _Visits()


def asked() -> None:
    """Note that somebody has asked for something."""
    _visits.last = time.monotonic()


@contextlib.contextmanager
def served() -> Iterator[None]:
    """Note that a page is made, for as long as it takes."""
    with _visits.lock:
        _visits.under_way += 1
    try:
        yield
    finally:
        with _visits.lock:
            _visits.under_way -= 1
        # What is made has still to be sent and drawn.
        asked()


def warm_up(patience: float = PATIENCE) -> None:
    """Import what every page needs, then the slow libraries, and freeze what is in memory out of later collections."""
    usual = sys.getswitchinterval()
    sys.setswitchinterval(TURN)
    try:
        for name in LIGHT:
            _import(name)
        until = time.monotonic() + patience
        for name in HEAVY:
            while _busy() and time.monotonic() < until:
                time.sleep(0.02)
            _import(name)
    finally:
        sys.setswitchinterval(usual)
    gc.collect()
    gc.freeze()


def _busy() -> bool:
    return _visits.under_way > 0 or time.monotonic() - _visits.last < QUIET


def _import(name: str) -> None:
    try:
        importlib.import_module(name)
    except ImportError:
        logging.getLogger("ngm").exception("could not import %s ahead of time", name)
