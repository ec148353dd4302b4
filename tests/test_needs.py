"""`strength`, `coverage` and `allocate` on the command line, the numbers typed there, and the sentences about them."""

from __future__ import annotations

import json
import math
import re
import shlex
from pathlib import Path

import pytest

import ngm
from ngm.__main__ import main
from ngm.errors import ScenarioError
from ngm.typed import by_group, number
from ngm.wording import allocation_words, coverage_words, share, strength_words, whole
from tests.analysis.packages import TOWN, intervention

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
FOUR = "scenarios/age-groups-ember-cough.toml"


def printed(capsys, *arguments):
    """Run a verb that must succeed and return what it prints."""
    assert main(list(arguments)) == 0
    out, err = capsys.readouterr()
    assert err == ""
    return out


def refused(capsys, *arguments):
    """Run a verb that must be refused and return what it says."""
    try:
        code = main(list(arguments))
    except SystemExit as stop:
        code = stop.code
    out, err = capsys.readouterr()
    assert (code, out) == (2, "")
    assert "Traceback" not in err
    assert len(err) < 2000
    return err


# -- numbers as typed -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0.7", 0.7),
        ("70 %", 0.7),
        ("70%", 0.7),
        (" 1e-3 ", 1e-3),
        (".5", 0.5),
        ("100 000", 1e5),
        ("-2", -2.0),
        ("3.", 3),
    ],
)
def test_numbers(text, value):
    assert number(text, "x") == value


@pytest.mark.parametrize("text", ["", "0,7", "1 2", "nan", "inf", "1e9999", "0x1", "__import__('os')", "7 0 %", "½"])
def test_what_is_no_number(text):
    with pytest.raises(ScenarioError, match=r"^supply: .*(Write|no number)"):
        number(text, "supply")


def test_numbers_by_group():
    assert by_group(["0.7"], "x") == 0.7
    assert by_group(["0-4=1", "a=b=50 %"], "x") == {"0-4": 1.0, "a=b": 0.5}
    assert by_group([], "x") == {}
    with pytest.raises(ScenarioError, match="stands twice"):
        by_group(["a=1", "a=2"], "x")
    with pytest.raises(ScenarioError, match="one number for all groups"):
        by_group(["0.5", "0.7"], "x")


# -- the verbs: what Python gives, to the last digit -----------------------------------------------------------------


def test_strength(capsys):
    name = "Vaccination of adults"
    expected = ngm.strength_needed(ngm.load(FOUR), name)
    told = json.loads(printed(capsys, "strength", FOUR, "--intervention", name, "--json"))
    assert told["strength"] == expected.strength
    assert told["at_full"] == expected.at_full
    assert told["R0"] == expected.R0
    assert told["curve"] == [list(point) for point in expected.curve]
    text = printed(capsys, "strength", FOUR, "--intervention", name)
    assert strength_words(expected) in text
    assert "control reproduction number" in text


def test_a_strength_that_is_not_enough_and_one_beside_others(capsys):
    alone = json.loads(printed(capsys, "strength", FOUR, "--intervention", "Masks", "--json"))
    assert (alone["strength"], alone["unattainable"]) == (None, True)
    assert "does not reach 1" in printed(capsys, "strength", FOUR, "--intervention", "Masks")
    besides = ["--with", "Isolation of cases", "Schools closed"]
    told = json.loads(printed(capsys, "strength", FOUR, "--intervention", "Masks", *besides, "--json"))
    assert told["in_force"] == besides[1:]
    assert 0 < told["strength"] < 1
    # By hand: masks scale K, so 0.2 of strength s takes the number from R to R (1 - 0.2 s).
    assert told["strength"] == pytest.approx((1 - 1 / told["R0"]) / 0.2, rel=1e-9)
    text = printed(capsys, "strength", FOUR, "--intervention", "Masks", *besides)
    assert "with Isolation of cases, Schools closed in force: control reproduction number" in text
    assert "\nR0 =" not in text


def test_coverage(capsys):
    expected = ngm.coverage_needed(ngm.load(FOUR), ["18-64"], efficacy=0.7)
    ask = ["coverage", FOUR, "--groups", "18-64", "--efficacy", "70 %"]
    told = json.loads(printed(capsys, *ask, "--json"))
    assert told["coverage"] == expected.coverage
    assert told["coverage"] == pytest.approx((1 - 1 / told["T"]) / 0.7, rel=1e-12)  # by hand
    assert coverage_words(expected) in printed(capsys, *ask)
    children = ["coverage", FOUR, "--groups", "0-4", "5-17", "--efficacy", "0.7"]
    assert "cannot be enough" in printed(capsys, *children)
    assert json.loads(printed(capsys, *children, "--json"))["T"] is None


def test_coverage_with_everything_said(capsys):
    ask = ["coverage", FOUR, "--groups", "18-64", "5-17", "--efficacy", "18-64=0.9", "5-17=0.8", "--against-spread"]
    ask += ["0.5", "--kind", "all-or-nothing", "--turnover", "0.02", "--waning", "0.005", "--target", "1.2"]
    told = json.loads(printed(capsys, *ask, "--json"))
    assert told["efficacies"] == pytest.approx([0.95, 0.9])  # by hand: 1 - 0.1*0.5, 1 - 0.2*0.5
    assert told["lasting"] == pytest.approx(0.8)  # by hand: 0.02/0.025
    assert (told["kind"], told["target"]) == ("all-or-nothing", 1.2)
    text = printed(capsys, *ask)
    assert "all-or-nothing" in text
    assert "protection wanes: 80 % of coverage protects" in text


