"""What is imported ahead of time is there, and waits while somebody is served."""

import importlib.util
import threading

import pytest

from ngm.screens import warm


def test_every_name_can_be_imported():
    assert "ngm" in warm.HEAVY
    assert [name for name in (*warm.LIGHT, *warm.HEAVY) if importlib.util.find_spec(name) is None] == []


@pytest.fixture
def imported(monkeypatch):
    """Names instead of libraries, and nothing frozen: the rest of the tests goes on in this process."""
    names = []
    monkeypatch.setattr(warm, "LIGHT", ("first",))
    monkeypatch.setattr(warm, "HEAVY", ("second", "third"))
    monkeypatch.setattr(warm, "_import", names.append)
    monkeypatch.setattr(warm, "QUIET", 0.0)
    monkeypatch.setattr(warm.gc, "freeze", lambda: None)
    return names


def test_what_is_slow_waits_for_a_page_on_its_way(imported):
    thread = threading.Thread(target=warm.warm_up, args=(60.0,))
    with warm.served():
        thread.start()
        thread.join(0.3)
        assert thread.is_alive()
        assert imported == ["first"]
    thread.join(30)
    assert imported == ["first", "second", "third"]


def test_patience_ends(imported):
    with warm.served():
        warm.warm_up(0.05)
    assert imported == ["first", "second", "third"]


def test_a_page_that_fails_is_no_longer_served(imported):
    with pytest.raises(ValueError, match="broken"), warm.served():
        raise ValueError("broken")
    warm.warm_up(60.0)
    assert imported == ["first", "second", "third"]
