"""A formula from a paper against the model's own R0: equal, related in a known way, or different, with a point where."""

from __future__ import annotations

from collections.abc import Callable
from decimal import Decimal, localcontext
from fractions import Fraction
from itertools import combinations, product
from typing import Any

import numpy as np

from ngm.analysis.formula_text import read_formula
from ngm.analysis.points import CONTEXT, Place, Places, decimal_value, exact_value
from ngm.analysis.solve import solve
from ngm.analysis.splits import roots, with_kinds
from ngm.analysis.steady import refuse_season
from ngm.errors import Problem, ScenarioError
from ngm.expression.tree import Node, Number
from ngm.results import Solution
from ngm.results_opinion import FormulaMatch, FormulaOpinion
from ngm.scenario.model import Scenario
from ngm.worker import identical

__all__ = ["formula"]

#: Points that are compared, and how many of them must have an R0 before anything is concluded.
POINTS = 24
LEAST = 8
#: Two numbers are one where they differ by less than this share: with a closed form, by arrays, for a type number.
SAME_DIGITS = Decimal("1e-40")
SAME_NUMBER = Decimal("1e-10")
#: Numbers this near are worth a better look.
NEAR = Decimal("1e-7")
#: Seconds for a proof; without one the points speak for themselves.
PROOF_LIMIT = 5.0
MOST_FOR_SETS = 6
MOST_FOR_TARGETS = 6
#: Points at which other splits are computed anew.
SPLIT_POINTS = 4


def formula(scenario: Scenario, text: str, *, seed: int = 1) -> FormulaOpinion:
    r"""Return whether a formula is the model's R0, a number related to it, or another one.

    The two are compared at the file's values and at 24 random points of the parameters' ranges (around the value where
    there is none), with 50 digits where the model has a closed form; where both are rational, in exact fractions. Agreement
    on the surface R0 = 1 alone is never called equality: such a formula is a threshold only.

    Parameters
    ----------
    scenario : Scenario
    text : str
        In the expression syntax or in simple LaTeX; ``R_0 =`` before it is dropped. Names: parameters, definitions,
        uninfected compartments (their value without infection), entries of matrices; ``sum`` runs over groups.
    seed : int
        Of the random points.

    Raises
    ------
    ngm.ExpressionError, ngm.ScenarioError
        The formula cannot be read, or a name in it is not known.
    ngm.DerivationError
        As `ngm.solve`.
    """
    refuse_season(scenario, "the comparison with a formula")
    solution = solve(scenario)
    if solution.R0 is None:
        raise ScenarioError(Problem("formula", f"the model has no R0 to compare with: {solution.no_R0}"))
    places = Places(scenario, solution, seed)
    tree = read_formula(scenario, solution, places, text)
    found: list[tuple[Place, Decimal | None]] = []
    start = places.at(places.typed())
    wanted = POINTS if places.quick else POINTS // 2
    for place in (start, *(places.at(places.draw()) for _ in range(wanted))):
        if place is not None:
            found.append((place, decimal_value(tree, place.decimals)))
    return _Comparison(scenario, solution, text, tree, places, found).opinion()


