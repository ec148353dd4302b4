"""Print the table of the README: ``python -m tests.benchmarks``. Ratios are measured in one run on one machine."""

from __future__ import annotations

import platform
from datetime import date

import numpy
import scipy
import sympy

from tests.benchmarks import derivation, draws, groups


def main() -> None:
    """Run every benchmark and print its rows."""
    versions = f"numpy {numpy.__version__}, scipy {scipy.__version__}, sympy {sympy.__version__}"
    print(f"{date.today()}, Python {platform.python_version()}, {platform.machine()}, {versions}\n")
    print("| what | measured | to keep |\n| --- | --- | --- |")
    for module in (derivation, groups, draws):
        for what, figure, bound in module.rows():
            print(f"| {what} | {figure} | {bound} |", flush=True)


if __name__ == "__main__":
    main()
