"""Scenario texts for the tests of the pages; infections and places are nobody's."""

from __future__ import annotations

#: R0 = beta/gamma = 2.5, by hand.
SIR = """\
# a comment that stays
[scenario]
title = "Plain"
time_unit = "day"

[compartments]
S = { infected = false }
I = { label = "Infectious", infected = true }
R = { infected = false }

[parameters]
beta = { value = 0.5, unit = "1/day" } # contacts
gamma = { value = 0.2, unit = "1/day" }

[definitions]
N = "S + I + R"

[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / N"
kind = "transmission"
label = "Infection"

[[flow]]
from = "I"
to = "R"
rate = "gamma * I"
kind = "transition"

[infection_free]
S = 1000
R = 0
"""

#: A name is misspelt in the first flow.
BROKEN = SIR.replace("beta * S", "bata * S")

#: No TOML at all.
UNREADABLE = SIR + "\n[[flow\n"

#: Two strains that do not meet: classes {I} and {J} with R0 = 0.5/0.2 = 2.5 and 0.1/0.2 = 0.5, by hand.
REDUCIBLE = """\
[scenario]
title = "Two strains"
time_unit = "day"

[compartments]
S = { infected = false }
I = { infected = true }
J = { infected = true }
R = { infected = false }

[parameters]
b1 = { value = 0.5 }
b2 = { value = 0.1 }
g = { value = 0.2 }

[definitions]
N = "S + I + J + R"

[[flow]]
from = "S"
to = "I"
rate = "b1 * S * I / N"
kind = "transmission"

[[flow]]
from = "S"
to = "J"
rate = "b2 * S * J / N"
kind = "transmission"

[[flow]]
from = "I"
to = "R"
rate = "g * I"
kind = "transition"

[[flow]]
from = "J"
to = "R"
rate = "g * J"
kind = "transition"

[infection_free]
S = 1000
R = 0
"""

#: Labels that try to be pictures, links, formulas and pages.
HOSTILE = SIR.replace("Plain", "![x](http://evil.example/a.png) <script>alert(1)</script> $x$ :red[y]").replace(
    '"Infectious"', '"a\\"] [b](http://evil.example) `` ``` $$ \\\\input{x}"'
)

#: Infected hosts that bear infected hosts faster than they are removed: no R0, V is no M-matrix (births b*I with b > g).
NO_R0 = (
    SIR.replace("[definitions]", "b = { value = 0.9 }\n\n[definitions]")
    + """
[[flow]]
to = "I"
rate = "b * I"
kind = "transition"
"""
)

#: New infections need two of the infected: F vanishes altogether, R0 = 0, no type at infection.
NO_TYPE = SIR.replace("beta * S * I / N", "beta * S * I * I / N^2")


def grouped(groups: int) -> str:
    """Return a scenario of two infected compartments in so many groups; row sums of contacts 1, so R0 = 2, by hand."""
    labels = ", ".join(f'"g{k}"' for k in range(groups))
    row = "[" + ", ".join([str(1 / groups)] * groups) + "]"
    return f"""\
[scenario]
title = "Many groups"
time_unit = "day"

[dimensions]
g = [{labels}]

[compartments]
S = {{ infected = false, by = ["g"] }}
E = {{ infected = true, by = ["g"] }}
I = {{ infected = true, by = ["g"] }}

[parameters]
beta = {{ value = 2 }}
s = {{ value = 1 }}

[matrices.C]
by = "g"
values = [{", ".join([row] * groups)}]

[[flow]]
from = "S"
to = "E"
rate = "beta * S * C(I)"
kind = "transmission"

[[flow]]
from = "E"
to = "I"
rate = "s * E"
kind = "transition"

[[flow]]
from = "I"
rate = "I"
kind = "transition"

[infection_free]
S = 1
"""
