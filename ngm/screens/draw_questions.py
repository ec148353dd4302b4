"""What is asked of draws: where they come from, and what is worked out at each."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import streamlit as st

import ngm
from ngm.errors import NgmError, Problem
from ngm.screens import asking, parts, state
from ngm.screens.parts import Shown, plain
from ngm.typed import pairs

__all__ = ["Question", "asked_question"]

#: Draws at the most on the page; the command line and Python take more.
MOST_DRAWS = 200_000
OWN, BROUGHT = "from the ranges and distributions of the scenario", "from a file of joint draws"
DESIGNS = {"Latin hypercube": "latin_hypercube", "Scrambled Sobol points": "sobol"}
#: Types and entries of K of which a number is offered.
MOST_OFFERED = 30
#: Types up to which sets of them are offered, too.
MOST_IN_SETS = 5
GROWTH = "growth_rate"


@dataclass(frozen=True)
class Question:
    """Draws of one scenario, and what is wanted of each.

    Attributes
    ----------
    draws : int or None
        How many from the distributions; None for the draws of a file, whose bytes are `content`.
    digest : str
        Of `content`: it stands for it in a key.
    pairs : tuple of ((name, name), number)
        Rank correlations.
    of : tuple of str
        Numbers other than R0.
    """

    text: str
    folder: str | None
    draws: int | None
    seed: int
    kind: str
    pairs: tuple[tuple[tuple[str, str], float], ...]
    of: tuple[str, ...]
    digest: str
    name: str
    content: bytes

    @property
    def key(self) -> tuple[object, ...]:
        """What the answer depends on."""
        return self.text, self.folder, self.draws, self.seed, self.kind, self.pairs, self.of, self.digest, self.name

    @property
    def scenario(self) -> ngm.Scenario:
        """The scenario."""
        return ngm.loads(self.text, folder=self.folder)

    def source(self, scenario: ngm.Scenario) -> Any:
        """Return how many draws, or the draws of the file."""
        return ngm.read_draws(scenario, self.content, self.name) if self.draws is None else self.draws

    @property
    def settings(self) -> dict[str, Any]:
        """The keywords that say how draws are made."""
        return {"seed": self.seed, "kind": self.kind, "correlation": dict(self.pairs) or None}

    @property
    def options(self) -> list[str]:
        """The same on the command line."""
        if self.draws is None:
            out = ["--from", self.name]
        else:
            out = ["--draws", str(self.draws), "--seed", str(self.seed)]
            out += ["--design", "sobol"] if self.kind == "sobol" else []
        if self.pairs:
            out += ["--correlate", *(f"{a},{b}={value!r}" for (a, b), value in self.pairs)]
        return out


def asked_question(shown: Shown) -> Question | None:
    """Ask where draws come from and what is wanted; None, with a word why, as long as there is no question."""
    source = st.radio(
        "Draws",
        [OWN, BROUGHT],
        index=int(state.recall("sensitivity.source") == BROUGHT),
        horizontal=True,
        key="sensitivity.source",
    )
    state.remember("sensitivity.source", source)
    return _own(shown) if source == OWN else _brought(shown)


def _own(shown: Shown) -> Question | None:
    entries = asking.Entries()
    first, second, third = st.columns(3)
    number = entries.number("Number of draws", "sensitivity.draws", "2000", first)
    seed = entries.number("Seed", "sensitivity.seed", "1", second, "The same seed gives the same numbers.")
    with third:
        design = asking.choice("Design", list(DESIGNS), "sensitivity.design")
    for value, label, low, high in (
        (number, "Number of draws", 1, MOST_DRAWS),
        (seed, "Seed", 0, 2**32 - 1),
    ):
        if value is not None and not (value == int(value) and low <= value <= high):
            advice = f"expected a whole number from {low} to {high:,}, not {value:g}."
            entries.problems.append(Problem(label, advice))
    typed = st.text_area(
        "Rank correlations of what is drawn (optional)",
        value=state.recall("sensitivity.correlations"),
        key="sensitivity.correlations",
        height=68,
        placeholder="one pair a line, for example: beta, gamma = -0.6",
        help="From -1 to 1; pairs that are not named are independent. Sobol indices need independent parameters.",
    )
    state.remember("sensitivity.correlations", typed)
    found: dict[tuple[str, str], float] = {}
    try:
        found = pairs([line for line in typed.splitlines() if line.strip()], "Rank correlations")
    except NgmError as error:
        entries.problems += error.problems
    parts.problem_box(entries.problems)
    of = _numbers(shown)
    if entries.problems or number is None or seed is None:
        return None
    question = Question(
        shown.text, shown.folder, int(number), int(seed), DESIGNS[design], tuple(found.items()), of, "", "", b""
    )
    return question if asking.asked("sensitivity.own", "Draw", question.key) else None


def _brought(shown: Shown) -> Question | None:
    file = st.file_uploader(
        "A file of joint draws: CSV or Parquet", type=["csv", "txt", "tsv", "parquet", "pq"], key="sensitivity.file"
    )
    if file is not None:
        # Kept for the way back from other pages: a field for files is empty then. Every byte is one sign of the text.
        content = file.getvalue()
        token = f"{file.name}\n{hashlib.sha256(content).hexdigest()}"
        if state.recall("sensitivity.token") != token:
            state.remember("sensitivity.token", token)
            state.remember("sensitivity.content", content.decode("latin-1"))
    held = state.recall("sensitivity.content")
    if not held:
        st.caption(
            "A column a parameter, a row a draw, the numbers in each parameter's own unit. Columns are matched by name; "
            "sigma[65+] is one group. Parameters without a column keep their value."
        )
        return None
    name, digest = state.recall("sensitivity.token").split("\n")
    first, second = st.columns([3, 1], vertical_alignment="center")
    first.caption(f"Draws of the file {plain(name)}.")
    if second.button("Leave this file", key="sensitivity.leave", disabled=file is not None):
        state.remember("sensitivity.content", "")
        state.remember("sensitivity.token", "")
        st.rerun()
    of = _numbers(shown)
    return Question(shown.text, shown.folder, None, 0, "latin_hypercube", (), of, digest, name, held.encode("latin-1"))


def _numbers(shown: Shown) -> tuple[str, ...]:
    """Ask for other numbers whose distributions are wanted."""
    solution = shown.solution
    types = solution.types_at_infection
    offered = [] if solution.growth_rate is None else [GROWTH]
    offered += [f"T({name})" for name in types[:MOST_OFFERED]]
    if len(types) <= MOST_IN_SETS:
        sets = [chosen for size in range(2, len(types)) for chosen in combinations(types, size)]
        offered += [f"T({', '.join(chosen)})" for chosen in sets]
    if solution.K is not None:
        entries = [
            f"T({types[i]} <- {types[j]})" for i, row in enumerate(solution.K) for j, value in enumerate(row) if value
        ]
        offered += entries[:MOST_OFFERED]
    return asking.picked(
        "Also the distribution of",
        offered,
        "sensitivity.of",
        "growth rate, numbers of types (T) and of who infects whom",
    )
