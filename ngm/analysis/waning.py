"""Where protection wanes in a model, read from its flows: a vaccine's, or the immunity that an infection leaves."""

from __future__ import annotations

from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.derivation.evaluate import FLOATS
from ngm.derivation.template import flow_name
from ngm.results_control import Waning
from ngm.scenario.model import Flow, Scenario

__all__ = ["waning_of"]

#: Rates of infection that differ by less than this share are the same.
SAME = 1e-9


def waning_of(found: Numbers) -> tuple[Waning, ...]:
    """Return the flows by which protection is lost, in the order of the file.

    Such a flow leads from one uninfected compartment to another that new infections leave, where the members of the first are
    infected at a lower rate per head, or not at all. It is a vaccine's where people reach the protected compartment from the
    other one, or where some are born into either; it is that of past infection where they reach it from an infected one.
    A flow between compartments of the same exposure, as in growing up, is none.
    """
    scenario = found.scenario
    out = []
    for number, flow in enumerate(scenario.flows, 1):
        source, target = flow.source, flow.target
        if flow.kind != "transition" or source is None or target is None:
            continue
        if scenario.compartments[source].infected or scenario.compartments[target].infected:
            continue
        kind = _kind(scenario, source, target)
        if kind is None or not _is_less_exposed(found, source, target):
            continue
        rates = _per_head(found, flow)
        if not len(rates) or not np.all(np.isfinite(rates)) or not np.any(rates > 0):
            continue
        out.append(
            Waning(
                flow=flow_name(scenario, number),
                compartment=source,
                label=scenario.compartments[source].label or source,
                back_to=target,
                kind=kind,
                slowest=float(rates[rates > 0].min()),
                fastest=float(rates.max()),
                time_unit=scenario.time_unit,
            )
        )
    return tuple(out)


def _kind(scenario: Scenario, protected: str, exposed: str) -> str | None:
    """Return what protects the members of a compartment: "vaccine" or "infection"; None where the flows do not say."""
    entries = {f.source for f in scenario.flows if f.target == protected and f.kind == "transition"}
    if any(source is not None and scenario.compartments[source].infected for source in entries):
        return "infection"
    born = any(f.source is None and f.target == exposed for f in scenario.flows)
    return "vaccine" if exposed in entries or (None in entries and born) else None


def _is_less_exposed(found: Numbers, protected: str, exposed: str) -> bool:
    """Return whether one member of the protected compartment is infected at a lower rate than one of the other."""
    template = found.template
    one = {
        name: np.ones((*template.space.shape(template.by(name)), 1))
        for name in (*template.infected, protected, exposed)
    }
    evaluator = _evaluator(found, one)

    def rate(source: str) -> float:
        flows = [f for f in found.scenario.flows if f.source == source and f.kind == "transmission"]
        return float(sum(np.sum(evaluator.value(flow.rate.tree)) for flow in flows))

    return rate(protected) < rate(exposed) * (1 - SAME)


def _per_head(found: Numbers, flow: Flow) -> Any:
    """Return the rate per head at which a flow leaves its source at the infection-free state, by group."""
    template = found.template
    assert flow.source is not None
    by = template.by(flow.source)
    shape = (*template.space.shape(by), 1)
    here = np.broadcast_to(as_floats(np.asarray(found.point.state[flow.source])), shape)
    values = []
    for more in (1.0, 0.0):
        value = _evaluator(found, {flow.source: here + more}).value(flow.rate.tree)
        values.append(template.space.flatten(np.broadcast_to(value, np.broadcast_shapes(value.shape, shape)), by)[:, 0])
    return values[0] - values[1]


def _evaluator(found: Numbers, changed: dict[str, Any]) -> Any:
    point = found.point
    state = {name: as_floats(np.asarray(value)) for name, value in point.state.items()}
    matrices = {name: as_floats(np.asarray(value)) for name, value in point.matrices.items()}
    return found.template.evaluator(FLOATS, {**state, **changed}, matrices=matrices)
