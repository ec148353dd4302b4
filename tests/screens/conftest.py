"""For tests of pages without a browser: nothing asks again for formulas on their way, so a page waits until they are there."""

from __future__ import annotations

import pytest

from ngm.screens import desk


@pytest.fixture(autouse=True)
def _with_formulas(monkeypatch):
    monkeypatch.setattr(desk, "GRACE", 30.0)
