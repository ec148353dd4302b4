"""For all tests: drafts go to a place of their own, never to that of the person who runs them."""

from __future__ import annotations

import pytest
from hypothesis import Phase, settings

# A busy machine is slow, and that is no fault of the code: speed is measured in tests/benchmarks, as ratios.
# The same examples in every run, and a failure is told at once: to make it smaller can take five minutes. To have it
# smaller: --hypothesis-profile smaller; to look for new ones: --hypothesis-profile hunt.
_NO_SHRINKING = (Phase.explicit, Phase.generate, Phase.target)
settings.register_profile("steady", deadline=None, derandomize=True, database=None, phases=_NO_SHRINKING)
settings.register_profile("smaller", deadline=None, derandomize=True, database=None)
settings.register_profile("hunt", deadline=None)
settings.load_profile("steady")


@pytest.fixture(autouse=True)
def _own_drafts(tmp_path_factory, monkeypatch):
    monkeypatch.setenv("NGM_DRAFTS", str(tmp_path_factory.getbasetemp() / "drafts.sqlite"))
