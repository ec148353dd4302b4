"""A name replaced in every place that uses it. Expected texts by hand; that the model is the same: by its numbers."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import ngm
from ngm.scenario.renaming import rename_everywhere
from tests.scenario.models import GROUPED, PLAIN
from tests.stated import change, given

SCENARIOS = Path(__file__).parents[2] / "scenarios"


def test_every_use_is_followed_and_nothing_else():
    text = PLAIN.replace("[parameters]", "# beta is typed by hand\n[parameters]").replace(
        'label = "Infection"', 'label = "Infection by beta"'
    )
    changed = rename_everywhere(text, "beta", "contacts")
    assert changed == (
        text.replace("\nbeta = {", "\ncontacts = {")
        .replace('foi = "beta * I / N"', 'foi = "contacts * I / N"')
        .replace('parameter = "beta"', 'parameter = "contacts"')
    )


def test_a_compartment_in_flows_sums_and_states():
    changed = rename_everywhere(PLAIN, "S", "susceptible")
    assert 'N = "susceptible + E + I + R"' in changed
    assert 'rate = "foi * susceptible"' in changed
    assert 'from = "susceptible"' in changed
    assert "susceptible = 1000" in changed
    assert not re.search(r"\bS\b", changed)


@pytest.mark.parametrize("path", sorted(SCENARIOS.glob("*.toml")), ids=lambda path: path.stem)
def test_the_model_stays_the_same_whatever_is_renamed(path):
    """Each name in turn gets another one; then all at once: the same number, under other names."""
    text = path.read_text(encoding="utf-8")
    scenario = ngm.loads(text, folder=str(SCENARIOS))
    stated = scenario.given is not None or scenario.projection is not None
    named = [
        *([] if stated else scenario.compartments),  # types of a matrix that stands in the file are labels
        *scenario.parameters,
        *scenario.definitions,
        *scenario.matrices,
        *scenario.dimensions,
    ]
    for k, name in enumerate(named):
        text = rename_everywhere(text, name, f"other_{k}")
        if k % 5 == 0:
            ngm.loads(text, folder=str(SCENARIOS))
    other = ngm.loads(text, folder=str(SCENARIOS))
    assert list(other.parameters) == [f"other_{named.index(name)}" for name in scenario.parameters]
    assert ngm.solve(other, limit=0).R0 == ngm.solve(scenario, limit=0).R0
    # and back: nothing was lost on the way
    for k, name in enumerate(named):
        text = rename_everywhere(text, f"other_{k}", name)
    assert text == path.read_text(encoding="utf-8")


def test_groupings_and_matrices():
    text = (
        GROUPED
        + '\n[[intervention]]\nname = "a"\nchange = [{ parameter = "q", group = { age = "old" }, multiply = 0.5 }]\n'
    )
    changed = rename_everywhere(text, "age", "years")
    assert not re.search(r"\bage\b", changed)
    assert "group = { years = " in changed


def test_numbers_quotes_and_greek():
    text = (
        "[parameters]\ne3 = { value = 1 }\n'β' = { value = 2 }\n[definitions]\n"
        'x = \'e3 * 1e3 + β\'\ny = """\nbeta +\n e3"""\n'
    )
    changed = rename_everywhere(rename_everywhere(text, "e3", "f"), "beta", "γ")
    assert changed == (
        '[parameters]\nf = { value = 1 }\n"γ" = { value = 2 }\n[definitions]\nx = \'f * 1e3 + γ\'\ny = "γ +\\n f"\n'
    )


@pytest.mark.parametrize(
    ("old", "new", "why"),
    [
        ("beta", "gamma", "stands in the file already"),
        ("beta", "foi", "stands in the file already"),
        ("beta", "2x", "is no name"),
        ("beta", "exp", "belongs to a function"),
        ("nothing", "something", "nothing in the file is called 'nothing'"),
    ],
)
def test_conflicts_are_refused(old, new, why):
    with pytest.raises(ngm.ScenarioError, match=why):
        rename_everywhere(PLAIN, old, new)


def test_a_name_that_an_expression_waits_for_is_a_conflict():
    with pytest.raises(ngm.ScenarioError, match="stands in the file already"):
        rename_everywhere(PLAIN.replace("foi * S", "foi * S * later"), "beta", "later")


def test_types_of_a_matrix_are_labels():
    # A type may be called as a parameter is: the parameter alone gets the new name, by hand.
    text = given([["p", 1], [1, 0]], ["p", "q"], {"p": 0.5}, tail=change('susceptibility = "p", reduce = 0.5'))
    changed = rename_everywhere(text, "p", "share")
    assert changed == text.replace("p = { value", "share = { value").replace('[["p", 1]', '[["share", 1]')
