"""What the report says: the numbers are those of the JSON results, and every part is present or told of."""

from __future__ import annotations

import json

import pytest

import ngm
from ngm.reporting.make import compose
from ngm.reporting.narrative import SECTIONS
from ngm.reporting.numbers import lookup
from tests.reporting import examples

SCENARIOS = {
    "plain": examples.plain,
    "hostile": examples.hostile,
    "no R0": examples.without_R0,
    "no closed form": examples.no_closed_form,
    "vectors": lambda: examples.shipped("vector-borne"),
    "reducible": lambda: examples.shipped("two-strains"),
    "groups": lambda: examples.shipped("age-groups"),
    "towns": lambda: examples.shipped("three-towns"),
}


@pytest.fixture(scope="module", params=SCENARIOS.values(), ids=SCENARIOS)
def made(request):
    scenario = request.param()
    return scenario, compose(scenario, made_on="2026-01-02")


def words(document, key):
    from ngm.reporting.document import lines

    section = next(s for s in document.sections if s.key == key)
    out = []
    for block in section.blocks:
        for line in lines(block):
            out.append(
                "".join(
                    p if isinstance(p, str) else getattr(p, "text", getattr(p, "shown", getattr(p, "latex", "")))
                    for p in line
                )
            )
    return "\n".join(out)


def test_every_number_is_where_its_name_says(made):
    _, report = made
    tree = json.loads(report.companion_text())
    found = list(report.document.numbers())
    assert found
    for _, item in found:
        assert lookup(tree, item.name) == item.value, item.name
        # What is shown is the value to six digits at least, or the value itself.
        assert float(item.shown.replace(",", "")) == pytest.approx(item.value, rel=5e-6, abs=1e-300)
        assert (float(item.shown.replace(",", "")) == 1) == (item.value == 1)


def test_numbers_are_those_that_the_verbs_print(made):
    scenario, report = made
    tree = json.loads(report.companion_text())
    assert tree["solve"] == json.loads(json.dumps(ngm.solve(scenario).to_json()))
    assert tree["control"] == json.loads(json.dumps(ngm.control(scenario).to_json()))
    if scenario.interventions:
        assert tree["compare"] == json.loads(json.dumps(ngm.compare(scenario).to_json()))


def test_every_part_is_in_order_and_on_the_checklist(made):
    _, report = made
    keys = [section.key for section in report.document.sections]
    assert keys == list(SECTIONS)
    told = words(report.document, "checklist")
    for section in report.document.sections[:-1]:
        assert section.title in told
        assert section.blocks or (section.status != "present" and section.why)
    assert "uncertainty" not in report.sections
    assert "not computed: no draws were made" in told


def test_the_number_of_a_plain_model_by_hand():
    report = compose(examples.plain())
    found = {item.name: item.value for _, item in report.document.numbers()}
    # By hand: beta/(gamma + mu) = 0.5/0.3; growth 0.5 - 0.3; effort 1 - 0.6; an intervention halves beta.
    assert found["solve.R0"] == pytest.approx(5 / 3, rel=1e-14)
    assert found["solve.growth_rate"] == pytest.approx(0.2, rel=1e-12)
    assert found["control.type_reproduction[0].critical_effort"] == pytest.approx(0.4, rel=1e-12)
    assert found["compare.interventions[0].R0"] == pytest.approx(5 / 6, rel=1e-12)
    assert found["report.checks.closed"] == pytest.approx(5 / 3, rel=1e-14)
    assert "above 1" in words(report.document, "summary")


def test_per_generation_and_per_cycle_are_told_apart():
    report = compose(examples.shipped("vector-borne"))
    told = words(report.document, "R0")
    assert "R0 per generation" in told
    assert "R0 per cycle" in told
    assert "every 2 generations" in told


def test_without_R0_it_says_so_and_leaves_no_empty_promise():
    report = compose(examples.without_R0())
    assert "No R0" in words(report.document, "summary")
    assert {"control", "closed_form", "classes"} & set(report.sections) == set()
    assert not [item for _, item in report.document.numbers() if item.name in {"solve.R0", "solve.per_cycle"}]


def test_no_closed_form_is_said():
    assert "no closed form" in words(compose(examples.no_closed_form()).document, "closed_form").lower()


def test_a_reducible_matrix_is_explained():
    assert "reducible" in words(compose(examples.shipped("two-strains")).document, "classes")


def test_missing_sources_are_marked():
    report = compose(examples.plain())
    section = next(s for s in report.document.sections if s.key == "parameters")
    assert section.status == "missing"
    assert section.why == "no source is given for gamma, births, mu"
    assert words(report.document, "parameters").count("missing") == 3


def test_the_words_of_the_scenario_are_told():
    report = compose(examples.plain("Is it wise?"))
    assert "Is it wise?" in words(report.document, "question")
    assert "Is it wise?" in words(report.document, "summary")
    assert "Is it wise?" in words(report.document, "limits")
    assert "Place: missing from the scenario" in words(report.document, "question")


@pytest.mark.parametrize("caution", ["no speed", "no severity", "no forecast", "not medical advice", "elimination"])
def test_cautions_stand(caution):
    assert caution in words(compose(examples.plain()).document, "limits")


def test_parts_can_be_left_out():
    report = compose(examples.plain(), sections=["checklist", "R0"])
    assert [section.key for section in report.document.sections] == ["R0", "checklist"]
    assert words(report.document, "checklist").count("left out") == len(SECTIONS) - 2


def test_an_unknown_part_is_refused():
    with pytest.raises(ngm.ScenarioError, match="'poem' is none of summary, "):
        compose(examples.plain(), sections=["poem"])


def test_draws_are_told_with_their_number_and_seed():
    report = compose(examples.shipped("seir"), draws=200, seed=3)
    told = words(report.document, "uncertainty")
    assert "200 draws" in told
    assert "seed 3" in told
    tree = json.loads(report.companion_text())
    for key, item in report.document.numbers():
        if key == "uncertainty":
            assert lookup(tree, item.name) == item.value


def test_names_lead_through_lists_and_quotes():
    tree = {"a": [{"b": 1}, {"x[0-4,North]": [2.5]}]}
    assert lookup(tree, "a[0].b") == 1
    assert lookup(tree, 'a[1]["x[0-4,North]"][0]') == 2.5
    with pytest.raises(KeyError):
        lookup(tree, "a.b")
