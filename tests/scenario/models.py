"""Two small models that the tests of this folder change in one place."""

from __future__ import annotations

PLAIN = """
[scenario]
title = "Plain"
time_unit = "day"

[compartments]
S = { label = "Susceptible", infected = false }
E = { infected = true }
I = { infected = true }
R = { infected = false }

[parameters]
beta = { value = 0.4, unit = "1/day", range = [0.2, 0.6] }
sigma = { value = "1/5", unit = "1/day" }
gamma = { value = 0.2, unit = "1/day", distribution = { name = "lognormal", mean = 0.2, sd = 0.04 } }

[definitions]
N = "S + E + I + R"
foi = "beta * I / N"

[[flow]]
from = "S"
to = "E"
rate = "foi * S"
kind = "transmission"
label = "Infection"

[[flow]]
from = "E"
to = "I"
rate = "sigma * E"
kind = "transition"

[[flow]]
from = "I"
to = "R"
rate = "gamma * I"
kind = "transition"

[infection_free]
S = 1000
R = 0

[[intervention]]
name = "Masks"
change = [{ parameter = "beta", multiply = 0.6 }]
"""

GROUPED = """
[scenario]
title = "Grouped"
time_unit = "day"

[dimensions]
age = ["young", "old"]
region = ["North", "Mid", "South"]

[compartments]
S = { infected = false, by = ["age", "region"] }
I = { infected = true, by = ["age", "region"] }
W = { infected = true }

[parameters]
q = { value = 0.1 }
sus = { value = [1.0, 0.5], by = ["age"] }
both = { value = [[1, 2, 3], [4, 5, 6]], by = ["age", "region"] }
gamma = { value = 0.2, by = ["region"] }
xi = { value = 0.01 }
decay = { value = 0.5 }

[definitions]
N = "S + I"
total = "sum(N)"

[matrices.C]
by = "age"
values = [[1, 2], [3, 4]]
population = "sum(N, region)"

[matrices.T]
by = "region"
values = [[0, 0.1, 0.1], [0.1, 0, 0.1], [0.1, 0.1, 0]]

[matrices.M]
by = "age"
within = "region"
values = [[[1, 2], [3, 4]], [[1, 2], [3, 4]], [[1, 2], [3, 4]]]

[[flow]]
from = "S"
to = "I"
rate = "q * sus * S * M(T(I / N))"
kind = "transmission"

[[flow]]
from = "S"
to = "I"
rate = "q * S * W"
kind = "transmission"

[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"

[[flow]]
to = "W"
rate = "sum(xi * I)"
kind = "transition"

[[flow]]
from = "W"
rate = "decay * W"
kind = "transition"

[[movement]]
matrix = "T"
of = ["S", "I"]

[infection_free]
S = [[100, 200, 300], [400, 500, 600]]

[[intervention]]
name = "Mixed"
change = [
  { parameter = "sus", group = { age = "old" }, multiply = 0.5 },
  { matrix = "C", multiply = 0.4, rows = ["old"], columns = ["old"] },
  { matrix = "M", multiply = 0.4, group = { region = "North" } },
  { susceptibility = "I", group = { age = ["old"], region = "South" }, reduce = 0.45 },
  { infectivity = "I", reduce = 0.30 },
]
"""


def changed(text: str, old: str, new: str) -> str:
    """Return the text with one piece replaced; the piece must occur."""
    assert old in text, old
    return text.replace(old, new, 1)
