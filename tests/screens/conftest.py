"""For tests of pages without a browser: nothing asks again for work on its way, so a page waits until it is done."""

from __future__ import annotations

import pytest

from ngm.screens import desk, long_work


@pytest.fixture(autouse=True)
def _with_formulas(monkeypatch):
    monkeypatch.setattr(desk, "GRACE", 30.0)
    monkeypatch.setattr(long_work, "GRACE", 60.0)
