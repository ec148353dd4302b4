"""Two models side by side. Expected numbers: by hand from the formulas of the plain model, or sums that must agree."""

from __future__ import annotations

import re
from itertools import pairwise
from pathlib import Path

import pytest

import ngm

SCENARIOS = Path(__file__).parents[2] / "scenarios"
SEIR = (SCENARIOS / "seir-velmar-fever.toml").read_text(encoding="utf-8")


def against(text):
    return ngm.difference(ngm.loads(SEIR), ngm.loads(text))


def test_nothing():
    result = against(SEIR)
    assert (result.changes, result.entries, result.contributions) == ((), (), ())


def test_values_and_their_shares():
    result = against(
        SEIR.replace('value = 1.4, unit = "1/week"', 'value = 1.4, unit = "1/day"').replace("0.42,", "0.5,")
    )
    assert [(change.name, change.how) for change in result.changes] == [("beta", "changed"), ("gamma", "changed")]
    assert result.changes[1].note == "changed by the factor 7: were week and day mixed up?"
    moved = {(entry.matrix, entry.row, entry.column): entry.because for entry in result.entries}
    assert moved == {
        ("F", "E", "I"): ("value of beta",),
        ("V", "I", "I"): ("value of gamma",),
        ("K", "E", "E"): ("value of beta", "value of gamma"),
    }
    # By hand: R0 = beta s/(gamma + mu), s the chance of surviving the latent period.
    mu = 1 / 70 / 365.25
    survival = 0.2 / (0.2 + mu)

    def R0(beta, gamma):
        return beta * survival / (gamma + mu)

    one = R0(0.5, 0.2) - R0(0.42, 0.2)
    assert result.contributions[0].in_order == pytest.approx(one, rel=1e-9)
    late = R0(0.5, 1.4) - R0(0.42, 1.4)
    assert result.contributions[0].averaged == pytest.approx((one + late) / 2, rel=1e-9)
    assert sum(c.averaged for c in result.contributions) == pytest.approx(result.R0[1] - result.R0[0], rel=1e-9)


@pytest.mark.parametrize(("old", "new"), [("sigma", "kappa"), ("E", "L"), ("force_of_infection", "foi")])
def test_renaming_is_no_change(old, new):
    result = against(re.sub(rf"\b{old}\b", new, SEIR))
    assert [(change.how, change.before, change.after) for change in result.changes] == [("renamed", old, new)]
    assert result.entries == ()
    assert result.contributions == ()


def test_a_flow_added_and_one_changed():
    more = (
        SEIR.replace("1.4, unit", "1.5, unit")
        + '\n[[flow]]\nfrom = "E"\nto = "R"\nrate = "0.1*E"\nkind = "transition"\n'
    )
    result = against(more)
    assert [change.how for change in result.changes] == ["changed", "added"]
    moved = {(entry.matrix, entry.row, entry.column): entry.because for entry in result.entries}
    assert moved["V", "E", "E"] == ("flow 9 added",)
    assert moved["V", "I", "I"] == ("value of gamma",)
    assert sum(c.in_order for c in result.contributions) == pytest.approx(result.R0[1] - result.R0[0], rel=1e-9)


def test_a_compartment_added():
    more = SEIR.replace("[parameters]", 'D = { infected = true, label = "In hospital" }\n\n[parameters]', 1)
    more += '\n[[flow]]\nfrom = "I"\nto = "D"\nrate = "0.1*I"\nkind = "transition"\n'
    more += '\n[[flow]]\nfrom = "D"\nto = "R"\nrate = "0.2*D"\nkind = "transition"\n'
    result = against(more)
    assert ("compartment", "added", "D") in [(change.what, change.how, change.name) for change in result.changes]
    assert [c.change for c in result.contributions] == ["compartments and flows"]
    assert result.contributions[0].in_order == pytest.approx(result.R0[1] - result.R0[0], rel=1e-9)


def test_two_different_models_are_compared_without_failing():
    paths = [
        path
        for path in sorted(SCENARIOS.glob("*.toml"))
        if not {"sixteen", "by", "seasonal"} & set(path.stem.split("-")[:3])
    ]
    for one, two in pairwise(paths):
        result = ngm.difference(ngm.load(one), ngm.load(two))
        assert result.changes
        assert set(result.to_json()) >= {"R0", "changes", "entries", "contributions", "warnings"}
