"""Reports: processor time of a whole process for each form, for models of up to twelve types."""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
from pathlib import Path

from tests.reporting import examples

__all__ = ["rows"]

Row = tuple[str, str, str]
ENDINGS = ("html", "md", "tex", "docx", "pdf")


def seconds(scenario: Path, target: Path) -> float:
    """Return the processor time of a process that writes a report, its own children included."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    command = [sys.executable, "-m", "ngm", "report", str(scenario), "--to", str(target)]
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


def rows() -> list[Row]:
    """Return what was measured, the figure, and the bound it has to keep."""
    out = []
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        models = {"vector-borne, 4 types": examples.shipped("vector-borne").text}
        models["six islands with ferries, 12 types"] = examples.islands(6).text
        for name, text in models.items():
            path = folder / "model.toml"
            path.write_text(text, encoding="utf-8")
            taken = {ending: seconds(path, folder / f"report.{ending}") for ending in ENDINGS}
            told = ", ".join(f"{ending} {value:.1f}" for ending, value in taken.items())
            out.append((f"`report` as a process, {name}, processor time", f"{told} s", "10 s each"))
    return out
