"""Reading seasons: what is allowed, and each mistake in words. Expected wordings and periods are by hand."""

from __future__ import annotations

from fractions import Fraction

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.file import loads
from ngm.scenario.season import breaks, common_period, mean_factor
from tests.scenario.models import PLAIN, changed

BETA = 'beta = { value = 0.4, unit = "1/day", range = [0.2, 0.6] }'
SIGMA = 'sigma = { value = "1/5", unit = "1/day" }'


def with_season(text, more=""):
    return changed(PLAIN, BETA, f"beta = {{ value = 0.4, season = {text}{more} }}")


def test_a_wave():
    scenario = loads(with_season('{ amplitude = 0.3, peak = 30, period = "365.25" }'))
    season = scenario.parameters["beta"].season
    assert (season.amplitude, season.peak, season.period) == (Fraction(3, 10), 30, Fraction("365.25"))
    assert mean_factor(season) == 1
    assert "season" in scenario.text


def test_listed_factors():
    scenario = loads(with_season("{ values = [0.8, 1.0, 1.3, 0.7], period = 365 }"))
    assert mean_factor(scenario.parameters["beta"].season) == Fraction("0.95")
    assert [float(t) for t in breaks(scenario)] == [0, 91.25, 182.5, 273.75, 365]


def test_several_seasons_share_a_period():
    text = changed(
        with_season("{ amplitude = 0.1, period = 365 }"),
        SIGMA,
        "sigma = { value = 0.2, season = { values = [1, 0.8], period = 73 } }",
    )
    assert common_period(loads(text)) == 365


@pytest.mark.parametrize(
    ("season", "parts"),
    [
        ("0.3", ("parameters.beta, season: expected a table", "amplitude = 0.3")),
        ("{ amplitude = 0.3 }", ("season, period: is missing",)),
        ("{ period = 365 }", ("season, amplitude: is missing",)),
        ("{ amplitude = 0.3, period = 0 }", ("season, period: 0 is not above 0",)),
        ("{ amplitude = 0.3, period = -7 }", ("season, period: -7 is not above 0",)),
        ("{ amplitude = 30, period = 365 }", ("season, amplitude: 30 lies outside [0, 1]", 'sign = "any"')),
        ("{ amplitude = -0.3, period = 365 }", ("season, amplitude: is negative", "half a period")),
        ('{ amplitude = "x", period = 365 }', ("season, amplitude: expected a number",)),
        ("{ amplitude = 0.3, period = 365, phase = 1 }", ("'phase' is not a key that is known here",)),
        ("{ values = [1, 2], amplitude = 0.3, period = 365 }", ("season, amplitude: does not go with values",)),
        ("{ values = [], period = 365 }", ("season, values: expected a list of factors", "an empty list")),
        ("{ values = 2, period = 365 }", ("season, values: expected a list of factors",)),
        ("{ values = [1, -2], period = 365 }", ("season, values, entry 2: -2 is negative",)),
        ("{ values = [1, true], period = 365 }", ("season, values, entry 2: expected a number",)),
    ],
)
def test_mistakes(season, parts):
    with pytest.raises(ScenarioError) as caught:
        loads(with_season(season))
    told = str(caught.value)
    assert all(part in told for part in parts), told
    assert len(caught.value.problems) == 1
    assert caught.value.problems[0].key[:3] == ("parameters", "beta", "season")


def test_sign_any_lifts_the_limit():
    scenario = loads(with_season("{ amplitude = 3, period = 365 }", ', sign = "any"'))
    assert scenario.parameters["beta"].season.amplitude == 3


def test_periods_that_do_not_fit():
    text = changed(
        with_season("{ amplitude = 0.1, period = 365.25 }"),
        SIGMA,
        "sigma = { value = 0.2, season = { amplitude = 0.1, period = 7.01 } }",
    )
    with pytest.raises(ScenarioError, match="begin anew together only after"):
        loads(text)


def test_not_in_discrete_time():
    text = changed(
        with_season("{ amplitude = 0.1, period = 52 }"), 'time_unit = "day"', 'time_unit = "day"\ntime = "discrete"'
    )
    with pytest.raises(ScenarioError, match="continuous time only"):
        loads(text)