class _Comparison:
    def __init__(
        self,
        scenario: Scenario,
        solution: Solution,
        text: str,
        tree: Node,
        places: Places,
        found: list[tuple[Place, Decimal | None]],
    ) -> None:
        self.scenario, self.solution, self.text, self.tree = scenario, solution, text, tree
        self.places = places
        self.found = found
        self.same = SAME_DIGITS if places.closed is not None else SAME_NUMBER
        self.compared: list[FormulaMatch] = []

    # --- comparing ----------------------------------------------------------------------------------------------------

    def matches(self, name: str, value: Callable[[Place], Decimal | None], same: Decimal | None = None) -> bool:
        """Return whether the formula has this value at every point, and note in how many it has."""
        agrees = 0
        for count, (place, own) in enumerate(self.found, 1):
            other = value(place)
            if own is None or other is None or not _close(own, other, same or self.same):
                if count > 4:
                    break
                continue
            agrees += 1
        self.compared.append(FormulaMatch(name, agrees, len(self.found)))
        return agrees == len(self.found)

    def opinion(self) -> FormulaOpinion:
        """Return the verdict."""
        if len(self.found) < LEAST:
            return self._verdict(
                "undecided",
                f"Only {len(self.found)} of the points tried have an R0: too few to conclude anything.",
                None,
            )
        if self.matches("R0", lambda place: place.R0):
            proof = "symbols" if self._is_proven() else "fractions" if self._is_exact() else None
            rounded = "to 40 digits" if self.places.closed is not None else "to 10 digits"
            how = {"symbols": "and proven with symbols", "fractions": "in exact fractions"}.get(proof or "", rounded)
            return self._verdict(
                "equal", f"The formula is the model's R0: equal at all {len(self.found)} points, {how}.", proof
            )
        for verdict, name, value in self._powers():
            if self.matches(name, value):
                return self._verdict(verdict, self._power_words(verdict, name), None)
        for find in (self._type_number, self._target_number, self._other_split, self._threshold):
            verdict_message = find()
            if verdict_message is not None:
                return self._verdict(*verdict_message, None)
        return self._verdict("different", "The formula is not the model's R0, and no number related to it.", None)

    def _is_proven(self) -> bool:
        closed = self.places.closed
        if closed is None:
            return False
        scenario = self.scenario
        meanings: dict[str, Node] = {
            name: definition.expression.tree for name, definition in scenario.definitions.items() if not definition.by
        }
        meanings |= dict.fromkeys(self.solution.types, Number(Fraction(0)))
        meanings |= self.places.free
        for parameter in scenario.parameters.values():
            if parameter.follows:
                items = scenario.items(parameter.name, parameter.by)
                meanings |= {item: value.tree for item, value in zip(items, parameter.values, strict=True)}
        any_sign = [item for p in scenario.parameters.values() if p.any_sign for item in scenario.items(p.name, p.by)]
        return identical(self.tree, closed, meanings, any_sign, PROOF_LIMIT)

    def _is_exact(self) -> bool:
        closed = self.places.closed
        if closed is None:
            return False
        for place, _ in self.found:
            own, other = exact_value(self.tree, place.exact), exact_value(closed, place.exact)
            if own is None or own != other:
                return False
        return True

    def _powers(self) -> list[tuple[str, str, Callable[[Place], Decimal | None]]]:
        out: list[tuple[str, str, Callable[[Place], Decimal | None]]] = [
            ("square", "R0^2", lambda place: _power(place.R0, 2))
        ]
        structure = self.solution.structure
        periods = {c.period for c in structure.classes if c.period} if structure is not None else set()
        for period in sorted(periods - {1, 2}):
            out.append(("square", f"R0^{period}", lambda place, period=period: _power(place.R0, period)))  # type: ignore[misc]
        out.append(("root", "sqrt(R0)", lambda place: _root(place.R0)))
        return out

    def _power_words(self, verdict: str, name: str) -> str:
        if verdict == "root":
            return "The formula is the square root of the model's R0: a root is missing in the model, or is one too many in it."
        structure = self.solution.structure
        periods = {c.period for c in structure.classes} if structure is not None else set()
        if periods == {int(name.partition("^")[2])}:
            return (
                f"The formula is {name}: R0 per cycle, where the model's R0 is per generation. Both are 1 together; the "
                "numbers must not be compared."
            )
        return f"The formula is {name}: a root is missing in it, or a generation was counted twice."

    def _type_number(self) -> tuple[str, str] | None:
        at = list(self.solution.types_at_infection)
        m = len(at)
        if not 1 < m <= 12:
            return None
        sizes = range(1, m) if m <= MOST_FOR_SETS else range(1, 2)
        for size in sizes:
            for members in combinations(range(m), size):
                mask = np.zeros(m, dtype=bool)
                mask[list(members)] = True

                def value(place: Place, mask: Any = mask) -> Decimal | None:
                    T = None if place.K is None else _type_number_of(place.K, mask)
                    return None if T is None else Decimal(T)

                if self._some_agree(value, SAME_NUMBER):
                    named = ", ".join(at[k] for k in members)
                    return "type number", (
                        f"The formula is the type-reproduction number of {named}, and not R0: what control of {named} alone "
                        "must undo. Both are 1 together."
                    )
        return None

    def _target_number(self) -> tuple[str, str] | None:
        at = list(self.solution.types_at_infection)
        if not 1 < len(at) <= MOST_FOR_TARGETS:
            return None
        for i, j in product(range(len(at)), repeat=2):

            def value(place: Place, i: int = i, j: int = j) -> Decimal | None:
                T = None if place.K is None else _target_number_of(place.K, i, j)
                return None if T is None else Decimal(T)

            if self._some_agree(value, SAME_NUMBER):
                return "target number", (
                    f"The formula is the target reproduction number of infections of {at[i]} by {at[j]}, and not R0: what "
                    "control of these alone must undo. Both are 1 together."
                )
        return None

    def _some_agree(self, value: Callable[[Place], Decimal | None], same: Decimal, most: int | None = None) -> bool:
        """Return whether the formula has this value wherever the value exists, and it exists at enough points."""
        agreed = 0
        for place, own in self.found[:most]:
            other = value(place)
            if other is None:
                continue
            if own is None or not _close(own, other, same):
                return False
            agreed += 1
        return agreed >= 3

    def _other_split(self) -> tuple[str, str] | None:
        place, own = self.found[0]
        if own is None:
            return None
        for kinds, root in roots(self.places.changed(self.scenario, place.typed)):
            changed = with_kinds(self.scenario, kinds)

            def value(place: Place, changed: Scenario = changed, power: int = 1) -> Decimal | None:
                numbers = self.places.numbers(place.typed, changed)
                return None if numbers is None else _power(Decimal(numbers[0]), power)

            for power in (1, 2):
                if not _close(own, _power(Decimal(root), power), NEAR):
                    continue
                if self._some_agree(lambda p, v=value, k=power: v(p, power=k), SAME_NUMBER, SPLIT_POINTS):  # type: ignore[misc]
                    moved = ", ".join(f"flow {number} as {kind}" for number, kind in kinds.items())
                    square = "" if power == 1 else " squared"
                    return "other split", (
                        f"The formula is R0{square} of another split of the same flows: {moved}. Both are 1 together; "
                        "the numbers must not be compared."
                    )
        return None

    def _threshold(self) -> tuple[str, str] | None:
        """Look for points with R0 = 1 between points on either side, and ask whether the formula is 1 there too."""
        if any(own is None or (own > 1) != (place.R0 > 1) for place, own in self.found):
            return None
        above = [place for place, _ in self.found if place.R0 > 1]
        below = [place for place, _ in self.found if place.R0 < 1]
        for _ in range(300 if self.places.quick else 12):
            if above and below:
                break
            place = self.places.at(self.places.draw())
            if place is not None:
                (above if place.R0 > 1 else below).append(place)
        pairs = list(zip(above, below, strict=False))[: 3 if self.places.quick else 1]
        if not pairs:
            return None
        for high, low in pairs:
            own = self._on_surface(high, low)
            if own is None or abs(own - 1) > Decimal("1e-8"):
                return None
        return "threshold only", (
            "The formula is 1 where the model's R0 is 1, and on the same side of it everywhere, but its values are others: it "
            "tells whether infection spreads, and is not this R0."
        )

    def _on_surface(self, high: Place, low: Place) -> Decimal | None:
        """Return the formula's value where R0 = 1 on the straight line between two points."""
        a, b = Fraction(0), Fraction(1)
        place: Place | None = None
        for _ in range(60 if self.places.quick else 34):
            middle = (a + b) / 2
            typed = {name: high.typed[name] + (low.typed[name] - high.typed[name]) * middle for name in high.typed}
            place = self.places.at(typed)
            if place is None:
                return None
            if place.R0 > 1:
                a = middle
            else:
                b = middle
        return None if place is None else decimal_value(self.tree, place.decimals)

    # --- the answer ---------------------------------------------------------------------------------------------------

    def _verdict(self, verdict: str, message: str, proof: str | None) -> FormulaOpinion:
        worst: tuple[Place, Decimal | None] | None = None
        largest = Decimal(0)
        for place, own in self.found:
            gap = Decimal("Infinity") if own is None else abs(own - place.R0) / place.R0
            if gap > self.same and worst is None:
                worst = (place, own)
            largest = max(largest, gap)
        point: dict[str, float] | None = None
        responses: dict[str, tuple[float, float]] = {}
        if worst is not None and verdict != "equal":
            used = worst[0].decimals
            items = [i for p in self.scenario.parameters.values() for i in self.scenario.items(p.name, p.by)]
            point = {name: float(used[name]) for name in items if name in used}
            responses = self._responses(worst[0])
        return FormulaOpinion(
            self.solution.title,
            self.text,
            verdict,
            message,
            proof is not None,
            proof,
            len(self.found),
            float(largest) if largest.is_finite() else None,
            point,
            None if point is None or worst is None else float(worst[0].R0),
            None if point is None or worst is None or worst[1] is None else float(worst[1]),
            responses,
            tuple(self.compared),
            self.solution.warnings,
        )

    def _responses(self, place: Place) -> dict[str, tuple[float, float]]:
        """Return the elasticities of both at a point, for the parameters in which they differ."""
        step = Fraction(1, 10**12) if self.places.closed is not None else Fraction(1, 10**4)
        out: dict[str, tuple[float, float]] = {}
        for name, value in place.typed.items():
            if value == 0:
                continue
            ends = [self.places.at({**place.typed, name: value * (1 + sign * step)}) for sign in (1, -1)]
            if ends[0] is None or ends[1] is None:
                continue
            both = []
            for values in (
                [end.R0 for end in ends if end is not None],
                [decimal_value(self.tree, end.decimals) for end in ends if end is not None],
            ):
                high, low = values
                if high is None or low is None or high <= 0 or low <= 0:
                    break
                with localcontext(CONTEXT):
                    both.append(
                        float((high.ln() - low.ln()) / (2 * Decimal(step.numerator) / Decimal(step.denominator)))
                    )
            if len(both) == 2 and abs(both[0] - both[1]) > 1e-6 * max(1.0, abs(both[0]), abs(both[1])):
                out[name] = (both[0], both[1])
        return out


