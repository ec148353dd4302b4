"""Models that have no derivation, each told where, what, and what would be right; and what is accepted with a warning."""

from __future__ import annotations

from collections.abc import Callable

import pytest

import ngm
from tests.derivation.models import text

Flow = tuple[str, str, str, str]
SIR: list[tuple[str, bool]] = [("S", False), ("I", True), ("R", False)]
INFECTION: Flow = ("S", "I", "beta*S*I/(S + I + R)", "t")
RECOVERY: Flow = ("I", "R", "gamma*I", "x")
VALUES = {"beta": 0.5, "gamma": 0.25}


def closed(**free: str | float) -> str:
    return text(SIR, VALUES, [INFECTION, RECOVERY], free=free)


def logistic(rate: str, **free: str | float) -> str:
    flows: list[Flow] = [("", "S", rate, "x"), ("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")]
    return text([("S", False), ("I", True)], VALUES, flows, free=free)


REFUSED: list[tuple[str, Callable[[], str], list[str]]] = [
    ("closed, nothing given", closed, ["infection_free", "S, R", "closed population", "under [infection_free]"]),
    ("closed, one left free", lambda: closed(S=1000), ["nothing fixes R"]),
    (
        "not at rest",
        lambda: text(
            [("S", False), ("I", True)],
            {**VALUES, "mu": 0.1},
            [("", "S", "3", "x"), ("S", "", "mu*S", "x"), ("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")],
            free={"S": 31},
        ),
        ["infection_free.S", "not at rest", "3 per day enter", "3.1 leave", "expression in the parameters"],
    ),
    ("negative", lambda: closed(S="beta - 3", R=0), ["infection_free.S", "-2.5 is negative"]),
    (
        "nothing leaves",
        lambda: text(SIR, VALUES, [INFECTION], free={"S": 9, "R": 0}),
        ["V is singular", "nothing leaves I"],
    ),
    (
        "a loop that nobody leaves",
        lambda: text(
            [("S", False), ("E", True), ("I", True)],
            {"a": 1.0, "b": 2.0},
            [("S", "E", "a*S*I", "t"), ("E", "I", "a*E", "x"), ("I", "E", "b*I", "x")],
            free={"S": 1},
        ),
        ["V is singular", "E, I", "loop", "Add a flow out of one of"],
    ),
    (
        "imported cases",
        lambda: text(SIR, {**VALUES, "m": 0.1}, [INFECTION, RECOVERY, ("", "I", "m", "x")], free={"S": 9, "R": 0}),
        ["flow 3, rate", "even when nobody is infected", "(A4)"],
    ),
    (
        "carriers called uninfected",
        lambda: text(SIR, {**VALUES, "w": 0.1}, [INFECTION, RECOVERY, ("R", "I", "w*R", "x")], free={"S": 9, "R": 0}),
        ["flow 3, rate", "set infected = true for R"],
    ),
    (
        "several stable states",
        lambda: logistic("S*(1 - S)*(S - 2)*(S - 3)"),
        ["2 stable states", "S = 1", "S = 3", "Give"],
    ),
    ("no state at rest", lambda: logistic("1 + S"), ["no non-negative state", "S = -1"]),
    (
        "a root of nobody",
        lambda: text(SIR, VALUES, [("S", "I", "beta*S*sqrt(I)", "t"), RECOVERY], free={"S": 9, "R": 0}),
        ["flow 1, rate", "no slope when nobody is infected", "sqrt(I)"],
    ),
    (
        "a broken power of nobody",
        lambda: text(SIR, {**VALUES, "p": 0.5}, [("S", "I", "beta*S*I^p", "t"), RECOVERY], free={"S": 9, "R": 0}),
        ["flow 1, rate", "exponent", "1 or more"],
    ),
    (
        "divided by nobody",
        lambda: text(SIR, VALUES, [("S", "I", "beta*S*I/I", "t"), RECOVERY], free={"S": 9, "R": 0}),
        ["flow 1, rate", "divides by something that is 0 when nobody is infected"],
    ),
    ("divided by an empty population", lambda: closed(S=0, R=0), ["flow 1, rate", "divides by"]),
    (
        "a root of two that vanish",
        lambda: text(
            [*SIR, ("E", True)],
            VALUES,
            [("S", "I", "beta*S*sqrt(I*E)", "t"), RECOVERY, ("E", "", "E", "x")],
            free={"S": 9, "R": 0},
        ),
        ["flow 1, rate", "no slope when nobody is infected", "sqrt(I*E)"],
    ),
    (
        "births and no deaths",
        lambda: text(
            [("S", False), ("I", True)], VALUES, [("", "S", "3", "x"), ("S", "I", "beta*S*I", "t"), ("I", "", "I", "x")]
        ),
        ["without infection S never comes to rest", "Add a flow out of S"],
    ),
    (
        "what leaves comes back",
        lambda: text(
            [("S", False), ("I", True), ("W", True)],
            VALUES,
            [
                ("S", "I", "beta*S*W", "t"),
                ("I", "", "I", "x"),
                ("", "W", "I", "x"),
                ("", "W", "gamma*W", "x"),
                ("W", "", "gamma*W", "x"),
            ],
            free={"S": 9},
        ),
        ["V is singular whatever the values", "W"],
    ),
    (
        "a tie of two branches",
        lambda: text(
            SIR, {**VALUES, "cap": 0.0}, [("S", "I", "min(beta*S*I, cap)", "t"), RECOVERY], free={"S": 9, "R": 0}
        ),
        ["flow 1, rate", "min(beta*S*I, cap)", "tie"],
    ),
]


