"""Print the table of the README: ``python -m tests.benchmarks``. Ratios are measured in one run on one machine.

With names only those parts are run: ``python -m tests.benchmarks browser``. The browser is left out unless it is named,
since its figures are seconds, which mean something on a quiet machine only.
"""

from __future__ import annotations

import importlib
import os
import platform
import sys
from datetime import date
from pathlib import Path

import numpy
import scipy
import sympy

#: What runs where nothing is named.
PARTS = (
    "derivation",
    "groups",
    "draws",
    "control",
    "opinions",
    "outbreak",
    "course",
    "processes",
    "reports",
    "hostile",
)


def processor() -> str:
    """Return what the machine calls its processor."""
    about = Path("/proc/cpuinfo")
    lines = about.read_text(encoding="utf-8").splitlines() if about.exists() else []
    return next((line.partition(":")[2].strip() for line in lines if line.startswith("model name")), platform.machine())


def main(named: list[str]) -> None:
    """Run every benchmark and print its rows."""
    versions = f"numpy {numpy.__version__}, scipy {scipy.__version__}, sympy {sympy.__version__}"
    machine = f"{os.cpu_count()} cores of {processor()}, load {os.getloadavg()[0]:.1f} at the start"
    print(f"{date.today()}, {machine}, Python {platform.python_version()}, {versions}\n")
    print("| what | measured | to keep |\n| --- | --- | --- |")
    for name in named or PARTS:
        if name not in (*PARTS, "browser"):
            raise SystemExit(f"no part {name!r}: {', '.join(PARTS)}, browser")
        for what, figure, bound in importlib.import_module(f"tests.benchmarks.{name}").rows():
            print(f"| {what} | {figure} | {bound} |", flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
