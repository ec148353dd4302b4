"""Random models that know their own F and V: built from decimals, so that the truth can be computed to 50 digits.

The second route shares nothing with the program: the matrices are put together here from the drawn rates, and their
spectral radius comes from mpmath.
"""

from __future__ import annotations

import random
from dataclasses import dataclass, field

import mpmath

from tests.derivation.models import text

DIGITS = 60


@dataclass
class RandomModel:
    """States X1..Xm of a closed or open host population of size N, rates as decimal texts."""

    m: int
    hosts: str  # "closed" or "open"
    frequency: bool
    moves: dict[tuple[int, int], str] = field(default_factory=dict)  # (from, to)
    exits: dict[int, str] = field(default_factory=dict)
    transmissions: dict[tuple[int, int], str] = field(default_factory=dict)  # (to, by)
    sources: dict[tuple[int, int], str] = field(default_factory=dict)  # (to, by): arises without loss
    size: str = "1000"

    @property
    def scenario_text(self) -> str:
        """The model as a scenario file; every rate is a parameter."""
        parameters: dict[str, float] = {}
        flows = []

        def rate(name: str, value: str) -> str:
            parameters[name] = _Decimal(value)
            return name

        if self.hosts == "open":
            parameters["births"] = _Decimal("20")
            flows += [("", "S", "births", "x"), ("S", "", f"{rate('d', '0.02')}*S", "x")]
        for (j, i), value in self.moves.items():
            flows.append((f"X{j}", f"X{i}", f"{rate(f'q{i}_{j}', value)}*X{j}", "x"))
        for j, value in self.exits.items():
            flows.append((f"X{j}", "", f"{rate(f'e{j}', value)}*X{j}", "x"))
        for (i, j), value in self.transmissions.items():
            form = f"*S*X{j}/N" if self.frequency else f"*S*X{j}"
            flows.append(("S", f"X{i}", rate(f"b{i}_{j}", value) + form, "t"))
        for (i, j), value in self.sources.items():
            flows.append(("", f"X{i}", f"{rate(f's{i}_{j}', value)}*X{j}", "x"))
        compartments = [("S", False), *((f"X{k}", True) for k in range(self.m))]
        definitions = {"N": " + ".join(name for name, _ in compartments)} if self.frequency else None
        free = {"S": self.size} if self.hosts == "closed" else None
        return text(compartments, parameters, flows, definitions=definitions, free=free)

    def truth(self) -> tuple[mpmath.matrix, mpmath.matrix]:
        """Return F and V to many digits."""
        with mpmath.workdps(DIGITS):
            F, V = mpmath.zeros(self.m), mpmath.zeros(self.m)
            S = mpmath.mpf(self.size) if self.hosts == "closed" else mpmath.mpf("20") / mpmath.mpf("0.02")
            for (j, i), value in self.moves.items():
                V[j, j] += mpmath.mpf(value)
                V[i, j] -= mpmath.mpf(value)
            for j, value in self.exits.items():
                V[j, j] += mpmath.mpf(value)
            for (i, j), value in self.transmissions.items():
                F[i, j] += mpmath.mpf(value) * (1 if self.frequency else S)
            for (i, j), value in self.sources.items():
                V[i, j] -= mpmath.mpf(value)
            return F, V

    def R0(self) -> mpmath.mpf:
        """Return the spectral radius of F V^-1 to many digits."""
        F, V = self.truth()
        with mpmath.workdps(DIGITS):
            return spectral_radius(F * mpmath.inverse(V))


def spectral_radius(K: mpmath.matrix, digits: int = DIGITS) -> mpmath.mpf:
    """Return the largest modulus of an eigenvalue, class by class so that nilpotent parts do no harm."""
    import networkx

    m = K.rows
    graph = networkx.DiGraph()
    graph.add_nodes_from(range(m))
    graph.add_edges_from((j, i) for i in range(m) for j in range(m) if abs(K[i, j]) > mpmath.mpf(10) ** (20 - digits))
    best = mpmath.mpf(0)
    with mpmath.workdps(digits):
        for members in networkx.strongly_connected_components(graph):
            kinds = sorted(members)
            block = mpmath.matrix([[K[i, j] for j in kinds] for i in kinds])
            if len(kinds) == 1:
                best = max(best, block[0, 0])
            else:
                values = mpmath.eig(block, left=False, right=False)
                best = max(best, *(abs(v) for v in values))
    return best


class _Decimal(float):
    """A number that is written as it was drawn."""

    def __new__(cls, value: str) -> _Decimal:
        made = super().__new__(cls, value)
        made.text = value
        return made

    def __repr__(self) -> str:
        return self.text

    text: str


def draw(seed: int) -> RandomModel:
    """Return a random model: plain, staged, cyclic, reducible, periodic, with sources; rates over many scales."""
    rng = random.Random(seed)
    m = rng.randint(1, 5)
    wide = rng.random() < 0.4

    def rate() -> str:
        exponent = rng.uniform(-9, 9) if wide else rng.uniform(-2, 1)
        return f"{10**exponent:.{rng.randint(1, 12)}e}"

    model = RandomModel(m, rng.choice(["closed", "open"]), rng.random() < 0.5)
    for j in range(m):
        model.exits[j] = rate()
        for i in range(m):
            if i != j and rng.random() < (0.7 if i == j + 1 else 0.15):
                model.moves[j, i] = rate()
    shape = rng.choice(["first", "any", "cycle", "blocks"])
    for j in range(m):
        if shape == "first":
            targets = [0]
        elif shape == "cycle":
            targets = [(j + 1) % m]
        elif shape == "blocks":
            targets = [i for i in range(j, m) if rng.random() < 0.6]
        else:
            targets = [i for i in range(m) if rng.random() < 0.4]
        for i in targets:
            if shape != "first" or rng.random() < 0.6 or j == m - 1:
                model.transmissions[i, j] = rate()
    if not model.transmissions:
        model.transmissions[0, m - 1] = rate()
    if rng.random() < 0.2 and m > 1:
        j, i = rng.sample(range(m), 2)
        model.sources[i, j] = rate()
    return model
