"""The operator path of large grouped models against the enclosed numbers of the same models written out."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

import ngm
import ngm.analysis.point
import ngm.analysis.state
import ngm.engine.large

ROOT = Path(__file__).parents[2]
AGES, TOWNS = 3, 4


def grouped(seed: int) -> str:
    """Return a random model over age and town: contacts, travel, a reservoir, a latent and two infectious stages."""
    rng = np.random.default_rng(seed)
    by = 'by = ["age", "town"]'

    def rows(values: np.ndarray) -> list[Any]:
        return np.round(values, 6).tolist()

    C = rng.uniform(0.1, 3, (AGES, AGES))
    M = rng.uniform(0, 1, (TOWNS, TOWNS)) * (rng.uniform(size=(TOWNS, TOWNS)) < rng.choice([0.3, 1.0]))
    T = rng.uniform(0, 0.02, (TOWNS, TOWNS))
    np.fill_diagonal(T, 0)
    within = rng.uniform(0.1, 3, (TOWNS, AGES, AGES))
    lines = [
        '[scenario]\ntitle = "Random grouped model"\ntime_unit = "day"',
        f"[dimensions]\nage = {[f'a{k}' for k in range(AGES)]}\ntown = {[f't{k}' for k in range(TOWNS)]}".replace(
            "'", '"'
        ),
        "[compartments]",
        *(f"{name} = {{ infected = false, {by} }}" for name in ("S", "R")),
        *(f"{name} = {{ infected = true, {by} }}" for name in ("E", "I")),
        'A = { infected = true, by = ["town", "age"] }',
        "W = { infected = true }",
        "[parameters]",
        f"births = {{ value = {rows(rng.uniform(1, 9, (AGES, TOWNS)))}, {by} }}",
        f'sigma = {{ value = {rows(rng.uniform(0.5, 2, AGES))}, by = ["age"] }}',
        *(
            f"{name} = {{ value = {rng.uniform(low, high):.6f} }}"
            for name, low, high in (
                ("beta", 0.05, 0.3),
                ("bW", 0.0, 1e-3),
                ("xi", 0.01, 0.1),
                ("de", 0.1, 0.5),
                ("p", 0.2, 0.8),
                ("nu", 0.1, 0.5),
                ("gamma", 0.1, 0.4),
                ("mu", 0.005, 0.05),
            )
        ),
        f'[matrices.C]\nby = "age"\nvalues = {rows(C)}\npopulation = "sum(S, town)"\nreciprocal = true',
        f'[matrices.Q]\nby = "age"\nwithin = "town"\nvalues = {rows(within)}',
        f'[matrices.M]\nby = "town"\nvalues = {rows(M)}',
        f'[matrices.T]\nby = "town"\nvalues = {rows(T)}',
        '[definitions]\nN = "S + E + I + A + R"\nforce = "beta * (C(M((I + 0.5*A)/N)) + 0.1*Q(I/N)) + bW*W"',
    ]
    flows = [
        ("", "S", "births", "x"),
        ("S", "E", "sigma*force*S", "t"),
        ("E", "I", "p*nu*E", "x"),
        ("E", "A", "(1-p)*nu*E", "x"),
        ("I", "R", "gamma*I", "x"),
        ("A", "R", "gamma*A", "x"),
        ("", "W", "sum(xi*I) + 0.1*sum(A)", "x"),
        ("W", "", "de*W", "x"),
        *((name, "", f"mu*{name}", "x") for name in ("S", "E", "I", "A", "R")),
    ]
    if seed % 2:
        flows.append(("I", "E", "0.05*I", "x"))  # relapse: a loop among the stages
    for source, target, rate, kind in flows:
        ends = (f'from = "{source}"\n' if source else "") + (f'to = "{target}"\n' if target else "")
        name = "transmission" if kind == "t" else "transition"
        lines.append(f'[[flow]]\n{ends}rate = "{rate}"\nkind = "{name}"')
    lines.append('[[movement]]\nmatrix = "T"\nof = ["S", "E", "R"]')
    return "\n".join(lines) + "\n"


@pytest.fixture
def operators(monkeypatch: pytest.MonkeyPatch) -> None:
    """Send every model through the operators, however small it is."""
    monkeypatch.setattr(ngm.analysis.point, "MOST_EXACT", 0)
    monkeypatch.setattr(ngm.analysis.state, "MOST_DENSE", 0)
    monkeypatch.setattr(ngm.engine.large, "MOST_WRITTEN_OUT", 0)


TEXTS = [(f"random {k}", grouped(k)) for k in range(8)]
# A season is computed with matrices that are written out, whatever the model; a matrix that stands in the file is one.
TEXTS += [
    (path.stem, path.read_text(encoding="utf-8"))
    for path in sorted((ROOT / "scenarios").glob("*.toml"))
    if not path.stem.startswith(("seasonal", "ticks-and-mice", "mosquito-stages"))
]
EXPECTED: dict[str, Any] = {}


@pytest.fixture(scope="module")
def written_out() -> dict[str, Any]:
    """Return the enclosed numbers of each model."""
    return {name: ngm.solve(ngm.loads(text, folder=str(ROOT / "scenarios")), limit=0) for name, text in TEXTS}


@pytest.mark.parametrize(("name", "text"), TEXTS, ids=[name for name, _ in TEXTS])
def test_operators_give_the_numbers_of_the_matrices(name: str, text: str, written_out: Any, operators: None) -> None:
    expected = written_out[name]
    found = ngm.solve(ngm.loads(text, folder=str(ROOT / "scenarios")), limit=0)
    assert expected.R0 is not None
    assert found.R0 == pytest.approx(expected.R0, rel=1e-10)
    assert found.R0_bounds is not None
    assert found.R0_bounds[0] <= expected.R0_bounds[1]
    assert expected.R0_bounds[0] <= found.R0_bounds[1]
    assert found.R0_bounds[1] - found.R0_bounds[0] <= 1e-9 * expected.R0
    assert found.growth_rate == pytest.approx(expected.growth_rate, rel=1e-7, abs=1e-9)
    assert found.types_at_infection == expected.types_at_infection
    assert found.infection_free == pytest.approx(expected.infection_free, rel=1e-10, abs=1e-12)
    assert found.structure is not None
    assert expected.structure is not None
    assert found.structure.irreducible == expected.structure.irreducible
    assert found.structure.period == expected.structure.period
    classes = {frozenset(c.types): (c.R0, c.period, c.growth_rate) for c in expected.structure.classes}
    assert len(found.structure.classes) == len(classes)
    for c in found.structure.classes:
        root, period, rate = classes[frozenset(c.types)]
        assert (c.R0, c.period) == (pytest.approx(root, rel=1e-9, abs=1e-12), period)
        assert c.growth_rate == (None if rate is None else pytest.approx(rate, rel=1e-7, abs=1e-9))
    if expected.right is None:
        assert found.right is None
    else:
        assert found.right == pytest.approx(expected.right, rel=1e-7, abs=1e-12)
        assert found.left == pytest.approx(expected.left, rel=1e-7, abs=1e-10)


@pytest.mark.parametrize(
    ("name", "dimension"), [("random 0", "age"), ("random 0", "town"), ("random 3", "age"), ("random 5", "town")]
)
def test_numbers_of_groups(name: str, dimension: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Second route: K written out, and the type-reproduction number of the rows of each group."""
    from ngm.analysis.control import group_numbers

    scenario = ngm.loads(dict(TEXTS)[name])
    expected = group_numbers(scenario, dimension)
    monkeypatch.setattr(ngm.analysis.point, "MOST_EXACT", 0)
    found = group_numbers(scenario, dimension)
    assert [f.types for f in found] == [e.types for e in expected]
    assert len(found) == len(scenario.dimensions[dimension].groups)
    for f, e in zip(found, expected, strict=True):
        assert f.T == (None if e.T is None else pytest.approx(e.T, rel=1e-9))


