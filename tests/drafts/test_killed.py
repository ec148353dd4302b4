"""Killed while it writes, a program loses no edit that was acknowledged, and the file stays whole."""

from __future__ import annotations

import random
import sqlite3
import subprocess
import sys
import time
from pathlib import Path

from ngm.drafts import Store

ROOT = Path(__file__).resolve().parents[2]
KILLS = 50


def run(path, key, name):
    return subprocess.Popen(
        [sys.executable, "-m", "tests.drafts.hammer", str(path), key, name], cwd=ROOT, stdout=subprocess.PIPE, text=True
    )


def told(writer):
    """Return what a killed writer said, whole lines only."""
    out = writer.stdout.read()
    writer.stdout.close()
    writer.wait()
    return [tuple(line.split()[:2]) for line in out[: out.rfind("\n") + 1].splitlines()]


def stored(store, key):
    return [tuple(store.text(key, v.number).split()[:2]) for v in store.versions(key, most=10**6)]


def test_fifty_kills_at_random_moments(tmp_path):
    path = tmp_path / "drafts.sqlite"
    store = Store(path)
    key = store.create("start", "a.toml").id
    chance = random.Random(20)
    acknowledged = []
    for k in range(KILLS):
        writer = run(path, key, f"w{k}")
        first = writer.stdout.readline()  # it has begun: the kill falls among the writes, not among the imports
        time.sleep(chance.uniform(0, 0.06))
        writer.kill()
        acknowledged += [tuple(first.split()[:2]), *told(writer)]
        draft = store.get(key)
        if acknowledged and k % 10 == 9:
            with sqlite3.connect(path) as db:
                assert db.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        # The last acknowledged edit is the head, or the one that was on its way is.
        word, number = draft.text.split()[:2]
        assert (word, int(number)) in {(acknowledged[-1][0], int(acknowledged[-1][1]) + more) for more in (0, 1)}
    assert len(acknowledged) > 2 * KILLS
    assert set(acknowledged) <= set(stored(store, key))
    numbers = [v.number for v in store.versions(key, most=10**6)]
    assert numbers == list(range(len(numbers), 0, -1))


def test_two_processes_at_once_lose_nothing(tmp_path):
    path = tmp_path / "drafts.sqlite"
    store = Store(path)
    key = store.create("start", "a.toml").id
    writers = [run(path, key, name) for name in ("a", "b")]
    firsts = [tuple(writer.stdout.readline().split()[:2]) for writer in writers]
    time.sleep(0.7)
    for writer in writers:
        writer.kill()
    said = [told(writer) for writer in writers]
    kept = stored(store, key)
    assert {*firsts, *said[0], *said[1]} <= set(kept)
    assert len(kept) == len(set(kept))
