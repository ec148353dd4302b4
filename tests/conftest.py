"""For all tests: drafts go to a place of their own, never to that of the person who runs them."""

from __future__ import annotations

import pytest
from hypothesis import settings

# A busy machine is slow, and that is no fault of the code: speed is measured in tests/benchmarks, as ratios.
settings.register_profile("no deadline", deadline=None)
settings.load_profile("no deadline")


@pytest.fixture(autouse=True)
def _own_drafts(tmp_path_factory, monkeypatch):
    monkeypatch.setenv("NGM_DRAFTS", str(tmp_path_factory.getbasetemp() / "drafts.sqlite"))
