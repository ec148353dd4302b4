"""A model beside its twin in the other time: by hand, the way back, and agreement as the step goes to zero."""

from __future__ import annotations

import json
import math
from itertools import pairwise

import numpy as np
import pytest

import ngm
from ngm.__main__ import main
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.process import Process, process
from ngm.analysis.twin import twin_matrices
from tests.derivation.models import text

CONTINUOUS = text(
    [("S", False), ("E", True), ("I", True), ("R", False)],
    {"f": 0.6, "a": 0.5, "g": 0.2, "d": 0.1},
    [
        ("S", "E", "f*S*I/1000", "t"),
        ("E", "I", "a*E", "x"),
        ("I", "R", "g*I", "x"),
        ("I", "", "d*I", "x"),
    ],
    free={"S": 1000, "R": 0},
)
DISCRETE = CONTINUOUS.replace("[scenario]", '[scenario]\ntime = "discrete"')


def test_numbers_by_hand():
    # By hand: R0 = f/(g + d) both as steps and as rates; with hazards -ln(1 - e) it is f over that of the exits of I.
    found = ngm.twin(ngm.loads(DISCRETE))
    typed, shares, rates = found.versions
    assert (typed.R0, rates.R0) == pytest.approx((2, 2), rel=1e-14)
    assert shares.R0 == pytest.approx(0.6 / -math.log(0.7), rel=1e-13)
    s = max(np.roots([1, 0.8, 0.15 - 0.3]))  # (l + .5)(l + .3) = .5 * .6
    assert rates.growth_rate == pytest.approx(s, rel=1e-12)
    assert typed.growth_factor == pytest.approx(1 + s, rel=1e-12)
    stay = found.stays[1]
    assert (stay.share_leaving, stay.steps) == pytest.approx((0.3, 1 / 0.3), rel=1e-12)
    assert (stay.hazard, stay.time) == pytest.approx((-math.log(0.7), -1 / math.log(0.7)), rel=1e-12)
    # continuous first: e = 1 - exp(-h)
    typed, shares = ngm.twin(ngm.loads(CONTINUOUS)).versions
    assert shares.discrete
    assert shares.R0 == pytest.approx(0.6 / -math.expm1(-0.3), rel=1e-13)


def test_there_and_back():
    # The twin of the twin is the model: its matrices as shares give the rates back.
    events = process(decided_numbers(ngm.loads(CONTINUOUS)))
    F, V = twin_matrices(events, False)
    moves = -np.where(np.eye(2, dtype=bool), 0, V)
    back = Process(F, np.zeros((2, 2)), np.zeros((2, 2)), moves, V.sum(axis=0))
    again = twin_matrices(back, True)
    assert again[0] == pytest.approx(events.F, abs=1e-14)
    assert again[1] == pytest.approx(events.V, abs=1e-14)


def test_agreement_is_of_first_order_in_the_step():
    # Second route: theory. R0 and growth rate in steps differ from those of continuous time by a multiple of the step.
    found = decided_numbers(ngm.loads(CONTINUOUS))
    events = process(found)
    R0, r = 2.0, found.growth
    gaps = []
    for step in (0.02, 0.01, 0.005, 0.0025):
        F, V = twin_matrices(events, False, step)
        root = max(abs(np.linalg.eigvals(F @ np.linalg.inv(V))))
        factor = max(abs(np.linalg.eigvals(F + np.eye(2) - V)))
        gaps.append((abs(root - R0), abs(math.log(factor) / step - r)))
    for before, after in pairwise(gaps):
        for a, b in zip(before, after, strict=True):
            assert math.log2(a / b) == pytest.approx(1, abs=0.03)
    assert gaps[-1][0] < 0.005


def test_discrete_time_step_by_step_approaches_the_flows():
    # The same through scenario files: a daily model in steps of 1/8 day, and its continuous twin.
    rates = {"f": 0.6, "a": 0.5, "g": 0.2, "d": 0.0}
    fine = {"f": 0.6 / 8, "a": -math.expm1(-0.5 / 8), "g": -math.expm1(-0.2 / 8), "d": 0.0}
    whole = ngm.solve(ngm.loads(CONTINUOUS).with_values(**rates), limit=0)
    steps = ngm.solve(ngm.loads(DISCRETE).with_values(**fine), limit=0)
    assert steps.R0 == pytest.approx(whole.R0, rel=0.015)
    assert 8 * steps.growth_rate == pytest.approx(whole.growth_rate, rel=0.02)
    # the twin of the fine model gives the number of the flows back
    assert ngm.twin(ngm.loads(DISCRETE).with_values(**fine)).versions[1].R0 == pytest.approx(whole.R0, rel=1e-12)


def test_all_leave_in_one_step():
    found = ngm.twin(ngm.loads(DISCRETE).with_values(a=1))
    assert [v.name for v in found.versions] == ["as typed, discrete", "continuous, the same numbers as rates"]
    assert any("All members of E leave" in warning for warning in found.warnings)


def test_on_different_sides_of_one_that_is_said():
    found = ngm.twin(ngm.loads(DISCRETE).with_values(f=0.32))
    assert found.versions[0].R0 > 1 > found.versions[1].R0
    assert any("different sides of 1" in line for line in found.differ)


def test_command_line(tmp_path, capsys):
    path = tmp_path / "weekly.toml"
    path.write_text(DISCRETE.replace('time_unit = "day"', 'time_unit = "week"'))
    assert main(["twin", str(path)]) == 0
    out = capsys.readouterr().out
    for words in ("Why they differ", "Which to report", "in steps of one week", "half a step less"):
        assert words in out
    assert main(["twin", str(path), "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["discrete"] is True
    assert len(told["versions"]) == 3
    assert told["report"]
