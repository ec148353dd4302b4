"""A supply shared among the groups of a scenario."""

from __future__ import annotations

import numpy as np
import pytest

import ngm
from tests.analysis.packages import TOWN, intervention, matrix_text, numbers

FOUR = "scenarios/age-groups-ember-cough.toml"


def coverage_package(found, share):
    """Return an intervention that does what a share does, through susceptibility."""
    changes = [
        f'susceptibility = "I", group = {{ age = "{group}" }}, reduce = {e * x!r}'
        for group, e, x in zip(found.groups, found.efficacies, share.coverage, strict=True)
    ]
    return intervention("V", *changes)


def test_a_share_is_what_the_model_says():
    # A second route: the same coverage as an intervention on the model.
    found = ngm.allocate(ngm.loads(TOWN), 400, efficacy=0.8, against_spread=0.5)
    assert found.groups == ("young", "old")
    assert found.sizes == (300, 700)
    assert found.efficacies == pytest.approx((0.9, 0.9))
    for share in (found.best, *found.rules):
        assert numbers(TOWN, coverage_package(found, share))["V"] == pytest.approx(share.R0, rel=1e-12)
        assert sum(share.doses) == pytest.approx(400, rel=1e-9)
        assert share.R0 >= found.best.R0 * (1 - 1e-9)
    assert [share.rule for share in found.rules] == [
        "by population",
        "by incidence",
        "where the next dose does most",
        "young first",
        "old first",
    ]
    assert found.route == "convex"  # contacts that balance, like with like: both eigenvalues are positive
    assert 0 <= found.gap < 1e-6
    assert found.label == "control reproduction number"


def test_rules_by_hand():
    found = ngm.allocate(ngm.loads(TOWN), 400)
    rules = {share.rule: share.doses for share in found.rules}
    assert rules["by population"] == pytest.approx((120, 280))
    assert rules["young first"] == pytest.approx((300, 100))
    assert rules["old first"] == pytest.approx((0, 400))
    # Doses by the share of new cases: the published check value 0.4804941148 for the young.
    assert rules["by incidence"] == pytest.approx((400 * 0.4804941148, 400 * 0.5195058852), rel=1e-9)


def test_the_smallest_supply():
    found = ngm.allocate(ngm.loads(TOWN), 400, efficacy=0.9)
    smallest = found.smallest
    package = coverage_package(found, ngm.allocate(ngm.loads(TOWN), smallest.supply, efficacy=0.9).best)
    assert numbers(TOWN, package)["V"] == pytest.approx(1, abs=1e-6)
    assert smallest.lower_bound == pytest.approx(smallest.supply, rel=1e-5)
    # By population it takes (1 - 1/R0)/0.9 of everybody.
    assert smallest.supply < 1000 * (1 - 1 / found.R0) / 0.9


def test_costs_move_doses():
    cheap = ngm.allocate(ngm.loads(TOWN), 200, cost={"young": 1, "old": 10})
    dear = ngm.allocate(ngm.loads(TOWN), 200, cost={"young": 10, "old": 1})
    assert cheap.best.coverage[0] > dear.best.coverage[0]
    for found in (cheap, dear):
        assert np.dot(found.best.doses, found.costs) == pytest.approx(200, rel=1e-9)


def test_limits_are_kept():
    found = ngm.allocate(ngm.loads(TOWN), 900, upper={"young": 0.4, "old": 0.7})
    assert found.best.coverage == (0.4, 0.7)
    assert found.route == "all"
    assert found.gap == 0
    weak = ngm.allocate(ngm.loads(TOWN), 100, efficacy=0.3)
    assert weak.smallest.supply is None
    assert weak.smallest.why.startswith("Unattainable")


def test_nothing_to_share():
    found = ngm.allocate(ngm.loads(TOWN), 0)
    assert found.best.R0 == found.R0 == found.lower_bound
    assert found.best.doses == (0, 0)


def test_sizes_of_hosts_that_are_not_people():
    # Two kinds of hosts, and no word about which susceptibles belong to whom but the flows.
    found = ngm.allocate(ngm.loads(matrix_text([[0, 4.0], [9.0, 0]])), 0.75)
    assert found.groups == ("I1", "I2")
    assert found.sizes == (1, 1)
    # sqrt(36 (1 - x)(1 - y)) with x + y = 0.75 is least at a corner: 3.
    assert found.best.R0 == pytest.approx(3, rel=1e-9)
    assert found.route == "divided"
    assert "no convex function" in found.proof
    given = ngm.allocate(ngm.loads(matrix_text([[0, 4.0], [9.0, 0]])), 75, sizes={"I1": 100, "I2": 400})
    assert given.best.coverage == pytest.approx((0.75, 0), abs=1e-9)


def test_on_top_of_an_intervention():
    scenario = ngm.loads(TOWN + intervention("Half", 'parameter = "q", multiply = 0.5'))
    found = ngm.allocate(scenario, 100, intervention=scenario.interventions[0])
    assert found.R0 == pytest.approx(ngm.compare(scenario).interventions[0].R0, rel=1e-15)


def test_some_groups_only():
    found = ngm.allocate(ngm.loads(TOWN), 200, groups=["old"])
    assert found.groups == ("old",)
    assert found.best.doses == pytest.approx((200,))
    assert [share.rule for share in found.rules] == ["by population"]


@pytest.mark.parametrize("supply", [30_000, 100_000, 1_000_000])
def test_four_ages_and_a_hundred_thousand_doses(supply):
    found = ngm.allocate(ngm.load(FOUR), supply, efficacy=0.7)
    by_population = next(share for share in found.rules if share.rule == "by population")
    assert found.best.R0 <= by_population.R0
    # By hand: everybody alike leaves R0 (1 - 0.7 supply/1000000).
    assert by_population.R0 == pytest.approx(found.R0 * (1 - 0.7 * supply / 1_000_000), rel=1e-12)
    assert found.gap < 1e-5
    assert list(found.to_frame().index) == ["0-4", "5-17", "18-64", "65+"]
    assert len(found.numbers_frame()) == 2 + len(found.rules)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"supply": -1}, "is no supply"),
        ({"supply": float("nan")}, "is no supply"),
        ({"cost": 0}, "not above 0"),
        ({"efficacy": 1.5}, "outside"),
        ({"upper": {"young": 1}}, "has no value for old"),
        ({"groups": ["all"]}, "no group of hosts"),
        ({"sizes": {"yuong": 5}}, "none of the groups"),
        ({"sizes": {"young": -5}}, "0 or more"),
        ({"sizes": {"young": 0}, "groups": ["young"]}, "has no members"),
        ({"target": 0}, "lies above 0"),
    ],
)
def test_wrong_questions(options, message):
    supply = options.pop("supply", 100)
    with pytest.raises(ngm.ScenarioError, match=message):
        ngm.allocate(ngm.loads(TOWN), supply, **options)
