"""Small models that the tables of this folder change at one place. Places and infections are invented."""

from __future__ import annotations

__all__ = ["GROUPS", "PLAIN", "edited"]

#: A closed outbreak with one parameter of each kind and one intervention.
PLAIN = """\
[scenario]
title = "Marrow fever in Ostwick"
time_unit = "day"

[compartments]
S = { label = "Susceptible", infected = false }
E = { label = "Latently infected", infected = true }
I = { label = "Infectious", infected = true }
R = { label = "Recovered", infected = false }

[parameters]
beta = { value = 0.4, unit = "1/day" }
sigma = { value = "1/4", unit = "1/day" }
gamma = { value = 0.2, unit = "1/day" }
Lambda = { value = 10 }
mu = { value = 0.01 }

[definitions]
N = "S + E + I + R"

[[flow]]
to = "S"
rate = "Lambda"
kind = "transition"

[[flow]]
from = "S"
to = "E"
rate = "beta * S * I / N"
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

[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"

[[flow]]
from = "E"
rate = "mu * E"
kind = "transition"

[[flow]]
from = "I"
rate = "mu * I"
kind = "transition"

[[flow]]
from = "R"
rate = "mu * R"
kind = "transition"

[infection_free]
S = "Lambda / mu"
R = 0

[[intervention]]
name = "Masks"
change = [{ parameter = "beta", multiply = 0.6 }]
"""

#: Two dimensions, contacts (one matrix `within` the other dimension), a movement, a reservoir.
GROUPS = """\
[scenario]
title = "Pebble cough in Tarn and Fell"
time_unit = "day"

[dimensions]
age = ["young", "old"]
town = ["Tarn", "Fell", "Moor"]

[compartments]
S = { infected = false, by = ["age", "town"] }
I = { infected = true, by = ["age", "town"] }
W = { infected = true }

[parameters]
q = { value = 0.05 }
sus = { value = [1.0, 0.5], by = ["age"] }
size = { value = [[100, 200, 300], [400, 500, 600]], by = ["age", "town"] }
gamma = { value = [0.2, 0.25, 0.3], by = ["town"] }
xi = { value = 0.01 }
decay = { value = 0.5 }

[definitions]
N = "S + I"

[matrices.C]
by = "age"
within = "town"
values = [[[1, 2], [3, 4]], [[2, 2], [3, 1]], [[1, 1], [1, 4]]]

[matrices.V]
by = "town"
values = [[0.8, 0.1, 0.1], [0.2, 0.7, 0.1], [0.1, 0.1, 0.8]]

[matrices.G]
by = "age"
values = [[5, 2], [1, 3]]

[matrices.A]
by = "town"
values = [[0, 0.02, 0.01], [0.03, 0, 0.01], [0.01, 0.01, 0]]

[[flow]]
from = "S"
to = "I"
rate = "q * sus * S * C(V(I / N))"
kind = "transmission"

[[flow]]
from = "S"
to = "I"
rate = "0.0001 * S * W"
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
matrix = "A"
of = ["I"]

[infection_free]
S = "size"

[[intervention]]
name = "Tarn shut"
change = [{ matrix = "C", group = { town = "Tarn" }, multiply = 0.5, rows = ["old"] }]
"""


def edited(text: str, *changes: tuple[str, str]) -> str:
    """Return the text with each (old, new) replaced at its first place; each must occur."""
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text
