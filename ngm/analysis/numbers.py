"""F, V, K and R0 of one scenario at its values, with or without an intervention: what every verb reads from."""

from __future__ import annotations

import random
from dataclasses import replace
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np

from ngm.analysis.large import difference, faults, stray_losses
from ngm.analysis.point import Point, refuse_huge
from ngm.analysis.state import InfectionFree
from ngm.analysis.stated_entries import is_stated, negative_entry, refuse_negative_shares, without_end
from ngm.analysis.steps_of_time import refuse_overdrawn, refuse_overdrawn_blocks
from ngm.derivation.conditions import check_arrivals, check_exits
from ngm.derivation.outline import thumbnail
from ngm.derivation.template import Template
from ngm.engine.balls import PRECISION, contains_zero, interval, is_sharp, nearest, precision
from ngm.engine.enclosure import MMatrix, inverse, m_matrix
from ngm.engine.growth import class_growth_rate, growth_factor, growth_rate, logarithm
from ngm.engine.large import NextGeneration
from ngm.engine.linear import matmul, possible
from ngm.engine.spectrum import Spectrum, spectrum
from ngm.engine.transitions import SingularTransitions
from ngm.errors import DerivationError, NgmError, Problem
from ngm.expression.tree import Multiply, Number
from ngm.scenario.model import Expression, Intervention, Scenario

__all__ = ["Numbers", "decided_numbers"]

#: Bits tried in turn until every zero, sign and tie is decided; a tie that outlasts them all is a tie.
PRECISIONS = (PRECISION, 4 * PRECISION, 16 * PRECISION)
#: A growth factor of a large model up to this size is rounding.
ROUNDING = 1e-13
#: Types up to which more bits are tried.
MOST_REFINED = 60


