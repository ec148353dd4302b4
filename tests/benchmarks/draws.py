"""R0 at many draws: against the loop and the stack of matrices that one would write, in one run on one machine."""

from __future__ import annotations

import resource
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

import ngm
from ngm.analysis import draw_plan
from ngm.engine.batch import perron_roots
from ngm.scenario.exact import evaluate

__all__ = ["rows"]

Row = tuple[str, str, str]
SCENARIOS = Path(__file__).parents[2] / "scenarios"

#: Draws 17 groups of one scenario in a process of its own, and tells how long it took.
WHOLE = """
import sys, time
from tests.benchmarks.draws import draws_of, seventeen
import ngm
scenario = ngm.loads(seventeen()) if sys.argv[1] == "17" else ngm.load(sys.argv[1])
draws = draws_of(scenario, int(sys.argv[2]))
work = ngm.reproduction_numbers  # what it needs is imported here, once a session
start = time.perf_counter()
work(scenario, draws)
print(time.perf_counter() - start)
"""


def seconds(work: Callable[[], Any], runs: int = 7) -> float:
    """Return the shortest processor time that some work takes: what else the machine does counts less in a ratio."""
    taken = []
    for _ in range(runs):
        start = time.process_time()
        work()
        taken.append(time.process_time() - start)
    return min(taken)


def draws_of(scenario: ngm.Scenario, size: int) -> dict[str, np.ndarray]:
    """Return draws within a tenth of each number, shares below 1 left there; groups alike."""
    rng = np.random.default_rng(5)
    out = {}
    for name, parameter in scenario.parameters.items():
        if not parameter.follows:
            value = float(evaluate(parameter.values[0].tree))
            table = value * rng.uniform(0.9, 1.1, size)
            out[name] = np.minimum(table, 1) if value <= 1 else table
    return out


def seventeen() -> str:
    """Return an invented model of 17 age groups with dense contacts, three infected states and births and deaths."""
    rng = np.random.default_rng(17)
    contacts = np.exp(rng.normal(size=(17, 17))).round(4).tolist()
    groups = [f"age {k}" for k in range(17)]
    by = 'by = ["age"]'
    lines = ['[scenario]\ntitle = "17 ages"\ntime_unit = "day"\n[dimensions]', f"age = {groups}", "[compartments]"]
    lines += [f"{name} = {{ infected = {str(name in 'EAI').lower()}, {by} }}" for name in "SEAIR"]
    lines.append("[parameters]\nq = { value = 0.02 }\nsigma = { value = 0.25 }\ngamma = { value = 0.2 }")
    lines.append("p = { value = 0.6 }\nmu = { value = 0.01 }\nless = { value = 0.5 }\nbirths = { value = 2 }")
    lines.append(f'[matrices.C]\nby = "age"\nvalues = {contacts}\n[definitions]\nN = "S + E + A + I + R"')
    flows = [
        ("", "S", "births"), ("S", "E", "q * S * C((I + less * A) / N)"), ("E", "A", "(1 - p) * sigma * E"),
        ("E", "I", "p * sigma * E"), ("A", "R", "gamma * A"), ("I", "R", "gamma * I"),
        *((name, "", f"mu * {name}") for name in "SEAIR"),
    ]  # fmt: skip
    for source, target, rate in flows:
        ends = (f'from = "{source}"\n' if source else "") + (f'to = "{target}"\n' if target else "")
        kind = "transmission" if (source, target) == ("S", "E") else "transition"
        lines.append(f'[[flow]]\n{ends}rate = "{rate}"\nkind = "{kind}"')
    return "\n".join(lines) + "\n"


def rows() -> list[Row]:
    """Return what was compared, the ratio or figure, and the bound it has to keep."""
    out: list[Row] = []
    for stem, what in (("seir-velmar-fever", "SEIR"), ("vector-borne-ostrel-fever", "vector-borne")):
        out += closed(SCENARIOS / f"{stem}.toml", what)
    for n, size, bound in (
        (3, 300_000, "5"),
        (4, 200_000, "5"),
        (6, 60_000, "1.5"),
        (9, 30_000, "1.5"),
        (17, 10_000, "1.5"),
    ):
        K = np.random.default_rng(n).uniform(0.1, 3, (n, n, size))
        stack = np.ascontiguousarray(np.moveaxis(K, 2, 0))
        pattern = np.ones((n, n), dtype=bool)
        ratio = seconds(lambda s=stack: np.linalg.eigvals(s)) / seconds(lambda K=K, p=pattern: perron_roots(K, p))
        out.append((f"stacked `eigvals` of K / `perron_roots`, {n} types", f"{ratio:.1f}", bound))
    for name, draws, what, bound in (
        (str(SCENARIOS / "seir-velmar-fever.toml"), 10**6, "SEIR", "0.3 s, 1 GB"),
        (str(SCENARIOS / "vector-borne-ostrel-fever.toml"), 10**6, "vector-borne", "0.3 s, 1 GB"),
        ("17", 10**5, "17 groups, 51 types", "10 s, 1 GB"),
    ):
        taken, memory = whole_process(name, draws)
        out.append(
            (
                f"`reproduction_numbers`, {draws:,} draws of every parameter, {what}",
                f"{taken:.2f} s, {memory:.2f} GB",
                bound,
            )
        )
    return out


def closed(path: Path, what: str) -> list[Row]:
    """Compare a model with a closed form with the loop and with the stack, to which F and V are given for nothing."""
    scenario = ngm.load(path)
    size, few = 10**6, 200_000
    draws = draws_of(scenario, size)
    ngm.reproduction_numbers(scenario, draws)  # makes the plan, which later calls find
    ours = seconds(lambda: ngm.reproduction_numbers(scenario, draws)) / size

    def anew() -> None:
        draw_plan._kept.clear()
        ngm.reproduction_numbers(scenario, draws)

    first = seconds(anew) / size
    solution = ngm.solve(scenario, limit=0)
    scale = np.random.default_rng(1).uniform(0.9, 1.1, (few, 1, 1))
    F, V = np.array(solution.F) * scale, np.array(solution.V) / scale

    def loop() -> None:
        for one, other in zip(F[:2000], V[:2000], strict=True):
            np.max(np.abs(np.linalg.eigvals(one @ np.linalg.inv(other))))

    def stack() -> None:
        np.abs(np.linalg.eigvals(F @ np.linalg.inv(V))).max(axis=1)

    name = f"{what}, 10^6 draws of all {len(draws)} parameters"
    return [
        (
            f"{way} of `inv` and `eigvals` / `reproduction_numbers`, {name}",
            f"{a / ours:.0f}, first call {a / first:.0f}",
            bound,
        )
        for way, a, bound in (("a loop", seconds(loop) / 2000, "500"), ("a stack", seconds(stack) / few, "20"))
    ]


def whole_process(name: str, draws: int) -> tuple[float, float]:
    """Return the seconds of the call, and the largest memory (GB) of the process that made it, the draws included."""
    out = subprocess.run([sys.executable, "-c", WHOLE, name, str(draws)], check=True, capture_output=True, text=True)
    return float(out.stdout), resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024 / 1e9
