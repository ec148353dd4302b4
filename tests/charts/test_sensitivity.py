"""What the pictures of sensitivity show, read from their specifications."""

from __future__ import annotations

import json
from dataclasses import replace

import pytest

from ngm.charts import sensitivity as charts
from ngm.charts.plane import plane
from ngm.charts.style import DARK, LIGHT
from ngm.results_mixing import Scale
from ngm.results_sensitivity import DrawFigures, Driver, Plane, Swing, Uncertainty
from tests.charts.test_charts import values

#: R0 = beta/gamma at 0.5/0.2, by hand; `hidden` has no R0 at one end.
SWINGS = (
    Swing("beta", 0.1, 0.9, "1/day", 0.5, 4.5),
    Swing("gamma", 0.1, 0.3, "1/day", 5.0, 5 / 3),
    Swing("hidden", 0.0, 1.0, "", None, 3.0),
)


def figures(draws: int) -> DrawFigures:
    """Return figures made up to be drawn."""
    quantiles = {"0.025": 0.6, "0.25": 1.5, "0.5": 2.0, "0.75": 3.0, "0.975": 4.0}
    return DrawFigures(draws, 0, 2.1, 0.9, quantiles, 0.75, 0.9 / draws**0.5, (0.7, 0.8))


DRAWN = Uncertainty(
    title="Made up",
    digest="0",
    how="latin hypercube of 400",
    seed=1,
    R0=figures(400),
    histogram=((0.5, 1.0, 100.0), (1.0, 2.0, 120.0), (2.0, 4.0, 180.0)),
    running=(figures(100), figures(200), figures(400)),
    drivers=(
        Driver("gamma", -0.8, None, True, 0.25, (0.2, 0.3), 0.3, (0.25, 0.35)),
        Driver("beta", 0.9, None, True, 0.6, (0.55, 0.65), 0.7, (0.6, 0.8)),
        Driver("odd", 0.01, None, False, 0.0, (-0.02, 0.02), 0.1, (0.05, 0.15)),
        Driver("fixed", None, "it does not vary", None, None, None, None, None),
    ),
    interventions=(),
    assurance=0.9,
    uniform_effort=0.7,
    warnings=(),
)
PLANE = Plane(
    title="Made up",
    digest="0",
    x=Scale("parameter", "beta", "beta (1/day)", (0.0, 1.0, 2.0), 1.5),
    y=Scale("parameter", "gamma", "gamma (1/day)", (0.0, 1.0), 0.5),
    R0=((None, None, None), (0.0, 1.0, 2.0)),
    now=3.0,
    lines=((1.0, (((1.0, 0.9), (1.0, 1.0)),)), (2.0, (((2.0, 0.9), (2.0, 1.0)),)), (9.0, ())),
    missing={"nobody recovers": 3},
)


def test_a_tornado_has_a_bar_to_each_end_that_has_a_number():
    chart = charts.tornado(SWINGS, 2.5)
    rows = [row for row in values(chart) if "end" in row]
    bars = {(row["parameter"], row["end"]): (row["base"], row["R0"], row["shown"]) for row in rows}
    assert bars["beta", "lower end"] == (2.5, 0.5, "0.1")
    assert bars["gamma", "upper end"] == (2.5, 5 / 3, "0.3")
    assert ("hidden", "lower end") not in bars
    assert ("hidden", "upper end") in bars
    words = {row["shown"]: row["R0"] for row in values(chart) if "end" not in row}
    assert words == {"now 2.5": 2.5, "1": 1.0}
    told = chart.to_dict()["description"]
    assert "beta from 0.1 to 0.9 1/day: R0 from 0.5 to 4.5" in told
    assert charts.tornado(SWINGS[:0], 2.5) is None


def test_the_histogram_parts_at_one_and_holds_every_draw():
    chart = charts.histogram(DRAWN)
    rows = [row for row in values(chart) if "count" in row]
    assert sum(row["count"] for row in rows) == 400
    assert [row["side"] for row in rows] == ["up to 1", "above 1", "above 1"]
    assert all(row["zero"] == 0 for row in rows)  # bars stand on the axis
    told = chart.to_dict()["description"]
    assert "median 2, middle 95 % from 0.6 to 4" in told
    assert "Share above 1: 0.75" in told
    assert charts.histogram(replace(DRAWN, histogram=())) is None
    across = charts.histogram(replace(DRAWN, histogram=((0.5, 1.5, 7.0),)))
    assert [row["side"] for row in values(across) if "count" in row] == ["across 1"]


def test_the_ranking_is_by_size_and_marks_what_misleads():
    rows = [row for row in values(charts.ranking(DRAWN)) if "shown" in row]
    names = list(dict.fromkeys(row["parameter"] for row in rows))
    assert names == ["beta", "gamma", "odd"]
    assert {row["parameter"]: row["shown"] for row in rows}["odd"] == "0.01  (rises and falls)"
    assert charts.ranking(replace(DRAWN, drivers=DRAWN.drivers[3:])) is None


def test_indices_carry_their_intervals_and_joint_draws_have_none():
    rows = values(charts.indices(DRAWN))
    first = {row["parameter"]: (row["low"], row["value"], row["high"]) for row in rows if row["index"] == "first"}
    total = {row["parameter"]: (row["low"], row["value"], row["high"]) for row in rows if row["index"] == "total"}
    assert first["beta"] == (0.55, 0.6, 0.65)
    assert total["odd"] == (0.05, 0.1, 0.15)
    joint = tuple(replace(d, first=None, total=None) for d in DRAWN.drivers)
    assert charts.indices(replace(DRAWN, drivers=joint)) is None


def test_convergence_has_a_point_for_each_set_of_draws():
    rows = values(charts.convergence(DRAWN))
    means = {row["draws"]: row for row in rows if row["what"] == "mean of R0"}
    assert set(means) == {100, 200, 400}
    assert means[100]["high"] - means[100]["value"] == pytest.approx(1.96 * 0.09)  # 0.9/sqrt(100), by hand
    assert charts.convergence(replace(DRAWN, running=DRAWN.running[:1])) is None


def test_the_plane_shows_its_cells_its_lines_and_where_the_scenario_stands():
    chart = plane(PLANE)
    spec = chart.to_dict()
    rows = values(chart)
    # Those without a number have no cell.
    assert [row["R0"] for row in rows if "R0" in row] == [0.0, 1.0, 2.0]
    assert {row["shown"] for row in rows if "shown" in row} == {"R0 = 1", "R0 = 2", "now 3"}
    dashes = [layer["mark"]["strokeDash"] for layer in spec["layer"] if layer["mark"].get("type") == "rule"]
    assert dashes == [[1, 0], [4, 3]]  # the line at 1 is told apart by more than colour
    assert "beta (1/day) (across)" in spec["description"]
    assert plane(replace(PLANE, R0=((None,) * 3,) * 2)) is None
    assert "does not pass 1" in plane(replace(PLANE, lines=((1.0, ()),))).to_dict()["description"]


@pytest.mark.parametrize(("dark", "ink"), [(False, LIGHT), (True, DARK)])
def test_letters_take_the_ink_of_the_theme(dark, ink):
    for chart in (
        charts.tornado(SWINGS, 2.5, dark=dark),
        charts.histogram(DRAWN, dark=dark),
        charts.ranking(DRAWN, dark=dark),
        charts.indices(DRAWN, dark=dark),
    ):
        assert ink.text in json.dumps(chart.to_dict())
