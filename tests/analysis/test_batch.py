"""R0 at many draws: the same as `solve` at each of them, however the work is split, and every bad draw told."""

from __future__ import annotations

import importlib
from collections.abc import Mapping
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import replace
from multiprocessing import get_context
from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.analysis import batch, draw_work
from ngm.analysis.batch import draw_numbers, next_generation_matrices
from ngm.analysis.numbers import decided_numbers
from ngm.derivation.compile import formulas
from ngm.engine.balls import nearest
from ngm.scenario.exact import evaluate
from ngm.scenario.values import as_number
from tests.published.models import Model

#: Seasons are refused here, which tests/analysis/test_season.py looks at.
SCENARIOS = [
    path
    for path in sorted((Path(__file__).parents[2] / "scenarios").glob("*.toml"))
    if not path.stem.startswith("seasonal")
]
PUBLISHED = [
    model
    for name in ("conditions", "groups", "growth", "one_host", "structure", "vaccination", "vectors_and_strains")
    for model in vars(importlib.import_module(f"tests.published.test_{name}")).values()
    if isinstance(model, Model)
]
DRAWS = 50
CLOSE = 1e-10

SIR = """
[scenario]
title = "SIR with births"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
[parameters]
beta = { value = 0.4 }
gamma = { value = 0.7, unit = "1/week" }
mu = { value = 0.01 }
p = { value = 0.25 }
rest = { value = "1 - p" }
births = { value = 3 }
[definitions]
N = "S + I"
[[flow]]
to = "S"
rate = "births"
kind = "transition"
[[flow]]
from = "S"
to = "I"
rate = "rest * beta * S * I / N"
kind = "transmission"
[[flow]]
from = "S"
rate = "mu * S"
kind = "transition"
[[flow]]
from = "I"
rate = "(gamma + mu) * I"
kind = "transition"
[[intervention]]
name = "Masks"
change = [{ parameter = "beta", multiply = 0.5 }, { parameter = "gamma", add = 0.7 }]
[[intervention]]
name = "Fixed"
change = [{ parameter = "beta", set = 0.2 }, { infectivity = "I", reduce = 0.25 }]
[[intervention]]
name = "Less"
change = [{ parameter = "beta", add = -0.3 }]
"""
#: logistic growth in place of births: the state without infection is no affine system
LOGISTIC = SIR.replace('rate = "births"', 'rate = "births * N * (1 - N / 500)"').replace(
    "births = { value = 3 }", "births = { value = 0.1 }"
)


def own_values(scenario: ngm.Scenario) -> dict[str, np.ndarray]:
    """Return the value of each copy of each parameter given as a number, in its own unit."""
    return {
        name: np.array([float(evaluate(value.tree)) for value in parameter.values])
        for name, parameter in scenario.parameters.items()
        if not parameter.follows
    }


def random_draws(scenario: ngm.Scenario, size: int, seed: int = 0, spread: float = 0.3) -> dict[str, np.ndarray]:
    """Return draws of every parameter, each copy by itself; what is a share stays one, what is 0 stays 0."""
    rng = np.random.default_rng(seed)
    draws = {}
    for name, values in own_values(scenario).items():
        table = values[:, None] * np.exp(spread * rng.normal(size=(len(values), size)))
        share = values[:, None] + np.where(values[:, None] < 0.5, values[:, None], 1 - values[:, None]) * rng.uniform(
            -0.5, 0.5, table.shape
        )
        table = np.where((0 < values[:, None]) & (values[:, None] < 1), share, table)
        draws[name] = table if len(values) > 1 else table[0]
    return draws


def at(scenario: ngm.Scenario, draws: Mapping[str, np.ndarray], k: int) -> ngm.Scenario:
    """Return the scenario with the values of one draw written into it, copy by copy."""
    parameters = dict(scenario.parameters)
    for name, table in draws.items():
        column = np.atleast_2d(table)[:, k]
        parameters[name] = replace(parameters[name], values=tuple(as_number(float(v)) for v in column))
    return replace(scenario, parameters=parameters)


