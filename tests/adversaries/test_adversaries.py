"""Some of the random models in each run of the tests; the long run is `python -m tests.adversaries`.

Second route: F and V put together from the drawn rates, inverted and solved by mpmath in 60 digits.
"""

from __future__ import annotations

from pathlib import Path

import mpmath
import pytest

from tests.adversaries.__main__ import hunt, one
from tests.adversaries.laws import LAWS, Case
from tests.adversaries.models import KINDS, draw
from tests.fuzz.record import Record

#: Of each kind: 200 models in all.
MODELS = 25


@pytest.mark.parametrize("kind", KINDS)
def test_no_law_is_broken(kind: str) -> None:
    with_R0 = 0
    for number in range(MODELS):
        has, broken = one(kind, number)
        assert not broken, (kind, number, broken)
        with_R0 += has
    # near a V without inverse some models have none, and of the others all do
    assert with_R0 >= (MODELS // 2 if kind in ("nearly singular", "scales") else MODELS)


@pytest.mark.parametrize(("kind", "number"), [("scales", 512), ("scales", 565)])
def test_models_that_once_broke_a_law(kind: str, number: int) -> None:
    # R0 near 1e37: what leaves is a 1e-37th of what goes round, and 128 bits left a dozen digits of K
    assert one(kind, number) == (True, [])


@pytest.mark.parametrize("law", ["bounds", "numbers", "formulas", "compiled"])
def test_a_law_notices_another_truth(law: str) -> None:
    """Guards the guards: with one rate changed in the sixth digit, each of these laws is broken."""
    case = Case(draw("staged", 3))
    with mpmath.workdps(60):
        case.K = case.K * (1 + mpmath.mpf(10) ** -6)
        case.R0 = case.R0 * (1 + mpmath.mpf(10) ** -6)
    with pytest.raises(AssertionError):
        LAWS[law](case)


def test_runs_go_on_where_the_last_ended(tmp_path: Path) -> None:
    hunt("plain", 2, tmp_path)
    hunt("plain", 3, tmp_path)
    hunt("plain", 3, tmp_path)
    assert Record("plain", tmp_path).save()["executions"] == 3


def test_a_number_stands_for_one_model() -> None:
    assert draw("cyclic", 5).scenario_text == draw("cyclic", 5).scenario_text
    assert draw("cyclic", 5).scenario_text != draw("cyclic", 6).scenario_text
