"""The derivation and the numbers of a scenario at its values."""

from __future__ import annotations

from typing import Any

import numpy as np

from ngm.analysis.point import MOST_WRITTEN, Point
from ngm.derivation.conditions import check_arrivals, check_exits, fifth_condition, first_conditions
from ngm.derivation.terms import entry_terms
from ngm.engine.balls import PRECISION, nearest, outward, precision, to_floats
from ngm.engine.enclosure import MMatrix, inverse, m_matrix
from ngm.engine.growth import class_growth_rate, doubling_time, growth_rate
from ngm.engine.linear import matmul, possible
from ngm.engine.spectrum import Spectrum, spectrum
from ngm.results import Class, Matrix, Solution, Structure, Symbolic, Vector
from ngm.scenario.model import Intervention, Scenario
from ngm.worker import LIMIT, WorkerFailed, symbols, warm

__all__ = ["Numbers", "decided_numbers", "solve"]

#: Bits tried in turn until every zero, sign and tie is decided; a tie that outlasts them all is a tie.
PRECISIONS = (PRECISION, 4 * PRECISION, 16 * PRECISION)
#: Types up to which more bits are tried.
MOST_REFINED = 60
#: Types at infection up to which the eigenvalues of K are listed.
MOST_EIGENVALUES = 500


class Numbers:
    """F, V, K and R0 of one scenario at its values, as arrays of the engine, computed with `bits` bits."""

    bits = PRECISION

    def __init__(self, scenario: Scenario, intervention: Intervention | None = None) -> None:
        self.scenario = scenario
        self.point = Point(scenario, intervention)
        template = self.template = self.point.template
        floats = self.point.plain_tables
        check_arrivals(template, floats)
        check_exits(template)
        self.plain_matrices = floats
        self.F, self.V = self.point.F_and_V
        self.at = np.array(template.at_infection, dtype=int)
        self.no_R0: str | None = None
        self.broken: MMatrix | None = None
        self.K_large: Any = None
        self.K: Any = None
        self.spectrum: Spectrum | None = None
        self._reproduce()

    @property
    def decided(self) -> bool:
        """False where more bits could change the classes, the vectors, or whether V is an M-matrix."""
        if self.broken is not None:
            return self.broken.decided
        return self.spectrum is None or self.spectrum.decided

    def _reproduce(self) -> None:
        types = self.template.types
        negative = [(i, j) for i, j in zip(*np.nonzero(possible(self.F)), strict=True) if self.F[i, j] < 0]
        if negative:
            i, j = negative[0]
            self.no_R0 = (
                f"F has a negative entry: {types[j]} takes away new infections of {types[i]}. "
                "A rate of new infections must not fall when an infected compartment grows."
            )
            return
        verdict = m_matrix(self.V)
        if verdict.verdict != "yes":
            self.broken = verdict
            self.no_R0 = self._why_none(verdict)
            return
        self.K_large = matmul(self.F, inverse(self.V))
        if self.point.exact is False:
            self.K_large = np.maximum(self.K_large, 0.0)
        self.K = self.K_large[np.ix_(self.at, self.at)]
        if len(self.at):
            self.spectrum = spectrum(self.K)

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
        named = ", ".join(members[:6]) + (", …" if len(members) > 6 else "")
        if verdict.verdict == "singular":
            return (
                f"V is singular at these values: of {named} nobody is lost, so the time spent there has no finite mean. "
                "Check the rates out of it."
            )
        return (
            f"V is no M-matrix at these values: {named} grows without any transmission (what arises there exceeds what "
            "leaves), so the infection-free state is unstable by itself."
        )


def decided_numbers(scenario: Scenario, intervention: Intervention | None = None) -> Numbers:
    """Return the numbers, computed with as many bits as it takes to decide every zero, sign and tie, up to a limit."""
    for bits in PRECISIONS:
        with precision(bits):
            found = Numbers(scenario, intervention)
        found.bits = bits
        if found.decided or len(found.template.types) > MOST_REFINED:
            break
    return found


def solve(scenario: Scenario, *, limit: float = LIMIT) -> Solution:
    """Return the derivation and the numbers of a scenario: F, V, K, R0 with bounds, structure, growth.

    Parameters
    ----------
    scenario : Scenario
        As `ngm.load` or `ngm.loads` gives it.
    limit : float
        Seconds for the formulas; past them the numbers come alone, with a warning. 0: no formulas.

    Raises
    ------
    ngm.DerivationError
        There is no infection-free state (or several), no transmission, or V is singular by structure.

    References
    ----------
    Diekmann, Heesterbeek & Roberts (2010) J. R. Soc. Interface 7:873-885; van den Driessche & Watmough (2002) Math.
    Biosci. 180:29-48
    """
    if limit > 0:
        warm()  # the child gets ready while the numbers are computed
    found = decided_numbers(scenario)
    with precision(found.bits):
        out = _numbers(found)
    symbolic, more = _symbols(found, limit)
    out["warnings"] += more
    out["warnings"] = tuple(dict.fromkeys(out["warnings"]))
    closed = symbolic.closed_form if out["R0"] is not None else None
    return Solution(**out, closed_form=closed, symbolic=symbolic)