def one_by_one(scenario: ngm.Scenario, draws: Mapping[str, np.ndarray], intervention: object = None) -> np.ndarray:
    """Return R0 of each draw as `solve` and `compare` compute it: the second route; nan where there is none."""
    size = next(iter(draws.values())).shape[-1]
    out = np.full(size, np.nan)
    for k in range(size):
        try:
            found = decided_numbers(at(scenario, draws, k), intervention)  # type: ignore[arg-type]
        except ngm.DerivationError:
            continue
        if found.no_R0 is None:
            out[k] = 0.0 if found.spectrum is None else nearest(found.spectrum.root)
    return out


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
def test_every_example_at_every_draw(path):
    scenario = ngm.load(path)
    draws = random_draws(scenario, DRAWS)
    expected = one_by_one(scenario, draws)
    assert ngm.reproduction_numbers(scenario, draws) == pytest.approx(expected, rel=CLOSE, nan_ok=True)
    assert np.isfinite(expected).mean() > 0.5  # otherwise the test says little
    few = {name: table[..., :4] for name, table in draws.items()}
    for intervention in scenario.interventions:
        found = ngm.reproduction_numbers(scenario, few, intervention=intervention.name)
        assert found == pytest.approx(one_by_one(scenario, few, intervention), rel=CLOSE, nan_ok=True)


@pytest.mark.parametrize("model", PUBLISHED, ids=lambda model: model.name)
def test_every_published_model_at_every_draw(model):
    scenario = model.scenario
    draws = random_draws(scenario, DRAWS, spread=0.2)
    found = draw_numbers(scenario, draws)
    assert found.values == pytest.approx(one_by_one(scenario, draws), rel=CLOSE, nan_ok=True)
    assert found.rejected == np.isnan(found.values).sum()


# By hand: R0 = (1 - p) beta / (gamma / 7 + mu), gamma per week.
def by_hand(beta, gamma, mu, p):
    return (1 - p) * beta / (gamma / 7 + mu)


def test_by_hand_in_own_units_and_with_a_parameter_that_follows():
    draws = random_draws(ngm.loads(SIR), 300)
    expected = by_hand(draws["beta"], draws["gamma"], draws["mu"], draws["p"])
    assert ngm.reproduction_numbers(ngm.loads(SIR), draws) == pytest.approx(expected, rel=1e-13)


def test_interventions_act_on_the_drawn_value():
    scenario = ngm.loads(SIR)
    beta, gamma = np.array([0.3, 0.5, 0.9]), np.array([0.7, 1.4, 2.1])
    draws = {"beta": beta, "gamma": gamma}
    masks = ngm.reproduction_numbers(scenario, draws, intervention="Masks")
    assert masks == pytest.approx(by_hand(0.5 * beta, gamma + 0.7, 0.01, 0.25), rel=1e-13)
    fixed = ngm.reproduction_numbers(scenario, draws, intervention=scenario.interventions[1])
    assert fixed == pytest.approx(0.75 * by_hand(0.2, gamma, 0.01, 0.25), rel=1e-13)
    with pytest.raises(ngm.ScenarioError, match=r"beta: is -0\.1 at draw 2, which is negative"):
        ngm.reproduction_numbers(scenario, {"beta": [0.4, 0.2]}, intervention="Less")


def test_a_draw_of_what_follows_replaces_its_expression():
    found = ngm.reproduction_numbers(ngm.loads(SIR), {"rest": [0.1, 0.5], "p": [0.9, 0.9]})
    assert found == pytest.approx(np.array([0.1, 0.5]) * by_hand(0.4, 0.7, 0.01, 0), rel=1e-13)


def test_what_changes_nothing_gives_the_same_number():
    found = ngm.reproduction_numbers(ngm.loads(SIR), {"births": [1.0, 2.0, 30.0]})
    assert found == pytest.approx(by_hand(0.4, 0.7, 0.01, 0.25), rel=1e-13)
    assert found.shape == (3,)
    assert ngm.reproduction_numbers(ngm.loads(SIR), {"births": []}).shape == (0,)