def _close(a: Decimal, b: Decimal, same: Decimal) -> bool:
    with localcontext(CONTEXT):
        return abs(a - b) <= same * max(abs(a), abs(b))


def _power(value: Decimal, power: int) -> Decimal:
    with localcontext(CONTEXT):
        return value**power


def _root(value: Decimal) -> Decimal:
    with localcontext(CONTEXT):
        return value.sqrt()


def _type_number_of(K: Any, mask: Any) -> float | None:
    """Return rho(P K (I - (I - P) K)^-1) in plain doubles: many sets at many points; None where the rest sustains itself."""
    rest = np.where(mask[:, None], 0.0, K)
    if np.max(np.abs(np.linalg.eigvals(rest))) >= 1:
        return None
    through = np.where(mask[:, None], K, 0.0) @ np.linalg.inv(np.eye(len(K)) - rest)
    return float(np.max(np.abs(np.linalg.eigvals(through))))


def _target_number_of(K: Any, i: int, j: int) -> float | None:
    """Return K_ij times the ways back from i to j past the entry itself; None where the rest sustains itself."""
    rest = K.copy()
    rest[i, j] = 0.0
    if not K[i, j] or np.max(np.abs(np.linalg.eigvals(rest))) >= 1:
        return None
    return float(K[i, j] * np.linalg.inv(np.eye(len(K)) - rest)[j, i])
