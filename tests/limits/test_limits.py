"""Each limit of the scenario format: at it a file is read, just past it refused in a line."""

from __future__ import annotations

from pathlib import Path

import pytest

from ngm.errors import ScenarioError
from tests.limits.inputs import LIMITS, Limit


@pytest.mark.parametrize("limit", LIMITS, ids=[limit[0] for limit in LIMITS])
def test_at_the_limit_and_past_it(limit: Limit, tmp_path: Path) -> None:
    _, at, past, part = limit
    at(tmp_path)
    with pytest.raises(ScenarioError) as caught:
        past(tmp_path)
    told = str(caught.value)
    assert part in told
    assert len(told) < 2000
