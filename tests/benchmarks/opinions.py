"""The second opinions as whole processes, on a model of twelve types: processor time, which other work moves little."""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
from pathlib import Path

from tests.test_opinions import twelve_types

__all__ = ["rows"]

ROOT = Path(__file__).parents[2]


def rows() -> list[tuple[str, str, str]]:
    """Return what each verb takes, start of Python and of the process for symbols included."""
    with tempfile.TemporaryDirectory() as folder:
        first, second = Path(folder) / "first.toml", Path(folder) / "second.toml"
        text = twelve_types()
        first.write_text(text, encoding="utf-8")
        second.write_text(text.replace("{ value = 0.2 }", "{ value = 0.25 }"), encoding="utf-8")
        verbs = {
            "units": [],
            "splits": [],
            "formula": ["--text", "sqrt(baa*daa*sa/(sa + mua)/ga)"],
            "difference": ["--to", str(second)],
        }
        out = []
        for verb, options in verbs.items():
            best = min(_seconds([sys.executable, "-m", "ngm", verb, str(first), *options]) for _ in range(2))
            both = " in two processes" if verb == "formula" else ""
            out.append((f"`{verb}` as a whole process, 12 types, processor time", f"{best:.1f} s{both}", "2 s"))
    return out


def _seconds(command: list[str]) -> float:
    """Return the processor time of a command and its children."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    subprocess.run(command, cwd=ROOT, check=True, capture_output=True)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
