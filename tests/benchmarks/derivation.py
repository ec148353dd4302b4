"""Derivation in symbols: this package against what one would write in a notebook with the general library."""

from __future__ import annotations

import multiprocessing
import time
from typing import Any

import sympy

import ngm
from ngm.derivation.symbols import derive_symbols
from ngm.expression.parse import parse
from tests.derivation.models import chain, hosts_and_vectors, patches, text

__all__ = ["rows"]

LIMIT = 20.0


def quarantine() -> str:
    """Return a model of four infected states in which quarantine and isolation return people."""
    flows = [
        ("", "S", "births", "x"),
        ("S", "E", "beta*S*(I + eq*Q + ej*J)/N", "t"),
        ("E", "I", "k1*E", "x"),
        ("E", "Q", "g1*E", "x"),
        ("Q", "J", "k2*Q", "x"),
        ("I", "J", "g2*I", "x"),
        ("J", "I", "back*J", "x"),
        ("I", "R", "s1*I", "x"),
        ("J", "R", "s2*J", "x"),
        *((c, "", f"mu*{c}", "x") for c in "SEQIJR"),
    ]
    names = ["births", "beta", "eq", "ej", "k1", "g1", "k2", "g2", "back", "s1", "s2", "mu"]
    compartments = [("S", False), ("E", True), ("Q", True), ("I", True), ("J", True), ("R", False)]
    values = {name: 0.1 + 0.05 * k for k, name in enumerate(names)}
    return text(compartments, values, flows, definitions={"N": "S + E + Q + I + J + R"})


def _notebook(F: list[list[str]], V: list[list[str]], done: Any) -> None:
    """Do what one would write: invert V and ask for the eigenvalues."""
    symbols: dict[str, sympy.Symbol] = {}

    def read(entry: str) -> sympy.Expr:
        from ngm.expression.symbolic import to_sympy

        return to_sympy(
            parse(entry, items=True), lambda n: symbols.setdefault(n.item, sympy.Symbol(n.item, positive=True))
        )

    K = sympy.Matrix([[read(e) for e in row] for row in F]) * sympy.Matrix([[read(e) for e in row] for row in V]).inv()
    done.put(len(K.eigenvals()))


def rows() -> list[tuple[str, str, str]]:
    """Return what was compared, the ratio (or that the other did not finish), and the bound it has to keep."""
    out = []
    cases = [
        ("quarantine, 4 states", quarantine()),
        ("chain of 6 + 6 stages", chain(6, 6)),
        ("chain of 20 + 20 stages", chain(20, 20)),
        ("2 hosts with 2 vectors, 8 states", hosts_and_vectors(2, 2)),
        ("3 hosts with 3 vectors, 12 states", hosts_and_vectors(3, 3)),
        ("3 patches with migration, 6 states", patches(3)),
        ("5 patches with migration, 10 states", patches(5)),
    ]
    for name, model in cases:
        scenario = ngm.loads(model)
        state = ngm.solve(scenario, limit=0).infection_free
        start = time.perf_counter()
        symbolic = derive_symbols(scenario, state)
        ours = time.perf_counter() - start
        assert symbolic.F is not None
        assert symbolic.V is not None
        theirs = _limited([list(r) for r in symbolic.F], [list(r) for r in symbolic.V])
        ratio = f"{theirs / ours:.0f}" if theirs is not None else f"not done in {LIMIT:g} s (> {LIMIT / ours:.0f})"
        out.append((f"`F*V.inv()` and `.eigenvals()` of sympy / derivation, {name}", f"{ratio}; {ours:.2f} s", "1 s"))
    return out


def _limited(F: list[list[str]], V: list[list[str]]) -> float | None:
    """Return the seconds of the notebook's way, None where it is not done within the limit."""
    context = multiprocessing.get_context("spawn")
    done = context.Queue()
    process = context.Process(target=_notebook, args=(F, V, done))
    start = time.perf_counter()
    process.start()
    process.join(LIMIT)
    if process.is_alive():
        process.kill()
        process.join()
        return None
    return time.perf_counter() - start
