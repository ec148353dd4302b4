"""Scenarios that a report has to cope with, invented for these tests."""

from __future__ import annotations

from pathlib import Path

import ngm

ROOT = Path(__file__).resolve().parents[2]

SIR = """\
[scenario]
title = "TITLE"
time_unit = "day"

[compartments]
S = { label = "LABEL", infected = false }
I = { label = "Infectious", infected = true }

[parameters]
beta = { value = 0.5, label = "LABEL", source = "LABEL", unit = "1/day" }
gamma = { value = 0.2, unit = "1/day" }
births = { value = 100, unit = "individual/day" }
mu = { value = 0.1, unit = "1/day" }

[definitions]
N = "S + I"

[[flow]]
to = "S"
rate = "births"
kind = "transition"
label = "LABEL"

[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / N"
kind = "transmission"
label = "LABEL"

[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"

[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"

[[flow]]
from = "I"
rate = "mu * I"
kind = "transition"

[[intervention]]
name = "LABEL"
note = "LABEL"
change = [{ parameter = "beta", multiply = 0.5 }]

[report]
question = "LABEL"
author = "LABEL"
limits = ["LABEL"]
"""

#: What each form could take for a command; single quotes in TOML keep it as it is.
HOSTILE_TEXTS = (
    r"<script>alert(1)</script><img src=x onerror=alert(1)>",
    r"\input{/etc/passwd} \write18{id} $\def\x{}$ % # & ~ ^ {",
    '+ #import "x": y; #read("/etc/passwd") $ [ ] @ref <label>',
    "= heading",
    "- item",
    "1. item",
    "![x](http://evil.example/a.png) [b](http://evil.example) `` ``` | a | *b* _c_",
    "\u202eabc\u0007 \u03b2 \u00e9 &amp; &lt;",
)


def plain(text: str = "Some words") -> ngm.Scenario:
    """R0 = beta/(gamma + mu) = 0.5/0.3, by hand."""
    return ngm.loads(SIR.replace('"TITLE"', '"Plain"').replace('"LABEL"', f'"{text}"'))


def hostile() -> ngm.Scenario:
    """A scenario with the hostile texts wherever it may have text."""
    lines = []
    count = 0
    for line in SIR.splitlines():
        while '"LABEL"' in line or '"TITLE"' in line:
            word = '"LABEL"' if '"LABEL"' in line else '"TITLE"'
            text = HOSTILE_TEXTS[count % len(HOSTILE_TEXTS)]
            escaped = "".join(
                c if c.isprintable() and c not in '"\\' else f"\\u{ord(c):04x}" if c not in '"\\' else "\\" + c
                for c in text
            )
            line = line.replace(word, f'"{escaped}"', 1)
            count += 1
        lines.append(line)
    return ngm.loads("\n".join(lines) + "\n")


def without_R0() -> ngm.Scenario:
    """Carriers are born faster than they are removed: V is no M-matrix."""
    more = '\n[[flow]]\nto = "I"\nrate = "0.9 * I"\nkind = "transition"\n\n[[intervention]]'
    return ngm.loads(plain().text.replace("\n[[intervention]]", more))


def shipped(part: str) -> ngm.Scenario:
    """A scenario of the examples, by part of its name."""
    return ngm.load(next((ROOT / "scenarios").glob(f"*{part}*.toml")))


def no_closed_form() -> ngm.Scenario:
    """Three types that all infect each other by unlike rates: no closed form worth printing."""
    names = "ABC"
    lines = ["[scenario]", 'title = "Three kinds"', 'time_unit = "day"', "[compartments]", "S = { infected = false }"]
    lines += [f"{n} = {{ infected = true }}" for n in names]
    lines += ["[parameters]", *(f"b{i}{j} = {{ value = 0.{i + 1}{j + 2} }}" for i in range(3) for j in range(3))]
    lines += ["g = { value = 0.3 }", "[infection_free]", "S = 100"]
    for i, n in enumerate(names):
        force = " + ".join(f"b{i}{j} * {m}" for j, m in enumerate(names))
        lines += ["[[flow]]", 'from = "S"', f'to = "{n}"', f'rate = "S/100 * ({force})"', 'kind = "transmission"']
        lines += ["[[flow]]", f'from = "{n}"', f'rate = "g * {n}"', 'kind = "transition"']
    return ngm.loads("\n".join(lines) + "\n")


def halves(contacts: str = "[[5, 5], [5, 5]]", sizes: str = "[500, 500]") -> ngm.Scenario:
    """Two groups that meet as `contacts` says; where all meet alike, R0 = 0.04 * 10 / 0.2 = 2 by hand."""
    return ngm.loads(f"""\
[scenario]
title = "Two halves"
time_unit = "day"

[dimensions]
half = ["left", "right"]

[compartments]
S = {{ infected = false, by = ["half"] }}
I = {{ infected = true, by = ["half"] }}
R = {{ infected = false, by = ["half"] }}

[parameters]
q = {{ value = 0.04, source = "invented" }}
gamma = {{ value = 0.2, unit = "1/day", source = "invented" }}
people = {{ value = {sizes}, by = ["half"], unit = "person", source = "invented" }}

[matrices.C]
by = "half"
values = {contacts}
population = "people"
reciprocal = true
source = "invented"

[infection_free]
S = "people"
R = 0

[[flow]]
from = "S"
to = "I"
rate = "q * S * C(I / people)"
kind = "transmission"

[[flow]]
from = "I"
to = "R"
rate = "gamma * I"
kind = "transition"
""")


def islands(count: int = 5) -> ngm.Scenario:
    """Islands with ferries between all of them, two infected states each: long formulas and wide matrices."""
    numbers = range(1, count + 1)
    lines = ["[scenario]", 'title = "Islands"', 'time_unit = "day"', "[compartments]"]
    lines += [f"S_{k} = {{ infected = false }}" for k in numbers]
    lines += [f"{state}_{k} = {{ infected = true }}" for k in numbers for state in "EI"]
    lines += ["[parameters]", 'sigma = { value = 0.2, unit = "1/day" }', 'gamma = { value = 0.15, unit = "1/day" }']
    lines += [f'beta_{k} = {{ value = {0.2 + 0.05 * k:.2f}, unit = "1/day" }}' for k in numbers]
    lines += [
        f"m_{i}{j} = {{ value = {0.01 + 0.003 * i + 0.001 * j:.3f} }}" for i in numbers for j in numbers if i != j
    ]
    lines += ["N = { value = 1000 }", "[infection_free]", *(f'S_{k} = "N"' for k in numbers)]
    flows = []
    for k in numbers:
        flows += [(f"S_{k}", f"E_{k}", f"beta_{k} * S_{k} * I_{k} / N"), (f"E_{k}", f"I_{k}", f"sigma * E_{k}")]
        flows += [(f"I_{k}", "", f"gamma * I_{k}")]
        flows += [(f"{c}_{k}", f"{c}_{j}", f"m_{k}{j} * {c}_{k}") for j in numbers if j != k for c in "EI"]
    for source, target, rate in flows:
        kind = "transmission" if source[0] == "S" else "transition"
        end = f'to = "{target}"' if target else ""
        lines += ["[[flow]]", f'from = "{source}"', end, f'rate = "{rate}"', f'kind = "{kind}"']
    return ngm.loads("\n".join(lines) + "\n")
