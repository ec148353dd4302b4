"""Random models of eight kinds, each with its own F and V in 60 digits, put together here from the rates drawn."""

from __future__ import annotations

import random
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import mpmath

from tests.properties.random_models import DIGITS, RandomModel

__all__ = ["KINDS", "GroupedModel", "Model", "draw"]


class Model(Protocol):
    """A model that knows the truth about itself."""

    @property
    def scenario_text(self) -> str: ...

    def truth(self) -> tuple[mpmath.matrix, mpmath.matrix]: ...

    def values(self) -> dict[str, str]: ...


@dataclass
class Plain(RandomModel):
    """A model without groups."""

    def values(self) -> dict[str, str]:
        """Return the decimals of every parameter and of the state."""
        out = {f"q{i}_{j}": value for (j, i), value in self.moves.items()}
        out |= {f"e{j}": value for j, value in self.exits.items()}
        out |= {f"b{i}_{j}": value for (i, j), value in self.transmissions.items()}
        out |= {f"s{i}_{j}": value for (i, j), value in self.sources.items()}
        return out | {"births": "20", "d": "0.02", "S": self.size if self.hosts == "closed" else "1000"}


@dataclass
class GroupedModel:
    """Latent and infectious hosts in groups that meet, and perhaps move; rates as decimal texts.

    Row i, column j of `contacts`: contacts of one member of group i with group j; of `moves`: from group i to group j.
    """

    groups: list[str]
    sizes: list[str]
    susceptibility: list[str]
    ends: list[str]
    recovery: str
    infectivity: str
    contacts: list[list[str]]
    moves: list[list[str]] = field(default_factory=list)
    frequency: bool = True

    @property
    def scenario_text(self) -> str:
        """The model as a scenario file."""
        rows = ", ".join(f"[{', '.join(row)}]" for row in self.contacts)
        force = "C(I/N)" if self.frequency else "C(I)"
        text = f"""[scenario]
title = "Built for a test"
time_unit = "day"
[dimensions]
town = [{", ".join(f'"{group}"' for group in self.groups)}]
[compartments]
S = {{ infected = false, by = ["town"] }}
E = {{ infected = true, by = ["town"] }}
I = {{ infected = true, by = ["town"] }}
[parameters]
a = {{ value = [{", ".join(self.susceptibility)}], by = ["town"] }}
e = {{ value = [{", ".join(self.ends)}], by = ["town"] }}
g = {{ value = {self.recovery} }}
q = {{ value = {self.infectivity} }}
[definitions]
N = "S + E + I"
[matrices.C]
by = "town"
values = [{rows}]
[[flow]]
from = "S"
to = "E"
rate = "q*a*S*{force}"
kind = "transmission"
[[flow]]
from = "E"
to = "I"
rate = "e*E"
kind = "transition"
[[flow]]
from = "I"
rate = "g*I"
kind = "transition"
[infection_free]
S = [{", ".join(self.sizes)}]
"""
        if self.moves:
            rows = ", ".join(f"[{', '.join(row)}]" for row in self.moves)
            text += f'[matrices.A]\nby = "town"\nvalues = [{rows}]\n[[movement]]\nmatrix = "A"\nof = ["E", "I"]\n'
        return text

    def values(self) -> dict[str, str]:
        """Return the decimals of every parameter, entry of a matrix and part of the state, by item."""
        out = {"g": self.recovery, "q": self.infectivity}
        for i, group in enumerate(self.groups):
            out |= {f"a[{group}]": self.susceptibility[i], f"e[{group}]": self.ends[i], f"S[{group}]": self.sizes[i]}
            for j, other in enumerate(self.groups):
                out[f"C[{group},{other}]"] = self.contacts[i][j]
                if self.moves:
                    out[f"A[{group},{other}]"] = self.moves[i][j]
        return out

    def truth(self) -> tuple[mpmath.matrix, mpmath.matrix]:
        """Return F and V to many digits: the latent of every group first, then the infectious."""
        n = len(self.groups)
        with mpmath.workdps(DIGITS):
            F, V = mpmath.zeros(2 * n), mpmath.zeros(2 * n)
            number = mpmath.mpf
            for i in range(n):
                for j in range(n):
                    size = number(self.sizes[i]) / (number(self.sizes[j]) if self.frequency else 1)
                    rate = number(self.infectivity) * number(self.susceptibility[i]) * number(self.contacts[i][j])
                    F[i, n + j] = rate * size
                V[i, i] += number(self.ends[i])
                V[n + i, i] -= number(self.ends[i])
                V[n + i, n + i] += number(self.recovery)
            for i in range(n if self.moves else 0):
                for j in range(n):
                    for at in (0, n):
                        V[at + i, at + i] += number(self.moves[i][j])
                        V[at + j, at + i] -= number(self.moves[i][j])
            return F, V


Rate = Callable[[], str]


def _text_of(rng: random.Random, low: float, high: float) -> str:
    return f"{10 ** rng.uniform(low, high):.{rng.randint(1, 12)}e}"


