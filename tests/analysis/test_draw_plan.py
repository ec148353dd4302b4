"""Plans for draws are kept by what they are made from, and a kept one answers for nothing else."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import ngm
from ngm.analysis import draw_plan
from ngm.analysis.draws import read_draws
from ngm.derivation.compile import formulas

SEIR = "scenarios/seir-velmar-fever.toml"


def plan_of(scenario, **draws):
    columns, arrays = read_draws(scenario, draws or {"beta": [0.3]})
    return draw_plan.plan(scenario, None, columns, len(arrays))


def test_the_same_content_has_one_plan():
    assert plan_of(ngm.load(SEIR)) is plan_of(ngm.load(SEIR))


def test_other_values_under_the_same_text_have_a_plan_of_their_own():
    # A derivative moves a number without writing the text anew.
    scenario = ngm.load(SEIR)
    gamma = scenario.parameters["gamma"]
    other = ngm.load(SEIR).with_values(gamma=2.8).parameters["gamma"]
    changed = replace(scenario, parameters={**scenario.parameters, "gamma": replace(gamma, values=other.values)})
    assert changed.text == scenario.text
    # By hand: R0 = beta sigma / ((gamma + mu)(mu + sigma)); mu is small, so twice gamma halves it but for 1 in 10,000.
    ratio = ngm.reproduction_numbers(scenario, {"beta": [0.4]}) / ngm.reproduction_numbers(changed, {"beta": [0.4]})
    assert ratio[0] == pytest.approx(2, rel=3e-4)
    assert ratio[0] != 2


def test_other_columns_have_a_plan_of_their_own():
    scenario = ngm.load(SEIR)
    assert plan_of(scenario, beta=[0.3]) is not plan_of(scenario, gamma=[1.4])


def test_only_so_many_are_kept(monkeypatch):
    monkeypatch.setattr(draw_plan, "MOST_KEPT", 2)
    scenario = ngm.load(SEIR)
    for k in range(4):
        plan_of(scenario.with_values(gamma=1 + k / 10))
    assert len(draw_plan._kept) == 2


@pytest.mark.parametrize("size", [1, 63, 64, 65, 20_000])
def test_extremes_are_those_of_the_whole_array(size):
    # Second route: numpy's own extremes of the arrays written out.
    x = np.random.default_rng(size).normal(size=size)
    program = formulas(["2*x", "x + 1", "x - 1"], ["x"])
    whole = program.run([x])
    kept, worst = program.screened([x], ["max", "min"])
    assert np.array_equal(kept, whole[:1])
    assert worst == [whole[1].max(), whole[2].min()]


def test_a_value_that_is_none_shows_among_the_extremes():
    x = np.ones(40_000)
    x[12_345] = -1
    _, worst = formulas(["x", "log(x)"], ["x"]).screened([x], ["min"])
    assert np.isnan(worst[0])


def test_a_draw_of_minus_zero_is_zero():
    # One pass over the bits tells that all is well; the bits of -0.0 do not, and the slower look does.
    scenario = ngm.load(SEIR)
    assert ngm.reproduction_numbers(scenario, {"beta": [-0.0, 0.0]}).tolist() == [0.0, 0.0]
