"""What must hold for every model: one function a law, each raising AssertionError with the numbers."""

from __future__ import annotations

import random
import re
from collections.abc import Callable

import mpmath
import numpy as np

import ngm
from ngm.derivation.symbols import derive_symbols
from ngm.expression.parse import parse
from ngm.expression.write import write
from ngm.results import Solution
from ngm.scenario.model import Scenario
from tests.adversaries.models import Model
from tests.expression.evaluate import value
from tests.properties.random_models import DIGITS, spectral_radius

__all__ = ["LAWS", "check"]

#: Less than this share is the rounding of 60 digits.
_NOTHING = mpmath.mpf(10) ** -45


class Case:
    """A model with everything that the laws look at."""

    def __init__(self, model: Model) -> None:
        self.model = model
        self.scenario: Scenario = ngm.loads(model.scenario_text)
        self.solution: Solution = ngm.solve(self.scenario, limit=0)
        self.F, self.V = model.truth()
        with mpmath.workdps(DIGITS):
            self.inverse = mpmath.inverse(self.V)
            self.K = self.F * self.inverse
            self.R0 = spectral_radius(self.K)

    @property
    def conditioned(self) -> float:
        """How much a rounding of one parameter may be felt: only a reservoir that balances its losses feels more."""
        if not getattr(self.model, "sources", None):
            return 1.0
        return max(1.0, float(max(abs(x) for x in self.inverse) * max(abs(x) for x in self.V)))

    @property
    def has_R0(self) -> bool:
        return self.solution.R0 is not None


def close(first: object, second: object, rel: float) -> bool:
    """Return whether two numbers agree to a share of the larger one."""
    with mpmath.workdps(DIGITS):
        one, other = mpmath.mpf(first), mpmath.mpf(second)
        return bool(abs(one - other) <= rel * max(abs(one), abs(other)))


def existence(case: Case) -> None:
    """R0 exists exactly where V^-1 >= 0 in 60 digits; in between lies what 60 digits cannot tell."""
    negative = min(case.inverse) < -_NOTHING * max(case.inverse)
    assert case.has_R0 != negative, (case.solution.no_R0, min(case.inverse))
    assert case.has_R0 or case.solution.no_R0


def bounds(case: Case) -> None:
    """The bounds enclose R0 in 60-digit arithmetic and are two neighbouring numbers or little more."""
    if not case.has_R0:
        return
    solution = case.solution
    assert solution.R0_bounds is not None
    assert solution.R0 is not None
    low, high = solution.R0_bounds
    with mpmath.workdps(DIGITS):
        assert mpmath.mpf(low) <= case.R0 <= mpmath.mpf(high), (low, case.R0, high)
    assert low <= solution.R0 <= high
    assert high - low <= 1e-15 * high, (low, high)


def numbers(case: Case) -> None:
    """F, V, K_large and K are those of 60-digit arithmetic, entry by entry."""
    if not case.has_R0:
        return
    solution = case.solution
    for name, ours, truth in (("F", solution.F, case.F), ("V", solution.V, case.V), ("K", solution.K_large, case.K)):
        assert ours is not None
        nothing = _NOTHING * max(abs(x) for x in truth)
        for i, row in enumerate(ours):
            for j, entry in enumerate(row):
                assert close(entry, truth[i, j], 1e-13) or abs(truth[i, j]) <= nothing, (name, i, j, entry, truth[i, j])


def threshold(case: Case) -> None:
    """R0 - 1 and the growth rate share their sign."""
    if case.has_R0 and abs(case.R0 - 1) > 1e-12:
        assert (case.R0 > 1) == (case.solution.growth_rate > 0), (case.R0, case.solution.growth_rate)


def formulas(case: Case) -> None:
    """Every formula, evaluated in 50 digits, is the number of 60-digit arithmetic."""
    if not case.has_R0:
        return
    values: dict[str, object] = dict(case.model.values())
    point = {name: float(str(number)) for name, number in values.items()}
    symbolic = derive_symbols(case.scenario, case.solution.infection_free, point)

    def evaluated(text: str) -> mpmath.mpf:
        return value(parse(text, items=True), values)

    for name, text in symbolic.abbreviations.items():
        values[name] = evaluated(text)
    kept = [case.solution.types.index(name) for name in case.solution.types_at_infection]
    for name, texts, truth, rows in (
        ("F", symbolic.F, case.F, range(case.F.rows)),
        ("V", symbolic.V, case.V, range(case.F.rows)),
        ("K", symbolic.K, case.K, kept),
    ):
        for i, row in zip(rows, texts or (), strict=False):
            for j, text in zip(rows, row, strict=True):
                assert close(evaluated(text), truth[i, j], 1e-25), (name, i, j, text)
                assert write(parse(text, items=True)) == text
    if symbolic.closed_form is not None:
        assert close(evaluated(symbolic.closed_form), case.R0, 1e-20), symbolic.closed_form


