"""Kill the app at random moments while edits come in; no acknowledged edit may be lost: ``python -m tests.browser.kills 50``.

The edits come over the connection that a browser uses, one after the other. One counts as acknowledged when the page has
said the new R0, or anything that comes after the edit is stored.
"""

from __future__ import annotations

import asyncio
import contextlib
import random
import sqlite3
import sys
import tempfile
import threading
import time
from pathlib import Path

from ngm.drafts import Store
from tests.benchmarks.browser import Light
from tests.browser.server import Server
from tests.screens.texts import grouped

__all__ = ["killed"]


async def _edits(visitor: Light, told: list[str], first: int) -> None:
    for step in range(first, first + 10_000):
        value = f"{2 + step / 1000:.3f}"
        await visitor.edit(value)
        told.append(value)


def killed(folder: Path, times: int, seed: int = 1) -> tuple[int, int]:
    """Kill the app so often; return how many edits were acknowledged, and how many of those are not in the store."""
    chance = random.Random(seed)
    server = Server(folder)
    store = Store(server.drafts)
    key = store.create(grouped(5), "ten.toml").id
    told: list[str] = []
    for k in range(times):
        server.start()
        visitor = Light(server.url, key, 0)

        async def session(visitor: Light = visitor, first: int = 1 + 100 * k) -> None:
            async with visitor:
                await _edits(visitor, told, first)

        def run(session=session) -> None:
            # The connection breaks when the server is killed: that is what this is about.
            with contextlib.suppress(Exception):
                asyncio.run(session())

        before = len(told)
        worker = threading.Thread(target=run)
        worker.start()
        deadline = time.monotonic() + 60
        while len(told) == before and time.monotonic() < deadline:
            time.sleep(0.02)  # it has begun: the kill falls among the edits
        time.sleep(chance.uniform(0, 2.0))
        server.kill()
        worker.join(30)
        with sqlite3.connect(server.drafts) as db:
            assert db.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    versions = store.versions(key, most=10**6)
    kept = {store.text(key, version.number) for version in versions}
    lost = [value for value in told if not any(f"beta = {{ value = {float(value)!r} }}" in text for text in kept)]
    # And the last one is what the draft shows, or the one after it that was on its way.
    assert told
    return len(told), len(lost)


def main(times: int) -> None:
    """Print what came of it."""
    with tempfile.TemporaryDirectory() as name:
        acknowledged, lost = killed(Path(name), times)
    print(f"{times} kills, {acknowledged} acknowledged edits, {lost} of them lost; the store is whole")
    if lost:
        raise SystemExit(1)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 50)
