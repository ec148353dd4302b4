"""Long computations in the background: they come, say how far they are, can be stopped, and keep what they found."""

from __future__ import annotations

import time

import pytest

from ngm.errors import Problem, ScenarioError
from ngm.progress import advance, expect
from ngm.screens import long_work


def slow(steps=10_000):
    def work():
        expect(steps)
        for _ in range(steps):
            time.sleep(0.005)
            advance()
        return "done"

    return work


@pytest.fixture(autouse=True)
def _nothing_kept():
    yield
    for question in long_work._kept.subjects():
        long_work.forget(question)


def test_an_answer_comes_and_is_kept():
    asked = []
    work = long_work.start("a", lambda: asked.append(1) or 42)
    assert work.wait(30)
    assert work.result == 42
    assert long_work.start("a", lambda: asked.append(1) or 43) is work
    assert asked == [1]


def test_it_says_how_far_it_is_and_stops():
    work = long_work.start("b", slow())
    deadline = time.monotonic() + 30
    while work.progress.share == 0 and time.monotonic() < deadline:
        time.sleep(0.01)
    assert 0 < work.progress.share < 1
    work.stop()
    assert work.wait(30)
    assert work.stopped
    assert work.result is None
    assert work.failed is None


def test_what_nobody_waits_for_is_stopped_and_begun_anew(monkeypatch):
    monkeypatch.setattr(long_work.Work, "patience", 0.1)
    work = long_work.start("c", slow())
    deadline = time.monotonic() + 30
    while not work.abandoned and time.monotonic() < deadline:
        time.sleep(0.05)
    assert work.abandoned
    monkeypatch.undo()
    again = long_work.start("c", lambda: "quick")
    assert again is not work
    assert again.wait(30)
    assert again.result == "quick"


def test_what_is_wrong_with_the_question_is_kept():
    def wrong():
        raise ScenarioError(Problem("draws", "are none."))

    work = long_work.start("d", wrong)
    assert work.wait(30)
    assert [str(problem) for problem in work.problems] == ["draws: are none."]


def test_a_fault_is_handed_on():
    work = long_work.start("e", lambda: 1 / 0)
    assert work.wait(30)
    assert isinstance(work.failed, ZeroDivisionError)


def test_only_so_many_are_kept(monkeypatch):
    monkeypatch.setattr(long_work._kept, "most", 3)
    for k in range(6):
        assert long_work.start(("f", k), lambda k=k: k).wait(30)
    assert long_work._kept.subjects() == [("f", 3), ("f", 4), ("f", 5)]
