"""The report on a K as given and on a projected population: every number named, nothing promised that does not apply."""

from __future__ import annotations

import pytest

import ngm
from ngm.reporting.forms import FORMS
from ngm.reporting.make import compose
from tests.reporting import test_document as document
from tests.stated import change, given, population

K = given(
    [[0, "2.5 * p"], [2, 0]], ["tick", "p"], {"p": 0.5}, "sizes = [1000, 50]", change('infectivity = "p", reduce = 0.5')
)
PEOPLE = population(
    [[0, 0, "f"], [0] * 3, [0] * 3],
    [[0] * 3, [0.5, 0, 0], [0, 0.4, 0]],
    ["a", "b", "c"],
    {"f": 6},
    change('parameter = "f", multiply = 0.5'),
)
NO_END = population([[0, 1], [0, 0]], [[0, 0], [0.5, 1]])
TEXTS = {"K": K, "population": PEOPLE, "no R0": NO_END}


@pytest.fixture(scope="module", params=TEXTS.values(), ids=TEXTS)
def made(request):
    scenario = ngm.loads(request.param)
    return scenario, compose(scenario, made_on="2026-01-02")


def test_numbers_and_parts(made):
    document.test_every_number_is_where_its_name_says(made)
    document.test_numbers_are_those_that_the_verbs_print(made)
    document.test_every_part_is_in_order_and_on_the_checklist(made)


@pytest.mark.parametrize("ending", FORMS)
@pytest.mark.parametrize("text", [K, PEOPLE], ids=["K", "population"])
def test_every_form_is_written(text, ending, tmp_path):
    found = ngm.report(ngm.loads(text), tmp_path / f"r{ending}", sections=["summary", "flows", "R0", "population"])
    assert found.path is not None


def test_what_does_not_apply_to_a_K_is_absent_with_the_reason():
    report = compose(ngm.loads(K))
    absent = {s.key: s.why for s in report.document.sections if not s.blocks}
    expected = ("diagram", "compartments", "groups", "infection_free", "transmission", "conditions", "population")
    assert {key for key in expected if key in absent} == set(expected)
    assert absent["transmission"] == "K is given: there is no F and no V behind it"
    told = document.words(report.document, "flows")
    assert "stands in the scenario, entry by entry" in told
    assert "1,000" in told or "1000" in told
    assert "no time in it" in document.words(report.document, "R0")
    assert "types" in document.words(report.document, "next_generation")


def test_a_population_is_told_in_its_own_words():
    report = compose(ngm.loads(PEOPLE))
    assert "grows in the long run" in document.words(report.document, "summary")
    told = document.words(report.document, "population")
    assert "1.06266" in told  # the cube root of 1.2, by hand
    assert "comes back every 3 steps" in told
    everything = "\n".join(
        document.words(report.document, s.key)
        for s in report.document.sections
        if s.blocks and s.key not in ("references", "provenance", "names", "checklist", "question", "parameters")
    )
    for word in ("infected", "infections", "epidemic", "outbreak"):
        assert word not in everything.lower(), word


def test_without_R0_the_growth_factor_is_told():
    report = compose(ngm.loads(NO_END))
    assert "1.36603" in document.words(report.document, "population")  # (1 + sqrt 3)/2, by hand
    assert "rho(T) >= 1" in document.words(report.document, "R0")
