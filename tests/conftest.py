"""For all tests: drafts go to a place of their own, never to that of the person who runs them."""

from __future__ import annotations

import pytest


@pytest.fixture(autouse=True)
def _own_drafts(tmp_path_factory, monkeypatch):
    monkeypatch.setenv("NGM_DRAFTS", str(tmp_path_factory.getbasetemp() / "drafts.sqlite"))
