"""Numbers of sets of types and of entries of K, and a supply shared among groups, in a running process."""

from __future__ import annotations

import time

import numpy as np

import ngm

__all__ = ["rows"]

Row = tuple[str, str, str]


def grouped(n: int) -> ngm.Scenario:
    """Return an invented model of n groups with dense contacts and one infected state: n types at infection."""
    contacts = np.exp(np.random.default_rng(n).normal(size=(n, n))).round(4).tolist()
    groups = [f"group {k}" for k in range(n)]
    by = 'by = ["group"]'
    lines = [f'[scenario]\ntitle = "{n} groups"\ntime_unit = "day"\n[dimensions]\ngroup = {groups}\n[compartments]']
    lines += [f"{name} = {{ infected = {str(name == 'I').lower()}, {by} }}" for name in "SIR"]
    lines.append('[parameters]\nq = { value = 0.02 }\ngamma = { value = 0.2 }\n[definitions]\nN = "S + I + R"')
    lines.append(f'[matrices.C]\nby = "group"\nvalues = {contacts}\n[infection_free]\nS = 100\nR = 0')
    lines.append('[[flow]]\nfrom = "S"\nto = "I"\nrate = "q * S * C(I / N)"\nkind = "transmission"')
    lines.append('[[flow]]\nfrom = "I"\nto = "R"\nrate = "gamma * I"\nkind = "transition"')
    return ngm.loads("\n".join(lines) + "\n")


def rows() -> list[Row]:
    """Return processor times: of `control` the shortest of three, of `allocate` that of the first call."""
    out = []
    for n, what in ((6, "all 63 sets of 6 types, 36 entries, 6 states"), (10, "all 100 entries of K of 10 types")):
        scenario = grouped(n)
        taken = []
        for _ in range(4):
            start = time.process_time()
            found = ngm.control(scenario)
            taken.append(time.process_time() - start)
        assert len(found.target_reproduction) == n * n
        out.append((f"`control`, {what}", f"{min(taken[1:]):.2f} s", "0.5 s"))
    for n, bound in ((17, "2 s"), (300, "30 s")):
        scenario = grouped(n)
        start = time.process_time()
        ngm.allocate(scenario, 20.0 * n, efficacy=0.9)
        out.append((f"`allocate`, {n} groups", f"{time.process_time() - start:.1f} s", bound))
    return out