@pytest.mark.parametrize(("model", "parts"), [case[1:] for case in REFUSED], ids=[case[0] for case in REFUSED])
def test_refused_in_words(model: Callable[[], str], parts: list[str]) -> None:
    scenario = ngm.loads(model())
    with pytest.raises(ngm.DerivationError) as caught:
        ngm.solve(scenario, limit=0)
    message = str(caught.value)
    for part in parts:
        assert part in message, message
    assert len(message) < 2000


def test_the_stable_state_of_two_is_taken() -> None:
    """By hand: S' = S (2 - S) rests at 0 (unstable) and 2 (stable); R0 = beta 2 / gamma = 4."""
    solution = ngm.solve(ngm.loads(logistic("S*(2 - S)")))
    assert solution.infection_free == {"S": 2.0}
    assert solution.R0 == pytest.approx(4, rel=1e-14)
    assert solution.symbolic.infection_free == {"S": "2"}
    assert solution.closed_form is not None
    assert any("closed form holds where" in warning for warning in solution.warnings)


def test_a_single_unstable_state_is_taken_with_a_warning() -> None:
    """By hand: S' = S - 5 rests at 5 only, and runs away from it."""
    flows: list[Flow] = [("", "S", "S", "x"), ("S", "", "5", "x")]
    flows += [("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")]
    solution = ngm.solve(ngm.loads(text([("S", False), ("I", True)], VALUES, flows)))
    assert solution.infection_free == {"S": 5.0}
    assert any("not stable without infection" in warning for warning in solution.warnings)
    assert [c.holds for c in solution.conditions] == [True, False, True, True, False]  # 5 leave even an empty S


def test_a_rate_without_a_value_at_zero_is_read_elsewhere() -> None:
    """By hand: S' = S - 5 S/S: the same flow, written so that it has no value at S = 0."""
    flows: list[Flow] = [("", "S", "S", "x"), ("S", "", "5*S/S", "x")]
    flows += [("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")]
    solution = ngm.solve(ngm.loads(text([("S", False), ("I", True)], VALUES, flows)))
    assert solution.infection_free == {"S": 5.0}


def test_definitions_fifty_deep_are_walked() -> None:
    """Each of fifty definitions holds forty levels of its own: far deeper than the interpreter recurses."""
    definitions = {"d0": "beta"}
    for k in range(1, 50):
        definitions[f"d{k}"] = "(" * 40 + f"d{k - 1}" + "*1)" * 40
    flows: list[Flow] = [("S", "I", "d49*S*I/(S + I + R)", "t"), RECOVERY]
    model = text(SIR, VALUES, flows, definitions=definitions, free={"S": 1000, "R": 0})
    assert ngm.solve(ngm.loads(model)).R0 == pytest.approx(2, rel=1e-14)


