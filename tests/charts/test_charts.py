"""What the charts show, read from their specifications."""

from __future__ import annotations

import json
from dataclasses import replace
from math import inf, nan, sqrt

import pytest

from ngm.charts import bars
from ngm.charts.spectrum import eigenvalues
from ngm.charts.style import DARK, LIGHT, short
from tests.charts.samples import CONTROL, TWO_CLASSES, VECTOR_BORNE


def values(chart):
    """Return every data row of a chart."""
    spec = chart.to_dict()
    return [row for rows in spec["datasets"].values() for row in rows] if "datasets" in spec else _inline(spec)


def _inline(spec):
    rows = list(spec.get("data", {}).get("values", []))
    for layer in spec.get("layer", []):
        rows += _inline(layer)
    return rows


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (2.449489742783178, "2.449"),
        (1.0, "1"),
        (1.00001, "1.00001"),  # never rounded onto the threshold
        (0.9999999, "0.9999999"),
        (12345.678, "12,346"),
        (1000.0, "1000"),
        (1.5e-7, "1.5e-7"),
        (3e12, "3e12"),
        (0.0, "0"),
        (-0.25, "-0.25"),
        (None, "–"),
        (nan, "–"),
        (inf, "∞"),
    ],
)
def test_short(value, text):
    assert short(value) == text


def test_eigenvalues_lie_where_they_are_and_say_so():
    chart = eigenvalues(VECTOR_BORNE)
    rows = values(chart)
    points = [row for row in rows if "eigenvalue" in row]
    assert [(p["re"], p["what"]) for p in points] == [(sqrt(6), "R0 itself"), (-sqrt(6), "on the circle")]
    circle = [row for row in rows if row.get("circle", "").startswith("radius R0")]
    assert all(row["re"] ** 2 + row["im"] ** 2 == pytest.approx(6) for row in circle)
    spec = chart.to_dict()
    assert spec["width"] == spec["height"]  # equal scales: circles are circles
    assert "2.449" in spec["description"]


def test_eigenvalues_need_an_R0():
    assert eigenvalues(replace(VECTOR_BORNE, R0=None)) is None
    assert eigenvalues(replace(VECTOR_BORNE, eigenvalues=())) is None


def test_distribution_and_values_carry_their_labels():
    rows = values(bars.stable_distribution(VECTOR_BORNE))
    # By hand: K w = R0 w gives w_v = sqrt(3/2) w_h.
    assert {row["type"]: row["shown"] for row in rows} == {
        "I_h: Infectious hosts": "0.4495",
        "I_v: Infectious vectors": "0.5505",
    }
    chart = bars.reproductive_values(VECTOR_BORNE)
    assert {row["shown"] for row in values(chart)} == {"1.112", "0.9082"}
    assert "1.112" in chart.to_dict()["description"]


def test_vectors_that_do_not_exist_are_not_drawn():
    assert bars.stable_distribution(replace(TWO_CLASSES, right=None)) is None
    assert bars.reproductive_values(replace(TWO_CLASSES, left=None)) is None
    many = tuple(f"t{k}" for k in range(bars.MOST_BARS + 1))
    assert bars.stable_distribution(replace(TWO_CLASSES, types_at_infection=many, right=(1.0,) * len(many))) is None


def test_efforts_name_what_is_not_enough():
    rows = values(bars.efforts(CONTROL))
    assert {row["type"]: row["shown"] for row in rows} == {
        "infections of I_h": "0.833",
        "infections of I_v": "not enough alone",
        "infectivity of I_h": "0.833",
    }


def test_efforts_without_a_bar_are_not_drawn():
    nothing = replace(CONTROL, type_reproduction=CONTROL.type_reproduction[1:], state_reproduction=())
    assert bars.efforts(nothing) is None


@pytest.mark.parametrize(("dark", "ink"), [(False, LIGHT), (True, DARK)])
def test_letters_take_the_ink_of_the_theme(dark, ink):
    for chart in (bars.stable_distribution(VECTOR_BORNE, dark=dark), eigenvalues(VECTOR_BORNE, dark=dark)):
        assert ink.text in json.dumps(chart.to_dict())