class Numbers:
    """F, V, K and R0 of one scenario at its values, as arrays of the engine, computed with `bits` bits."""

    bits = PRECISION

    def __init__(
        self,
        scenario: Scenario,
        intervention: Intervention | None = None,
        *,
        moved: bool = False,
        state: InfectionFree | None = None,
    ) -> None:
        self.scenario, self._moved = scenario, moved
        self.point = Point(scenario, intervention)
        if state is not None:  # known from the same flows under other kinds
            self.point.infection_free = state
        template = self.template = self.point.template
        floats = self.point.plain_tables
        if not is_stated(scenario):
            check_arrivals(template, floats)
            check_exits(template if self.point.exact else Template(thumbnail(scenario)))
        self.plain_matrices = floats
        self.at = np.array(template.at_infection, dtype=int)
        self.no_R0: str | None = None
        self.broken: MMatrix | None = None
        self.F: Any = None
        self.V: Any = None
        self.K_large: Any = None
        self.K: Any = None
        self.spectrum: Spectrum | None = None
        self.operator: NextGeneration | None = None
        self._growth: float | None = None
        self._class_growth: list[float | None] = []
        if self.point.exact:
            self.F, self.V = self.point.F_and_V
            if scenario.projection is not None:
                refuse_negative_shares(template, self.V)
            elif scenario.discrete:
                refuse_overdrawn(template, self.point.evaluator, self.V)
            self._reproduce()
        else:
            self._reproduce_large()

    @property
    def decided(self) -> bool:
        """False where more bits could change the classes, the vectors, whether V is an M-matrix, or the digits of R0 and K."""
        if self.broken is not None:
            return self.broken.decided
        if self.spectrum is None or self.operator is not None:
            return True
        printed = [self.spectrum.root, *self.K.ravel()]
        return self.spectrum.decided and all(contains_zero(entry) or is_sharp(entry) for entry in printed)

    def _reproduce(self) -> None:
        types = self.template.types
        negative = [(i, j) for i, j in zip(*np.nonzero(possible(self.F)), strict=True) if self.F[i, j] < 0]
        if negative:
            i, j = negative[0]
            self.no_R0 = (
                f"F has a negative entry: {types[j]} takes away new infections of {types[i]}. "
                "A rate of new infections must not fall when an infected compartment grows."
            )
            if is_stated(self.scenario):
                self.no_R0 = negative_entry(self.scenario, types[i], types[j])
            return
        verdict = m_matrix(self.V)
        if verdict.verdict == "singular" and verdict.members is not None:
            self._refuse_structure([types[int(k)] for k in verdict.members])
        if verdict.verdict != "yes":
            self.broken = verdict
            self.no_R0 = self._why_none(verdict)
            return
        self.K_large = matmul(self.F, inverse(self.V))
        refuse_huge("K", self.K_large, types)
        self.K = self.K_large[np.ix_(self.at, self.at)]
        if len(self.at):
            self.spectrum = spectrum(self.K)

    def _refuse_structure(self, members: list[str]) -> None:
        """Refuse a V that is singular whatever the values: it still is with every number of the file moved at random."""
        if self._moved or self.scenario.projection is not None:
            return
        rng = random.Random(2002)
        for _ in range(2):
            try:
                other = Numbers(_shaken(self.scenario, rng), moved=True)
            except NgmError:
                return
            if other.broken is None or other.broken.verdict != "singular":
                return
        named = ", ".join(dict.fromkeys(label.split("[")[0] for label in members))
        raise DerivationError(
            Problem(
                "derivation",
                f"V is singular whatever the values: what leaves {named} comes back in the same measure. Check the flows into "
                f"and out of {named}; one of them is meant for another compartment, or stands twice.",
                key=("flow",),
            )
        )

    def _reproduce_large(self) -> None:
        """Find R0 and the rest of a model whose matrices are never written out."""
        slopes, infected = self.point.blocks, self.template.infected
        V = difference(slopes.losses, slopes.gains)
        if self.scenario.discrete:
            refuse_overdrawn_blocks(self.template, V)
        negative, stray = faults(slopes.F), stray_losses(slopes.losses)
        if negative is not None:
            i, j = negative
            self.no_R0 = (
                f"F may have a negative entry: {infected[j]} takes away new infections of {infected[i]} in some group."
            )
        elif stray is not None:
            i, j = stray
            self.no_R0 = (
                f"V may have a positive off-diagonal entry: members leave {infected[i]} because of {infected[j]}."
            )
        elif faults(slopes.gains) is not None:
            self.no_R0 = "V may have a positive off-diagonal entry: what arrives somewhere falls as others grow."
        if self.no_R0 is None:
            try:
                operator = NextGeneration(slopes.F, V, self.at)
                if operator.is_m_matrix():
                    self.operator = operator
                    self._take(operator)
                    return
                self.no_R0 = (
                    "V is no M-matrix at these values: some infected compartments grow without any transmission."
                )
            except SingularTransitions as singular:
                named = ", ".join(infected[k] for k in singular.parts)
                self.no_R0 = f"V is singular at these values: of {named} nobody is lost in some group. Check the exits."
        self.broken = MMatrix("no")
        self._growth = NextGeneration.growth_of(slopes.F, V)

    def _take(self, operator: NextGeneration) -> None:
        if not len(self.at):
            self._growth = operator.growth_rate()
            return
        found = operator.spectrum()
        self._class_growth = [c.growth_rate for c in found.classes]
        single = len(found.classes) == 1 and len(found.classes[0].members) == len(self.at)
        irreducible = single and found.classes[0].period is not None
        periods = tuple(c.period for c in found.classes)
        cycles = {periods[k] for k in found.leading}
        self.spectrum = Spectrum(
            classes=tuple(c.members for c in found.classes),
            roots=tuple(interval(*c.bounds) for c in found.classes),
            periods=periods,
            root=interval(*found.bounds),
            leading=found.leading,
            right=found.right,
            left=found.left,
            irreducible=irreducible,
            period=periods[0] if irreducible else None,
            cycle=cycles.pop() if len(cycles) == 1 else None,
            decided=True,
        )
        start = None if found.right is None else operator.stays(found.right)
        core = [rate for rate in self._class_growth if rate is not None]
        self._growth = operator.growth_rate(start) if not single else max([*core, operator.growth_rate(start)])

    @cached_property
    def factor_ball(self) -> Any:
        """In discrete time rho(F + T), what a step multiplies the infection by, as a ball; None in continuous time."""
        if not self.scenario.discrete:
            return None
        if self._growth is not None:
            factor = 1 + self._growth
            return interval(factor, factor) if factor > ROUNDING else interval(0.0, 0.0)
        return growth_factor(self.F, self.V)

    @property
    def factor(self) -> float | None:
        """In discrete time rho(F + T), what a step multiplies the infection by; None in continuous time."""
        return None if self.factor_ball is None else nearest(self.factor_ball)

    @cached_property
    def growth_ball(self) -> Any:
        """The growth rate per time unit as a ball: of F - V the largest real part of the eigenvalues, or ln rho(F + T)."""
        if self.scenario.given is not None:
            return None
        if self.factor_ball is not None:
            return logarithm(self.factor_ball)
        if self._growth is not None:
            return interval(self._growth, self._growth)
        return growth_rate(self.F, self.V)

    @property
    def growth(self) -> float | None:
        """The growth rate per time unit; None in discrete time where a step leaves nothing, and of a K as given."""
        return None if self.growth_ball is None else nearest(self.growth_ball)

    def class_growth(self, number: int) -> float | None:
        """Return the growth rate of one class of K, as if it were alone; None for a zero class."""
        if self.scenario.given is not None:
            return None
        if self._class_growth:
            found = self._class_growth[number]
            rate = None if found is None else interval(found, found)
        else:
            assert self.spectrum is not None
            rate = class_growth_rate(self.F, self.V, self.at[self.spectrum.classes[number]])
        if rate is not None and self.scenario.discrete:
            rate = logarithm(1 + rate)
        return None if rate is None else nearest(rate)

    def _why_none(self, verdict: MMatrix) -> str:
        types = self.template.types
        if verdict.verdict == "positive off-diagonal":
            assert verdict.entry is not None
            i, j = verdict.entry
            return (
                f"V has a positive off-diagonal entry: members leave {types[i]} the faster, the more there are in {types[j]}. "
                "F V^-1 is then no next-generation matrix."
            )
        members = [] if verdict.members is None else [types[int(k)] for k in verdict.members]
        if self.scenario.projection is not None:
            return without_end(members)
        named = ", ".join(members[:6]) + (", …" if len(members) > 6 else "")
        if verdict.verdict == "singular":
            return (
                f"V is singular at these values: of {named} nobody is lost, so the time spent there has no finite mean. "
                "Check the rates out of it."
            )
        root = ": rho(T) >= 1" if self.scenario.discrete else ""
        return (
            f"V is no M-matrix at these values: {named} grows without any transmission (what arises there exceeds what "
            f"leaves{root}), so the infection-free state is unstable by itself."
        )


def decided_numbers(scenario: Scenario, intervention: Intervention | None = None) -> Numbers:
    """Return the numbers, computed with as many bits as it takes to decide every zero, sign and tie, up to a limit."""
    for bits in PRECISIONS:
        with precision(bits):
            found = Numbers(scenario, intervention)
        found.bits = bits
        if len(found.template.types) > MOST_REFINED or found.decided:
            break
    return found


def _shaken(scenario: Scenario, rng: random.Random) -> Scenario:
    """Return the scenario with each number of its parameters multiplied by a random factor."""
    parameters = {}
    for name, parameter in scenario.parameters.items():
        values = []
        for value in parameter.values:
            factor = Number(Fraction(rng.randrange(500, 2000), 1000))
            shaken = Expression("", Multiply(((1, value.tree), (1, factor)))) if value.is_number else value
            values.append(shaken)
        parameters[name] = replace(parameter, values=tuple(values))
    return replace(scenario, parameters=parameters)
