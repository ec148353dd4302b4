"""Formulas in the background: they come, they can be stopped, and nobody's are stopped for want of interest."""

from __future__ import annotations

import time

from ngm.screens import jobs
from tests.analysis.test_worker import endless


def test_formulas_come():
    job = jobs.start(endless(2), None)
    assert job.wait(60)
    assert job.solution.closed_form is not None
    assert jobs.ready(endless(2), None) is job.solution
    assert jobs.start(endless(2), None) is job


def test_a_stop_ends_the_work_and_the_numbers_stand():
    text = endless()
    job = jobs.start(text, None)
    assert not job.wait(0.5)
    begun = time.monotonic()
    job.stop()
    assert job.wait(30)
    assert time.monotonic() - begun < 9  # the limit of time would have come later
    assert job.solution is None or job.solution.closed_form is None
    assert jobs.ready(text, None) is None
    jobs.forget(text, None)


def test_what_nobody_waits_for_is_stopped_and_begun_anew(monkeypatch):
    monkeypatch.setattr(jobs.Job, "patience", 0.2)
    text = endless(46)
    job = jobs.start(text, None)
    deadline = time.monotonic() + 30
    while not job.abandoned and time.monotonic() < deadline:
        time.sleep(0.1)
    assert job.abandoned
    again = jobs.start(text, None)
    assert again is not job
    again.stop()
    jobs.forget(text, None)
