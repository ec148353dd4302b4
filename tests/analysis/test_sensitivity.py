"""Local indices against published numbers, laws, and differences of the proven numbers; calibration."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import ngm
from tests.derivation.models import text
from tests.properties.random_models import draw
from tests.published.models import Model
from tests.published.test_vectors_and_strains import CHITNIS, LOW

ROOT = Path(__file__).parents[2]
SEIR = text(
    [("S", False), ("E", True), ("I", True), ("R", False)],
    {"Lambda": 10, "beta": 0.5, "sigma": 0.2, "gamma": 0.125, "mu": 0.0005},
    [
        ("", "S", "Lambda", "x"),
        ("S", "E", "beta*S*I/N", "t"),
        ("E", "I", "sigma*E", "x"),
        ("I", "R", "gamma*I", "x"),
        *((c, "", f"mu*{c}", "x") for c in "SEIR"),
    ],
    definitions={"N": "S + E + I + R"},
)


def elasticities(scenario: ngm.Scenario) -> dict[str, float | None]:
    return {index.parameter: index.elasticity for index in ngm.sensitivity(scenario).local}


def test_indices_of_the_seir_model() -> None:
    """Published: part B9 of the published examples: the normalised indices of model 2, by hand from its closed form."""
    found = elasticities(ngm.loads(SEIR))
    expected = {"beta": 1, "sigma": 0.002493765586, "gamma": -0.9960159363, "mu": -0.006477829331, "Lambda": 0}
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-30)


# Published: Chitnis, Hyman & Cushing (2008) Bull. Math. Biol. 70:1272-1296; model and baselines from memory, indices
# re-derived.
INDICES = {
    "high": {"s_v": 0.8039758350, "b_hv": 0.5, "psi_v": -0.3867273527, "b_vh": 0.3369120881, "mu2v": -0.3039758350,
             "gam": -0.3019615111, "nu_v": 0.2941176471, "s_h": 0.1960241650},
    "low": {"s_v": 0.7579515586, "b_hv": 0.5, "psi_v": -0.4594560448, "b_vh": 0.4448880308, "mu2v": -0.2579515586,
            "gam": -0.4252147032, "nu_v": 0.3051643192, "s_h": 0.2420484414},
}  # fmt: skip


@pytest.mark.parametrize("setting", ["high", "low"])
def test_indices_of_the_malaria_model(setting: str) -> None:
    found = elasticities({"high": CHITNIS, "low": CHITNIS.but(**LOW)}[setting].scenario)
    for name, expected in INDICES[setting].items():
        assert found[name] == pytest.approx(expected, rel=1e-9), name


def test_entries_of_a_two_type_matrix() -> None:
    """Published: part B8: K = [[.8, 1.5], [.6, .5]], sensitivities v_i w_j / v.w; elasticities add up to 1."""
    model = Model(
        "Two types",
        "A B",
        "S",
        "S->A t: S*(0.8*A + 1.5*B); S->B t: S*(0.6*A + 0.5*B); A->0 x: A; B->0 x: B",
        {"unused": 1.0},
        free={"S": 1},
    )
    found = ngm.sensitivity(model.scenario)
    expected = [[0.5780868809, 0.3123475238], [0.7808688094, 0.4219131191]]
    np.testing.assert_allclose(found.entry_sensitivity, expected, rtol=1e-9)
    expected = [[0.2871645523, 0.2909223286], [0.2909223286, 0.1309907904]]
    np.testing.assert_allclose(found.entry_elasticity, expected, rtol=1e-9)
    assert float(np.sum(found.entry_elasticity)) == pytest.approx(1, rel=1e-12)


def test_a_share_moves_what_follows_it() -> None:
    """By hand: R0 = b (p/g1 + q/g2) with q = 1 - p: dR0/dp = b (1/g1 - 1/g2)."""
    model = text(
        [("S", False), ("A", True), ("B", True)],
        {"b": 0.5, "p": 0.3, "q": 0, "g1": 0.25, "g2": 0.1},
        [
            ("S", "A", "p*b*S*(A + B)", "t"),
            ("S", "B", "q*b*S*(A + B)", "t"),
            ("A", "", "g1*A", "x"),
            ("B", "", "g2*B", "x"),
        ],
        free={"S": 1},
    ).replace("q = { value = 0 }", 'q = { value = "1 - p" }')
    found = {index.parameter: index for index in ngm.sensitivity(ngm.loads(model)).local}
    assert set(found) == {"b", "p", "g1", "g2"}
    assert found["p"].derivative == pytest.approx(0.5 * (1 / 0.25 - 1 / 0.1), rel=1e-14)


@pytest.mark.parametrize("seed", range(7000, 7040))
def test_rates_weigh_in_with_their_power_of_time(seed: int) -> None:
    """Common practice, no source: all parameters here are rates: indices of R0 sum to 0, slopes of r times rates to r."""
    scenario = ngm.loads(draw(seed).scenario_text)
    found = ngm.sensitivity(scenario)
    if found.R0 is None or found.R0 == 0 or found.local[0].derivative is None:
        pytest.skip("no R0 here, or classes tie")
    indices = [index.elasticity for index in found.local]
    assert sum(i for i in indices if i is not None) == pytest.approx(
        0, abs=1e-12 * max(1, *(abs(i or 0) for i in indices))
    )
    parts = [(index.growth_derivative or 0.0) * index.value for index in found.local]
    assert sum(parts) == pytest.approx(found.growth_rate, rel=1e-9, abs=1e-12 * max(map(abs, parts)))


@pytest.mark.parametrize("name", ["age-groups-ember-cough", "three-towns-torvane-fever", "two-strains-brindle-cough"])
def test_slopes_are_those_of_the_numbers(name: str) -> None:
    """Second route: central differences of R0 with another value, group by group."""
    scenario = ngm.load(ROOT / "scenarios" / f"{name}.toml")
    base = ngm.solve(scenario, limit=0)
    assert base.R0 is not None
    for index in ngm.sensitivity(scenario).local:
        owner = scenario.parameters[index.parameter.split("[")[0]]
        items = scenario.items(owner.name, owner.by)
        place = items.index(index.parameter)
        roots = []
        for factor in (1 + 1e-6, 1 - 1e-6):
            values = list(owner.values)
            moved = scenario.with_values(**{owner.name: index.value * factor}).parameters[owner.name].values
            values[place] = moved[place]
            new = replace(
                scenario, parameters={**scenario.parameters, owner.name: replace(owner, values=tuple(values))}
            )
            roots.append(ngm.solve(new, limit=0).R0)
        slope = (roots[0] - roots[1]) / (2e-6 * index.value)
        assert index.derivative == pytest.approx(slope, rel=1e-5, abs=1e-9 * base.R0 / index.value)


def test_a_state_typed_as_a_number_that_a_rate_moves_is_refused() -> None:
    with pytest.raises(ngm.DerivationError, match="Write it as an expression"):
        ngm.sensitivity(ngm.loads(SEIR + "\n[infection_free]\nS = 20000\nR = 0\n"))
    assert ngm.sensitivity(ngm.loads(SEIR + '\n[infection_free]\nS = "Lambda/mu"\nR = 0\n')).local


def test_no_slope_where_classes_tie_or_no_R0_is() -> None:
    flows = [("S", "A", "b*S*A", "t"), ("S", "B", "b*S*B", "t"), ("A", "", "A", "x"), ("B", "", "B", "x")]
    tie = ngm.sensitivity(ngm.loads(text([("S", False), ("A", True), ("B", True)], {"b": 2}, flows, free={"S": 1})))
    assert [i.derivative for i in tie.local] == [None]
    assert tie.to_json()["entries"] == {"sensitivity": None, "elasticity": None}
    assert any("no slope" in warning for warning in tie.warnings)
    gone = ngm.sensitivity(ngm.loads(SEIR).with_values(beta=0))
    found = {index.parameter: index for index in gone.local}
    assert found["beta"].elasticity is None
    assert found["beta"].derivative == pytest.approx(3.974128424 / 0.5, rel=1e-9)


def test_calibration() -> None:
    """Published: part B14: malaria of model 8 to 2 per generation: a = 0.1095445115 (linear), b = 0.06666666667 (square)."""
    malaria = text(
        [("Sh", False), ("Ih", True), ("Sv", False), ("Iv", True)],
        {"a": 0.3, "b": 0.5, "c": 0.4, "m": 2, "gamma": 0.01, "g": 0.12},
        [
            ("Sh", "Ih", "a*b*Iv*Sh", "t"),
            ("Sv", "Iv", "a*c*Sv*Ih", "t"),
            ("Ih", "Sh", "gamma*Ih", "x"),
            ("Iv", "", "g*Iv", "x"),
        ],
        free={"Sh": 1, "Sv": "m"},
    )
    scenario = ngm.loads(malaria)
    assert ngm.calibrate(scenario, "a", 2.0).value == pytest.approx(0.1095445115, rel=1e-9)
    assert ngm.calibrate(scenario, "b", 2.0).value == pytest.approx(0.06666666667, rel=1e-9)
    limited = ngm.loads(malaria.replace("a = { value = 0.3 }", "a = { value = 0.3, range = [0.2, 0.4] }"))
    with pytest.raises(ngm.ScenarioError, match=r"R0 goes from 3\.651\d* to 7\.30\d*"):
        ngm.calibrate(limited, "a", 2.0)
    with pytest.raises(ngm.ScenarioError, match="Did you mean 'gamma'"):
        ngm.calibrate(scenario, "gama", 2.0)


def test_of_several_values_the_smallest_is_taken() -> None:
    """By hand: R0 = p (1 - p) 8: 1.5 at p = 1/4 and at 3/4."""
    model = text(
        [("S", False), ("I", True)], {"p": 0.4}, [("S", "I", "8*p*(1-p)*S*I", "t"), ("I", "", "I", "x")], free={"S": 1}
    ).replace("value = 0.4", "value = 0.4, range = [0, 1]")
    found = ngm.calibrate(ngm.loads(model), "p", 1.5)
    assert found.value == pytest.approx(0.25, rel=1e-12)
    assert any("0.75" in warning for warning in found.warnings)
