"""A short hunt by mutation in each run of the tests, every input that once crashed, and the tools of the hunt itself.

The long hunts, guided by coverage, are `python -m tests.fuzz`.
"""

from __future__ import annotations

import random
import time
from pathlib import Path

import pytest

from ngm.errors import NgmError, Problem
from tests.fuzz import record
from tests.fuzz.judge import Judge, Verdict
from tests.fuzz.mutation import mutated
from tests.fuzz.record import Record
from tests.fuzz.targets import TARGETS

#: What the hunts found, each once a crash: target, input.
FOUND = [
    # decimal.Overflow: the absolute value of a cell was rounded
    ("matrix", b"\t\t\n from4from4,5,6\n 1e999999999,5,6"),
    # a unit with a number in it was worked out as a fraction of a thousand million digits
    ("scenario", TARGETS["scenario"].seeds[0].replace(b'"1/week"', b'"1e-999999999/week"')),
    ("scenario", TARGETS["scenario"].seeds[0].replace(b'"1/week"', b'"1e99999999999999999999/week"')),
    ("matrix", b"group,value\n0-4,-1e999999999\n5+,2\nx,3\n"),
]


@pytest.mark.parametrize("name", TARGETS)
def test_short_hunt(name: str) -> None:
    target = TARGETS[name]
    judge, rng = Judge(target.run), random.Random(name)
    kinds = set()
    for _ in range(60 if name == "solve" else 250):
        data = mutated(rng.choice(target.seeds), rng, target.words, target.seeds, target.most)
        verdict = judge(data)
        assert verdict.kind != "crash", (data, verdict.told)
        kinds.add(verdict.kind)
    assert kinds == {"accepted", "refused"}


@pytest.mark.parametrize("name", TARGETS)
def test_seeds_are_accepted(name: str) -> None:
    """A hunt that starts from inputs that are refused would see the beginning of the reader only."""
    judge = Judge(TARGETS[name].run)
    assert [judge(seed).kind for seed in TARGETS[name].seeds] == ["accepted"] * len(TARGETS[name].seeds)


@pytest.mark.parametrize(("name", "data"), FOUND)
def test_what_once_crashed(name: str, data: bytes) -> None:
    verdict = Judge(TARGETS[name].run)(data)
    assert verdict.kind != "crash", verdict.told


def _raises(error: BaseException) -> Judge:
    def run(data: bytes) -> None:
        raise error

    return Judge(run)


def test_what_counts_as_a_crash() -> None:
    assert _raises(NgmError(Problem("a", "b")))(b"").kind == "refused"
    assert _raises(NgmError(Problem("", "")))(b"").kind == "crash"
    verdict = _raises(ZeroDivisionError("x"))(b"")
    assert verdict.kind == "crash"
    assert verdict.place.startswith("ZeroDivisionError")


def test_much_memory_is_a_crash(monkeypatch: pytest.MonkeyPatch) -> None:
    sizes = iter([100_000_000, 700_000_000, 700_000_000])
    monkeypatch.setattr("tests.fuzz.judge._peak", lambda: next(sizes))
    monkeypatch.setattr("tests.fuzz.judge._SHORT", 0)
    judge = Judge(lambda data: None)
    assert judge(b"").kind == "crash"
    assert judge(b"").kind == "accepted"


def test_what_never_ends_is_broken_off(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tests.fuzz.judge._BROKEN_OFF", 0.05)
    monkeypatch.setattr("tests.fuzz.judge._LOOK", 0.01)

    def run(data: bytes) -> None:
        while True:
            pass

    with Judge(run) as judge:
        verdict = judge(b"")
    assert verdict.kind == "crash"
    assert verdict.place.startswith("time")


def test_what_takes_too_long_is_a_crash(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tests.fuzz.judge.MOST_SECONDS", 0.05)
    monkeypatch.setattr("tests.fuzz.judge._LOOK", 0.01)

    def run(data: bytes) -> None:
        start = time.process_time()
        while time.process_time() - start < 0.5:
            pass

    with Judge(run) as judge:
        assert judge(b"").place == "time"


def test_counts_add_up_over_runs_and_processes(tmp_path: Path) -> None:
    first, second = Record("parse", tmp_path), Record("parse", tmp_path)
    for _ in range(3):
        first.count(Verdict("accepted"), b"x")
    second.count(Verdict("crash", "why", "somewhere:1"), b"boom")
    second.count(Verdict("crash", "why again", "somewhere:1"), b"boom 2")
    first.save()
    assert second.save() == {"executions": 5, "accepted": 3, "crash": 2}
    assert second.save() == {"executions": 5, "accepted": 3, "crash": 2}
    ((place, path),) = first.found()
    assert place == "somewhere:1"
    assert path.read_bytes() == b"boom"


def test_a_seed_gives_the_same_inputs_again() -> None:
    target = TARGETS["scenario"]
    draws = [
        [mutated(target.seeds[0], random.Random(k), target.words, target.seeds, 999) for k in range(20)] for _ in "ab"
    ]
    assert draws[0] == draws[1]
    assert len(set(draws[0])) > 15
    assert max(map(len, draws[0])) <= 999


def test_the_command_knows_every_target() -> None:
    assert list(record.TARGETS) == list(TARGETS)
