"""Discrete time: T = I - V, the growth factor, exits that add up to more than all, and what stays as it is."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import ngm
from ngm.analysis.batch import draw_numbers
from tests.analysis.packages import intervention
from tests.derivation.models import text

SEIR = text(
    [("S", False), ("E", True), ("I", True), ("R", False)],
    {"f": 0.3, "a": 0.4, "g": 0.2},
    [("S", "E", "f*S*I/1000", "t"), ("E", "I", "a*E", "x"), ("I", "R", "g*I", "x")],
    free={"S": 1000, "R": 0},
)


def discrete(model: str, **values: object) -> ngm.Scenario:
    return ngm.loads(model.replace("[scenario]", '[scenario]\ntime = "discrete"')).with_values(**values)


def test_published_numbers():
    # Published (second hand): F = [[0, .3], [0, 0]], T = [[.6, 0], [.4, .8]]: R0 1.5, growth factor 1.060555128, after
    # Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127-1147. By hand the factor is 0.7 + sqrt(0.13).
    solution = ngm.solve(discrete(SEIR))
    told = solution.to_json()
    assert solution.R0 == pytest.approx(1.5, rel=1e-15)
    assert told["growth_factor"] == pytest.approx(1.060555128, abs=1e-9)
    assert told["growth_factor"] == pytest.approx(0.7 + math.sqrt(0.13), rel=1e-15)
    assert told["growth_rate"] == pytest.approx(math.log(0.7 + math.sqrt(0.13)), rel=1e-14)
    assert told["doubling_time"] == pytest.approx(math.log(2) / told["growth_rate"], rel=1e-14)
    assert np.array(told["V"]) == pytest.approx(np.eye(2) - [[0.6, 0], [0.4, 0.8]], abs=1e-15)
    assert told["structure"]["classes"][0]["growth_rate"] == told["growth_rate"]
    assert [c["name"] for c in told["conditions"]] == ["A1", "A2", "A3", "A4", "A5"]


def test_continuous_time_has_no_growth_factor():
    assert "growth_factor" not in ngm.solve(ngm.loads(SEIR)).to_json()


def test_all_leave_in_a_step():
    # By hand: a step leaves nobody in E and I, F + T = [[0, .3], [1, 0]], factor sqrt(.3).
    solution = ngm.solve(discrete(SEIR, a=1, g=1))
    assert (solution.R0, solution.growth_factor) == pytest.approx((0.3, math.sqrt(0.3)), rel=1e-14)


def test_no_growth_rate_where_a_step_leaves_nothing():
    # By hand: F = 0 at f = 0, and T is nilpotent.
    solution = ngm.solve(discrete(SEIR, f=0, a=1, g=1))
    assert (solution.growth_factor, solution.growth_rate, solution.doubling_time) == (0.0, None, None)
    assert solution.to_json()["growth_rate"] is None
    assert ngm.sensitivity(discrete(SEIR, f=0, a=1, g=1)).growth_rate is None
    assert ngm.compare(discrete(SEIR, f=0, a=1, g=1)).baseline.growth_rate is None


def test_exits_that_add_up_to_more_than_all_are_refused_with_the_flows():
    model = text(
        [("S", False), ("I", True), ("R", False)],
        {"f": 0.3, "g": 0.7, "d": 0.4},
        [("S", "I", "f*S*I/1000", "t"), ("I", "R", "g*I", "x"), ("I", "", "d*I", "x")],
        free={"S": 1000, "R": 0},
    )
    with pytest.raises(ngm.DerivationError) as caught:
        ngm.solve(discrete(model))
    said = str(caught.value)
    assert "flows out of I" in said
    assert "flow 2 (0.7) and flow 3 (0.4) add up to 1.1" in said
    assert caught.value.problems[0].key == ("flow", 2, "rate")
    # exits of exactly 1 are all, and no more: decimals are kept as decimals
    assert ngm.solve(discrete(model, d=0.3)).growth_factor == pytest.approx(0.3, rel=1e-14)


def test_draws_that_overdraw_have_no_number():
    found = draw_numbers(discrete(SEIR), {"g": np.array([0.2, 1.0, 1.1])})
    assert found.values[:2] == pytest.approx([1.5, 0.3], rel=1e-12)
    assert np.isnan(found.values[2])
    assert list(found.missing.values()) == [1]
    assert "more leave" in next(iter(found.missing))


def test_draws_done_one_by_one_tell_the_same_reason():
    # The state without infection solves a quadratic, so each draw is done by itself.
    model = text(
        [("S", False), ("I", True)],
        {"b": 2, "g": 0.5, "c": 0.5},
        [("", "S", "b", "x"), ("S", "", "0.01*S*S", "x"), ("S", "I", "c*S*I/(S+I)", "t"), ("I", "", "g*I", "x")],
    )
    found = draw_numbers(discrete(model), {"g": np.array([0.2, 1.2])})
    assert found.values[0] == pytest.approx(2.5, rel=1e-12)
    assert list(found.missing) == ["more leave a compartment in one step than there are in it"]


def test_an_intervention_that_overdraws_is_named():
    model = SEIR + intervention("Cure", 'parameter = "g", set = 1.5')
    with pytest.raises(ngm.ScenarioError, match=r'intervention "Cure", flows out of I: .* add up to 1\.5'):
        ngm.compare(discrete(model))


def test_a_share_per_another_unit_of_time_is_refused():
    weekly = SEIR.replace('time_unit = "day"', 'time_unit = "week"')
    assert weekly != SEIR
    for unit, fine in (("1/week", True), ("%", True), ("1/day", False), ("1/(day*person)", False), ("%/day", False)):
        model = weekly.replace("g = { value = 0.2", f'g = {{ unit = "{unit}", value = 0.2')
        assert f'"{unit}"' in model
        if fine:
            assert ngm.solve(discrete(model)).R0 is not None
        else:
            with pytest.raises(ngm.ScenarioError, match="shares do not add up"):
                discrete(model)


def test_stability_of_the_state_without_infection_is_decided_by_moduli():
    # By hand: S' = S + B - m S has the state B/m; its step multiplies deviations by 1 - m, which is -1.5 at m = 2.5.
    model = text(
        [("S", False), ("I", True)],
        {"B": 10, "m": 0.5, "f": 0.6, "g": 0.5},
        [("", "S", "B", "x"), ("S", "", "m*S", "x"), ("S", "I", "f*S*I/(S+I)", "t"), ("I", "", "g*I", "x")],
    )
    assert ngm.solve(discrete(model)).conditions[4].holds
    unstable = ngm.solve(discrete(model, m=2.5))
    assert not unstable.conditions[4].holds
    assert ngm.solve(ngm.loads(model).with_values(m=2.5)).conditions[4].holds


def test_a_step_that_overshoots_is_unstable_also_in_large_models():
    # By hand, as above: 510 places alike, deviations times 1 - m; unstable at m = 2.5.
    groups = 510
    model = f"""
