"""Results made by hand, for pictures of them."""

from __future__ import annotations

from math import log, sqrt

from ngm.results import (
    Class,
    Condition,
    ControlResult,
    EntryTerm,
    Solution,
    StateNumber,
    Structure,
    Symbolic,
    TargetNumber,
    TypeNumber,
)

#: A host infects 3 vectors, a vector 2 hosts: R0 = sqrt(6), period 2, shares 1 : sqrt(3/2), by hand.
VECTOR_BORNE = Solution(
    title="Hosts and vectors",
    time_unit="day",
    digest="0",
    types=("I_h", "I_v"),
    type_labels={"I_h": "Infectious hosts", "I_v": "Infectious vectors"},
    infection_free={"S_h": 100.0, "S_v": 150.0},
    residual=0.0,
    F=((0.0, 2.0), (3.0, 0.0)),
    V=((1.0, 0.0), (0.0, 1.0)),
    K_large=((0.0, 2.0), (3.0, 0.0)),
    types_at_infection=("I_h", "I_v"),
    K=((0.0, 2.0), (3.0, 0.0)),
    R0=sqrt(6),
    no_R0=None,
    R0_bounds=(2.449489742783178, 2.4494897427831783),
    per_cycle=6.0,
    closed_form="sqrt(a*b)",
    symbolic=Symbolic(F=(("0", "a"), ("b", "0")), V=(("1", "0"), ("0", "1")), K=(("0", "a"), ("b", "0"))),
    right=(sqrt(2) / (sqrt(2) + sqrt(3)), sqrt(3) / (sqrt(2) + sqrt(3))),
    left=((sqrt(2) + sqrt(3)) / (2 * sqrt(2)), (sqrt(2) + sqrt(3)) / (2 * sqrt(3))),
    structure=Structure(True, 2, (Class(("I_h", "I_v"), sqrt(6), 2, sqrt(6) - 1),)),
    growth_rate=sqrt(6) - 1,
    doubling_time=log(2) / (sqrt(6) - 1),
    conditions=(Condition("A1", True, "no flow is negative"),),
    warnings=(),
    eigenvalues=((sqrt(6), 0.0), (-sqrt(6), 0.0)),
    terms=(EntryTerm("F", "I_h", "I_v", 1, "Biting", 1, "a"),),
)

#: Two strains that do not meet: K = diag(2, 0.5), two classes, by hand.
TWO_CLASSES = Solution(
    title="Two strains",
    time_unit="day",
    digest="1",
    types=("A", "B"),
    type_labels={},
    infection_free={"S": 1.0},
    residual=0.0,
    F=((2.0, 0.0), (0.0, 0.5)),
    V=((1.0, 0.0), (0.0, 1.0)),
    K_large=((2.0, 0.0), (0.0, 0.5)),
    types_at_infection=("A", "B"),
    K=((2.0, 0.0), (0.0, 0.5)),
    R0=2.0,
    no_R0=None,
    R0_bounds=(2.0, 2.0),
    per_cycle=2.0,
    closed_form=None,
    symbolic=Symbolic(),
    right=(1.0, 0.0),
    left=(1.0, 0.0),
    structure=Structure(False, None, (Class(("A",), 2.0, 1, 1.0), Class(("B",), 0.5, 1, -0.5))),
    growth_rate=1.0,
    doubling_time=log(2),
    conditions=(),
    warnings=(),
    eigenvalues=((2.0, 0.0), (0.5, 0.0)),
)

#: Control of the vector-borne sample: T = 6 and effort 5/6, by hand; one target fails (made up, to be drawn).
CONTROL = ControlResult(
    title="Hosts and vectors",
    digest="0",
    R0=sqrt(6),
    no_R0=None,
    type_reproduction=(
        TypeNumber(("I_h",), 6.0, 5 / 6, None),
        TypeNumber(("I_v",), None, None, "without I_v the infection sustains itself"),
    ),
    target_reproduction=(TargetNumber(("I_h", "I_v"), 6.0, 5 / 6, None),),
    state_reproduction=(StateNumber("I_h", 6.0, 5 / 6, None),),
    warnings=(),
)
