"""Print the table of the README: ``python -m tests.benchmarks``. Ratios are measured in one run on one machine.

With names only those parts are run: ``python -m tests.benchmarks browser``. The browser is left out unless it is named,
since its figures are seconds, which mean something on a quiet machine only.
"""

from __future__ import annotations

import importlib
import platform
import sys
from datetime import date

import numpy
import scipy
import sympy

#: What runs where nothing is named.
PARTS = ("derivation", "groups", "draws", "control", "opinions", "outbreak")


def main(named: list[str]) -> None:
    """Run every benchmark and print its rows."""
    versions = f"numpy {numpy.__version__}, scipy {scipy.__version__}, sympy {sympy.__version__}"
    print(f"{date.today()}, Python {platform.python_version()}, {platform.machine()}, {versions}\n")
    print("| what | measured | to keep |\n| --- | --- | --- |")
    for name in named or PARTS:
        if name not in (*PARTS, "browser"):
            raise SystemExit(f"no part {name!r}: {', '.join(PARTS)}, browser")
        for what, figure, bound in importlib.import_module(f"tests.benchmarks.{name}").rows():
            print(f"| {what} | {figure} | {bound} |", flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
