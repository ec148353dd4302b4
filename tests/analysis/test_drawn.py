"""Numbers other than R0 at draws: each is what the scenario with the values of that draw has."""

from __future__ import annotations

from collections import OrderedDict

import numpy as np
import pytest

import ngm
from ngm.analysis import draw_plan
from ngm.analysis.batch import growth_rates_at
from ngm.analysis.drawn import drawn_numbers, read_numbers
from ngm.progress import Progress, Stopped, watched

VECTOR = ngm.load("scenarios/vector-borne-ostrel-fever.toml")
AGES = ngm.load("scenarios/age-groups-ember-cough.toml")
SEIR = ngm.load("scenarios/seir-velmar-fever.toml")


def spread(scenario, size, seed=3):
    """Return draws within a tenth of every parameter that is one number."""
    rng = np.random.default_rng(seed)
    out = {}
    for index in ngm.sensitivity(scenario).local:
        if "[" not in index.parameter:
            out[index.parameter] = np.minimum(index.value * rng.uniform(0.9, 1.1, size), max(1.0, 2 * index.value))
    return out


@pytest.mark.parametrize("scenario", [VECTOR, AGES, SEIR], ids=["vector", "ages", "seir"])
def test_each_draw_is_the_scenario_with_its_values(scenario):
    # Second route: `solve` and `control` of the scenario changed by hand.
    draws = spread(scenario, 3)
    control = ngm.control(scenario)
    names = [f"T({', '.join(t.types)})" for t in control.type_reproduction]
    names += [f"T({t.entry[0]} <- {t.entry[1]})" for t in control.target_reproduction]
    wanted = read_numbers(scenario, ["growth_rate", *names])
    assert [one.name for one in wanted] == ["growth_rate", *names]
    found = drawn_numbers(scenario, draws, wanted)
    for k in range(2):
        changed = scenario.with_values(**{name: float(values[k]) for name, values in draws.items()})
        there = ngm.control(changed)
        expected = [ngm.solve(changed, limit=0).growth_rate]
        expected += [t.T for t in (*there.type_reproduction, *there.target_reproduction)]
        for one, number in zip(found, expected, strict=True):
            assert one.values[k] == pytest.approx(np.nan if number is None else number, rel=1e-10, nan_ok=True)


def test_a_set_of_entries():
    # By hand: acting on both entries of a cycle of two is acting on everything, and T = R0.
    both = read_numbers(VECTOR, ["T(E_h <- E_v, E_v <- E_h)"])
    draws = spread(VECTOR, 2)
    found = drawn_numbers(VECTOR, draws, both)[0].values
    assert found == pytest.approx(ngm.reproduction_numbers(VECTOR, draws), rel=1e-12)


def test_why_a_number_is_missing_is_counted():
    # Children alone cannot be the target: the adults sustain the infection.
    found = drawn_numbers(AGES, spread(AGES, 3), read_numbers(AGES, ["T(E[0-4])"]))[0]
    assert np.isnan(found.values).all()
    assert found.missing == {"what is not acted on sustains the infection by itself": 3}


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("T(E_x)", "'E_x' is no type at infection. Types: E_h, E_v."),
        ("T(E_h <- E_x)", "'E_x' is no type at infection."),
        ("T(E_h, E_v <- E_h)", "expected types, or entries as infected <- by"),
        ("T()", "expected types"),
        ("spread", "Write growth_rate, T(type)"),
    ],
)
def test_a_name_that_is_none_is_refused(name, message):
    with pytest.raises(ngm.ScenarioError) as caught:
        read_numbers(VECTOR, [name])
    assert message in str(caught.value)


def test_growth_where_there_is_no_R0():
    # By hand: x leaves at mu = 0.1 and doubles itself at 0.3 without any transmission: V is no M-matrix and there is no
    # R0, but the compartment grows by 0.2 + beta a day all the same.
    scenario = ngm.loads(GROWING)
    draws = {"beta": [0.0, 0.5]}
    assert np.isnan(ngm.reproduction_numbers(scenario, draws)).all()
    found = growth_rates_at(scenario, draws)
    assert found.values == pytest.approx([0.2, 0.7], abs=1e-12)
    assert found.missing == {}


def test_the_work_is_counted_and_can_be_stopped():
    progress = Progress()
    with watched(progress):
        ngm.reproduction_numbers(SEIR, {"beta": np.full(100_000, 0.4)})
        assert progress.done == 100_000
        progress.stop()
        with pytest.raises(Stopped):
            ngm.reproduction_numbers(SEIR, {"beta": np.full(10, 0.4)})
    # and nothing of it is left behind
    assert len(ngm.reproduction_numbers(SEIR, {"beta": np.full(10, 0.4)})) == 10


def test_draws_done_one_by_one_are_counted_once(monkeypatch):
    monkeypatch.setattr(draw_plan, "MOST_TRACED", 0)
    monkeypatch.setattr(draw_plan, "_kept", OrderedDict())
    progress = Progress()
    with watched(progress):
        alone = growth_rates_at(SEIR, {"beta": [0.2, 0.42]}).values
    assert progress.done == 2
    # Second route: the traced program gives the same growth rates.
    monkeypatch.undo()
    assert growth_rates_at(SEIR, {"beta": [0.2, 0.42]}).values == pytest.approx(alone, abs=1e-13)


GROWING = """
[scenario]
title = "A reservoir that grows by itself"
time_unit = "day"
[compartments]
S = { infected = false }
X = { infected = true }
[parameters]
beta = { value = 0.1 }
[infection_free]
S = 100
[[flow]]
from = "S"
to = "X"
rate = "beta * S * X / 100"
kind = "transmission"
[[flow]]
to = "X"
rate = "0.3 * X"
kind = "transition"
[[flow]]
from = "X"
rate = "0.1 * X"
kind = "transition"
"""
