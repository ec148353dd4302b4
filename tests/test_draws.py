"""Draws on the command line: what is worked out at each, where they go, how much is enough over them."""

from __future__ import annotations

import csv
import json

import pytest

import ngm
from ngm.__main__ import main
from ngm.analysis import slopes

SEIR = "scenarios/seir-velmar-fever.toml"
AGES = "scenarios/age-groups-ember-cough.toml"


@pytest.fixture(autouse=True)
def _patient(monkeypatch):
    # Formulas take well under a second; a machine that does much else must not decide what is tested here.
    monkeypatch.setattr(slopes, "LIMIT", 120.0)
    monkeypatch.setattr("ngm.analysis.sensitivity.FORMULA_LIMIT", 120.0)


def run(capsys, *arguments):
    code = main(list(arguments))
    out, err = capsys.readouterr()
    return code, out, err


def test_other_numbers_stand_beside_those_of_every_run(capsys):
    arguments = ["sensitivity", AGES, "--draws", "64", "--seed", "3", "--of", "growth_rate", "T(E[18-64])", "--json"]
    code, out, _ = run(capsys, *arguments)
    assert code == 0
    told = json.loads(out)
    # Second route: the same in Python.
    found = ngm.uncertainty(ngm.load(AGES), 64, seed=3, of=["growth_rate", "T(E[18-64])"])
    assert told["global"] == found.to_json()
    assert [one["number"] for one in told["distributions"]] == ["R0", "growth_rate", "T(E[18-64])"]
    assert told["distributions"][1]["mean"] == found.others[0].figures.mean
    assert [one["intervention"] for one in told["control_numbers"]] == [i.name for i in ngm.load(AGES).interventions]


def test_without_draws_the_object_has_no_distributions(capsys):
    _, out, _ = run(capsys, "sensitivity", AGES, "--json")
    told = json.loads(out)
    assert told["global"] is None
    assert "distributions" not in told


def test_the_text_says_each_number_with_its_threshold(capsys):
    _, out, _ = run(capsys, "sensitivity", SEIR, "--draws", "32", "--of", "growth rate")
    assert "  growth_rate per day: mean" in out
    assert "share of draws with growth_rate > 0:" in out
    assert "elasticity by sigma = mu/(mu + sigma)" in out


def test_every_draw_is_written(capsys, tmp_path):
    path = tmp_path / "draws.csv"
    code, _, _ = run(
        capsys, "sensitivity", SEIR, "--draws", "40", "--seed", "2", "--of", "growth_rate", "--table", str(path)
    )
    assert code == 0
    with path.open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 40
    # Second route: `solve` with the numbers of one row.
    row = rows[17]
    changed = ngm.load(SEIR).with_values(
        **{name: float(value) for name, value in row.items() if name not in ("draw", "R0", "growth_rate")}
    )
    solution = ngm.solve(changed, limit=0)
    assert float(row["R0"]) == pytest.approx(solution.R0, rel=1e-12)
    assert float(row["growth_rate"]) == pytest.approx(solution.growth_rate, rel=1e-10)


def test_correlations_are_typed_by_pairs(capsys):
    _, out, _ = run(capsys, "sensitivity", AGES, "--draws", "500", "--correlate", "q,gamma=0.7", "--json")
    told = json.loads(out)
    independent = ngm.uncertainty(ngm.load(AGES), 500)
    # By hand: R0 rises with q and falls with gamma, so it spreads less where they go together.
    assert told["global"]["R0"]["sd"] < independent.R0.sd
    assert set(told["global"]["sobol_first"].values()) == {None}


@pytest.mark.parametrize("verb", ["strength", "coverage"])
def test_how_much_is_enough_over_the_draws(capsys, verb):
    more = ["--intervention", "Masks"] if verb == "strength" else ["--efficacy", "0.9"]
    arguments = [verb, AGES, *more, "--target", "1.5", "--draws", "100", "--seed", "4", "--assurance", "60 %"]
    code, out, _ = run(capsys, *arguments, "--json")
    assert code == 0
    told = json.loads(out)["assured"]
    ages = ngm.load(AGES)
    if verb == "strength":
        found = ngm.assured_strength(ages, "Masks", 100, assurance=0.6, target=1.5, seed=4)
    else:
        found = ngm.assured_coverage(ages, 100, efficacy=0.9, assurance=0.6, target=1.5, seed=4)
    assert told == json.loads(json.dumps(found.to_json()))
    assert told["needed"] > told["at_values"]
    _, text, _ = run(capsys, *arguments)
    assert "in 60 % of the draws" in text
    assert "At the scenario's own values" in text


def test_without_draws_strength_says_nothing_of_them(capsys):
    _, out, _ = run(capsys, "strength", AGES, "--intervention", "Masks", "--json")
    assert "assured" not in json.loads(out)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["sensitivity", SEIR, "--of", "growth_rate"], "--of: needs draws"),
        (["sensitivity", SEIR, "--table", "x.csv"], "--table: needs draws"),
        (["sensitivity", SEIR, "--draws", "9", "--from", "x.csv"], "Give one of the two."),
        (["sensitivity", SEIR, "--draws", "9", "--of", "T(X)"], "'X' is no type at infection"),
        (["sensitivity", SEIR, "--draws", "9", "--correlate", "beta=0.4"], "expected A,B=NUMBER"),
        (["sensitivity", SEIR, "--draws", "9", "--correlate", "beta,gamma=much"], "'much' is no number"),
        (["sensitivity", SEIR, "--draws", "9", "--table", "no/such/folder/x.csv"], "cannot be written"),
        (["strength", AGES, "--intervention", "Masks", "--draws", "9", "--assurance", "95"], "For 95 % write 0.95."),
    ],
)
def test_refused_in_words(capsys, arguments, message):
    code, out, err = run(capsys, *arguments)
    assert (code, out) == (2, "")
    assert message in err
