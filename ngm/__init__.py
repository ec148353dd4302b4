"""From compartments and flows to R0: the next-generation matrix of an infection, derived, bounded and explained.

>>> import ngm
>>> scenario = ngm.load("scenarios/…toml")        # doctest: +SKIP
>>> ngm.solve(scenario).R0                         # doctest: +SKIP
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from ngm.errors import DerivationError, ExpressionError, NgmError, ScenarioError

if TYPE_CHECKING:
    from ngm.analysis.allocation import allocate
    from ngm.analysis.assurance import assured_coverage, assured_strength
    from ngm.analysis.batch import reproduction_numbers
    from ngm.analysis.calibrate import calibrate
    from ngm.analysis.compare import compare
    from ngm.analysis.control import control
    from ngm.analysis.course import course
    from ngm.analysis.difference import difference
    from ngm.analysis.drawfile import read_draws
    from ngm.analysis.formula import formula
    from ngm.analysis.mixing import contact_readings, mixing
    from ngm.analysis.mixing_scan import mixing_map, mixing_responses
    from ngm.analysis.outbreak import outbreak
    from ngm.analysis.plane import plane, swings
    from ngm.analysis.sensitivity import sensitivity
    from ngm.analysis.solve import solve
    from ngm.analysis.splits import splits
    from ngm.analysis.strength import coverage_needed, strength_needed
    from ngm.analysis.threshold import threshold
    from ngm.analysis.twin import twin
    from ngm.analysis.uncertainty import draw_table, uncertainty
    from ngm.analysis.units import units
    from ngm.reporting.make import report
    from ngm.scenario.file import load, loads
    from ngm.scenario.model import Scenario
    from ngm.scenario.packages import combined
    from ngm.scenario.slips import conversions, slips

__all__ = [
    "DerivationError",
    "ExpressionError",
    "NgmError",
    "Scenario",
    "ScenarioError",
    "allocate",
    "assured_coverage",
    "assured_strength",
    "calibrate",
    "combined",
    "compare",
    "contact_readings",
    "control",
    "conversions",
    "course",
    "coverage_needed",
    "difference",
    "draw_table",
    "formula",
    "load",
    "loads",
    "mixing",
    "mixing_map",
    "mixing_responses",
    "outbreak",
    "plane",
    "read_draws",
    "report",
    "reproduction_numbers",
    "sensitivity",
    "slips",
    "solve",
    "splits",
    "strength_needed",
    "swings",
    "threshold",
    "twin",
    "uncertainty",
    "units",
]

#: Where each public name is made. Loaded when first used: numpy and scipy take half a second that an import must not cost.
_HOMES = {
    "Scenario": "ngm.scenario.model",
    "allocate": "ngm.analysis.allocation",
    "assured_coverage": "ngm.analysis.assurance",
    "assured_strength": "ngm.analysis.assurance",
    "combined": "ngm.scenario.packages",
    "compare": "ngm.analysis.compare",
    "contact_readings": "ngm.analysis.mixing",
    "control": "ngm.analysis.control",
    "conversions": "ngm.scenario.slips",
    "slips": "ngm.scenario.slips",
    "course": "ngm.analysis.course",
    "coverage_needed": "ngm.analysis.strength",
    "load": "ngm.scenario.file",
    "loads": "ngm.scenario.file",
    "mixing": "ngm.analysis.mixing",
    "mixing_map": "ngm.analysis.mixing_scan",
    "mixing_responses": "ngm.analysis.mixing_scan",
    "calibrate": "ngm.analysis.calibrate",
    "outbreak": "ngm.analysis.outbreak",
    "plane": "ngm.analysis.plane",
    "reproduction_numbers": "ngm.analysis.batch",
    "report": "ngm.reporting.make",
    "sensitivity": "ngm.analysis.sensitivity",
    "solve": "ngm.analysis.solve",
    "strength_needed": "ngm.analysis.strength",
    "swings": "ngm.analysis.plane",
    "threshold": "ngm.analysis.threshold",
    "twin": "ngm.analysis.twin",
    "uncertainty": "ngm.analysis.uncertainty",
    "draw_table": "ngm.analysis.uncertainty",
    "read_draws": "ngm.analysis.drawfile",
    "difference": "ngm.analysis.difference",
    "formula": "ngm.analysis.formula",
    "splits": "ngm.analysis.splits",
    "units": "ngm.analysis.units",
}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        from importlib import import_module

        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'ngm' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(set(globals()) | set(__all__))