def test_a_closed_population_breaks_A5_and_says_so() -> None:
    solution = ngm.solve(ngm.loads(closed(S=1000, R=0)))
    assert solution.R0 == pytest.approx(2, rel=1e-14)
    A5 = solution.conditions[4]
    assert not A5.holds
    assert "closed" in A5.detail
    assert any("A5" in warning for warning in solution.warnings)


def test_infection_in_pairs_only_has_R0_zero() -> None:
    """By hand: beta I I has no slope at I = 0: F vanishes, no type at infection."""
    solution = ngm.solve(ngm.loads(text(SIR, VALUES, [("S", "I", "beta*S*I*I", "t"), RECOVERY], free={"S": 9, "R": 0})))
    assert solution.R0 == 0
    assert solution.R0_bounds == (0, 0)
    assert solution.per_cycle == 0
    assert solution.types_at_infection == ()
    assert solution.K == ()
    assert solution.growth_rate == pytest.approx(-0.25)
    assert any("R0 is 0" in warning for warning in solution.warnings)


def test_F_zero_at_its_values_keeps_its_type() -> None:
    solution = ngm.solve(ngm.loads(closed(S=1000, R=0)).with_values(beta=0))
    assert solution.R0 == 0
    assert solution.types_at_infection == ("I",)
    assert solution.K == ((0.0,),)
    assert solution.structure is not None
    assert not solution.structure.irreducible


def test_growth_without_transmission_leaves_no_R0() -> None:
    """By hand: births of infected at b = 0.5 exceed losses g = 0.25, so V = [g - b] < 0 is no M-matrix."""
    flows: list[Flow] = [INFECTION, RECOVERY, ("", "I", "b*I", "x")]
    solution = ngm.solve(ngm.loads(text(SIR, {**VALUES, "b": 0.5}, flows, free={"S": 9, "R": 0})))
    assert solution.R0 is None
    assert solution.no_R0 is not None
    assert "M-matrix" in solution.no_R0
    assert solution.F == ((0.5,),)
    assert solution.V == ((-0.25,),)
    assert solution.K is None
    assert solution.growth_rate == pytest.approx(0.75)
    record = solution.to_json()
    assert [
        record[key] for key in ("R0", "R0_bounds", "per_cycle", "closed_form", "K", "K_large", "perron", "structure")
    ] == ([None] * 8)
    control = ngm.control(ngm.loads(text(SIR, {**VALUES, "b": 0.5}, flows, free={"S": 9, "R": 0})))
    assert control.to_json()["type_reproduction"] == []


def test_singular_at_these_values_leaves_no_R0() -> None:
    flows: list[Flow] = [INFECTION, RECOVERY, ("", "I", "b*I", "x")]
    solution = ngm.solve(ngm.loads(text(SIR, {**VALUES, "b": 0.25}, flows, free={"S": 9, "R": 0})))
    assert solution.R0 is None
    assert solution.no_R0 is not None
    assert "singular at these values" in solution.no_R0


def test_a_count_on_which_nothing_depends_is_no_part_of_the_state() -> None:
    """Deaths are counted in D, which no rate reads: it need not be at rest, and is 0."""
    flows: list[Flow] = [INFECTION, RECOVERY, ("I", "D", "0.1*I", "x")]
    solution = ngm.solve(ngm.loads(text([*SIR, ("D", False)], VALUES, flows, free={"S": 9, "R": 0})))
    assert solution.infection_free["D"] == 0
    assert solution.R0 == pytest.approx(0.5 / 0.35, rel=1e-14)