[scenario]
title = "Many places alike, invented"
time_unit = "week"
time = "discrete"
[dimensions]
place = {[f"p{k}" for k in range(groups)]}
[compartments]
S = {{ infected = false, by = ["place"] }}
I = {{ infected = true, by = ["place"] }}
[parameters]
m = {{ value = 0.5 }}
[[flow]]
to = "S"
rate = "10"
kind = "transition"
[[flow]]
from = "S"
rate = "m * S"
kind = "transition"
[[flow]]
from = "S"
to = "I"
rate = "0.6 * S * I / (S + I)"
kind = "transmission"
[[flow]]
from = "I"
rate = "0.5 * I"
kind = "transition"
"""
    scenario = ngm.loads(model)
    assert not ngm.solve(scenario.with_values(m=2.5), limit=0).conditions[4].holds
    assert ngm.solve(ngm.loads(model.replace('time = "discrete"', "")).with_values(m=2.5), limit=0).conditions[4].holds


shares = st.floats(0.05, 0.95)


@settings(max_examples=15, deadline=None)
@given(f=st.floats(0.01, 2), a=shares, g=shares, share=st.floats(0, 1))
def test_number_and_factor_lie_on_the_same_side_of_one(f, a, g, share):
    # Second route: the factor as an eigenvalue of F + T in numpy; the sign as the theorem says.
    model = text(
        [("S", False), ("E", True), ("I", True), ("J", True)],
        {"f": 0.3, "a": 0.4, "g": 0.2, "c": 0.5},
        [
            ("S", "E", "f*S*(I + 0.5*J)/1000", "t"),
            ("E", "I", "c*a*E", "x"),
            ("E", "J", "(1-c)*a*E", "x"),
            ("I", "", "g*I", "x"),
            ("J", "", "g*J/2", "x"),
        ],
        free={"S": 1000},
    )
    solution = ngm.solve(discrete(model, f=f, a=a, g=g, c=share), limit=0)
    F, T = np.array(solution.F), np.eye(3) - np.array(solution.V)
    assert (T >= -1e-15).all()
    assert solution.growth_factor == pytest.approx(max(abs(np.linalg.eigvals(F + T))), rel=1e-9)
    if abs(solution.R0 - 1) > 1e-9:
        assert (solution.R0 > 1) == (solution.growth_factor > 1)


def test_large_models_take_the_same_way():
    # Second route: 600 types as an operator against the same model in one group, whose groups are all alike.
    groups = 300
    model = f"""
[scenario]
title = "Many groups alike, invented"
time_unit = "week"
time = "discrete"
[dimensions]
place = {[f"p{k}" for k in range(groups)]}
[compartments]
S = {{ infected = false, by = ["place"] }}
E = {{ infected = true, by = ["place"] }}
I = {{ infected = true, by = ["place"] }}
[parameters]
f = {{ value = 0.3 }}
g = {{ value = 0.2 }}
[[flow]]
from = "S"
to = "E"
rate = "f * S * sum(I) / {groups}"
kind = "transmission"
[[flow]]
from = "E"
to = "I"
rate = "0.4 * E"
kind = "transition"
[[flow]]
from = "I"
rate = "g * I"
kind = "transition"
[infection_free]
S = 1
"""
    scenario = ngm.loads(model)
    solution = ngm.solve(scenario, limit=0)
    assert (solution.R0, solution.growth_factor) == pytest.approx((1.5, 0.7 + math.sqrt(0.13)), rel=1e-9)
    with pytest.raises(ngm.DerivationError, match=r"1\.2 of its members"):
        ngm.solve(scenario.with_values(g=1.2), limit=0)
