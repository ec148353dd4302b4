"""The examples of the README give what it prints; every scenario that comes with the program works and is explained."""

from __future__ import annotations

import doctest
import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

import ngm

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
SCENARIOS = sorted((ROOT / "scenarios").glob("*.toml"))


def blocks(language: str) -> list[str]:
    """Return the fenced blocks of one language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", README, flags=re.MULTILINE | re.DOTALL)


def examples() -> list[tuple[str, str]]:
    """Return the commands in the README's console blocks, each with what is printed below it."""
    found = []
    for block in blocks("console"):
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, printed = part.partition("\n")
            found.append((command, printed))
    return found


EXAMPLES = [(command, printed) for command, printed in examples() if command.startswith("python -m ngm ")]


def test_there_are_examples():
    assert len(EXAMPLES) >= 2
    assert any(" solve " in command for command, _ in EXAMPLES)
    assert any(" control " in command for command, _ in EXAMPLES)


@pytest.mark.parametrize(("command", "printed"), EXAMPLES, ids=[command for command, _ in EXAMPLES])
def test_commands_print_what_the_readme_shows(command, printed):
    done = subprocess.run(
        [sys.executable, *shlex.split(command)[1:]],
        cwd=ROOT,
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=True,
    )
    assert done.stdout.rstrip() == printed.rstrip()


def test_python_examples():
    sessions = [block for block in blocks("python") if ">>>" in block]
    assert sessions
    runner = doctest.DocTestRunner(optionflags=doctest.NORMALIZE_WHITESPACE)
    for session in sessions:
        test = doctest.DocTestParser().get_doctest(session, {}, "README.md", "README.md", 0)
        assert runner.run(test).failed == 0


def test_the_scenario_shown_is_the_one_that_works():
    shown, stated = blocks("toml")
    solution = ngm.solve(ngm.loads(shown))
    assert solution.R0 is not None
    assert f"{solution.R0:.4g}" in README
    # The two matrices that stand in place of flows are of two files.
    head = '[scenario]\ntitle = "T"\ntime_unit = "year"\n'
    K, population = stated.split("[projection]")
    assert ngm.solve(ngm.loads(head + K)).R0 == pytest.approx(3**0.5, rel=1e-14)  # a cycle of 3/2 and 2, by hand
    assert ngm.solve(ngm.loads(f"{head}[projection]{population}")).R0 == pytest.approx(0.3 / 0.2 * 2, rel=1e-14)


def test_two_commands_and_no_more():
    commands = [command for command, _ in examples() if command.startswith("bash ")]
    assert commands == ["bash .ci/app", "bash .ci/test"]
    assert "test" in (ROOT / ".ci/run").read_text(encoding="utf-8")


def test_every_dependency_has_a_reason():
    lines = (ROOT / "requirements.txt").read_text(encoding="utf-8").splitlines()
    pinned = [line for line in lines if line and not line.startswith("#")]
    for line in pinned:
        name, _, version = line.partition("==")
        assert re.fullmatch(r"[\d.]+(\.post\d+)?", version), f"{line}: not an exact version"
        assert f"`{name}`" in README, f"{name}: no reason in the README"


def test_every_scenario_is_named():
    for path in SCENARIOS:
        assert path.name in README


def test_enough_scenarios():
    assert len(SCENARIOS) >= 10


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
class TestScenario:
    def test_says_what_is_invented(self, path):
        scenario = ngm.load(path)
        assert "nvented" in (scenario.summary or "")
        for parameter in scenario.parameters.values():
            assert parameter.label, parameter.name
            assert parameter.follows or "invented" in (parameter.source or ""), parameter.name
        assert all(matrix.source and "invented" in matrix.source for matrix in scenario.matrices.values())

    def test_teaches(self, path):
        # Explained, labelled, and without a warning from the reader.
        scenario = ngm.load(path)
        assert path.read_text(encoding="utf-8").count("#") >= 3
        assert all(compartment.label for compartment in scenario.compartments.values())
        assert all(flow.label for flow in scenario.flows)
        assert all(
            parameter.unit is None or parameter.unit.powers is not None for parameter in scenario.parameters.values()
        )
        assert scenario.warnings == ()

    def test_solves(self, path):
        solution = ngm.solve(ngm.load(path))
        assert solution.R0 is not None
        low, high = solution.R0_bounds
        assert 0.5 < low <= solution.R0 <= high < 10
        # A K as given has no time in it.
        assert (solution.growth_rate is None) == (solution.form == "K as given")
        assert solution.growth_rate is None or (solution.R0 > 1) == (solution.growth_rate > 0)
        # A closed population breaks A5 and says so; nothing else may be wrong with an example.
        assert {c.name for c in solution.conditions if not c.holds} <= {"A5"}
        # A season says what its number is and which numbers beside it mislead.
        assert len(solution.warnings) <= (1 if solution.season is None else 4)

    def test_has_numbers_for_control(self, path):
        result = ngm.control(ngm.load(path))
        assert result.type_reproduction
        for number in result.type_reproduction:
            assert (number.T is None) == (number.why is not None)
