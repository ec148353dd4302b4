"""The first weeks: what is seen against growth rate and stable mix, and against solutions by hand."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import ngm
from tests.analysis.test_season import SIR as SEASONAL
from tests.analysis.test_threshold import SIR

SCENARIOS = Path(__file__).parents[2] / "scenarios"


@pytest.mark.parametrize("stem", ["seir-velmar-fever", "waterborne-karsk-flux", "wards-and-burials-moss-fever"])
def test_growth_and_mix_are_what_F_minus_V_says(stem):
    scenario = ngm.load(SCENARIOS / f"{stem}.toml")
    found, solution = ngm.course(scenario), ngm.solve(scenario, limit=0)
    assert found.growth_rate == solution.growth_rate
    values, vectors = np.linalg.eig(np.array(solution.F) - np.array(solution.V))
    leading = np.real(vectors[:, int(np.argmax(values.real))])
    assert found.stable_mix == pytest.approx(leading / leading.sum(), rel=1e-9)
    for c in found.courses:
        assert c.settled
        assert c.growth == pytest.approx(solution.growth_rate, rel=2e-4)
        assert c.mix == pytest.approx(found.stable_mix, abs=1e-4)


def test_two_strains_grow_each_at_its_own_rate():
    found = ngm.course(ngm.load(SCENARIOS / "two-strains-brindle-cough.toml"))
    mu = 1 / (60 * 365.25)
    rates = {c.seed: c.growth for c in found.courses}
    assert rates["A"] == pytest.approx(0.18 - 0.05 - mu, rel=1e-3)  # by hand: beta - gamma - mu of each
    assert rates["B"] == pytest.approx(0.55 - 0.2 - mu, rel=1e-3)


def test_the_course_itself_by_hand():
    # With a fixed share susceptible I(t) = I0 exp(r t); few cases use up nobody.
    found = ngm.course(ngm.loads(SIR), horizon=20)
    one = found.courses[0]
    r = 0.5 - 0.22
    expected = [one.cases * math.exp(r * t) for t in found.times]
    assert [row[0] for row in one.infected] == pytest.approx(expected, rel=1e-4)
    assert found.depleted < 1e-4


def test_many_cases_use_up_the_susceptible():
    found = ngm.course(ngm.loads(SIR), horizon=60, cases=50)
    assert found.depleted > 0.3
    assert not found.courses[0].settled
    assert found.courses[0].growth < 0.1


def test_generations_are_powers_of_K():
    scenario = ngm.load(SCENARIOS / "vector-borne-ostrel-fever.toml")
    found, K = ngm.course(scenario, horizon=5), np.array(ngm.solve(scenario, limit=0).K)
    for j, rows in enumerate(found.generations):
        start = np.eye(len(K))[j]
        for g, row in enumerate(rows):
            assert row == pytest.approx(np.linalg.matrix_power(K, g) @ start, rel=1e-12)


def test_steps_of_time():
    text = SIR.replace('time_unit = "day"', 'time_unit = "day"\ntime = "discrete"')
    found = ngm.course(ngm.loads(text), horizon=10)
    one = found.courses[0]
    # By hand: a step multiplies by 1 + beta - gamma - mu.
    assert one.infected[10][0] == pytest.approx(one.cases * 1.28**10, rel=1e-4)
    assert found.growth_rate == pytest.approx(math.log(1.28), rel=1e-12)
    assert one.settled


def test_a_season():
    scenario = ngm.loads(SEASONAL.replace("SEASON", "{ amplitude = 0.8, peak = 3, period = 30 }"))
    found = ngm.course(scenario)
    assert found.stable_mix is None
    assert found.generations == ()
    assert found.courses[0].growth == pytest.approx(0.2, rel=1e-3)  # mean beta - gamma
    assert found.courses[0].settled
    # By hand: ln I rises by the integral of beta(t) - gamma.
    t, w = found.times[40], 2 * math.pi / 30
    rise = 0.2 * t + 0.4 * 0.8 * (math.sin(w * (t - 3)) + math.sin(3 * w)) / w
    assert math.log(found.courses[0].infected[40][0] / found.courses[0].cases) == pytest.approx(rise, rel=1e-4)


def test_many_components_go_by_a_sparse_slope():
    groups = ", ".join(f'"g{k}"' for k in range(32))
    text = SIR.replace("[compartments]", f"[dimensions]\nplace = [{groups}]\n[compartments]")
    for name in "SIR":
        text = text.replace(f"{name} = {{ ", f'{name} = {{ by = ["place"], ')
    found = ngm.course(ngm.loads(text), seeds=["I[g3]"])
    assert found.courses[0].growth == pytest.approx(0.28, rel=1e-3)


def test_an_intervention_in_force():
    scenario = ngm.loads(SIR + '[[intervention]]\nname = "Half"\nchange = [{ susceptibility = "I", reduce = 0.5 }]\n')
    found = ngm.course(scenario, intervention=scenario.interventions[0])
    assert found.courses[0].growth == pytest.approx(0.25 - 0.22, rel=1e-2)
    assert found.label == "control reproduction number"


def test_wrong_questions():
    scenario = ngm.loads(SIR)
    with pytest.raises(ngm.ScenarioError, match="above 0"):
        ngm.course(scenario, horizon=-1)
    with pytest.raises(ngm.ScenarioError, match="no infected type"):
        ngm.course(scenario, seeds=["S"])
    infectivity = SIR + '[[intervention]]\nname = "Masks"\nchange = [{ infectivity = "I", reduce = 0.5 }]\n'
    masked = ngm.loads(infectivity)
    with pytest.raises(ngm.DerivationError, match="infectivity of I"):
        ngm.course(masked, intervention=masked.interventions[0])
