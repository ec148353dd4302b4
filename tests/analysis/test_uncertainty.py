"""Draws: what they say of R0, which parameters drive it, joint draws from a file, the same numbers however work is split."""

from __future__ import annotations

import json
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np
import pytest

import ngm
from tests.derivation.models import text

ROOT = Path(__file__).parents[2]


def product(spread: str = "range = [0.2, 0.6]", stay: str = "range = [4, 6]", extra: str = "") -> str:
    """Return R0 = beta D, the product function of the published examples."""
    model = text(
        [("S", False), ("I", True)],
        {"beta": 0.4, "D": 5},
        [("S", "I", "beta*S*I", "t"), ("I", "", "I/D", "x")],
        free={"S": 1},
    )
    model = model.replace("beta = { value = 0.4 }", f"beta = {{ value = 0.4, {spread} }}")
    return model.replace("D = { value = 5 }", f"D = {{ value = 5, {stay} }}") + extra


def test_sobol_indices_of_a_product() -> None:
    """Published: part B11: beta ~ U(.2, .6), D ~ U(4, 6): S .8522727273, .1363636364; T .8636363636, .1477272727."""
    found = ngm.uncertainty(ngm.loads(product()), 2**14, seed=4)
    drivers = {d.parameter: d for d in found.drivers}
    assert drivers["beta"].first == pytest.approx(0.8522727273, abs=3e-3)
    assert drivers["D"].first == pytest.approx(0.1363636364, abs=3e-3)
    assert drivers["beta"].total == pytest.approx(0.8636363636, abs=3e-3)
    assert drivers["D"].total == pytest.approx(0.1477272727, abs=3e-3)
    for d in drivers.values():
        assert d.total_interval is not None
        assert d.total_interval[0] <= d.total <= d.total_interval[1]
    # By hand: mean 0.4 * 5 = 2; P(R0 > 1) = 1 - P(beta < 1/D) with 1/D in (1/6, 1/4): the area is worked out below.
    assert found.R0.mean == pytest.approx(2, abs=2e-3)
    D = np.linspace(4, 6, 200_001)
    expected = float(np.mean(1 - np.clip((1 / D - 0.2) / 0.4, 0, 1)))
    assert found.R0.above_one == pytest.approx(expected, abs=2e-3)
    assert sum(count for _, _, count in found.histogram) == 2**14


def test_distributions_are_those_of_the_file() -> None:
    """By hand: R0 = 5 beta with beta lognormal of mean 0.4 and sd 0.1: mean 2, sd 0.5."""
    model = product('distribution = { name = "lognormal", mean = 0.4, sd = 0.1 }', 'label = "stay"')
    found = ngm.uncertainty(ngm.loads(model), 20_000, seed=1)
    assert found.R0.mean == pytest.approx(2, rel=2e-3)
    assert found.R0.sd == pytest.approx(0.5, rel=1e-2)
    assert [d.parameter for d in found.drivers] == ["beta"]


def test_units_and_shares_are_drawn_in_their_own_unit() -> None:
    """By hand: a beta distribution of mean 35 % and sd 5 %, in percent; R0 = 4 p: mean 1.4, sd 0.2."""
    model = text(
        [("S", False), ("I", True)], {"p": 35}, [("S", "I", "4*p*S*I", "t"), ("I", "", "I", "x")], free={"S": 1}
    )
    model = model.replace("value = 35", 'value = 35, unit = "%", distribution = { name = "beta", mean = 35, sd = 5 }')
    found = ngm.uncertainty(ngm.loads(model), 20_000, seed=1)
    assert found.R0.mean == pytest.approx(1.4, rel=2e-3)
    assert found.R0.sd == pytest.approx(0.2, rel=1e-2)


def test_the_same_seed_gives_the_same_bytes_in_one_process_or_two() -> None:
    scenario = ngm.load(ROOT / "scenarios" / "vector-borne-ostrel-fever.toml")
    alone = ngm.uncertainty(scenario, 3000, seed=9)
    with ProcessPoolExecutor(2) as pool:
        together = ngm.uncertainty(scenario, 3000, seed=9, executor=pool)
    assert json.dumps(alone.to_json()) == json.dumps(together.to_json())
    assert json.dumps(alone.to_json()) != json.dumps(ngm.uncertainty(scenario, 3000, seed=10).to_json())