def _numbers(found: Numbers) -> dict[str, Any]:
    scenario, template, point = found.scenario, found.template, found.point
    F, V = found.F, found.V
    small = len(template.types) <= MOST_WRITTEN
    warnings = [*scenario.warnings, *point.infection_free.warnings, *point.reciprocity_warnings()]
    if not small:
        warnings.append(
            f"{len(template.types)} types: matrices are not written out, and the bounds are those of the matrix as rounded."
        )
    if len(found.at) == 0:
        warnings.append("No flow makes new infections near the infection-free state: R0 is 0.")
    r = nearest_of(growth_rate(F, V))
    doubling = doubling_time(r)
    spec = found.spectrum
    R0: float | None = None
    bounds: tuple[float, float] | None = None
    per_cycle: float | None = None
    structure: Structure | None = None
    right = left = None
    if found.no_R0 is None:
        if spec is None:
            R0, bounds, per_cycle = 0.0, (0.0, 0.0), 0.0
            structure = Structure(False, None, ())
        else:
            bounds = outward(spec.root)
            R0 = min(max(nearest(spec.root), bounds[0]), bounds[1])
            if R0 == 0:
                per_cycle = 0.0
            elif spec.cycle is not None:
                per_cycle = nearest(spec.root**spec.cycle)
            right, left = _vector(spec.right), _vector(spec.left)
            structure = _structure(found, spec)
            if len(spec.leading) > 1 and R0 > 0:
                warnings.append("Several classes attain R0: the stable distribution is not unique.")
    conditions = _conditions(found, warnings)
    eigenvalues: tuple[tuple[float, float], ...] = ()
    if found.K is not None and 0 < len(found.at) <= MOST_EIGENVALUES:
        values = np.linalg.eigvals(_plain(found.K))
        order = np.argsort(-np.abs(values), kind="stable")
        eigenvalues = tuple((float(values[k].real), float(values[k].imag)) for k in order)
    if found.no_R0 is not None:
        warnings.append(f"No R0: {found.no_R0}")
    return {
        "title": scenario.title,
        "time_unit": scenario.time_unit,
        "digest": scenario.digest,
        "types": template.types,
        "type_labels": {
            item: scenario.compartments[name].label or name
            for name in template.infected
            for item in scenario.items(name, template.by(name))
        },
        "infection_free": _state(found),
        "residual": point.infection_free.residual,
        "F": _matrix(F) if small else None,
        "V": _matrix(V) if small else None,
        "K_large": _matrix(found.K_large) if small and found.K_large is not None else None,
        "types_at_infection": tuple(template.types[k] for k in found.at),
        "K": _matrix(found.K) if small and found.K is not None else None,
        "R0": R0,
        "no_R0": found.no_R0,
        "R0_bounds": bounds,
        "per_cycle": per_cycle,
        "right": right,
        "left": left,
        "structure": structure,
        "growth_rate": r,
        "doubling_time": None if doubling is None else nearest_of(doubling),
        "conditions": tuple(conditions),
        "warnings": warnings,
        "eigenvalues": eigenvalues,
        "terms": entry_terms(template),
    }


def _conditions(found: Numbers, warnings: list[str]) -> list[Any]:
    conditions = first_conditions(found.template, found.plain_matrices)
    regular = found.broken is None
    conditions.append(fifth_condition(found.point.is_stable_without_infection(), regular, found.no_R0))
    for condition in conditions:
        if not condition.holds:
            warnings.append(f"{condition.name} does not hold: {condition.detail}")
    return conditions


def _structure(found: Numbers, spec: Spectrum) -> Structure:
    types = [found.template.types[k] for k in found.at]
    out = []
    for members, root, period in zip(spec.classes, spec.roots, spec.periods, strict=True):
        rate = None
        if period is not None:
            rate = class_growth_rate(found.F, found.V, found.at[members])
        out.append(
            Class(
                tuple(types[int(k)] for k in members),
                nearest(root),
                period,
                None if rate is None else nearest_of(rate),
            )
        )
    return Structure(spec.irreducible, spec.period, tuple(out))


def _symbols(found: Numbers, limit: float) -> tuple[Symbolic, list[str]]:
    if limit <= 0:
        return Symbolic(), []
    point, template = found.point, found.template
    values: dict[str, float] = {}
    for name, parameter in found.scenario.parameters.items():
        flat = _plain(template.space.flatten(point.evaluator.name(name), parameter.by))[:, 0]
        values.update(zip(found.scenario.items(name, parameter.by), flat.tolist(), strict=True))
    branches = {
        s.name: [int(v) for v in _plain(point.evaluator.names[s.name]).ravel()] for s in template.at_rest.selectors
    }
    try:
        return symbols(found.scenario, _state(found), values, branches, limit), []
    except WorkerFailed as failed:
        return Symbolic(), [f"No formulas: {failed}"]


def _state(found: Numbers) -> dict[str, float]:
    template = found.template
    out: dict[str, float] = {}
    for name in template.uninfected:
        flat = _plain(template.space.flatten(np.asarray(found.point.state[name]), template.by(name)))[:, 0]
        out.update(zip(found.scenario.items(name, template.by(name)), flat.tolist(), strict=True))
    return out


def _plain(values: Any) -> Any:
    return to_floats(values) if values.dtype == object else np.asarray(values, dtype=float)


def nearest_of(value: Any) -> float:
    """Return a ball or a double as a double."""
    return float(value) if isinstance(value, float) else nearest(value)


def _matrix(values: Any) -> Matrix:
    return tuple(tuple(row) for row in _plain(values).tolist())


def _vector(values: Any) -> Vector | None:
    return None if values is None else tuple(_plain(values).tolist())