def compiled(case: Case) -> None:
    """The compiled program, given the parameters as arrays, ends at the same number."""
    values = {name: p for name, p in case.model.values().items() if name in case.scenario.parameters}
    out = ngm.reproduction_numbers(case.scenario, {name: np.full(3, float(v)) for name, v in values.items()})
    if not case.has_R0:
        assert np.all(np.isnan(out)), out
        return
    assert len(set(out.tolist())) == 1
    assert close(out[0], case.R0, 1e-13 * case.conditioned), (out[0], case.R0)


def order(case: Case) -> None:
    """The order of flows and of compartments changes no number."""
    parts = re.split(r"\n(?=\[)", case.model.scenario_text)
    flows = [part for part in parts if part.startswith("[[flow]]")]
    head = [part for part in parts if not part.startswith("[[flow]]")]
    random.Random(len(flows)).shuffle(flows)
    at = next(k for k, part in enumerate(head) if part.startswith("[compartments]"))
    title, *lines = head[at].strip().splitlines()
    head[at] = "\n".join([title, *reversed(lines)])
    other = ngm.solve(ngm.loads("\n".join([*head, *flows])), limit=0)
    assert sorted(other.types) == sorted(case.solution.types)
    assert other.R0_bounds == case.solution.R0_bounds, (other.R0_bounds, case.solution.R0_bounds)
    assert close(other.growth_rate, case.solution.growth_rate, 1e-9)


def targets(case: Case) -> None:
    """With the rows of the targeted types divided by T, R0 is 1 in 60-digit arithmetic."""
    if not case.has_R0:
        return
    at = {name: k for k, name in enumerate(case.solution.types)}
    for number in ngm.control(case.scenario).type_reproduction[:12]:
        if number.T is None or number.T <= 0:
            assert number.T == 0 or number.why
            continue
        # a T of 1e77 leaves entries of as many scales, and takes as many digits more
        digits = DIGITS + 3 * max(0, int(mpmath.log10(number.T)))
        with mpmath.workdps(digits):
            divided = case.F * mpmath.inverse(case.V)
            for name in number.types:
                for j in range(divided.cols):
                    divided[at[name], j] = divided[at[name], j] / mpmath.mpf(number.T)
            assert close(spectral_radius(divided, digits), 1, 1e-6), (number.types, number.T)


def time_units(case: Case) -> None:
    """In units ten times as long every rate is ten times as large: R0 stays, the growth rate follows."""
    if case.scenario.dimensions:
        # contacts and moves carry time too, and are entries of matrices: no override reaches them
        return
    values = {name: 10 * float(p) for name, p in case.model.values().items() if name in case.scenario.parameters}
    other = ngm.solve(case.scenario.with_values(**values), limit=0)
    assert (other.R0 is None) == (case.solution.R0 is None) or case.conditioned > 1e12
    if other.R0 is not None and case.solution.R0 is not None:
        assert close(other.R0, case.solution.R0, 1e-12 * case.conditioned), (other.R0, case.solution.R0)
    if abs(case.R0 - 1) > 1e-6:
        assert close(other.growth_rate, 10 * case.solution.growth_rate, 1e-12 * case.conditioned)


def indices(case: Case) -> None:
    """Elasticities of R0 by parameters that carry time sum to 0 (no matrices in these models)."""
    if not case.has_R0 or case.scenario.dimensions or not case.solution.R0 or case.solution.right is None:
        return
    local = ngm.sensitivity(case.scenario).local
    if any(row.elasticity is None for row in local):
        return
    total = sum(row.elasticity or 0.0 for row in local)
    size = max(1.0, *(abs(row.elasticity or 0.0) for row in local))
    assert abs(total) <= 1e-7 * size, total


LAWS: dict[str, Callable[[Case], None]] = {
    law.__name__: law
    for law in (existence, bounds, numbers, threshold, formulas, compiled, order, targets, time_units, indices)
}
#: Laws that take long: every so many models.
_SELDOM = {"indices": 4, "formulas": 2, "targets": 2, "time_units": 2, "order": 2}


def check(model: Model, number: int) -> tuple[bool, list[str]]:
    """Return whether the model has an R0, and each broken law with what was found."""
    case = Case(model)
    broken = []
    for at, (name, law) in enumerate(LAWS.items()):
        if (number + at) % _SELDOM.get(name, 1):
            continue
        try:
            law(case)
        except Exception as error:
            broken.append(f"{name}: {type(error).__name__}: {str(error)[:500]}")
    return case.has_R0, broken