def test_groups_by_row_alike_and_by_item():
    scenario = ngm.load(next(path for path in SCENARIOS if path.stem.startswith("age-groups")))
    name, values = next((name, v) for name, v in own_values(scenario).items() if len(v) > 1)
    items = scenario.items(name, scenario.parameters[name].by)
    table = np.repeat(values[:, None], 2, axis=1)
    table[1, 1] *= 1.5
    rows = ngm.reproduction_numbers(scenario, {name: table})
    item = ngm.reproduction_numbers(scenario, {items[1]: table[1]})
    assert rows.tolist() == item.tolist()
    assert rows[0] == pytest.approx(ngm.solve(scenario, limit=0).R0, rel=1e-13)
    assert rows[1] != rows[0]
    alike = ngm.reproduction_numbers(scenario, {name: table[1]})
    assert (
        alike.tolist()
        == ngm.reproduction_numbers(scenario, {name: np.repeat(table[1:2], len(values), axis=0)}).tolist()
    )


@pytest.mark.parametrize("stem", ["seir", "vector-borne", "two-hosts", "staged"])
def test_closed_forms_and_programs_agree(stem):
    scenario = ngm.load(next(path for path in SCENARIOS if path.stem.startswith(stem)))
    symbolic = ngm.solve(scenario).symbolic
    assert symbolic.closed_form is not None
    draws = random_draws(scenario, 200)
    items, columns = [], []
    for name, table in draws.items():
        parameter = scenario.parameters[name]
        items += scenario.items(name, parameter.by)
        columns += list(np.ascontiguousarray(np.atleast_2d(table) * float(parameter.factor)))
    followers = [name for name, parameter in scenario.parameters.items() if parameter.follows]
    extra = {name: scenario.parameters[name].values[0].text for name in followers}
    found = draw_numbers(scenario, draws).values
    formula = formulas([symbolic.closed_form], items, extra).run(columns)[0]
    good = ~np.isnan(found)
    assert good.any()
    assert found[good] == pytest.approx(formula[good], rel=1e-12)


def test_K_at_every_draw():
    scenario = ngm.load(next(path for path in SCENARIOS if path.stem.startswith("vector-borne")))
    draws = random_draws(scenario, 3)
    K = next_generation_matrices(scenario, draws)
    for k in range(3):
        expected = np.array([[float(nearest(v)) for v in row] for row in decided_numbers(at(scenario, draws, k)).K])
        assert K[:, :, k] == pytest.approx(expected, rel=1e-13)


# --- zeros, ties, states that cannot be written down ------------------------------------------------------------------------


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
def test_parameters_of_zero(path):
    # Zeros make K reducible or empty at single draws; some leave V singular or a state without a value.
    scenario = ngm.load(path)
    names = list(own_values(scenario))
    draws = {name: np.repeat(v[:, None], len(names), axis=1) for name, v in own_values(scenario).items()}
    for k, name in enumerate(names):
        draws[name][:, k] = 0
    kept, expected = [], []
    for k in range(len(names)):
        alone = {name: table[:, k : k + 1] for name, table in draws.items()}
        try:
            found = ngm.reproduction_numbers(scenario, alone)
        except ngm.NgmError:  # refused, as `solve` refuses it: a state off rest, or a parameter without a value
            with pytest.raises(ngm.NgmError):
                ngm.solve(scenario.with_values(**{names[k]: 0}), limit=0)
            continue
        kept.append(float(found[0]))
        expected.append(float(one_by_one(scenario, alone)[0]))
    assert len(kept) > 1
    assert kept == pytest.approx(expected, rel=CLOSE, nan_ok=True)


def test_logistic_growth_is_followed():
    scenario = ngm.loads(LOGISTIC)
    draws = random_draws(scenario, 60)
    draws["births"][:5] = 0.005  # fewer births than deaths: nobody is left
    found = draw_numbers(scenario, draws)
    assert found.values == pytest.approx(one_by_one(scenario, draws), rel=CLOSE, nan_ok=True)
    assert np.isnan(found.values[:5]).all()
    assert not np.isnan(found.values[5:]).any()
    assert found.rejected == 5


