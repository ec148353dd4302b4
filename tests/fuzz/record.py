"""What all runs together have done: counts that add up, inputs worth keeping, crashes, in `.cache/fuzz/TARGET/`."""

from __future__ import annotations

import fcntl
import hashlib
import json
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:  # coverage is seen only of what is imported by the fuzzer itself
    from tests.fuzz.judge import Verdict

__all__ = ["TARGETS", "Record"]

#: The names in `targets.TARGETS`.
TARGETS = ("parse", "latex", "scenario", "matrix", "solve")
HOME = Path(__file__).parents[2] / ".cache" / "fuzz"


class Record:
    """Counts of one target. Several processes may add to them at once."""

    def __init__(self, target: str, home: Path = HOME) -> None:
        self.folder = home / target
        self.corpus = self.folder / "corpus"
        self.crashes = self.folder / "crashes"
        for folder in (self.corpus, self.crashes):
            folder.mkdir(parents=True, exist_ok=True)
        self.waiting: dict[str, float] = {}

    def count(self, verdict: Verdict, data: bytes) -> None:
        """Count one execution; keep the input of a crash, one for each place in the program."""
        self.waiting["executions"] = self.waiting.get("executions", 0) + 1
        self.waiting[verdict.kind] = self.waiting.get(verdict.kind, 0) + 1
        if verdict.kind == "crash":
            self.keep(verdict, data)

    def count_crash(self, verdict: Verdict, data: bytes) -> None:
        """Count one more fault of an execution that has been counted."""
        self.add(crash=1)
        self.keep(verdict, data)

    def keep(self, verdict: Verdict, data: bytes) -> None:
        """Keep the input of a crash, unless one at the same place is there already."""
        name = hashlib.sha256(verdict.place.encode()).hexdigest()[:12]
        if not (self.crashes / name).exists():
            (self.crashes / name).write_bytes(data)
            (self.crashes / f"{name}.txt").write_text(f"{verdict.place}\n\n{verdict.told}\n", encoding="utf-8")

    def add(self, **counts: float) -> None:
        """Count something else: seconds, runs."""
        for name, number in counts.items():
            self.waiting[name] = self.waiting.get(name, 0) + number

    def save(self) -> dict[str, float]:
        """Add what waits to the counts on disk; return the sums."""
        with (self.folder / "counts.json").open("a+", encoding="utf-8") as stream:
            fcntl.flock(stream, fcntl.LOCK_EX)
            stream.seek(0)
            old = stream.read()
            sums: dict[str, float] = json.loads(old) if old else {}
            for name, number in self.waiting.items():
                sums[name] = sums.get(name, 0) + number
            stream.seek(0)
            stream.truncate()
            stream.write(json.dumps(sums, indent=1) + "\n")
        self.waiting.clear()
        return sums

    def found(self) -> list[tuple[str, Path]]:
        """Return the crashes kept: where in the program, and the file with the input."""
        return [
            (path.read_text(encoding="utf-8").partition("\n")[0], path.with_suffix(""))
            for path in sorted(self.crashes.glob("*.txt"))
        ]
