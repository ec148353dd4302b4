"""R0 at the ends of ranges and over a plane, against closed forms by hand; a wanted growth rate."""

from __future__ import annotations

from math import exp, hypot, log
from pathlib import Path

import pytest

import ngm
from tests.derivation.models import text

ROOT = Path(__file__).parents[2]
#: R0 = beta/gamma, growth rate beta - gamma, by hand; per capita, S = 1.
SIR = text(
    [("S", False), ("I", True)],
    {"beta": 0.5, "gamma": 0.2},
    [("S", "I", "beta*S*I", "t"), ("I", "", "gamma*I", "x")],
    free={"S": 1},
)
RANGED = SIR.replace("beta = { value = 0.5 }", "beta = { value = 0.5, range = [0.1, 0.9] }")
#: R0 = b (p/g1 + (1 - p)/g2), by hand: p beyond 1 has no model.
SHARED = text(
    [("S", False), ("A", True), ("B", True)],
    {"b": 0.5, "p": 0.7, "q": 0, "g1": 0.25, "g2": 0.1},
    [
        ("S", "A", "p*b*S*(A + B)", "t"),
        ("S", "B", "q*b*S*(A + B)", "t"),
        ("A", "", "g1*A", "x"),
        ("B", "", "g2*B", "x"),
    ],
    free={"S": 1},
).replace("q = { value = 0 }", 'q = { value = "1 - p" }')


def test_swings_over_ranges_and_a_tenth() -> None:
    found = ngm.swings(ngm.loads(RANGED))
    assert found.R0 == pytest.approx(2.5, rel=1e-12)
    (swing,) = found.ranges
    assert (swing.parameter, swing.low, swing.high) == ("beta", 0.1, 0.9)
    assert (swing.R0_low, swing.R0_high) == pytest.approx((0.5, 4.5), rel=1e-12)
    tenth = {one.parameter: (one.R0_low, one.R0_high) for one in found.tenth}
    assert tenth["beta"] == pytest.approx((2.25, 2.75), rel=1e-12)
    assert tenth["gamma"] == pytest.approx((0.5 / 0.18, 0.5 / 0.22), rel=1e-12)
    # The wider one first: 0.505 against 0.5.
    assert [one.parameter for one in found.tenth] == ["gamma", "beta"]
    assert found.missing == {}


def test_a_distribution_without_a_range_goes_over_its_central_95_percent() -> None:
    """By hand: a log-normal's 2.5 % and 97.5 % points are median exp(-/+ 1.959963985 s)."""
    model = SIR.replace(
        "gamma = { value = 0.2 }",
        'gamma = { value = 0.2, range = [0.2, 0.2], distribution = { name = "lognormal", mean = 0.2, sd = 0.05 } }',
    ).replace("range = [0.2, 0.2], ", "")
    (swing,) = ngm.swings(ngm.loads(model)).ranges
    s2 = log(1 + (0.05 / 0.2) ** 2)
    median = 0.2 * exp(-s2 / 2)
    assert swing.low == pytest.approx(median * exp(-1.959963984540054 * s2**0.5), rel=1e-9)
    assert swing.R0_low == pytest.approx(0.5 / swing.low, rel=1e-12)


def test_a_value_outside_its_domain_is_counted_and_the_others_stand() -> None:
    """By hand: p = 0.95 and 10 % more is beyond 1, where q = 1 - p would be negative."""
    found = ngm.swings(ngm.loads(SHARED.replace("p = { value = 0.7 }", "p = { value = 0.95 }")))
    p = next(one for one in found.tenth if one.parameter == "p")
    assert p.R0_high is None
    assert p.R0_low == pytest.approx(0.5 * (0.855 / 0.25 + 0.145 / 0.1), rel=1e-12)
    assert sum(found.missing.values()) == 1
    assert any("q" in why for why in found.missing)
    assert "q" not in {one.parameter for one in found.tenth}  # it follows p


def test_groups_move_together_and_one_by_one() -> None:
    """Second route: `solve` with the changed values."""
    scenario = ngm.load(ROOT / "scenarios" / "age-groups-ember-cough.toml")
    found = ngm.swings(scenario)
    sigma = next(one for one in found.tenth if one.parameter == "sigma")
    # By hand: the susceptibilities of all groups are a factor on K.
    assert sigma.unit == ""
    assert (sigma.low, sigma.high) == (0.9, 1.1)
    assert (sigma.R0_low, sigma.R0_high) == pytest.approx((0.9 * found.R0, 1.1 * found.R0), rel=1e-12)
    q = next(one for one in found.ranges if one.parameter == "q")
    assert q.R0_high == pytest.approx(ngm.solve(scenario.with_values(q=q.high), limit=0).R0, rel=1e-12)


def test_the_plane_and_its_line_at_one() -> None:
    """By hand: R0 = beta/gamma, and its line at a level L is beta = L gamma, straight."""
    found = ngm.plane(ngm.loads(RANGED), "beta", "gamma", levels=(1.0, 2.0), side=21)
    assert found.x.values[0] == 0.1
    assert found.x.values[-1] == 0.9
    assert found.y.values[-1] == pytest.approx(0.4)  # no range: from 0 to twice the value
    assert found.now == pytest.approx(2.5, rel=1e-12)
    for y, row in zip(found.y.values, found.R0, strict=True):
        for x, R0 in zip(found.x.values, row, strict=True):
            if y == 0:
                assert R0 is None  # nobody ever recovers
            else:
                assert R0 == pytest.approx(x / y, rel=1e-12)
    assert sum(found.missing.values()) == 21
    for level, pieces in found.lines:
        assert len(pieces) > 5
        for piece in pieces:
            for x, y in piece:
                # Taken as linear over a step h = 0.02 upward, 1/y is off by at most (h/y)^2/4 of itself.
                assert x / y == pytest.approx(level, rel=(0.02 / (y - 0.02)) ** 2 / 4 + 1e-12)
    one = dict(found.lines)[1.0]
    ends = [point for piece in one for point in piece]
    assert hypot(*max(ends)) > 0.5  # it reaches across the plane: to (0.4, 0.4)
    frame = found.to_frame()
    assert list(frame.columns) == ["beta", "gamma", "R0"]
    assert len(frame) == 441


