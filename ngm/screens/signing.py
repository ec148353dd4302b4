"""Signing in, where the server is set up for it: then nothing is shown to anybody who has not.

It is the framework's own sign-in (OpenID Connect), set up by a section `[auth]` in its file of secrets, or a proxy that
signs people in and names them in a header the server is told to trust. Without either there is no sign-in, nobody has a
name, and whoever reaches the server may use it.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import streamlit as st

__all__ = ["account", "is_open", "name", "show", "who"]


def who() -> Mapping[str, Any]:
    """Return what is known of the visitor: empty where no sign-in is set up."""
    return st.user.to_dict()


def is_open(visitor: Mapping[str, Any]) -> bool:
    """Return whether pages may be shown: signed in, or no sign-in set up."""
    return visitor.get("is_logged_in") is not False


def account(visitor: Mapping[str, Any]) -> str:
    """Return who owns what this visitor makes, or nothing for nobody.

    The provider's own number of the person, since addresses of mail change hands; the address where a proxy tells no more.
    """
    if visitor.get("is_logged_in") is False:
        return ""
    if visitor.get("sub"):
        return f"{visitor.get('iss', '')}|{visitor['sub']}"
    return str(visitor.get("email") or "").casefold()


def name(visitor: Mapping[str, Any]) -> str:
    """Return what a signed-in visitor is called, or nothing."""
    return str(visitor.get("name") or visitor.get("email") or visitor.get("sub") or "") if account(visitor) else ""


def show() -> None:
    """Ask to sign in."""
    st.title("Sign in")
    st.markdown("This server is for a team. Its drafts are shown to those who have signed in.")
    st.caption(
        "An address of a draft that was passed on to you leads there once you are signed in: open it again then."
    )
    st.button("Sign in", type="primary", on_click=st.login, key="signing.in")
