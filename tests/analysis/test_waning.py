"""Where protection wanes is read from the flows: a vaccine's, that of past infection, and what only looks like it."""

from __future__ import annotations

import pytest

import ngm
from ngm.wording import waning_words
from tests.derivation.models import text


def waning(model):
    return ngm.coverage_needed(ngm.loads(model) if "\n" in model else ngm.load(f"scenarios/{model}.toml")).waning


def test_a_vaccine_that_wanes():
    (found,) = waning("vaccination-copper-spots")
    assert (found.compartment, found.back_to, found.kind) == ("V", "S", "vaccine")
    # By hand: 12 years of 365.25 days in weeks.
    assert 1 / found.fastest == pytest.approx(12 * 365.25 / 7, rel=1e-12)
    assert found.slowest == found.fastest
    assert waning_words(found) == (
        'Immunity of V (Vaccinated, still susceptible in part) wanes: flow 3 "Protection lost" leads back to S, after '
        "1/0.00159708 = 626.143 weeks on average. The coverage holds only while it is kept up: those who lose protection must "
        "be vaccinated again."
    )


def test_immunity_of_past_infection_that_wanes():
    (found,) = waning("waterborne-karsk-flux")
    assert (found.compartment, found.back_to, found.kind) == ("R", "S", "infection")
    # By hand: two years.
    assert 1 / found.fastest == pytest.approx(730.5, rel=1e-9)


def test_in_the_object_of_the_command_line():
    (told,) = ngm.coverage_needed(ngm.load("scenarios/vaccination-copper-spots.toml")).to_json()["waning"]
    # By hand: one rate for all, 1/(12 years) in weeks.
    assert told.pop("rate") == [pytest.approx(7 / (12 * 365.25), rel=1e-12)] * 2
    assert told == {"flow": 'flow 3 "Protection lost"', "compartment": "V", "back_to": "S", "kind": "vaccine"}


@pytest.mark.parametrize("model", ["seir-velmar-fever", "age-groups-ember-cough", "vector-borne-ostrel-fever"])
def test_a_model_without_it(model):
    assert waning(model) == ()


FLOWS = [
    ("", "S", "births", "x"),
    ("S", "V", "nu*S", "x"),
    ("V", "S", "omega*V", "x"),
    ("S", "I", "beta*S*I", "t"),
    ("I", "", "gamma*I", "x"),
    ("S", "", "mu*S", "x"),
    ("V", "", "mu*V", "x"),
]
VALUES = {"births": 1, "nu": 0.02, "omega": 0.1, "beta": 0.02, "gamma": 0.2, "mu": 0.01}
HOSTS = [("S", False), ("V", False), ("I", True)]


def test_people_of_any_age_are_vaccinated():
    (found,) = waning(text(HOSTS, VALUES, FLOWS))
    assert (found.compartment, found.kind, found.fastest) == ("V", "vaccine", pytest.approx(0.1))


def test_of_two_compartments_of_the_same_exposure_none_is_protected():
    # Growing up and back, in a manner of speaking: V is infected just as S is.
    both = [*FLOWS, ("V", "I", "beta*V*I", "t")]
    assert waning(text(HOSTS, VALUES, both)) == ()


def test_the_less_exposed_one_is_the_protected_one():
    leaky = [*FLOWS, ("V", "I", "0.3*beta*V*I", "t")]
    assert [one.compartment for one in waning(text(HOSTS, VALUES, leaky))] == ["V"]
    worse = [*FLOWS, ("V", "I", "3*beta*V*I", "t")]
    # Then it is S that is protected, whatever the names say, and nu is the rate at which protection is lost.
    assert [(one.compartment, one.fastest) for one in waning(text(HOSTS, VALUES, worse))] == [
        ("S", pytest.approx(0.02))
    ]