def test_the_line_lies_closer_on_a_finer_grid() -> None:
    def gap(side: int) -> float:
        ((_, pieces),) = ngm.plane(ngm.loads(RANGED), "beta", "gamma", levels=(1.7,), side=side).lines
        return max(abs(x / y / 1.7 - 1) for piece in pieces for x, y in piece if y > 0.1)

    assert gap(81) < gap(21) / 8  # second order in the step


def test_a_plane_beyond_a_domain_has_gaps_and_says_why() -> None:
    found = ngm.plane(ngm.loads(SHARED), "p", "b", side=9)
    assert [R0 is None for R0 in found.R0[4]] == [p > 1 for p in found.x.values]
    assert sum(found.missing.values()) == 9 * sum(p > 1 for p in found.x.values)


def test_planes_of_groups_and_of_contacts() -> None:
    """Second route: `mixing` with a factor, and `solve`."""
    scenario = ngm.load(ROOT / "scenarios" / "age-groups-ember-cough.toml")
    found = ngm.plane(scenario, "sigma[5-17]", "gamma", side=3, ranges=((0.0, 1.0), (0.1, 0.4)))
    assert found.x.title == "sigma[5-17]"
    # By hand: only recovery ends infectiousness there, so R0 is in proportion to 1/gamma.
    assert found.R0[0][1] == pytest.approx(found.R0[1][1] * 0.25 / 0.1, rel=1e-12)
    assert found.R0[0][0] < found.R0[0][1] < found.R0[0][2]
    contacts = ngm.plane(scenario, ("factor", "contacts"), "q", side=3, ranges=((0.0, 1.0), (2.0, 4.0)))
    half = ngm.mixing(scenario, "contacts", factors={"contacts": 0.5})
    case = next(case for case in half.cases if case.name == "with these factors")
    # q is a factor on K: 3 % in the middle of the axis, 2.8 % in the scenario.
    assert contacts.R0[1][1] == pytest.approx(case.R0 * 3 / 2.8, rel=1e-9)
    mixed = ngm.plane(scenario, ("assortativity", "contacts"), "q", side=3, levels=(1.5,))
    assert mixed.now == pytest.approx(ngm.solve(scenario, limit=0).R0, rel=1e-9)


@pytest.mark.parametrize(
    ("x", "y", "more", "told"),
    [
        ("beta", "beta", {}, "both axes are the same quantity"),
        ("bata", "gamma", {}, "'bata' is no parameter of this scenario. Did you mean 'beta'?"),
        ("beta", "gamma", {"levels": (0.0,)}, "0 is no value of R0"),
        ("beta", "gamma", {"side": 1}, "expected 2 to 401"),
        ("beta", "gamma", {"ranges": ((0.5, 0.1), None)}, "from 0.5 to 0.1 is no range"),
        ("beta", "gamma", {"ranges": ((-1.0, 0.1), None)}, "from -1 to 0.1 is no range"),
    ],
)
def test_questions_that_are_none(x: str, y: str, more: dict, told: str) -> None:
    with pytest.raises(ngm.ScenarioError, match=told.replace("?", r"\?")):
        ngm.plane(ngm.loads(SIR), x, y, **more)


def test_what_follows_others_is_no_axis() -> None:
    with pytest.raises(ngm.ScenarioError, match="q follows other parameters"):
        ngm.plane(ngm.loads(SHARED), "q", "b")
    scenario = ngm.load(ROOT / "scenarios" / "age-groups-ember-cough.toml")
    with pytest.raises(ngm.ScenarioError, match="both axes move"):
        ngm.plane(scenario, "sigma", "sigma[65+]")


def test_a_value_for_a_wanted_growth_rate() -> None:
    """By hand: r = beta - gamma, so beta = 0.2 + 0.15, and R0 = 0.35/0.2."""
    found = ngm.calibrate(ngm.loads(SIR), "beta", growth_rate=0.15)
    assert found.value == pytest.approx(0.35, rel=1e-12)
    assert found.R0 == pytest.approx(1.75, rel=1e-12)
    assert found.growth_rate == 0.15
    assert found.to_json()["growth_rate"] == 0.15
    assert ngm.calibrate(ngm.loads(SIR), "beta", growth_rate=-0.1).value == pytest.approx(0.1, rel=1e-12)
    with pytest.raises(ngm.ScenarioError, match=r"growth rate goes from -0\.1 to 0\.7"):
        ngm.calibrate(ngm.loads(RANGED), "beta", growth_rate=2.0)
    with pytest.raises(ngm.ScenarioError, match="one of the two"):
        ngm.calibrate(ngm.loads(SIR), "beta", 2.0, growth_rate=0.1)
    assert "growth_rate" not in ngm.calibrate(ngm.loads(SIR), "beta", 2.0).to_json()