def _staged(rng: random.Random, rate: Rate) -> Plain:
    """One latent and infectious stage after the other; all new cases start at the first."""
    m = rng.randint(2, 8)
    model = Plain(m, rng.choice(["closed", "open"]), rng.random() < 0.5)
    model.exits = {j: rate() for j in range(m)}
    model.moves = {(j, j + 1): rate() for j in range(m - 1)}
    model.transmissions = {(0, j): rate() for j in range(rng.randrange(m), m)}
    return model


def _plain(rng: random.Random, rate: Rate) -> Plain:
    model = _staged(rng, rate)
    model.m = min(model.m, 3)
    model.exits = {j: model.exits[j] for j in range(model.m)}
    model.moves = {pair: value for pair, value in model.moves.items() if max(pair) < model.m}
    model.transmissions = {(0, j): rate() for j in range(model.m)}
    return model


def _cyclic(rng: random.Random, rate: Rate) -> Plain:
    """Hosts go back and forth between states, so that V has cycles to eliminate."""
    m = rng.randint(2, 5)
    model = Plain(m, rng.choice(["closed", "open"]), rng.random() < 0.5)
    model.exits = {j: rate() for j in range(m) if rng.random() < 0.5} or {m - 1: rate()}
    model.moves = {(j, (j + 1) % m): rate() for j in range(m)}
    for j in range(m):
        for i in range(m):
            if i != j and rng.random() < 0.3:
                model.moves[j, i] = rate()
    model.transmissions = {(rng.randrange(m), j): rate() for j in range(m)}
    return model


def _reducible(rng: random.Random, rate: Rate) -> Plain:
    """Blocks of types; a later block may be infected by an earlier one, never the other way round."""
    blocks = [rng.randint(1, 2) for _ in range(rng.randint(2, 3))]
    m = sum(blocks)
    model = Plain(m, rng.choice(["closed", "open"]), rng.random() < 0.5)
    model.exits = {j: rate() for j in range(m)}
    start = 0
    for size in blocks:
        here = range(start, start + size)
        model.transmissions |= {(i, j): rate() for i in here for j in here if rng.random() < 0.8}
        model.transmissions |= {(i, j): rate() for i in here for j in range(start) if rng.random() < 0.3}
        start += size
    model.transmissions = model.transmissions or {(0, m - 1): rate()}
    return model


def _periodic(rng: random.Random, rate: Rate) -> Plain:
    """Kinds of hosts in a ring: each infects the next only."""
    kinds = [rng.randint(1, 2) for _ in range(rng.randint(2, 4))]
    places = [(kind, number) for kind, size in enumerate(kinds) for number in range(size)]
    m = len(places)
    model = Plain(m, rng.choice(["closed", "open"]), rng.random() < 0.5)
    model.exits = {j: rate() for j in range(m)}
    for j, (kind, _) in enumerate(places):
        for i, (other, _) in enumerate(places):
            if other == (kind + 1) % len(kinds):
                model.transmissions[i, j] = rate()
    return model


def _nearly_singular(rng: random.Random, rate: Rate) -> Plain:
    """Hardly anybody leaves; or a reservoir that sheds almost, or more than, as much as it loses."""
    model = _cyclic(rng, rate)
    if rng.random() < 0.5:
        model.exits = {j: _text_of(rng, -12, -7) for j in model.exits}
        return model
    m = model.m = model.m + 1
    model.exits[m - 1] = "1.0"
    model.sources[m - 1, m - 1] = rng.choice(["0.999999999", "0.99", "0.9999999999999999", "1.000001"])
    model.transmissions[0, m - 1] = rate()
    model.sources[m - 1, 0] = rate()
    return model


def _grouped(rng: random.Random, rate: Rate) -> GroupedModel:
    n = rng.randint(2, 4)
    names = rng.sample(["North", "South", "0-4", "65+", "Old town", "x", "ä/b"], n)
    empty = rng.choice([0.0, 0.3])

    def entry() -> str:
        return "0" if rng.random() < empty else rate()

    moves = [["0" if i == j else entry() for j in range(n)] for i in range(n)] if rng.random() < 0.4 else []
    return GroupedModel(
        names,
        [f"{rng.uniform(1, 1e6):.{rng.randint(0, 3)}f}" for _ in range(n)],
        [rate() for _ in range(n)],
        [rate() for _ in range(n)],
        rate(),
        rate(),
        [[entry() for _ in range(n)] for _ in range(n)],
        moves,
        rng.random() < 0.6,
    )


_MAKERS: dict[str, Callable[[random.Random, Rate], Model]] = {
    "plain": _plain,
    "staged": _staged,
    "cyclic": _cyclic,
    "grouped": _grouped,
    "reducible": _reducible,
    "periodic": _periodic,
    "nearly singular": _nearly_singular,
}
KINDS = (*_MAKERS, "scales")


def draw(kind: str, seed: int) -> Model:
    """Return the model of a kind that a seed stands for; "scales": one of the others with rates from 1e-9 to 1e9."""
    rng = random.Random(f"{kind} {seed}")
    wide = kind == "scales"
    maker = _MAKERS[rng.choice(list(_MAKERS)) if wide else kind]
    return maker(rng, lambda: _text_of(rng, *((-9, 9) if wide else (-2, 1))))
