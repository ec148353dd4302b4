"""How much is enough in a wanted share of the draws; every draw with its numbers; correlations of what is drawn."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest

import ngm
from ngm.engine.ranks import rank_correlation
from tests.analysis.test_uncertainty import product

AGES = ngm.load("scenarios/age-groups-ember-cough.toml")
LESS = '[[intervention]]\nname = "Less contact"\nchange = [{ parameter = "beta", multiply = 0.2 }]\n'
#: R0 = 5 beta, D fixed.
STRAIGHT = ngm.loads(product(stay='label = "stay"', extra=LESS))


@pytest.mark.parametrize("assurance", [0.5, 0.75, 0.9, 0.95])
def test_strength_for_an_assurance(assurance):
    # By hand: 5 beta (1 - 0.8 s) < 1 in the share a of the draws needs s above (1 - 1/(5 b)) / 0.8, b the draw of that rank.
    beta = np.linspace(0.21, 0.59, 200)
    found = ngm.assured_strength(STRAIGHT, "Less contact", {"beta": beta}, assurance=assurance)
    b = beta[int(np.ceil(assurance * 200)) - 1]
    assert found.needed == pytest.approx((1 - 1 / (5 * b)) / 0.8, abs=2e-7)
    # By hand: at the values, beta = 0.4.
    assert found.at_values == pytest.approx((1 - 1 / 2) / 0.8, rel=1e-9)
    assert (found.share_at_none, found.share_at_full) == (0, 1)


def test_at_the_strength_returned_the_share_is_large_enough():
    needed = ngm.assured_strength(AGES, "Masks", 300, assurance=0.3, target=1.5, seed=2)
    if needed.needed is None:
        assert needed.share_at_full < 0.3
        return
    # Second route: the intervention written at that strength, and its draws counted.
    part = ngm.scenario.packages.scaled(next(i for i in AGES.interventions if i.name == "Masks"), needed.needed)
    columns = ngm.draw_table(AGES, 300, seed=2, interventions=False).columns
    draws = {name: values for name, values in columns.items() if name != "R0"}
    values = ngm.analysis.batch.draw_numbers(AGES, draws, intervention=part).values
    assert np.mean(values < 1.5) >= 0.3


def test_a_strength_that_is_not_there():
    found = ngm.assured_strength(STRAIGHT, "Less contact", {"beta": [0.3, 0.59, 2.0]}, assurance=0.9)
    assert found.needed is None
    assert found.why == "Unattainable: with all of it the number is below 1 in 66.67 % of the draws."
    # and where nothing is needed
    assert ngm.assured_strength(STRAIGHT, "Less contact", {"beta": [0.1, 0.15]}, assurance=0.9).needed == 0


def test_coverage_for_an_assurance():
    # By hand: one type, x = (1 - 1/R0)/e.
    beta = np.linspace(0.21, 0.59, 100)
    found = ngm.assured_coverage(STRAIGHT, {"beta": beta}, efficacy=0.9, assurance=0.95)
    assert found.needed == pytest.approx((1 - 1 / (5 * beta[94])) / 0.9, rel=1e-12)
    assert found.at_values == pytest.approx(0.5 / 0.9, rel=1e-12)
    assert found.what == "coverage of everybody"


@pytest.mark.parametrize("efficacy", [0.8, {"0-4": 0.9, "5-17": 0.9, "18-64": 0.8, "65+": 0.5}])
def test_coverage_is_that_of_each_draw(efficacy):
    # Second route: `coverage_needed` of each draw's scenario, and the right one of them picked out.
    table = ngm.draw_table(AGES, 12, seed=5, interventions=False).columns
    draws = {name: values for name, values in table.items() if name != "R0"}
    single = []
    for k in range(12):
        changed = AGES.with_values(**{name: float(values[k]) for name, values in draws.items()})
        one = ngm.coverage_needed(changed, efficacy=efficacy)
        single.append(np.inf if one.coverage is None else one.coverage)
    found = ngm.assured_coverage(AGES, draws, efficacy=efficacy, assurance=0.75)
    wanted = sorted(single)[8]
    assert found.needed == (None if np.isinf(wanted) else pytest.approx(wanted, rel=1e-9))


def test_children_alone_are_never_enough():
    found = ngm.assured_coverage(AGES, 100, ["0-4"], assurance=0.5)
    assert found.needed is None
    assert found.share_at_full == found.share_at_none  # the draws with R0 below 1 from the start


@pytest.mark.parametrize("assurance", [0, 1, 95, float("nan")])
def test_an_assurance_that_is_none(assurance):
    with pytest.raises(ngm.ScenarioError, match="between 0 and 1"):
        ngm.assured_strength(STRAIGHT, "Less contact", 10, assurance=assurance)


# --- other numbers, the table, correlations ------------------------------------------------------------------------------


def test_distributions_of_other_numbers():
    # By hand: growth rate beta - 1/D with D = 5: mean 0.2, P(> 0) = P(beta > 0.2) = 1; T of the only type is R0.
    found = ngm.uncertainty(STRAIGHT, 4096, seed=1, of=["growth_rate", "T(I)"])
    growth, T = found.others
    assert (growth.number, growth.unit, growth.threshold) == ("growth_rate", "1/day", 0.0)
    assert growth.figures.mean == pytest.approx(0.2, abs=1e-4)
    assert growth.figures.above_one == 1
    assert T.figures.quantiles == pytest.approx(found.R0.quantiles, rel=1e-12)
    assert sum(count for _, _, count in growth.histogram) == 4096
    told = found.more_json()["distributions"]
    assert [one["number"] for one in told] == ["R0", "growth_rate", "T(I)"]
    # the object `global` is as without them
    assert found.to_json() == ngm.uncertainty(STRAIGHT, 4096, seed=1).to_json()


def test_every_draw_with_its_numbers():
    table = ngm.draw_table(STRAIGHT, 50, seed=3, of=["growth_rate"])
    assert list(table.columns) == ["beta", "R0", "growth_rate", "R with Less contact"]
    beta = table.columns["beta"]
    # By hand: R0 = 5 beta, r = beta - 1/5, a fifth of R0 with the intervention.
    assert table.columns["R0"] == pytest.approx(5 * beta, rel=1e-12)
    assert table.columns["growth_rate"] == pytest.approx(beta - 0.2, abs=1e-12)
    assert table.columns["R with Less contact"] == pytest.approx(beta, rel=1e-12)
    rows = list(csv.reader(io.StringIO(table.to_csv())))
    assert rows[0] == ["draw", *table.columns]
    assert [float(cell) for cell in rows[50]] == [50, *(values[49] for values in table.columns.values())]
    # Second route: the figures of the same draws.
    assert ngm.uncertainty(STRAIGHT, 50, seed=3).R0.mean == pytest.approx(
        float(np.mean(table.columns["R0"])), rel=1e-12
    )


def test_groups_have_a_column_and_a_rank_each():
    name = next(p.name for p in AGES.parameters.values() if p.by and not p.follows)
    own = np.array([float(v.tree.value) for v in AGES.parameters[name].values])
    rows = own[:, None] * np.random.default_rng(1).uniform(0.9, 1.1, (len(own), 60))
    items = list(AGES.items(name, AGES.parameters[name].by))
    assert list(ngm.draw_table(AGES, {name: rows}, interventions=False).columns) == [*items, "R0"]
    assert [d.parameter for d in ngm.uncertainty(AGES, {name: rows}, interventions=False).drivers] == items


def test_correlation_by_pairs():
    scenario = ngm.loads(product())
    found = ngm.draw_table(scenario, 2000, seed=1, correlation={("beta", "D"): -0.7})
    # The method meets a wanted rank correlation to some 0.02 at 2,000 draws.
    assert rank_correlation(np.column_stack([found.columns["beta"], found.columns["D"]]))[0, 1] == pytest.approx(
        -0.7, abs=0.02
    )
    # By hand: R0 = beta D spreads less where one falls as the other rises.
    independent = ngm.uncertainty(scenario, 2000, seed=1)
    assert ngm.uncertainty(scenario, 2000, seed=1, correlation={("beta", "D"): -0.7}).R0.sd < independent.R0.sd


@pytest.mark.parametrize(
    ("pairs", "message"),
    [
        ({("beta", "E"): 0.5}, "'E' is not drawn."),
        ({("beta", "beta"): 0.5}, "Name two."),
        ({("beta", "D"): 0.5, ("D", "beta"): 0.4}, "stands twice"),
        ({("beta", "D"): 1.5}, "outside -1 to 1"),
    ],
)
def test_correlations_that_are_none(pairs, message):
    with pytest.raises(ngm.ScenarioError) as caught:
        ngm.uncertainty(ngm.loads(product()), 100, correlation=pairs)
    assert message in str(caught.value)


def test_correlations_that_no_parameters_can_have():
    # By hand: x goes with y and with z at 0.9, and y against z at 0.9.
    model = ngm.load("scenarios/vector-borne-ostrel-fever.toml")
    x, y, z = [d.parameter for d in ngm.uncertainty(model, 16, interventions=False).drivers][:3]
    with pytest.raises(ngm.ScenarioError, match="not positive definite"):
        ngm.uncertainty(model, 100, correlation={(x, y): 0.9, (x, z): 0.9, (y, z): -0.9})


def test_joint_draws_have_their_own_correlations():
    with pytest.raises(ngm.ScenarioError, match="their own correlations"):
        ngm.uncertainty(STRAIGHT, {"beta": [0.3, 0.4]}, correlation={("beta", "D"): 0.1})


def test_calibration_tells_all_values_and_what_is_attainable():
    found = ngm.calibrate(STRAIGHT, "beta", 2.0)
    # By hand: R0 = 5 beta over the range 0.2 to 0.6.
    assert found.values == (found.value,)
    assert found.attainable == pytest.approx((1, 3), rel=1e-12)
    assert found.to_json()["attainable"] == list(found.attainable)