def test_the_side_of_a_minimum_is_chosen_draw_by_draw():
    capped = SIR.replace("rest * beta * S * I / N", "rest * beta * min(S, 250) * I / N")
    draws = random_draws(ngm.loads(capped), 40)
    expected = one_by_one(ngm.loads(capped), draws)
    assert ngm.reproduction_numbers(ngm.loads(capped), draws) == pytest.approx(expected, rel=CLOSE)


def test_an_exponent_that_decides_the_structure_is_done_draw_by_draw():
    text = SIR.replace("S * I / N", "S * I^q / N").replace("[definitions]", "q = { value = 1 }\n[definitions]")
    found = ngm.reproduction_numbers(ngm.loads(text), {"q": [1, 2, 1], "beta": [0.4, 0.4, 0.8]})
    one = by_hand(0.4, 0.7, 0.01, 0.25)
    assert found == pytest.approx([one, 0, 2 * one], rel=1e-13)


def test_no_R0_is_counted_with_the_reason():
    text = SIR.replace("gamma + mu) * I", "gamma + mu - p) * I")
    draws = {"p": [0.0, 0.11, 0.12, 0.05, 0.5], "gamma": [0.7] * 5}
    found = draw_numbers(ngm.loads(text), draws)
    assert np.isnan(found.values).tolist() == [False, True, True, False, True]
    assert found.values == pytest.approx(
        one_by_one(ngm.loads(text), {n: np.array(v) for n, v in draws.items()}), rel=1e-8, nan_ok=True
    )
    assert list(found.missing.values()) == [3]
    assert next(iter(found.missing)).startswith("V is singular or no M-matrix")


def test_a_negative_state_is_no_state():
    text = SIR.replace('rate = "births"', 'rate = "births - 2"').replace("births = {", "births = {")
    found = draw_numbers(ngm.loads(text), {"births": [3.0, 1.0]})
    assert np.isnan(found.values).tolist() == [False, True]
    assert found.missing == {"no infection-free state with non-negative numbers": 1}


# --- refusals ---------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("draws", "message"),
    [
        ({"bta": [1.0]}, r"'bta' is not a parameter of this scenario. Did you mean 'beta'\?"),
        ({}, "the draws name no parameter"),
        ({"beta": [0.1, 0.2], "gamma": [0.1]}, r"different numbers of draws \(beta: 2, gamma: 1\)"),
        ({"beta": [0.1, 0.2, -0.3]}, "beta: draw 3 is -0.3: negative. beta is positive or zero."),
        ({"beta": [0.1, float("nan")]}, "beta: draw 2 is nan: not finite or too large"),
        ({"beta": [0.1, float("inf")]}, "beta: draw 2 is inf: not finite"),
        ({"beta": [0.1, 0.2, "many"]}, "beta: draw 3 is 'many', and no number"),
        ({"beta": [0.1, None]}, "beta: draw 2 is None, and no number"),
        ({"beta": ["0.1"]}, "beta: draw 1 is '0.1', and no number"),
        ({"beta": [True, False]}, "beta: draw 1 is True, and no number"),
        ({"beta": 0.3}, r"beta: its draws have shape \(\); \(N,\) is needed"),
        ({"beta": [[0.3], [0.4]]}, r"beta: its draws have shape \(2, 1\)"),
        ({"beta[old]": [0.3]}, r"'beta\[old\]' is no value of beta"),
        ({"beta": [0.3], "β": [0.3]}, "drawn twice"),
        ({3: [0.3]}, "the names of draws are texts"),
        ({"p": [0.5, 0.5, 1.5, 1.25]}, r"rest: is -0.5 at draw 3, which is negative"),
    ],
)
def test_bad_draws_are_told(draws, message):
    with pytest.raises(ngm.ScenarioError, match=message):
        ngm.reproduction_numbers(ngm.loads(SIR), draws)