def test_the_object_of_the_command_line() -> None:
    found = ngm.sensitivity(ngm.loads(product()), draws=500, seed=0).to_json()["global"]
    keys = {"draws", "rejected", "seed", "R0", "probability_above_one", "prcc", "sobol_first", "sobol_total"}
    assert set(found) == keys
    assert set(found["R0"]) == {"mean", "sd", "quantiles"}
    assert list(found["R0"]["quantiles"]) == ["0.025", "0.25", "0.5", "0.75", "0.975"]
    assert (found["draws"], found["rejected"], found["seed"]) == (500, 0, 0)
    assert ngm.sensitivity(ngm.loads(product())).to_json()["global"] is None


def test_interventions_get_their_chance() -> None:
    """By hand: 0.3 times R0 = 0.3 beta D: below 1 where beta D < 10/3."""
    extra = '\n[[intervention]]\nname = "Fewer"\nchange = [{ parameter = "beta", multiply = 0.3 }]\n'
    found = ngm.uncertainty(ngm.loads(product(extra=extra)), 20_000, seed=2)
    (fewer,) = found.interventions
    D = np.linspace(4, 6, 200_001)
    expected = float(np.mean(np.clip((10 / 3 / D - 0.2) / 0.4, 0, 1)))
    assert fewer.below_one == pytest.approx(expected, abs=5e-3)


def test_a_response_that_turns_is_told() -> None:
    """By hand: R0 = 8 p (1 - p) rises and falls on (0.1, 0.9): its rank correlation says nothing."""
    model = text(
        [("S", False), ("I", True)], {"p": 0.5}, [("S", "I", "8*p*(1-p)*S*I", "t"), ("I", "", "I", "x")], free={"S": 1}
    )
    found = ngm.uncertainty(ngm.loads(model.replace("value = 0.5", "value = 0.5, range = [0.1, 0.9]")), 2000, seed=1)
    assert found.drivers[0].monotone is False
    assert any("misleads" in warning for warning in found.warnings)


TABLE = "beta,D\n0.2,5\n0.4,5\n0.6,4\n"


def test_joint_draws_from_a_file(tmp_path: Path) -> None:
    scenario = ngm.loads(product())
    (tmp_path / "draws.csv").write_text(TABLE)
    found = ngm.uncertainty(scenario, ngm.read_draws(scenario, tmp_path / "draws.csv"))
    assert found.R0.mean == pytest.approx((1 + 2 + 2.4) / 3)
    assert found.R0.above_one == pytest.approx(2 / 3)
    assert found.seed is None
    pandas = pytest.importorskip("pandas")
    pytest.importorskip("pyarrow")
    pandas.DataFrame({"D": [5.0, 5.0], "beta": [0.2, 0.4]}).to_parquet(tmp_path / "draws.parquet")
    found = ngm.uncertainty(scenario, ngm.read_draws(scenario, tmp_path / "draws.parquet"))
    assert found.R0.mean == pytest.approx(1.5)


@pytest.mark.parametrize(
    ("table", "parts"),
    [
        (TABLE.replace("beta", "bata"), ["column 'bata'", "Did you mean 'beta'"]),
        (TABLE.replace("0.4", "high"), ["column 'beta'", "row 3", "'high' is no number"]),
        (TABLE.replace("0.4,5", "0.4"), ["row 3", "1 cells for the 2 columns"]),
        (TABLE.replace("0.4", ""), ["row 3", "is empty"]),
        (TABLE.replace("0.4", "nan"), ["row 3", "'nan' is no number"]),
        (TABLE.replace("0.4", "-0.4"), ["beta", "negative"]),
        ("beta,beta\n1,2\n", ["column 'beta'"]),
        ("beta\n", ["holds no draws"]),
        ("beta;D\n0,4;5\n", ["'0,4' is no number", "with a point"]),
    ],
)
def test_wrong_tables_are_told_with_row_and_column(table: str, parts: list[str], tmp_path: Path) -> None:
    scenario = ngm.loads(product())
    (tmp_path / "draws.csv").write_text(table)
    with pytest.raises(ngm.NgmError) as caught:
        ngm.uncertainty(scenario, ngm.read_draws(scenario, tmp_path / "draws.csv"))
    for part in parts:
        assert part in str(caught.value)


@pytest.mark.parametrize(
    ("model", "draws", "message"),
    [
        (product('label = "a"', 'label = "b"'), 100, "no parameter has a range or a distribution"),
        (product(), 0, "expected a whole number from 1"),
    ],
)
def test_refused_in_words(model: str, draws: int, message: str) -> None:
    with pytest.raises(ngm.ScenarioError, match=message):
        ngm.uncertainty(ngm.loads(model), draws)