@pytest.mark.parametrize(
    ("death", "rate"), [("min(gamma*I, 3 + I)", 0.25), ("max(gamma*I - 1, 0.25*I)", 0.25), ("max(2*I, I - 3)", 2.0)]
)
def test_the_branch_in_force_gives_the_slope(death: str, rate: float) -> None:
    """By hand: at I = 0 the side in force is gamma I, 0.25 I and 2 I; S = 30, infection 0.5 S I: R0 = 15 / rate."""
    flows: list[Flow] = [("S", "I", "beta*S*I", "t"), ("I", "", death, "x")]
    solution = ngm.solve(ngm.loads(text([("S", False), ("I", True)], VALUES, flows, free={"S": 30})))
    assert solution.V == ((rate,),)
    assert solution.R0 == pytest.approx(15 / rate, rel=1e-14)


def test_a_capped_infection_follows_its_uncapped_branch() -> None:
    """By hand: min(S I, c) is S I near I = 0 while c > 0: F = beta S."""
    flows: list[Flow] = [("S", "I", "beta*min(I*S, 4)", "t"), ("I", "", "gamma*I", "x")]
    solution = ngm.solve(ngm.loads(text([("S", False), ("I", True)], VALUES, flows, free={"S": 30})))
    assert solution.F == ((15.0,),)
    assert solution.closed_form == "30*beta/gamma"


@pytest.mark.parametrize(("births", "deaths", "rest"), [("3", "S + 2*S^2", 1.0), ("10", "S + S^3", 2.0)])
def test_a_root_on_the_grid_is_found(births: str, deaths: str, rest: float) -> None:
    """By hand: 3 = S + 2 S^2 at S = 1, 10 = S + S^3 at S = 2."""
    flows: list[Flow] = [
        ("", "S", births, "x"),
        ("S", "", deaths, "x"),
        ("S", "I", "beta*S*I", "t"),
        ("I", "", "gamma*I", "x"),
    ]
    solution = ngm.solve(ngm.loads(text([("S", False), ("I", True)], VALUES, flows)))
    assert solution.infection_free["S"] == pytest.approx(rest, rel=1e-15)
    assert solution.R0 == pytest.approx(2 * rest, rel=1e-14)


@pytest.mark.parametrize(("rate", "R0"), [("(I*I)^0.6", 0.0), ("(I*I)^2", 0.0), ("I^1", 18.0), ("I^0", None)])
def test_powers_of_what_vanishes(rate: str, R0: float | None) -> None:
    """By hand: x^p has slope 0 at 0 where x vanishes with order k and k p > 1; I^0 is 1: cases out of nothing."""
    model = text(SIR, VALUES, [("S", "I", f"beta*S*{rate}", "t"), RECOVERY], free={"S": 9, "R": 0})
    if R0 is None:
        with pytest.raises(ngm.DerivationError, match="even when nobody is infected"):
            ngm.solve(ngm.loads(model), limit=0)
    else:
        assert ngm.solve(ngm.loads(model), limit=0).R0 == pytest.approx(R0)


def test_a_rest_that_is_missed_by_little_is_told_with_enough_digits() -> None:
    flows: list[Flow] = [("", "S", "1", "x"), ("S", "", "0.1*S", "x"), ("S", "I", "beta*S*I", "t"), ("I", "", "I", "x")]
    model = text([("S", False), ("I", True)], VALUES, flows, free={"S": 10.00001})
    with pytest.raises(ngm.DerivationError, match=r"1 per day enter and 1\.000001 leave"):
        ngm.solve(ngm.loads(model), limit=0)


def test_a_sum_takes_the_minus_sign() -> None:
    """By hand: two reservoirs that feed each other: R0 = 3 a b/(g (d - c)), written with d - c."""
    flows: list[Flow] = [
        ("S", "I", "b*S*(W + X)", "t"), ("I", "", "g*I", "x"), ("", "W", "a*I + c*X", "x"), ("", "X", "c*W", "x"),
        ("W", "", "d*W", "x"), ("X", "", "d*X", "x"),
    ]  # fmt: skip
    values = {"a": 0.5, "b": 0.2, "c": 0.1, "d": 0.4, "g": 0.3}
    compartments = [("S", False), ("I", True), ("W", True), ("X", True)]
    closed = ngm.solve(ngm.loads(text(compartments, values, flows, free={"S": 3}))).closed_form
    assert closed is not None
    assert not closed.startswith("-")
    assert "d - c" in closed
