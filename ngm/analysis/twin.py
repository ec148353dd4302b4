"""A model in discrete time beside its twin in continuous time, and the other way round.

The same flows, read in the other time. Of the members of an infected state j the share e_j leaves in a step; that is what a
constant rate h_j does for one time unit where

    e_j = 1 - exp(-h_j),

shared among the ways out in proportion. What one member infects (or sheds) in a unit of time is taken over as it is: near
the infection-free state the chance to be infected in a step is so small that 1 - exp(-x) = x. So the twin has the same F,
and column j of T - I times h_j / e_j (from discrete to continuous time) or e_j / h_j (the other way).

Source: own reasoning on the definitions of Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127-1147.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.process import MOST_DENSE, Process, process
from ngm.engine.balls import nearest
from ngm.engine.perron import reproduction_number
from ngm.errors import Problem, ScenarioError
from ngm.results_outbreak import Twin, TwinStay, TwinVersion
from ngm.scenario.model import Scenario

__all__ = ["twin", "twin_matrices"]

FloatArray = npt.NDArray[np.float64]

#: Relative differences of R0 up to this are told as none worth mentioning.
SMALL = 0.02


def twin(scenario: Scenario) -> Twin:
    """Return a scenario's numbers beside those of the same flows in the other time.

    Raises
    ------
    ngm.ScenarioError
        The matrices stand in the file, a rate has a season, or the model has too many types.
    ngm.DerivationError
        As `ngm.solve`.

    Examples
    --------
    >>> import ngm
    >>> found = ngm.twin(ngm.load("scenarios/seir-velmar-fever.toml"))
    >>> [(v.discrete, round(v.R0, 3)) for v in found.versions]
    [(False, 2.099), (True, 2.316)]
    """
    _refuse(scenario)
    found = decided_numbers(scenario)
    if len(found.template.types) > MOST_DENSE:
        raise ScenarioError(Problem("twin", f"more than {MOST_DENSE:,} types. Take fewer groups for the comparison."))
    warnings = [*scenario.warnings, *found.point.infection_free.warnings]
    if found.no_R0 is not None:
        warnings.append(f"No R0: {found.no_R0}")
        return Twin(
            scenario.title,
            scenario.time_unit,
            scenario.digest,
            scenario.discrete,
            (_typed(found),),
            (),
            ("There is no R0 at these values, and so no twin to compare.",),
            "None: there is no R0 at these values.",
            tuple(warnings),
        )
    events = process(found)
    leaving = events.leaving
    stays = tuple(
        _stay(name, float(out), scenario.discrete) for name, out in zip(found.template.types, leaving, strict=True)
    )
    versions = [_typed(found)]
    whole = [stay.type for stay in stays if stay.hazard is None]
    if whole:
        named = ", ".join(whole[:6]) + (", …" if len(whole) > 6 else "")
        warnings.append(
            f"All members of {named} leave within a step: no constant rate does that, so there is no "
            "twin in continuous time that "
            "keeps these shares."
        )
    else:
        F, V = twin_matrices(events, scenario.discrete)
        name = (
            "continuous, rates with the same shares left" if scenario.discrete else "discrete, shares left after a step"
        )
        versions.append(_version(name, F, V, not scenario.discrete))
    if scenario.discrete:
        versions.append(_version("continuous, the same numbers as rates", events.F, events.V, False))
    return Twin(
        scenario.title,
        scenario.time_unit,
        scenario.digest,
        scenario.discrete,
        tuple(versions),
        stays,
        tuple(_differ(scenario, versions, stays)),
        _report(scenario, versions, stays),
        tuple(dict.fromkeys(warnings)),
    )


def twin_matrices(events: Process, discrete: bool, step: float = 1.0) -> tuple[FloatArray, FloatArray]:
    """Return F and V of the twin: of shares in a step as rates, or of rates as shares in a step of this length.

    Parameters
    ----------
    events : Process
    discrete : bool
        Whether `events` are those of a step; every state then keeps a share.
    step : float
        Length of a step in time units, where `events` are rates.
    """
    leaving = events.leaving
    if discrete:
        hazard = -np.log1p(-leaving)
        scale = np.divide(hazard, leaving, out=np.ones_like(leaving), where=leaving > 0)
        width = 1.0
    else:
        share = -np.expm1(-leaving * step)
        scale = np.divide(share, leaving, out=np.full_like(leaving, step), where=leaving > 0)
        width = step
    F = events.births * width + events.swaps * scale
    V = np.diag(leaving * scale) - events.moves * scale - events.sources * width
    return F, V


def _refuse(scenario: Scenario) -> None:
    if scenario.given is not None or scenario.projection is not None:
        raise ScenarioError(
            Problem(
                "twin",
                "the matrices stand in the file, and a twin is made of flows. Write compartments and flows to compare "
                "discrete and continuous time.",
            )
        )
    seasonal = [name for name, parameter in scenario.parameters.items() if parameter.season is not None]
    if seasonal:
        named = ", ".join(seasonal[:6])
        raise ScenarioError(Problem("twin", f"{named} has a season. Take the season out to compare both times."))


def _stay(name: str, leaving: float, discrete: bool) -> TwinStay:
    """Return the stay in a state of which `leaving` leaves: a share in a step, or a rate."""
    if discrete:
        hazard = -math.log1p(-leaving) if leaving < 1 - 1e-12 else None
        share = leaving
    else:
        hazard, share = leaving, -math.expm1(-leaving)
    return TwinStay(
        name, share, hazard, 1 / share if share > 0 else None, None if hazard is None or hazard == 0 else 1 / hazard
    )


def _typed(found: Numbers) -> TwinVersion:
    R0 = None
    if found.no_R0 is None:
        R0 = 0.0 if found.spectrum is None else nearest(found.spectrum.root)
    r = found.growth
    name = "as typed, " + ("discrete" if found.scenario.discrete else "continuous")
    doubling = math.log(2) / r if r is not None and r > 0 else None
    return TwinVersion(name, found.scenario.discrete, R0, found.no_R0, r, found.factor, doubling)


def _version(name: str, F: FloatArray, V: FloatArray, discrete: bool) -> TwinVersion:
    R0 = reproduction_number(np.maximum(F @ np.linalg.inv(V), 0.0))
    s = float(np.linalg.eigvals(F - V).real.max())
    factor = 1 + s if discrete else None
    r = s if factor is None else (math.log(factor) if factor > 0 else None)
    return TwinVersion(name, discrete, R0, None, r, factor, math.log(2) / r if r is not None and r > 0 else None)


def _short(stays: tuple[TwinStay, ...]) -> TwinStay:
    return max(stays, key=lambda stay: stay.share_leaving)


def _differ(scenario: Scenario, versions: list[TwinVersion], stays: tuple[TwinStay, ...]) -> list[str]:
    """Return why the numbers differ."""
    unit, shortest = scenario.time_unit, _short(stays)
    out = [
        f"In discrete time all that happens within one {unit} happens at once: who is in a state at "
        "its start infects for all of "
        "it, and only then leaves. Where the share e leaves in a step, the mean stay is 1/e steps; "
        "at the constant rate that "
        "leaves the same share, -ln(1 - e), it is -1/ln(1 - e), about half a step less."
    ]
    if shortest.steps is not None and shortest.time is not None:
        out.append(
            f"The state left fastest is {shortest.type}: {100 * shortest.share_leaving:.4g} % in a "
            f"step, so {shortest.steps:.4g} steps "
            f"against {shortest.time:.4g} {unit}s. The longer a step is beside the stays, the further "
            "apart the numbers are; they "
            "meet as it gets shorter."
        )
    if len(versions) == 3:
        out.append(
            "Taken as rates, the same numbers give the same R0, since F and V are the same matrices, "
            "but another growth: a step "
            "multiplies by 1 + s where continuous growth multiplies by exp(s), s the largest real "
            "part of the eigenvalues of F - V."
        )
    elif scenario.discrete:
        out.append("Taken as rates, the same numbers give the same R0, but more leave than there were.")
    if len(versions) > 1 and versions[1].R0 and versions[0].R0 and (versions[0].R0 - 1) * (versions[1].R0 - 1) < 0:
        out.append(
            "They lie on different sides of 1: the step decides the answer. Do not report either without that remark."
        )
    return out


def _report(scenario: Scenario, versions: list[TwinVersion], stays: tuple[TwinStay, ...]) -> str:
    """Return which number to report."""
    unit = scenario.time_unit
    gap = None
    if (
        len(versions) > 1
        and versions[0].R0
        and versions[1].R0 is not None
        and not versions[1].name.endswith("as rates")
    ):
        gap = abs(versions[1].R0 - versions[0].R0) / versions[0].R0
    if gap is not None and gap < SMALL:
        return f"The number as typed: its twin differs by {100 * gap:.2g} %, less than any of the values is known."
    apart = "" if gap is None else f" They are {100 * gap:.3g} % apart."
    if scenario.discrete:
        return (
            f"The number as typed, with the words 'in steps of one {unit}', where its shares were "
            f"counted or estimated per {unit} "
            f"with this model; its growth factor per {unit} is then what is seen in the "
            "counts. Where durations or rates "
            "were measured and only turned into shares, report the continuous twin, or take a shorter step until both agree."
            + apart
        )
    return (
        "The number as typed, where durations and rates were measured: it does not depend on a step. "
        "The discrete twin is what "
        f"counting in steps of one {unit} makes of the same data; compare it with numbers that were found in such steps only."
        + apart
    )
