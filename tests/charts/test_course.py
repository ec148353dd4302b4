"""What the pictures of endemic states, first weeks and seasons show, read from their specifications."""

from __future__ import annotations

from pathlib import Path

import pytest

import ngm
from ngm.charts import course as charts
from ngm.charts.style import short
from tests.charts.test_charts import values

SCENARIOS = Path(__file__).parents[2] / "scenarios"


@pytest.fixture(scope="module")
def fenmoor():
    scenario = ngm.load(SCENARIOS / "leaky-vaccine-fenmoor-itch.toml")
    return ngm.threshold(scenario, intervention=scenario.interventions[0])


@pytest.mark.parametrize("dark", [False, True])
def test_endemic_curve(fenmoor, dark):
    chart = charts.endemic_curve(fenmoor, dark=dark)
    told = chart.to_dict()["description"]
    assert f"turning point at {short(fenmoor.turning)}" in told
    assert "backward" in told
    dashes = {
        tuple(layer["mark"].get("strokeDash", ()))
        for layer in chart.to_dict()["layer"]
        if layer["mark"]["type"] == "line"
    }
    assert dashes == {(1, 0), (5, 4)}
    drawn = [row for row in values(chart) if "state" in row]
    assert [row["infected"] for row in drawn] == [p.infected for p in fenmoor.branch]


def test_first_weeks():
    found = ngm.course(ngm.load(SCENARIOS / "seir-velmar-fever.toml"), horizon=10)
    chart = charts.first_weeks(found, found.courses[1])
    assert "of I" in chart.to_dict()["description"]
    drawn = [row for row in values(chart) if row.get("type") == "I"]
    assert drawn[-1]["infected"] == found.courses[1].infected[-1][1]


def test_season():
    year = ngm.solve(ngm.load(SCENARIOS / "seasonal-midges-sallow-fever.toml"), limit=0).season
    chart = charts.season(year, "day")
    assert short(year.R0) in chart.to_dict()["description"]
    drawn = [row["number"] for row in values(chart) if "time" in row]
    assert drawn == list(year.frozen)
