"""Derivatives and elasticities as formulas: by hand, and against the numbers that are worked out without formulas."""

from __future__ import annotations

import numpy as np
import pytest

import ngm
from ngm.analysis import slopes
from ngm.analysis.slopes import values_in_force, with_formulas
from ngm.derivation.compile import formulas
from ngm.derivation.slope_forms import slope_forms
from ngm.expression.parse import parse
from tests.properties.random_models import draw


@pytest.fixture(autouse=True)
def _patient(monkeypatch):
    # Formulas take well under a second; a machine that does much else must not decide what is tested here.
    monkeypatch.setattr(slopes, "LIMIT", 120.0)
    monkeypatch.setattr("ngm.analysis.sensitivity.FORMULA_LIMIT", 120.0)


def formulas_of(path):
    scenario = ngm.load(f"scenarios/{path}.toml")
    found = ngm.sensitivity(scenario, formulas=True)
    return found, {index.parameter: index for index in found.local}


def test_elasticities_of_a_plain_model():
    # By hand: R0 = beta sigma / ((gamma + mu)(mu + sigma)).
    _, found = formulas_of("seir-velmar-fever")
    assert found["beta"].elasticity_formula == "1"
    assert found["sigma"].elasticity_formula == "mu/(mu + sigma)"
    assert found["gamma"].elasticity_formula == "-gamma/(gamma + mu)"
    assert found["beta"].formula == "sigma/((gamma + mu)*(mu + sigma))"
    # The number of people does not matter.
    assert (found["Lambda"].formula, found["Lambda"].elasticity_formula) == ("0", "0")


def test_a_root_and_a_parameter_that_others_follow():
    # By hand: R0 is the square root of a product; sigma_v = 1/extrinsic_period follows its parameter.
    _, found = formulas_of("vector-borne-ostrel-fever")
    assert found["a"].elasticity_formula == "1"
    assert found["b"].elasticity_formula == "0.5"
    assert found["sigma_h"].elasticity_formula == "mu_h/(2*(mu_h + sigma_h))"
    assert found["extrinsic_period"].elasticity_formula is not None
    assert "extrinsic_period" in found["extrinsic_period"].elasticity_formula


def test_of_a_maximum_the_side_in_force_moves():
    # By hand: strain A leads; R0 = beta_A/(gamma_A + mu).
    _, found = formulas_of("two-strains-brindle-cough")
    assert found["beta_A"].formula == "1/(gamma_A + mu)"
    assert found["beta_B"].formula == "0"


@pytest.mark.parametrize(
    "path",
    ["seir-velmar-fever", "vector-borne-ostrel-fever", "waterborne-karsk-flux", "wards-and-burials-moss-fever"],
)
def test_formulas_have_the_values_of_the_numbers(path):
    # Second route: the numbers come from difference quotients with 400 bits, the formulas from sympy.
    found, rows = formulas_of(path)
    scenario = ngm.load(f"scenarios/{path}.toml")
    values = values_in_force(scenario)
    assert all(index.formula is not None for index in rows.values())
    for index in found.local:
        texts = [index.formula, index.elasticity_formula]
        slope, share = formulas(texts, list(values)).run([np.array([v]) for v in values.values()])[:, 0]
        assert slope * index.factor == pytest.approx(index.derivative, rel=1e-12, abs=1e-25)
        assert share == pytest.approx(index.elasticity, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("seed", range(12))
def test_random_models(seed):
    scenario = ngm.loads(draw(seed).scenario_text)
    solution = ngm.solve(scenario)
    local = ngm.sensitivity(scenario).local
    if solution.closed_form is None or any(index.derivative is None for index in local):
        pytest.skip("no closed form, or no slope")
    values = values_in_force(scenario)
    forms = slope_forms(parse(solution.closed_form, items=True), {}, [i.parameter for i in local], values)
    for index in local:
        if index.parameter in forms:
            program = formulas(list(forms[index.parameter]), list(values))
            slope, share = program.run([np.array([v]) for v in values.values()])[:, 0]
            assert slope * index_factor(scenario, index) == pytest.approx(index.derivative, rel=1e-8, abs=1e-12)
            if index.elasticity is not None:  # R0 = 0 has none
                assert share == pytest.approx(index.elasticity, rel=1e-8, abs=1e-10)


def index_factor(scenario, index):
    return float(scenario.parameters[index.parameter].factor)


def test_a_formula_that_is_not_the_number_is_not_shown():
    scenario = ngm.load("scenarios/seir-velmar-fever.toml")
    local = ngm.sensitivity(scenario).local
    wrong = with_formulas(scenario, local, "beta*sigma/((gamma + mu)*(mu + 2*sigma))", 2.1)
    assert all(index.formula is None for index in wrong if index.parameter in ("sigma", "gamma", "mu"))


def test_without_a_closed_form_the_numbers_stand_alone():
    found = ngm.sensitivity(ngm.load("scenarios/livestock-pasture-grimble.toml"), formulas=False)
    assert all(index.formula is None for index in found.local)
    assert "formulas" not in found.to_json()


def test_in_the_object_of_the_command_line():
    found, _ = formulas_of("seir-velmar-fever")
    told = {row["parameter"]: row for row in found.to_json()["formulas"]}
    # By hand: gamma is typed per week, R0 moves by a seventh of what it moves by gamma per day.
    assert told["gamma"]["factor"] == pytest.approx(1 / 7, rel=1e-15)
    assert set(told["gamma"]) == {"parameter", "derivative", "elasticity", "factor"}
    assert slopes.AGREE <= 1e-6
