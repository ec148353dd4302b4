"""What the charts of control show, read from their specifications."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

import ngm
from ngm.charts import control
from ngm.charts.style import DARK, LIGHT
from tests.analysis.packages import TOWN, intervention
from tests.charts.samples import CONTROL
from tests.charts.test_charts import values

FOUR = ngm.load("scenarios/age-groups-ember-cough.toml")
COMPARED = ngm.compare(FOUR)
ROWS = [COMPARED.baseline, *COMPARED.interventions]
SHARED = ngm.allocate(FOUR, 100_000, efficacy=0.7)


def of(chart, key):
    return [row for row in values(chart) if key in row]


def test_bars_stand_in_the_order_given_with_a_line_at_one():
    chart = control.interventions(ROWS)
    bars = of(chart, "kind")
    assert [row["value"] for row in bars] == [row.R0 for row in ROWS]
    assert [row["what"] for row in bars] == ["R0"] + ["control reproduction number"] * 5
    assert ["below 1" in row["name"] for row in bars] == [row.below_one for row in ROWS]  # in words, not by colour
    assert {row["at"] for row in of(chart, "at")} == {1.0}
    spec = chart.to_dict()
    assert "Masks 1.297" in spec["description"]
    assert "Vaccination of adults 0.9659, below 1" in spec["description"]


def test_a_row_without_a_number_says_so():
    none = replace(COMPARED.interventions[0], R0=None, no_R0="made up", below_one=False)
    chart = control.interventions([COMPARED.baseline, none])
    assert "no number" in of(chart, "kind")[1]["name"]
    assert control.interventions([none]) is None


def test_too_many_bars_are_no_picture():
    assert control.interventions([COMPARED.interventions[0]] * (control.MOST_BARS + 1)) is None


def test_names_that_are_cut_alike_stay_apart():
    long = "A name of many words that goes on and on and ends in "
    rows = [replace(COMPARED.interventions[0], name=long + end) for end in ("one", "two")]
    names = [row["name"] for row in of(control.interventions(rows), "kind")]
    assert len(set(names)) == 2
    assert all(len(line) <= 30 for name in names for line in name.split("\n"))


def test_strength_needed_is_marked():
    found = ngm.strength_needed(FOUR, "Vaccination of adults")
    chart = control.strength(found)
    (mark,) = of(chart, "shown")[:1]
    assert (mark["strength"], mark["value"]) == (found.strength, 1.0)
    points = [row for row in of(chart, "strength") if "shown" not in row]
    assert (points[0]["value"], points[-1]["value"]) == (found.R0, found.at_full)
    assert "1 is reached at strength 0.9135" in chart.to_dict()["description"]


def test_strength_that_is_not_enough_has_no_mark():
    found = ngm.strength_needed(FOUR, "Masks")
    chart = control.strength(found)
    assert not of(chart, "shown")
    assert "is not reached" in chart.to_dict()["description"]
    assert control.strength(replace(found, curve=((0.0, None), (1.0, None)))) is None


@pytest.mark.parametrize(
    ("kind", "shown"),
    [
        ("types", {"I_h": "0.833", "I_v": "cannot work alone"}),
        ("entries", {"I_v infecting I_h": "0.833"}),
        ("states", {"I_h": "0.833"}),
    ],
)
def test_efforts_and_what_cannot_work_alone(kind, shown):
    # By hand: 1 - 1/6.
    chart = control.efforts(CONTROL, kind)
    assert {row["name"]: row["shown"] for row in of(chart, "shown")} == shown
    assert all(0 <= row["value"] <= 1 for row in of(chart, "shown"))
    assert "cannot work alone" in chart.to_dict()["description"] or kind != "types"


def test_no_target_no_picture():
    assert control.efforts(replace(CONTROL, state_reproduction=()), "states") is None


def test_ways_of_sharing_are_points():
    chart = control.shares(SHARED)
    rows = of(chart, "kind")
    assert [row["value"] for row in rows] == [SHARED.R0, SHARED.best.R0, *(rule.R0 for rule in SHARED.rules)]
    assert [row["kind"] for row in rows].count("best") == 1
    low, high = chart.to_dict()["layer"][0]["encoding"]["x"]["scale"]["domain"]
    assert low < SHARED.best.R0 < SHARED.R0 < high  # an axis not from 0: points, not bars
    assert {layer["mark"]["type"] for layer in chart.to_dict()["layer"]} == {"point", "text"}


def test_coverage_of_each_group_beside_an_even_one():
    rows = of(control.coverages(SHARED), "what")
    best = [row for row in rows if row["what"] == "best found"]
    even = [row for row in rows if row["what"] == "by population"]
    assert [row["value"] for row in best] == pytest.approx([100 * x for x in SHARED.best.coverage])
    assert [row["value"] for row in even] == pytest.approx([10] * 4)  # by hand: 100,000 of 1,000,000
    assert [row["name"] for row in best] == list(SHARED.groups)


def test_nothing_to_share_is_drawn_all_the_same():
    nothing = ngm.allocate(ngm.loads(TOWN), 0)
    for chart in (control.shares(nothing), control.coverages(nothing)):
        rows = values(chart)
        assert all(math.isfinite(row["value"]) for row in rows)


@pytest.mark.parametrize("dark", [False, True])
def test_ink_follows_the_background(dark):
    other = (LIGHT if dark else DARK).text
    scenario = ngm.loads(TOWN + intervention("Distance", 'matrix = "C", multiply = 0.5'))
    charts = [
        control.interventions(ROWS, dark=dark),
        control.strength(ngm.strength_needed(scenario, "Distance", target=2), dark=dark),
        control.efforts(CONTROL, "types", dark=dark),
        control.shares(SHARED, dark=dark),
        control.coverages(SHARED, dark=dark),
    ]
    for chart in charts:
        text = str(chart.to_dict())
        assert other not in text
        assert chart.to_dict()["description"]