def test_a_dimension_that_is_not_there_is_told() -> None:
    from ngm.analysis.control import group_numbers

    with pytest.raises(ngm.ScenarioError, match="Its dimensions: age, town"):
        group_numbers(ngm.loads(TEXTS[0][1]), "region")


def kronecker(ages: int, towns: int) -> str:
    """Return a model whose K is a product of an age matrix and a town matrix: nothing differs but contacts and mixing."""
    rng = np.random.default_rng(5)
    C, M = (np.round(rng.uniform(0.1, 2, (n, n)), 6) for n in (ages, towns))
    by = 'by = ["age", "town"]'
    return f"""
[scenario]
title = "A product of two matrices"
time_unit = "day"
[dimensions]
age = {[f"a{k}" for k in range(ages)]}
town = {[f"t{k}" for k in range(towns)]}
[compartments]
S = {{ infected = false, {by} }}
E = {{ infected = true, {by} }}
I = {{ infected = true, {by} }}
[parameters]
beta = {{ value = 0.02 }}
nu = {{ value = 0.25 }}
gamma = {{ value = 0.2 }}
[matrices.C]
by = "age"
values = {C.tolist()}
[matrices.M]
by = "town"
values = {M.tolist()}
[[flow]]
from = "S"
to = "E"
rate = "beta * S * C(M(I))"
kind = "transmission"
[[flow]]
from = "E"
to = "I"
rate = "nu * E"
kind = "transition"
[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"
[infection_free]
S = 1
""".replace("'", '"')


def root(matrix: list[list[float]]) -> float:
    return float(np.max(np.abs(np.linalg.eigvals(np.array(matrix)))))


@pytest.mark.parametrize("towns", [17, 60])
def test_a_product_of_matrices_has_the_product_of_their_roots(towns: int) -> None:
    """By hand: K = (beta/gamma) C x M, so R0 = (beta/gamma) rho(C) rho(M); 578 and 2,040 types."""
    scenario = ngm.loads(kronecker(17, towns))
    C, M = ([[float(v) for v in row] for row in scenario.matrices[name].blocks[0]] for name in "CM")
    solution = ngm.solve(scenario, limit=0)
    assert len(solution.types) == 2 * 17 * towns
    assert solution.R0 == pytest.approx(0.1 * root(C) * root(M), rel=1e-10)


def test_operators_equal_the_explicit_numbers_at_the_limit_of_what_is_written_out(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Second route: 476 types, enclosed; the same by operators."""
    scenario = ngm.loads(kronecker(17, 14))
    expected = ngm.solve(scenario, limit=0)
    monkeypatch.setattr(ngm.analysis.point, "MOST_EXACT", 0)
    monkeypatch.setattr(ngm.engine.large, "MOST_WRITTEN_OUT", 0)
    found = ngm.solve(scenario, limit=0)
    assert expected.R0_bounds is not None
    assert found.R0 == pytest.approx(expected.R0, rel=1e-10)
    assert found.growth_rate == pytest.approx(expected.growth_rate, rel=1e-9)
    assert found.right == pytest.approx(expected.right, rel=1e-8)
