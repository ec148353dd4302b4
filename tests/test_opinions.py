"""The verbs that contradict, on the command line: as text and as JSON, and how long they take."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

import ngm
from ngm.__main__ import main

ROOT = Path(__file__).parents[1]
SEIR = str(ROOT / "scenarios" / "seir-velmar-fever.toml")
WATER = str(ROOT / "scenarios" / "waterborne-karsk-flux.toml")

#: Three hosts and three vectors, latent and infectious: 12 types.
HOSTS = "abc"


def twelve_types() -> str:
    lines = ["[scenario]", 'title = "Three hosts, three vectors"', 'time_unit = "day"', "[compartments]"]
    for k in HOSTS:
        lines += [
            f"{c}{k} = {{ infected = {'false' if c in ('S', 'M') else 'true'} }}"
            for c in ("S", "E", "I", "M", "F", "J")
        ]
    lines.append("[parameters]")
    for n, k in enumerate(HOSTS):
        values = {"mu": 0.01, "s": 0.2, "g": 0.1 + n / 50, "c": 0.1, "t": 0.15, "N": 100, "V": 300}
        lines += [f"{name}{k} = {{ value = {value} }}" for name, value in values.items()]
        lines += [f"b{k}{j} = {{ value = {0.1 + (n + m) / 20} }}" for m, j in enumerate(HOSTS)]
        lines += [f"d{k}{j} = {{ value = {0.05 + (n + 2 * m) / 40} }}" for m, j in enumerate(HOSTS)]

    def flow(source, target, rate, kind="transition"):
        lines.append("[[flow]]")
        lines.extend(f'{key} = "{end}"' for key, end in (("from", source), ("to", target)) if end)
        lines.extend([f'rate = "{rate}"', f'kind = "{kind}"'])

    for k in HOSTS:
        flow(f"S{k}", f"E{k}", " + ".join(f"b{k}{j}*J{j}" for j in HOSTS).join(("(", f")*S{k}/N{k}")), "transmission")
        flow(f"M{k}", f"F{k}", " + ".join(f"d{k}{j}*I{j}/N{j}" for j in HOSTS).join(("(", f")*M{k}")), "transmission")
        flow(f"E{k}", f"I{k}", f"s{k}*E{k}")
        flow(f"I{k}", f"S{k}", f"g{k}*I{k}")
        flow(f"F{k}", f"J{k}", f"t{k}*F{k}")
        flow("", f"S{k}", f"mu{k}*N{k}")
        flow("", f"M{k}", f"c{k}*V{k}")
        for c, rate in (("S", "mu"), ("E", "mu"), ("I", "mu"), ("M", "c"), ("F", "c"), ("J", "c")):
            flow(f"{c}{k}", "", f"{rate}{k}*{c}{k}")
    return "\n".join(lines)


@pytest.mark.parametrize(
    ("arguments", "words", "keys"),
    [
        (["units", SEIR], "mean stay in E", {"findings", "parameters", "stays", "expressions", "warnings"}),
        (["splits", WATER], "Not to be compared", {"choices", "splits", "agree", "differ", "warnings"}),
        (["formula", SEIR, "--text", "beta/gamma"], "Verdict: different", {"verdict", "counterexample", "responses"}),
        (["difference", SEIR, "--to", WATER], "What differs", {"changes", "entries", "contributions", "R0"}),
    ],
)
def test_text_and_json(arguments, words, keys, capsys):
    assert main(arguments) == 0
    assert words in capsys.readouterr().out
    assert main([*arguments, "--json"]) == 0
    assert keys <= set(json.loads(capsys.readouterr().out))


def test_the_readme_names_every_field():
    """Every key of the four objects stands in the README's list."""
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    told = readme[readme.index("`--json` prints, beside `title` (`first`") :][:3500]
    scenario = ngm.load(WATER)
    results = [
        ngm.units(scenario),
        ngm.splits(scenario),
        ngm.formula(scenario, "gamma"),
        ngm.difference(scenario, scenario.with_values(gamma=0.2)),
    ]
    for result in results:
        for key, value in result.to_json().items():
            inner = value[0] if isinstance(value, list) and value and isinstance(value[0], dict) else {}
            assert all(f"`{name}`" in told for name in (key, *inner)), key


def test_a_rate_per_week_is_told_per_day_above_the_result(capsys, tmp_path):
    assert main(["solve", SEIR, "--set", "gamma=0.35"]) == 0
    lines = capsys.readouterr().out.splitlines()
    told = lines.index("  gamma: 0.35 1/week = 0.05 1/day, once in 20 day")
    assert told < next(k for k, line in enumerate(lines) if line.startswith("R0 = "))
    path = tmp_path / "slip.toml"
    path.write_text(Path(SEIR).read_text(encoding="utf-8").replace('1.4, unit = "1/week"', '1.4, unit = "1/day"'))
    assert main(["control", str(path)]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[2].startswith("  ! parameters.gamma: its label says '5 days'")
    assert main(["solve", str(path), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["warnings"]


def test_wrong_input_is_told_and_exits_with_2(capsys):
    assert main(["formula", SEIR, "--text", "bata"]) == 2
    assert main(["difference", SEIR, "--to", "nowhere.toml"]) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    assert "Did you mean 'beta'" in printed.err


def test_twelve_types_are_answered():
    scenario = ngm.loads(twelve_types())
    ngm.formula(scenario, "baa")  # the process for symbols and the libraries are there
    other = scenario.with_values(ga=0.2, sa=0.3, baa=0.2)
    assert ngm.units(scenario).to_json()
    assert ngm.splits(scenario).to_json()
    assert ngm.formula(scenario, "baa*sa/(sa + mua)").to_json()
    assert ngm.difference(scenario, other).to_json()
