"""A turning point, R0 over a season for eight states, and the first weeks: seconds, on a machine that is not asleep."""

from __future__ import annotations

import time
from collections.abc import Callable

import ngm

__all__ = ["rows"]

EIGHT = """
[scenario]
title = "Eight infected states over a season"
time_unit = "day"
[compartments]
S = { infected = false }
Sv = { infected = false }
STATES
[parameters]
a = { value = 0.3, season = { amplitude = 0.4, peak = 200, period = 365 } }
births = { value = 200, season = { amplitude = 0.7, peak = 150, period = 365 } }
k = { value = 0.4 }
mu = { value = 0.08 }
[definitions]
H = "I1 + I2"
J = "J1 + J2"
[[flow]]
to = "Sv"
rate = "births"
kind = "transition"
[[flow]]
from = "Sv"
rate = "mu * Sv"
kind = "transition"
[[flow]]
from = "S"
to = "E1"
rate = "a * 0.3 * J * S / 1000"
kind = "transmission"
[[flow]]
from = "Sv"
to = "F1"
rate = "a * 0.3 * Sv * H / 1000"
kind = "transmission"
"""


def eight_states() -> str:
    """Return two hosts with two latent and two infectious stages each."""
    names = ("E1", "E2", "I1", "I2", "F1", "F2", "J1", "J2")
    text = EIGHT.replace("STATES", "\n".join(f"{name} = {{ infected = true }}" for name in names))
    for chain, last in ((names[:4], "S"), (names[4:], None)):
        for k, name in enumerate(chain):
            target = chain[k + 1] if k < 3 else last
            to = "" if target is None else f'to = "{target}"\n'
            text += f'[[flow]]\nfrom = "{name}"\n{to}rate = "k * {name}"\nkind = "transition"\n'
            if last is None:
                text += f'[[flow]]\nfrom = "{name}"\nrate = "mu * {name}"\nkind = "transition"\n'
    return text + "[infection_free]\nS = 1000\n"


def _seconds(work: Callable[[], object]) -> str:
    begun = time.process_time()
    work()
    return f"{time.process_time() - begun:.2f} s"


def rows() -> list[tuple[str, str, str]]:
    """Return processor times, and what they are not to exceed."""
    fenmoor = ngm.load("scenarios/leaky-vaccine-fenmoor-itch.toml")
    eight = ngm.loads(eight_states())
    velmar = ngm.load("scenarios/seir-velmar-fever.toml")
    cases: list[tuple[str, Callable[[], object], str]] = [
        (
            "`threshold` with its turning point, leaky vaccine",
            lambda: ngm.threshold(fenmoor, intervention=fenmoor.interventions[0], limit=0),
            "2 s",
        ),
        ("`solve` over a season, 8 infected states and vectors that move", lambda: ngm.solve(eight, limit=0), "5 s"),
        ("`course` of SEIR", lambda: ngm.course(velmar), ""),
    ]
    return [(what, _seconds(work), bound) for what, work, bound in cases]
