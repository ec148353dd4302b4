"""Below one: against the quadratic of a leaky vaccine solved directly, by hand for SIR, and by a scan for reinfection."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

import ngm
from tests.published.models import evaluate

FENMOOR = Path(__file__).parents[2] / "scenarios" / "leaky-vaccine-fenmoor-itch.toml"

SIR = """
[scenario]
title = "Births and deaths"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
R = { infected = false }
[parameters]
beta = { value = 0.5 }
gamma = { value = 0.2 }
mu = { value = 0.02 }
[[flow]]
to = "S"
rate = "mu * 1000"
kind = "transition"
[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / 1000"
kind = "transmission"
[[flow]]
from = "I"
to = "R"
rate = "gamma * I"
kind = "transition"
[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"
[[flow]]
from = "I"
rate = "mu * I"
kind = "transition"
[[flow]]
from = "R"
rate = "mu * R"
kind = "transition"
"""

# Source: Feng, Castillo-Chavez & Capurro (2000) Theor. Popul. Biol. 57:235-247 (from memory), without deaths by disease.
REINFECTION = """
[scenario]
title = "Reinfection of the latent"
time_unit = "year"
[compartments]
S = { infected = false }
E = { infected = true }
I = { infected = true }
T = { infected = false }
[parameters]
beta = { value = 4 }
p = { value = 0.4 }
sigma = { value = 0.9 }
k = { value = 0.005 }
r = { value = 2 }
mu = { value = 0.016 }
[definitions]
N = "S + E + I + T"
[[flow]]
to = "S"
rate = "mu * 1000"
kind = "transition"
[[flow]]
from = "S"
to = "E"
rate = "beta * S * I / N"
kind = "transmission"
[[flow]]
from = "T"
to = "E"
rate = "sigma * beta * T * I / N"
kind = "transmission"
[[flow]]
from = "E"
to = "I"
rate = "k * E + p * beta * E * I / N"
kind = "transition"
[[flow]]
from = "I"
to = "T"
rate = "r * I"
kind = "transition"
[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"
[[flow]]
from = "E"
rate = "mu * E"
kind = "transition"
[[flow]]
from = "I"
rate = "mu * I"
kind = "transition"
[[flow]]
from = "T"
rate = "mu * T"
kind = "transition"
"""

CLOSED_SIS = """
[scenario]
title = "Closed"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
[parameters]
beta = { value = 0.5 }
gamma = { value = 0.2 }
[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / (S + I)"
kind = "transmission"
[[flow]]
from = "I"
to = "S"
rate = "gamma * I"
kind = "transition"
[infection_free]
S = 1000
"""


def leaky_quadratic(beta, leak, phi, theta, gamma, mu):
    """Coefficients of the quadratic for the share i infected: from I' = 0, S + leak V = (mu + gamma)/beta, and V' = 0.

    Derived by hand from the flows of the scenario, as Kribs-Zaleta & Velasco-Hernandez (2000) Math. Biosci. 164:183-201 do.
    """
    s0 = ((mu + gamma) / beta - leak) / (1 - leak)
    s1 = leak / (1 - leak)  # S = s0 + s1 i, V = v0 + v1 i
    v0, v1 = 1 - s0, -(1 + s1)
    return (
        v1 * leak * beta,
        v0 * leak * beta + v1 * (mu + theta) - phi * s1,
        v0 * (mu + theta) - phi * s0,
    )


def discriminant(beta, **values):
    a, b, c = leaky_quadratic(beta, **values)
    return b * b - 4 * a * c


VALUES = {"leak": 0.15, "phi": 0.05, "theta": 0.0005, "gamma": 0.15, "mu": 0.002}


def drive(**set_values):
    return ngm.load(FENMOOR).with_values(phi=0.05, **set_values)


def test_turning_point_of_a_leaky_vaccine():
    found = ngm.threshold(drive())
    share = (0.002 + 0.0005 + 0.15 * 0.05) / (0.002 + 0.0005 + 0.05)
    assert found.at_one == pytest.approx((0.15 + 0.002) / share, rel=1e-12)  # by hand: R = beta share / (gamma + mu)
    assert found.direction == "backward"
    expected = brentq(lambda beta: discriminant(beta, **VALUES), 0.4, 0.6, xtol=1e-14)
    assert found.turning == pytest.approx(expected, abs=1e-8)
    assert found.turning == pytest.approx(expected, rel=1e-10)
    assert found.R_turning == pytest.approx(ngm.solve(drive(beta=found.turning), limit=0).R0, rel=1e-9)


def test_endemic_states_of_a_leaky_vaccine():
    found = ngm.threshold(drive())
    a, b, c = leaky_quadratic(0.7, **VALUES)
    assert [e.infected for e in found.endemic] == pytest.approx(sorted(10000 * np.roots([a, b, c])), rel=1e-9)
    assert [e.stable for e in found.endemic] == [False, True]


@pytest.mark.parametrize("leak", [0.02, 0.1, 0.3, 0.6, 0.9])
@pytest.mark.parametrize("gamma", [0.01, 0.15])
def test_direction_of_a_leaky_vaccine(leak, gamma):
    values = VALUES | {"leak": leak, "gamma": gamma}
    found = ngm.threshold(drive(leak=100 * leak, gamma=gamma), along="all-transmission")
    # Directly: backward where the quadratic has a root between 0 and 1 just below a number of 1.
    share = (0.0025 + leak * 0.05) / 0.0525
    a, b, c = leaky_quadratic((gamma + 0.002) / share * (1 - 1e-5), **values)
    roots = np.roots([a, b, c])
    backward = any(abs(x.imag) < 1e-12 and 0 < x.real < 1 for x in roots)
    assert found.direction == ("backward" if backward else "forward")


def test_the_vaccination_rate_above_which_it_cannot_persist():
    found = ngm.threshold(drive(), along="phi")
    assert found.rising is False
    expected = brentq(lambda phi: discriminant(0.7, **(VALUES | {"phi": phi})), 0.1, 0.3, xtol=1e-14)
    assert found.turning == pytest.approx(expected, abs=1e-8)


def test_an_intervention_in_force():
    scenario = ngm.load(FENMOOR)
    drive_on = scenario.interventions[0]
    found = ngm.threshold(scenario, intervention=drive_on)
    assert found.label == "control reproduction number"
    assert found.turning == pytest.approx(ngm.threshold(drive()).turning, rel=1e-9)
    assert found.R_now < 1
    assert any(e.stable for e in found.endemic)


def test_sir_by_hand():
    found = ngm.threshold(ngm.loads(SIR))
    # beta* = gamma + mu; w = (1, -beta*/mu): a = 2 beta*/1000 * (-beta*/mu), b = S/1000 = 1.
    assert found.at_one == pytest.approx(0.22, rel=1e-12)
    assert found.direction == "forward"
    assert found.a == pytest.approx(-2 * 0.22**2 / 0.02 / 1000, rel=1e-9)
    assert found.b == pytest.approx(1, rel=1e-9)
    # Endemic: I = mu (1000 - S) / beta' S with S = 1000 / R0.
    S = 1000 * 0.22 / 0.5
    assert found.endemic[0].state["S"] == pytest.approx(S, rel=1e-10)
    assert found.endemic[0].infected == pytest.approx(0.02 * (1000 - S) / (0.5 * S / 1000), rel=1e-10)
    assert found.endemic[0].stable
    assert found.turning is None


@pytest.mark.parametrize(("p", "sigma"), [(0.05, 0.9), (0.4, 0.9), (3.0, 0.2), (0.01, 0.0)])
def test_reinfection_by_a_scan(p, sigma):
    found = ngm.threshold(ngm.loads(REINFECTION).with_values(p=p, sigma=sigma))
    k, r, mu = 0.005, 2.0, 0.016
    assert found.at_one == pytest.approx((mu + k) * (mu + r) / k, rel=1e-12)

    def balance(force, beta):
        # Second route: every compartment from the force of infection, then the balance of the latent.
        i = force / beta
        s, t = mu / (mu + force), r * i / (sigma * force + mu)
        e = (mu + r) * i / (p * force + k)
        return force * s + sigma * force * t - (p * force + mu + k) * e

    beta = found.at_one * 0.9999
    forces = np.logspace(-9, 3, 4000)
    values = np.array([balance(f, beta) for f in forces])
    crossings = int(np.sum(np.sign(values[:-1]) != np.sign(values[1:])))
    assert found.direction == ("backward" if crossings == 2 else "forward")


def test_a_closed_population_keeps_its_size():
    found = ngm.threshold(ngm.loads(CLOSED_SIS))
    assert found.direction == "forward"
    assert found.endemic[0].infected == pytest.approx(600, rel=1e-10)  # by hand: 1000 (1 - 0.2/0.5)
    assert found.endemic[0].stable


def test_not_computed_is_said():
    closed = SIR.replace('[[flow]]\nto = "S"\nrate = "mu * 1000"\nkind = "transition"\n', "")
    closed = closed.replace("mu = { value = 0.02 }", "mu = { value = 0 }") + "[infection_free]\nS = 1000\nR = 0\n"
    found = ngm.threshold(ngm.loads(closed))
    assert found.direction is None
    assert "do not come back" in found.why
    assert ngm.threshold(ngm.loads(SIR).with_values(beta=0)).direction is None


def test_refusals():
    with pytest.raises(ngm.ScenarioError, match="Did you mean 'beta'"):
        ngm.threshold(ngm.loads(SIR), along="bta")
    with pytest.raises(ngm.DerivationError, match="season"):
        ngm.threshold(ngm.loads(SIR.replace("value = 0.5", "value = 0.5, season = { amplitude = 0.1, period = 9 }")))
    with pytest.raises(ngm.DerivationError, match="continuous time only"):
        ngm.threshold(ngm.loads(SIR.replace('time_unit = "day"', 'time_unit = "day"\ntime = "discrete"')))


def test_what_is_moved_by_default():
    # beta multiplies every transmission; where nothing does, all transmission is moved.
    assert ngm.threshold(ngm.loads(SIR)).along == "beta"
    assert ngm.threshold(ngm.loads(REINFECTION)).along == "beta"
    other = SIR.replace("beta * S * I / 1000", "beta * S * I / 1000 + 0.1 * S * I / 1000")
    assert ngm.threshold(ngm.loads(other)).along == "all transmission"


def test_a_caution_wherever_below_one_is_told():
    told = "Below one is not safe"
    assert any(told in w for w in ngm.solve(drive(), limit=0).warnings)
    assert any(told in w for w in ngm.control(drive()).warnings)
    rows = ngm.compare(ngm.load(FENMOOR)).interventions
    assert all(any(told in w for w in row.warnings) for row in rows)
    assert not any(told in w for w in ngm.solve(ngm.loads(SIR).with_values(beta=0.1), limit=0).warnings)


def test_a_caution_beside_efforts_that_bring_the_number_to_one():
    told = "Below one is not safe"
    assert any(told in w for w in ngm.strength_needed(ngm.load(FENMOOR), "Vaccination drive").warnings)
    assert any(told in w for w in ngm.coverage_needed(drive()).warnings)
    assert not any(told in w for w in ngm.coverage_needed(ngm.loads(SIR)).warnings)


def test_coefficients_as_formulas():
    found = ngm.threshold(ngm.loads(SIR))
    # By hand, as in the test of SIR: a = -2 (gamma + mu)^2/(1000 mu), b = 1.
    assert found.formula_b == "1"
    for gamma, mu in ((0.2, 0.02), (0.7, 0.01)):
        value = evaluate(found.formula_a, {"gamma": gamma, "mu": mu})
        assert value == pytest.approx(-2 * (gamma + mu) ** 2 / (1000 * mu), rel=1e-12)
    # Second route: the numbers of the same model at other values, which know nothing of the formula.
    leaky = ngm.threshold(drive())
    values = {"leak": 0.3, "phi": 0.02, "theta": 0.001, "gamma": 0.2, "mu": 0.004, "births": 40.0}
    other = ngm.threshold(ngm.load(FENMOOR).with_values(**(values | {"leak": 30})), along="beta", limit=0)
    assert evaluate(leaky.formula_a, values) == pytest.approx(other.a, rel=1e-9)
    assert evaluate(leaky.formula_b, values) == pytest.approx(other.b, rel=1e-9)