def test_allocation(capsys):
    expected = ngm.allocate(ngm.load(FOUR), 100_000, efficacy=0.7)
    ask = ["allocate", FOUR, "--supply", "100 000", "--efficacy", "0.7"]
    told = json.loads(printed(capsys, *ask, "--json"))
    assert told["best"] == expected.best.to_json()
    assert [rule["R0"] for rule in told["rules"]] == [rule.R0 for rule in expected.rules]
    assert told["smallest"]["supply"] == expected.smallest.supply
    assert told["gap"] == expected.gap
    text = printed(capsys, *ask)
    for line in allocation_words(expected):
        assert line in text
    assert "e-1" not in text  # nothing left of an optimiser's rounding


def test_allocation_with_everything_said(capsys):
    ask = ["allocate", FOUR, "--supply", "50000", "--groups", "18-64", "65+", "--efficacy", "0.7", "--cost", "18-64=1"]
    ask += ["65+=0.5", "--upper", "0.05", "--sizes", "65+=1000", "--with", "Masks", "--target", "1.2"]
    told = json.loads(printed(capsys, *ask, "--json"))
    assert told["groups"] == ["18-64", "65+"]
    assert told["sizes"] == [620_000, 1000]
    assert told["costs"] == [1, 0.5]
    assert max(told["best"]["coverage"]) <= 0.05
    assert told["smallest"]["target"] == 1.2
    assert told["R0"] == json.loads(printed(capsys, "compare", FOUR, "--json"))["interventions"][0]["R0"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["strength", "--intervention", "Mask"], "Did you mean 'Masks'?"),
        (["strength"], "--intervention"),
        (["strength", "--intervention", "Masks", "--with", "Masks", "Masks"], "named twice"),
        (["strength", "--intervention", "Masks", "--target", "0"], "lies above 0"),
        (["coverage", "--groups", "18-46"], "is no group of hosts"),
        (["coverage", "--efficacy", "1,5"], "after a point"),
        (["coverage", "--efficacy", "70"], "For 70 % write 0.7"),
        (["coverage", "--kind", "perfect"], "leaky"),
        (["coverage", "--waning", "0.1"], "turnover"),
        (["allocate"], "--supply"),
        (["allocate", "--supply", "-5"], "is no supply"),
        (["allocate", "--supply", "5", "--cost", "0"], "not above 0"),
        (["allocate", "--supply", "5", "--sizes", "5"], "GROUP=NUMBER"),
        (["allocate", "--supply", "5", "--upper", "18-64=1"], "has no value for 0-4"),
    ],
)
def test_wrong_questions_are_refused(capsys, arguments, message):
    assert message in refused(capsys, arguments[0], FOUR, *arguments[1:])


def test_what_the_readme_shows_of_an_allocation_is_printed(capsys):
    block = re.search(r"^```text\n\$ python -m ngm (allocate .*?)\n(.*?)^…\n```$", README, re.MULTILINE | re.DOTALL)
    lines = printed(capsys, *shlex.split(block[1])).splitlines()
    assert lines[: len(block[2].splitlines())] == block[2].splitlines()


# -- sentences ---------------------------------------------------------------------------------------------------------


def test_shares_and_counts():
    assert share(0.857064) == "85.71 %"
    assert share(1) == "100 %"
    assert share(0.9999999) == "99.99999 %"  # never rounded onto the whole
    assert share(1e-17) == "0 %"
    assert share(None) == "-"
    assert whole(84997.68) == "84,998"
    assert whole(0.25) == "0.25"
    assert whole(1e-12) == "0"


def test_words_of_an_allocation_by_hand():
    found = ngm.allocate(ngm.loads(TOWN), 400, efficacy=0.8)
    words = " ".join(allocation_words(found))
    even = next(rule.R0 for rule in found.rules if rule.rule == "by population")
    lost = (even - found.best.R0) / (found.R0 - found.best.R0)
    assert f"{even:.6g}, {100 * (even / found.best.R0 - 1):.4g} % more" in words
    assert f"gives away {100 * lost:.4g} % of" in words
    assert f"brings the number to 1 is {found.smallest.supply:.6g}." in words
    nothing = allocation_words(ngm.allocate(ngm.loads(TOWN), 400, efficacy=0.1))
    assert "No supply brings the number to 1. Unattainable" in nothing[-1]


def test_words_where_nothing_is_needed():
    scenario = ngm.loads(TOWN + intervention("Distance", 'matrix = "C", multiply = 0.5'))
    assert "none of it is needed" in strength_words(ngm.strength_needed(scenario, "Distance", target=50))
    assert "nobody has to be vaccinated" in coverage_words(ngm.coverage_needed(scenario, target=50))
    assert "without any supply" in allocation_words(ngm.allocate(scenario, 10, target=50))[-1]
    assert math.isfinite(ngm.coverage_needed(scenario).coverage)
