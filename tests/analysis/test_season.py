"""Seasons from the file to the number: against theory where it says they are equal, against a second route where not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.season import OverTheYear
from ngm.engine.balls import to_floats
from tests.engine.test_floquet import by_fourier

SALLOW = Path(__file__).parents[2] / "scenarios" / "seasonal-midges-sallow-fever.toml"

SIR = """
[scenario]
title = "One type"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
[parameters]
beta = { value = 0.4, season = SEASON }
gamma = { value = 0.2 }
[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / 1000"
kind = "transmission"
[[flow]]
from = "I"
to = "S"
rate = "gamma * I"
kind = "transition"
[infection_free]
S = 1000
"""

VECTOR = """
[scenario]
title = "Two kinds"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
Sv = { infected = false }
Ev = { infected = true }
Iv = { infected = true }
[parameters]
a = { value = 0.3, season = { amplitude = 0.5, peak = 210, period = 365 } }
pair = { value = "a * a / 0.3" }
gamma = { value = 0.1 }
sigma = { value = 0.1 }
mu = { value = 0.1 }
births = { value = 200, season = { amplitude = 0.8, peak = 180, period = 365 } }
[definitions]
both = "pair * 0.25 * 0.3 / a"
[[flow]]
from = "S"
to = "I"
rate = "a * 0.5 * S / 1000 * Iv"
kind = "transmission"
[[flow]]
from = "I"
to = "S"
rate = "gamma * I"
kind = "transition"
[[flow]]
to = "Sv"
rate = "births"
kind = "transition"
[[flow]]
from = "Sv"
to = "Ev"
rate = "2 * both * Sv * I / 1000"
kind = "transmission"
[[flow]]
from = "Ev"
to = "Iv"
rate = "sigma * Ev"
kind = "transition"
[[flow]]
from = "Sv"
rate = "mu * Sv"
kind = "transition"
[[flow]]
from = "Ev"
rate = "mu * Ev"
kind = "transition"
[[flow]]
from = "Iv"
rate = "mu * Iv"
kind = "transition"
[infection_free]
S = 1000
[[intervention]]
name = "Nets"
change = [{ parameter = "a", multiply = 0.5 }]
[[intervention]]
name = "Repellent for people"
change = [{ susceptibility = "I", reduce = 0.5 }]
"""


def solve(text):
    return ngm.solve(ngm.loads(text), limit=0)


def by_hand(t, bites=0.3, susceptible=1.0):
    """F and V of `VECTOR`, written out from its flows; the number of vectors from the solution of x' = b(t) - mu x."""
    w = 2 * np.pi / 365
    a = bites * (1 + 0.5 * np.cos(w * (t - 210)))
    vectors = 2000 + 200 * 0.8 * (0.1 * np.cos(w * (t - 180)) + w * np.sin(w * (t - 180))) / (0.1**2 + w**2)
    F, V = np.zeros((len(t), 3, 3)), np.zeros((len(t), 3, 3))
    F[:, 0, 2] = a * 0.5 * susceptible
    F[:, 1, 0] = a * 0.5 * vectors / 1000
    V[:, 0, 0], V[:, 1, 1], V[:, 2, 1], V[:, 2, 2] = 0.1, 0.2, -0.1, 0.1
    return F, V


@pytest.mark.parametrize(
    "season",
    [
        "{ amplitude = 0.9, peak = 30, period = 365.25 }",
        "{ values = [0.5, 1.5], period = 20 }",
        "{ amplitude = 1, period = 3 }",
    ],
)
def test_one_type_has_the_number_of_the_mean(season):
    # Theory: for one infected type R0 of the season is that of the mean rate, and the growth rate is mean beta - gamma.
    solution = solve(SIR.replace("SEASON", season))
    assert solution.R0 == pytest.approx(2, rel=1e-12)
    assert solution.growth_rate == pytest.approx(0.2, rel=1e-11)
    assert solution.closed_form is None
    assert solution.R0_bounds[0] <= solution.R0 <= solution.R0_bounds[1]


def test_factors_whose_mean_is_not_one():
    solution = solve(SIR.replace("SEASON", "{ values = [0.5, 1.0, 0.9], period = 12 }"))
    assert solution.R0 == pytest.approx(2 * 0.8, rel=1e-12)  # by hand: the mean factor is 0.8
    assert solution.F == ((pytest.approx(0.4 * 0.8),),)


def test_vectors_by_two_methods():
    solution = solve(VECTOR)
    # Second route: flows read by hand, births of vectors solved by hand, one eigenvalue problem in place of a search.
    assert solution.R0 == pytest.approx(by_fourier(by_hand, 365.0, 121), rel=1e-9)
    assert abs(solution.R0 - solution.season.averaged) > 5e-4
    assert solution.season.state_moves
    assert solution.season.worst > solution.R0 > solution.season.mildest
    assert any("mislead" in warning for warning in solution.warnings)


def test_growth_is_the_floquet_exponent():
    from scipy.integrate import solve_ivp

    # Second route: the columns of the solution operator by an ordinary solver.
    def field(t, y):
        F, V = by_hand(np.array([t]))
        return ((F[0] - V[0]) @ y.reshape(3, 3)).ravel()

    run = solve_ivp(field, (0, 365), np.eye(3).ravel(), rtol=1e-10, atol=1e-12)
    W = run.y[:, -1].reshape(3, 3)
    expected = np.log(np.max(np.abs(np.linalg.eigvals(W)))) / 365
    assert solve(VECTOR).growth_rate == pytest.approx(expected, rel=1e-7)


def test_interventions_over_the_season():
    found = ngm.compare(ngm.loads(VECTOR))
    nets, repellent = found.interventions
    assert nets.R0 == pytest.approx(by_fourier(lambda t: by_hand(t, bites=0.15), 365.0, 121), rel=1e-8)
    assert repellent.R0 == pytest.approx(by_fourier(lambda t: by_hand(t, susceptible=0.5), 365.0, 121), rel=1e-8)
    assert found.baseline.R0 == pytest.approx(solve(VECTOR).R0, rel=1e-12)


def test_dividing_by_T_brings_the_number_to_one():
    scenario = ngm.loads(VECTOR)
    control = ngm.control(scenario)
    people = next(t for t in control.type_reproduction if t.types == ("I",))
    assert people.critical_effort == pytest.approx(1 - 1 / people.T)
    changed = VECTOR.replace("reduce = 0.5", f"reduce = {people.critical_effort!r}")
    row = ngm.compare(ngm.loads(changed)).interventions[1]
    assert row.R0 == pytest.approx(1, abs=1e-9)
    whole = next(t for t in control.type_reproduction if len(t.types) == 2)
    assert whole.T == control.R0
    assert control.target_reproduction == ()


def test_the_example():
    solution = ngm.solve(ngm.load(SALLOW), limit=0)
    # The point of the example: the steady year says that it spreads, the year with its season that it does not.
    assert solution.R0 < 1 < solution.season.averaged < solution.season.worst
    assert solution.growth_rate < 0
    assert any("on the other side of 1" in warning for warning in solution.warnings)


def test_what_is_not_computed_with_a_season_is_refused():
    for ask in (
        lambda s: ngm.control(s, by="age"),
        lambda s: ngm.reproduction_numbers(s, {"a": np.array([0.2])}),
        lambda s: ngm.calibrate(s, "a", 1.0),
        lambda s: ngm.sensitivity(s),
    ):
        with pytest.raises(ngm.DerivationError, match="season"):
            ask(ngm.loads(VECTOR))


def test_growth_without_transmission_has_no_number():
    # By hand: births of infected exceed all exits over the year.
    text = SIR.replace("SEASON", "{ amplitude = 0.5, period = 10 }").replace(
        "[infection_free]",
        '[[flow]]\nto = "I"\nrate = "0.3 * I"\nkind = "transition"\n[infection_free]',
    )
    solution = solve(text)
    assert solution.R0 is None
    assert "die out over a period" in solution.no_R0
    assert solution.growth_rate == pytest.approx(0.5, rel=1e-9)


def test_groups_and_movements_at_single_moments():
    # Second route: the scenario without the season, its values multiplied by the factor of the moment.
    path = Path(__file__).parents[2] / "scenarios" / "three-towns-torvane-fever.toml"
    text = path.read_text(encoding="utf-8")
    line = next(line for line in text.splitlines() if line.startswith("beta = "))
    seasonal = line[:-1].rstrip() + ", season = { amplitude = 0.5, peak = 4, period = 60 } }"
    year = OverTheYear(decided_numbers(ngm.loads(text.replace(line, seasonal))))
    times = np.array([0.0, 11.0, 34.0])
    F, V = year.slopes(times)
    plain = ngm.loads(text)
    for k, t in enumerate(times):
        factor = 1 + 0.5 * np.cos(2 * np.pi * (t - 4) / 60)
        change = (
            f'[[intervention]]\nname = "moment"\nchange = [{{ parameter = "beta", multiply = {float(factor)!r} }}]\n'
        )
        found = decided_numbers(plain, ngm.loads(text + change).interventions[-1])
        assert F[k] == pytest.approx(to_floats(found.F), rel=1e-12)
        assert V[k] == pytest.approx(to_floats(found.V), rel=1e-12)


def test_a_rate_that_stops_at_a_moment():
    # Recovery stands still once a year: that moment alone has no number, the year has.
    text = SIR.replace("SEASON", "{ amplitude = 0.2, period = 10 }")
    text = text.replace(
        "gamma = { value = 0.2 }", "gamma = { value = 0.2, season = { amplitude = 1, peak = 5, period = 10 } }"
    )
    solution = solve(text)
    assert solution.R0 == pytest.approx(2, rel=1e-9)  # one type: mean over mean
    assert solution.season.worst is None
    assert solution.season.frozen == ()
    assert solution.to_json()["season"]["worst"] is None
