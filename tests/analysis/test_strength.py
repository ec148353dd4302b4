"""How much of an intervention, and which coverage, brings the number to a target."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

import ngm
from ngm.scenario.packages import scaled
from tests.analysis.packages import TOWN, intervention, matrix_text, numbers
from tests.analysis.test_compare import CLOSED, SIR
from tests.derivation.models import text
from tests.published.models import close
from tests.published.test_vaccination import ALL_OR_NOTHING, BREAKTHROUGH, LEAKY, WANING


def strength(model, *changes, **options):
    scenario = ngm.loads(model + intervention("Package", *changes))
    return ngm.strength_needed(scenario, "Package", **options)


# -- strengths --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("change", "needed"),
    [
        # R0 = 0.6/0.2 = 3. By hand: 0.6 (1 - s 0.8) = 0.2; 0.6 - 0.5 s = 0.2; 0.6 + s (0.1 - 0.6) = 0.2; 0.2 + s = 0.6;
        # 1 - 0.9 s = 1/3.
        ('parameter = "beta", multiply = 0.2', 5 / 6),
        ('parameter = "beta", add = -0.5', 0.8),
        ('parameter = "beta", set = 0.1', 0.8),
        ('parameter = "gamma", add = 1', 0.4),
        ('susceptibility = "I", reduce = 0.9', 20 / 27),
        ('infectivity = "I", reduce = 0.9', 20 / 27),
    ],
)
def test_every_action_by_hand(change, needed):
    found = strength(SIR, change)
    assert found.strength == pytest.approx(needed, abs=1e-13)
    assert found.monotone
    assert not found.unattainable
    assert found.R0 == pytest.approx(3, rel=1e-15)
    assert found.label == "control reproduction number"


def test_a_whole_package_by_hand():
    # 3 (1 - s/2)(1 - s/2) = 1
    found = strength(SIR, 'parameter = "beta", multiply = 0.5', 'infectivity = "I", reduce = 0.5')
    assert found.strength == pytest.approx(2 - 2 / math.sqrt(3), abs=1e-13)
    assert found.at_full == pytest.approx(0.75, rel=1e-14)


def test_another_target():
    assert strength(SIR, 'parameter = "beta", multiply = 0.2', target=1.5).strength == pytest.approx(0.625, abs=1e-13)


def test_on_matrices_and_groups():
    # By hand: all contacts times 1 - s, so R0 (1 - s) = 1; set to 0 is the same.
    R0 = ngm.solve(ngm.loads(TOWN)).R0
    for change in ('matrix = "C", multiply = 0', 'matrix = "C", set = 0', 'parameter = "q", set = 0'):
        assert strength(TOWN, change).strength == pytest.approx(1 - 1 / R0, abs=1e-12)


def test_the_strength_reaches_the_target():
    # A second route: the package at that strength, compared.
    scenario = ngm.loads(
        TOWN + intervention("P", 'matrix = "C", multiply = 0.4, rows = ["old"]', 'parameter = "gamma", set = 0.9')
    )
    found = ngm.strength_needed(scenario, "P")
    part = replace(scenario, interventions=(scaled(scenario.interventions[0], found.strength),))
    assert ngm.compare(part).interventions[0].R0 == pytest.approx(1, abs=1e-12)


def test_unattainable_is_told_with_what_is_reached():
    found = strength(SIR, 'parameter = "beta", multiply = 0.5')
    assert found.unattainable
    assert found.strength is None
    assert found.at_full == pytest.approx(1.5, rel=1e-15)
    assert found.why == "Package alone does not reach 1: at full strength the number is 1.5."


def test_not_needed():
    found = strength(SIR, 'parameter = "beta", multiply = 0.5', target=4)
    assert found.strength == 0
    assert any("none of it is needed" in warning for warning in found.warnings)


# R0 = 4 beta p (1 - p)/gamma rises with p up to 1/2 and falls after it.
HUMP = text(
    [("S", False), ("I", True)],
    {"beta": 0.6, "gamma": 0.2, "p": 0.1},
    [("S", "I", "4*beta*p*(1 - p)*S*I", "t"), ("I", "", "gamma*I", "x")],
    free={"S": 1},
)


def test_a_response_that_rises_first():
    # 3 * 4 p (1 - p) = 1.5 at p = (1 + sqrt(1/2))/2, s = (p - 0.1)/0.85. It is below 1.5 at s = 0 already (1.08).
    found = strength(HUMP, 'parameter = "p", set = 0.95', target=1.5)
    assert found.R0 == pytest.approx(1.08, rel=1e-14)
    assert found.strength == pytest.approx(((1 + math.sqrt(0.5)) / 2 - 0.1) / 0.85, abs=1e-12)
    assert not found.monotone
    assert any("stays at or below" in warning for warning in found.warnings)
    assert found.at_full == pytest.approx(0.57, rel=1e-13)


def test_a_response_that_comes_back():
    # p from 0.9 down to 0.5 and the number up from 1.08 to 3: the package makes it worse.
    worse = strength(HUMP.replace("p = { value = 0.1 }", "p = { value = 0.9 }"), 'parameter = "p", set = 0.5')
    assert worse.unattainable
    assert worse.strength is None
    # p from 0.5 to beyond 1 and 0 again: 3 * 4 p (1 - p) with q = 0.5 -> a dip at part of the strength.
    dip = text(
        [("S", False), ("I", True)],
        {"beta": 0.6, "gamma": 0.2, "p": 0},
        [("S", "I", "beta*(1 - 2*p)^2*S*I", "t"), ("I", "", "gamma*I", "x")],
        free={"S": 1},
    )
    found = strength(dip, 'parameter = "p", set = 1')
    assert found.unattainable
    assert found.lowest == pytest.approx(0, abs=1e-12)
    assert found.lowest_at == pytest.approx(0.5)
    assert "rises again" in found.why


def test_no_number_on_the_way():
    found = strength(CLOSED, 'parameter = "mu", multiply = 2', 'parameter = "beta", multiply = 0.1')
    assert found.strength is None
    assert not found.unattainable
    assert "not at rest" in found.why
    # L = 2 - 1.5 s and mu = 0.02 (1 - s/2)^2: S = 100 is at rest at both ends and nowhere between.
    halves = ['parameter = "mu", multiply = 0.5'] * 2
    ends = strength(CLOSED, 'parameter = "L", set = 0.5', *halves, 'parameter = "beta", set = 0.01')
    assert ends.strength == pytest.approx(1, abs=1e-8)  # a state counts as at rest within 1e-9
    assert any("there is no number" in warning and "not at rest" in warning for warning in ends.warnings)


def test_wrong_questions():
    scenario = ngm.loads(SIR + intervention("Masks", 'parameter = "beta", multiply = 0.5'))
    with pytest.raises(ngm.ScenarioError, match="Did you mean 'Masks'"):
        ngm.strength_needed(scenario, "Mask")
    with pytest.raises(ngm.ScenarioError, match="lies above 0"):
        ngm.strength_needed(scenario, "Masks", target=0)


def test_on_top_of_another_package():
    scenario = ngm.loads(
        SIR
        + intervention("A", 'parameter = "beta", multiply = 0.5')
        + intervention("B", 'infectivity = "I", reduce = 1')
    )
    found = ngm.strength_needed(scenario, "B", with_also=scenario.interventions[0])
    assert found.strength == pytest.approx(1 / 3, abs=1e-13)  # 1.5 (1 - s) = 1


# -- published vaccination thresholds, as strengths -------------------------------------------------------------------

# Smith, Rodrigues & Fine (1984), from memory; R0 = 2.857142857. Coverage is a parameter of the model, so the strength of
# "everybody is vaccinated" is the critical coverage.
FULL = 'parameter = "phi", set = 1'


@pytest.mark.parametrize(
    ("model", "coverage"),
    [(LEAKY, 0.8125), (ALL_OR_NOTHING, 0.8125), (BREAKTHROUGH, 0.7222222222)],
    ids=lambda v: str(v)[:20],
)
def test_critical_coverage_as_a_strength(model, coverage):
    found = strength(model.but(phi=0).text, FULL)
    assert found.R0 == close(2.857142857)
    assert found.strength == close(coverage)


def test_waning_makes_every_coverage_too_little():
    found = strength(WANING.but(phi=0).text, FULL)
    assert found.unattainable
    assert found.at_full == close(2.476190476)


# -- coverage without a vaccine in the model --------------------------------------------------------------------------

PLAIN = text(
    [("S", False), ("I", True), ("R", False)],
    {"beta": 0.6, "gamma": 0.2, "mu": 0.01},
    [
        ("", "S", "mu", "x"),
        ("S", "I", "beta*S*I/N", "t"),
        ("I", "R", "gamma*I", "x"),
        *((name, "", f"mu*{name}", "x") for name in "SIR"),
    ],
    definitions={"N": "S + I + R"},
)


@pytest.mark.parametrize("kind", ["leaky", "all-or-nothing"])
def test_published_coverages(kind):
    scenario = ngm.loads(PLAIN)
    found = ngm.coverage_needed(scenario, efficacy=0.8, kind=kind)
    assert found.groups == ("everybody",)
    assert found.R0 == found.T == close(2.857142857)
    assert found.coverage == close(0.8125)
    assert ngm.coverage_needed(scenario, efficacy=0.8, against_spread=0.5, kind=kind).coverage == close(0.7222222222)
    waning = ngm.coverage_needed(scenario, efficacy=0.8, turnover=0.01, waning=0.05, kind=kind)
    assert waning.required == close(4.875)
    assert waning.coverage is None
    assert waning.unattainable
    assert waning.at_full == close(2.476190476)
    assert waning.why.startswith("Unattainable: 487.5 % would be needed")


def test_a_vaccine_too_weak_for_any_coverage():
    found = ngm.coverage_needed(ngm.loads(PLAIN), efficacy=0.6)
    assert found.required == pytest.approx(0.65 / 0.6, rel=1e-12)
    assert found.unattainable
    nothing = ngm.coverage_needed(ngm.loads(PLAIN), efficacy=0)
    assert nothing.unattainable
    assert "no coverage would do" in nothing.why


def test_groups_that_cannot_be_the_target_alone():
    found = ngm.coverage_needed(ngm.loads(TOWN), ["young"], efficacy=0.9)
    assert found.T is None
    assert found.unattainable
    assert found.why == "Vaccinating young alone cannot be enough: without them the infection sustains itself."
    # rho of the old alone: 0.2 * 6 = 1.2, the number with all the young protected wholly
    assert ngm.coverage_needed(ngm.loads(TOWN), ["young"]).at_full == pytest.approx(1.2, rel=1e-12)


def test_a_group_alone_where_it_can_be():
    # K = [[0.8, 1.5], [0.6, 0.5]]: T2 = 5 (published check value), so 0.8/0.9 of the second type at efficacy 0.9.
    scenario = ngm.loads(matrix_text([[0.8, 1.5], [0.6, 0.5]]))
    found = ngm.coverage_needed(scenario, ["I2"], efficacy=0.9)
    assert found.T == pytest.approx(5, rel=1e-12)
    assert found.coverage == pytest.approx(8 / 9, rel=1e-12)
    made = numbers(
        matrix_text([[0.8, 1.5], [0.6, 0.5]]),
        intervention("V", f'susceptibility = "I2", reduce = {0.9 * found.coverage!r}'),
    )
    assert made["V"] == pytest.approx(1, abs=1e-12)


def test_efficacies_that_differ():
    scenario = ngm.loads(TOWN)
    found = ngm.coverage_needed(scenario, efficacy={"young": 0.9, "old": 0.7})
    x = found.coverage
    made = numbers(
        TOWN,
        intervention(
            "V",
            f'susceptibility = "I", group = {{ age = "young" }}, reduce = {0.9 * x!r}',
            f'susceptibility = "I", group = {{ age = "old" }}, reduce = {0.7 * x!r}',
        ),
    )
    assert made["V"] == pytest.approx(1, abs=1e-12)


def test_nothing_needed_below_one():
    found = ngm.coverage_needed(ngm.loads(PLAIN.replace("0.6", "0.1")), efficacy=0.8)
    assert (found.coverage, found.critical_effort, found.unattainable) == (0, 0, False)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"groups": ["yuong"]}, "Did you mean 'young'"),
        ({"groups": []}, "no group is named"),
        ({"groups": ["young", "I[young]"]}, "named twice"),
        ({"efficacy": 70}, "For 70 % write 0.7"),
        ({"efficacy": -0.1}, "outside"),
        ({"efficacy": {"young": 0.5}}, "has no value for old"),
        ({"efficacy": {"young": 0.5, "old": 0.5, "all": 1}}, "none of the groups"),
        ({"kind": "live"}, "leaky or all-or-nothing"),
        ({"waning": 0.1}, "turnover"),
        ({"target": -1}, "lies above 0"),
    ],
)
def test_wrong_questions_about_coverage(options, message):
    with pytest.raises(ngm.ScenarioError, match=message):
        ngm.coverage_needed(ngm.loads(TOWN), **options)
