"""Start the app: `streamlit run app.py`.

The slow libraries are imported in a thread as soon as nobody is being served, and then taken out of the garbage
collector's sight: Streamlit collects after every rerun, and walking through their objects each time costs more than
most pages do.
"""

from __future__ import annotations

import contextlib
import logging
import threading
from collections.abc import AsyncIterator

import streamlit as st
from starlette.middleware import Middleware
from starlette.types import ASGIApp, Receive, Scope, Send

from ngm.screens import warm


class Noted:
    """Tell the thread that warms up of each request, so that it steps back."""

    def __init__(self, inner: ASGIApp) -> None:
        self.inner = inner

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Note the request and pass it on; being asked whether the server is well is not a visit."""
        if scope["type"] != "lifespan" and scope["path"] != "/_stcore/health":
            warm.asked()
        await self.inner(scope, receive, send)


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
    threading.Thread(target=warm.warm_up, name="warm-up", daemon=True).start()
    yield


app = st.App("ngm/screens/main.py", lifespan=lifespan, middleware=[Middleware(Noted)], on_script_error=report_error)
