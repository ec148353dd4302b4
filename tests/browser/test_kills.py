"""A few kills of the app among edits; `python -m tests.browser.kills 50` makes more."""

from __future__ import annotations

from tests.browser.kills import killed


def test_no_acknowledged_edit_is_lost_when_the_app_is_killed(tmp_path):
    acknowledged, lost = killed(tmp_path, 3)
    assert acknowledged >= 3
    assert lost == 0