def test_a_parameter_without_a_value_is_told():
    text = SIR.replace('"1 - p"', '"1 / p"')
    with pytest.raises(ngm.ScenarioError, match="rest: has no value at draw 2"):
        ngm.reproduction_numbers(ngm.loads(text), {"p": [0.5, 0.0]})


def test_a_state_that_a_draw_moves_off_rest_is_refused():
    text = SIR + "[infection_free]\nS = 300\n"
    assert ngm.reproduction_numbers(ngm.loads(text), {"beta": [0.4]}) == pytest.approx([by_hand(0.4, 0.7, 0.01, 0.25)])
    with pytest.raises(ngm.DerivationError, match="S is not at rest at draw 2: 4 per day enter and 3 leave"):
        ngm.reproduction_numbers(ngm.loads(text), {"births": [3.0, 4.0, 5.0]})


def test_the_first_bad_draw_is_named_however_the_work_is_split(monkeypatch):
    monkeypatch.setattr(batch, "TASK", 64)
    p = np.full(500, 0.5)
    p[[130, 131, 400]] = 1.5
    with ThreadPoolExecutor(3) as pool, pytest.raises(ngm.ScenarioError, match="at draw 131,"):
        ngm.reproduction_numbers(ngm.loads(SIR), {"p": p}, pool)


# --- the same however the work is split ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("stem", ["vector-borne", "three-towns", "age-groups", "two-strains"])
def test_a_draw_does_not_depend_on_its_neighbours(stem, monkeypatch):
    scenario = ngm.load(next(path for path in SCENARIOS if path.stem.startswith(stem)))
    draws = random_draws(scenario, 1000)
    whole = ngm.reproduction_numbers(scenario, draws)
    for task, held in ((1, 1 << 20), (77, 1 << 10), (333, 1 << 20)):
        monkeypatch.setattr(batch, "TASK", task if task > 1 else 1000)
        monkeypatch.setattr(draw_work, "MOST_HELD", held)
        part = {name: table[..., : 1 if task == 1 else 1000] for name, table in draws.items()}
        found = ngm.reproduction_numbers(scenario, part)
        assert found.tobytes() == whole[: len(found)].tobytes()


def test_exponentials_do_not_depend_on_their_neighbours():
    text = SIR.replace('"1 - p"', '"exp(-p) * (1 + p)^0.37 / log(3 + p)"')
    draws = random_draws(ngm.loads(text), 1001)
    whole = ngm.reproduction_numbers(ngm.loads(text), draws)
    for start in (0, 1, 500, 993):
        for stop in (start + 1, start + 3, 1001):
            part = {name: table[start:stop] for name, table in draws.items()}
            assert ngm.reproduction_numbers(ngm.loads(text), part).tobytes() == whole[start:stop].tobytes()


@pytest.mark.parametrize("text", [SIR, LOGISTIC], ids=["affine", "curved"])
def test_a_pool_of_processes_gives_the_same_bytes(text, monkeypatch):
    monkeypatch.setattr(batch, "TASK", 100)
    scenario = ngm.loads(text)
    draws = random_draws(scenario, 350)
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        found = ngm.reproduction_numbers(scenario, draws, executor=pool)
    monkeypatch.undo()
    assert found.tobytes() == ngm.reproduction_numbers(scenario, draws).tobytes()


def test_a_dask_cluster_gives_the_same_bytes(monkeypatch):
    distributed = pytest.importorskip("distributed")
    monkeypatch.setattr(batch, "TASK", 100)
    scenario = ngm.loads(SIR)
    draws = random_draws(scenario, 350)
    with (
        distributed.LocalCluster(n_workers=2, threads_per_worker=1, dashboard_address=None) as cluster,
        distributed.Client(cluster) as client,
    ):
        found = ngm.reproduction_numbers(scenario, draws, executor=client.get_executor())
    monkeypatch.undo()
    assert found.tobytes() == ngm.reproduction_numbers(scenario, draws).tobytes()
