"""The page on sensitivity, without a browser: its states, and the way of an analyst with joint draws."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.screens.state import AppState, Version
from tests.screens.test_pages import metrics, start, text_of, visit, words
from tests.screens.texts import NO_R0, SIR, grouped

RANGED = SIR.replace(
    'beta = { value = 0.5, unit = "1/day" }', 'beta = { value = 0.5, unit = "1/day", range = [0.1, 0.9] }'
).replace('gamma = { value = 0.2, unit = "1/day" }', 'gamma = { value = 0.2, unit = "1/day", range = [0.1, 0.3] }')


def page(text=RANGED):
    return start(AppState(now=Version(text, "test.toml", None, text)), "sensitivity")


def success(at):
    return "\n".join(one.value for one in at.success)


def button(at, label):
    return next(one for one in at.button if one.label == label)


def cells(at, heads):
    """Return the rows of the plain table whose columns are these."""
    return next(t.value.values.tolist() for t in at.table if list(t.value.columns)[: len(heads)] == heads)


def joint(count=10_000, seed=3):
    """Return joint draws of beta and gamma that go together."""
    rng = np.random.default_rng(seed)
    z = rng.standard_normal((2, count))
    return 0.5 * np.exp(0.3 * z[0]), 0.3 * np.exp(0.2 * (0.6 * z[0] + 0.8 * z[1]))


def csv_of(beta, gamma):
    lines = ["beta,gamma", *(f"{b!r},{g!r}" for b, g in zip(beta.tolist(), gamma.tolist(), strict=True))]
    return "\n".join(lines).encode()


def test_indices_and_ends_stand_there_at_once():
    at = page()
    assert not at.exception
    # By hand: R0 = beta/gamma: elasticities 1 and -1; ends beta 0.1 -> 0.5, 0.9 -> 4.5.
    found = {row[0]: row for row in cells(at, ["parameter", "value"])}
    assert found["beta"][3] == "1"
    assert found["gamma"][3] == r"\-1"
    ends = {row[0]: row[4:] for row in cells(at, ["parameter", "lower end"])}
    assert ends["beta"] == [r"0\.5", r"4\.5"]
    assert ends["gamma"] == ["5", r"1\.667"]
    at.radio(key="sensitivity.over").set_value("over 10 % less and more").run()
    ends = {row[0]: row[4:] for row in cells(at, ["parameter", "lower end"])}
    assert ends["beta"] == [r"2\.25", r"2\.75"]


def test_draws_come_on_a_button_and_stay():
    at = page()
    assert "P(R0 > 1)" not in metrics(at)
    at.text_input(key="sensitivity.draws").set_value("4000").run()
    button(at, "Draw").click().run()
    assert not at.exception
    # By hand: beta in (0.1, 0.9), gamma in (0.1, 0.3), independent and uniform: P(beta > gamma) = 1 - E[gamma - 0.1]/0.8.
    assert float(metrics(at)["P(R0 > 1)"]) == pytest.approx(0.875, abs=0.01)
    rows = {row[0]: row for row in cells(at, ["parameter", "rank correlation"])}
    assert float(rows["beta"][1].replace("\\", "")) > 0.9
    assert float(rows["gamma"][1].replace("\\", "")) < -0.8
    assert "draws, latin hypercube of 4,000, seed 1" in words(at).replace("\\", "")
    visit(at, "numbers")
    visit(at, "sensitivity")
    assert "P(R0 > 1)" in metrics(at)
    at.text_input(key="sensitivity.seed").set_value("2").run()
    assert "P(R0 > 1)" not in metrics(at)
    assert "press the button" in words(at)


@pytest.mark.parametrize(
    ("field", "typed", "told"),
    [
        ("draws", "many", "is no number"),
        ("draws", "0", "expected a whole number from 1"),
        ("draws", "2.5", "not 2.5"),
        ("draws", "300000", "to 200,000"),
        ("seed", "-1", "expected a whole number from 0"),
    ],
)
def test_wrong_entries_are_told(field, typed, told):
    at = page()
    at.text_input(key=f"sensitivity.{field}").set_value(typed).run()
    assert told in words(at).replace("\\", "")
    assert not at.exception


def test_nothing_to_draw_is_told():
    at = page(SIR)
    button(at, "Draw").click().run()
    assert "no parameter has a range or a distribution" in words(at)


def test_the_way_of_an_analyst():
    """10,000 joint draws, distribution, P, ranking, plane, and beta for R0 = 2.4."""
    beta, gamma = joint()
    at = page()
    at.radio(key="sensitivity.source").set_value("from a file of joint draws").run()
    at.file_uploader(key="sensitivity.file").set_value(("draws.csv", csv_of(beta, gamma), "text/csv")).run()
    assert not at.exception
    # Second route: R0 = beta/gamma on the arrays themselves.
    R0 = beta / gamma
    assert float(metrics(at)["P(R0 > 1)"]) == pytest.approx(np.mean(R0 > 1), abs=5e-5)
    assert float(metrics(at)["R0, median of the draws"]) == pytest.approx(np.quantile(R0, 0.5), rel=1e-3)
    assert "10,000 draws" in words(at).replace("\\", "")
    rows = cells(at, ["parameter", "rank correlation"])
    assert {row[0] for row in rows} == {"beta", "gamma"}
    # It is still there after another page was looked at, where the field for the file is empty.
    visit(at, "numbers")
    visit(at, "sensitivity")
    assert "P(R0 > 1)" in metrics(at)
    # The plane: by hand, the line at 1 is beta = gamma.
    assert at.selectbox(key="sensitivity.across").value == "beta"
    assert "on its orange side" in words(at)
    at.text_input(key="sensitivity.levels").set_value("1 2 100").run()
    assert "No line at 100" in words(at)
    # By hand: beta = 2.4 * 0.2.
    at.text_input(key="sensitivity.value.R0").set_value("2.4").run()
    button(at, "Find the value").click().run()
    assert r"**beta = 0\.48 1\/day**" in success(at)
    button(at, "Take over beta = 0\\.48 into the scenario").click().run()
    assert "value = 0.48" in text_of(at)
    assert metrics(at)["R0: basic reproduction number"] == "2.4"
    assert not at.exception


def test_a_file_that_is_wrong_is_told_with_row_and_column():
    at = page()
    at.radio(key="sensitivity.source").set_value("from a file of joint draws").run()
    content = b"beta,gama\n0.5,0.2\n0.5,0.3\n"
    at.file_uploader(key="sensitivity.file").set_value(("draws.csv", content, "text/csv")).run()
    assert "Did you mean" in words(at)
    content = b"beta,gamma\n0.5,0.2\nx,0.3\n"
    at.file_uploader(key="sensitivity.file").set_value(("draws.csv", content, "text/csv")).run()
    assert "row 3" in words(at)
    assert "is no number" in words(at)
    assert not at.exception


def test_draws_in_a_parquet_file(tmp_path):
    import pandas

    beta, gamma = joint(500)
    path = tmp_path / "draws.parquet"
    pandas.DataFrame({"beta": beta, "gamma": gamma}).to_parquet(path)
    at = page()
    at.radio(key="sensitivity.source").set_value("from a file of joint draws").run()
    at.file_uploader(key="sensitivity.file").set_value(("draws.parquet", path.read_bytes(), "")).run()
    assert float(metrics(at)["P(R0 > 1)"]) == pytest.approx(np.mean(beta / gamma > 1), abs=5e-4)


def test_a_wanted_growth_rate_and_one_out_of_reach():
    at = page()
    at.selectbox(key="sensitivity.wanted").set_value("growth rate").run()
    at.text_input(key="sensitivity.value.growth rate").set_value("0.1").run()
    button(at, "Find the value").click().run()
    # By hand: r = beta - gamma, so beta = 0.3 and R0 = 1.5.
    assert r"**beta = 0\.3 1\/day**" in success(at)
    assert r"R0 = 1\.5" in success(at)
    at.text_input(key="sensitivity.value.growth rate").set_value("5").run()
    button(at, "Find the value").click().run()
    assert "is not attained" in words(at)


def test_contacts_on_an_axis_wait_for_the_button():
    at = page(grouped(4))
    names = at.selectbox(key="sensitivity.across").options
    factor = next(name for name in names if name.startswith("factor on "))
    at.selectbox(key="sensitivity.upward").set_value(factor).run()
    button(at, "Draw this plane (some seconds)").click().run()
    assert not at.exception
    assert "R0 = 1" in words(at) or "does not pass 1" in words(at)


def test_a_scenario_without_R0_can_still_be_calibrated():
    at = page(NO_R0)
    assert not at.exception
    assert "No R0" in words(at)
    assert any(one.label == "Find the value" for one in at.button)
