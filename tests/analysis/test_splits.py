"""Other divisions of the same flows. Numbers: published where a model of `tests/published` is named, else by hand."""

from __future__ import annotations

from pathlib import Path

import pytest

import ngm
from tests.published.models import Model, deaths
from tests.published.test_one_host import SEIR, SHED_TRANSITION, TREATMENT

SCENARIOS = Path(__file__).parents[2] / "scenarios"


def test_both_splits_of_the_waterborne_model():
    result = ngm.splits(SHED_TRANSITION.but(bI=0.15).scenario)
    assert [split.kinds for split in result.splits] == [{"8": "transition"}, {"8": "transmission"}]
    first, second = result.splits
    assert first.as_typed
    # Printed to ten digits, re-derived: both R0, and the host's number, which is the first split's R0.
    assert first.R0 == pytest.approx(1.857142857, rel=1e-9)
    assert second.R0 == pytest.approx(1.484266703, rel=1e-9)
    assert first.hosts["I"] == pytest.approx(second.hosts["I"], rel=1e-12)
    assert second.hosts["I"] == pytest.approx(first.R0, rel=1e-12)
    assert first.growth_rate == pytest.approx(second.growth_rate, rel=1e-12)
    assert [*second.F[0], *second.F[1]] == pytest.approx([0.15, 0.3, 0.4, 0.0])
    assert result.agree == ("growth rate", "whether R0 exceeds 1", "T(I)")
    assert result.differ == ("R0",)


def test_failed_treatment_is_a_choice():
    result = ngm.splits(TREATMENT.scenario)
    assert list(result.choices) == ["3", "4"]  # I -> E, then the step forward
    assert "where new infections arrive too" in result.choices["3"]
    by_kind = {tuple(split.kinds.values()): split.R0 for split in result.splits}
    assert by_kind["transition", "transition"] == pytest.approx(1.609787508, rel=1e-9)  # published
    assert by_kind["transmission", "transition"] == pytest.approx(1.548032407, rel=1e-9)  # published


def test_a_step_forward_comes_last_and_only_adds_a_generation():
    result = ngm.splits(SEIR.scenario)
    assert list(result.choices) == ["3"]
    assert "rarely" in result.choices["3"]
    first, second = result.splits
    assert second.R0 == pytest.approx(first.R0**0.5, rel=1e-12)  # by hand: E -> I -> E is a cycle of two then
    assert second.hosts["E"] == pytest.approx(first.R0, rel=1e-12)


def test_more_than_four_choices():
    result = ngm.splits(ngm.load(SCENARIOS / "staged-chronic-hollin-disease.toml"))
    assert len(result.choices) == 4
    assert len(result.splits) == 16
    assert next(iter(result.choices)) == "7"  # relapse before the steps forward
    assert any("keep the kind of the file" in warning and "flow 6" in warning for warning in result.warnings)
    assert set(result.agree) == {"growth rate", "whether R0 exceeds 1", "T(I1)"}


def test_an_invalid_split_says_which_condition_fails():
    # By hand: carriers bear 0.3 carriers and leave at 0.2; as transition V has -0.1 in their row.
    model = Model(
        "Carriers",
        "I C",
        "S",
        "S->I t: beta*S*I; I->C x: g*I; 0->C t: v*C; C->0 x: d*C; I->0 x: d*I; 0->S x: d" + deaths("S", "d"),
        {"beta": 0.5, "g": 0.1, "v": 0.3, "d": 0.2},
    )
    result = ngm.splits(model.scenario)
    first = result.splits[0]
    assert first.R0 == pytest.approx(max(0.5 / 0.3, 0.3 / 0.2))
    refused = [split for split in result.splits if split.refused is not None]
    assert refused
    assert all(
        "A5 fails: V is no M-matrix" in s.refused or "no flow makes new infections" in s.refused for s in refused
    )


def test_up_to_sixteen():
    result = ngm.splits(ngm.load(SCENARIOS / "livestock-pasture-grimble.toml"))
    assert len(result.splits) == 8
    assert len({round(split.R0, 9) for split in result.splits}) == 8
    assert result.agree == ("growth rate", "whether R0 exceeds 1", "T(I)")
    assert result.to_json()["splits"][0]["as_typed"] is True
