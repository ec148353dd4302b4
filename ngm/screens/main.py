"""The router: builds the menu from the registry, runs the chosen page, then shows in the side bar how things stand."""

from __future__ import annotations

import streamlit as st

from ngm.screens import desk, finding, keys, parts, signing, state, warm
from ngm.screens.registry import PAGES


def main() -> None:
    """Run one page."""
    # The icon is an emoji: a named one would be fetched from another server.
    st.set_page_config(page_title="Next-generation matrices", page_icon="🧮", layout="wide")
    offered = [st.Page(entry.path, title=entry.title, default=entry is PAGES[0]) for entry in PAGES]
    allowed = signing.is_open(signing.who())
    page = st.navigation(offered, position="sidebar" if allowed else "hidden", expanded=True)
    if not allowed:
        signing.show()
        return
    told = state.arrive()
    status = st.sidebar.container()
    notices = st.container()
    page.run()
    finding.arrive()
    keys.listen()
    parts.explanations(next((entry.explains for entry in PAGES if entry.title == page.title), ()))
    # After the page, so that both speak of the text as the page has just left it.
    with notices:
        desk.notices(told)
    with status:
        desk.status()


with warm.served():
    main()
