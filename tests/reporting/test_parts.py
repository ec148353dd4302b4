"""Parts that contradict, compare or share: the numbers are known by hand, and each is where its name says."""

from __future__ import annotations

import json
import re

import pytest

import ngm
from ngm.errors import NgmError
from ngm.reporting.make import compose
from ngm.reporting.numbers import lookup
from tests.reporting import examples
from tests.reporting.test_document import words


def named(report):
    """Return the numbers by name; each is also where its name says."""
    tree = json.loads(report.companion_text())
    found = {}
    for _, item in report.document.numbers():
        assert lookup(tree, item.name) == item.value, item.name
        found[item.name] = item.value
    return found


def part(report, key):
    return next(section for section in report.document.sections if section.key == key)


def test_mean_stays():
    report = compose(examples.plain(), sections=["units"])
    found = named(report)
    # By hand: out of I at gamma + mu = 0.2 + 0.1, two thirds by recovery; out of S at mu = 0.1.
    index = next(k for k, stay in enumerate(report.companion["units"]["stays"]) if stay["compartment"] == "I")
    assert found[f"units.stays[{index}].mean"] == pytest.approx(1 / 0.3, rel=1e-12)
    assert found[f"units.stays[{index}].exits[0].probability"] == pytest.approx(2 / 3, rel=1e-12)
    assert "The units fit" in words(report.document, "units")


def test_units_that_do_not_fit_are_listed():
    scenario = ngm.loads(examples.plain().text.replace('unit = "1/day" }\nbirths', 'unit = "person" }\nbirths'))
    told = words(compose(scenario, sections=["units"]).document, "units")
    assert "What does not fit" in told
    assert "flow 3" in told


def test_groups_alike_share_a_line():
    told = words(compose(examples.halves(), sections=["units"]).document, "units")
    assert told.count(" and 1 other groups") == 3
    assert named(compose(examples.halves(), sections=["units"]))["units.stays[0].mean"] == pytest.approx(5, rel=1e-12)


def test_splits_agree_on_the_host():
    report = compose(examples.shipped("waterborne"), sections=["splits"])
    found = named(report)
    assert report.companion["splits"] == json.loads(json.dumps(ngm.splits(examples.shipped("waterborne")).to_json()))
    hosts = [value for name, value in found.items() if ".hosts" in name]
    # The type number of the host is the same whether shedding counts as infection or not: what the two agree on.
    assert len(hosts) == 2
    assert hosts[0] == pytest.approx(hosts[1], rel=1e-12)
    assert found["splits.splits[0].R0"] != pytest.approx(found["splits.splits[1].R0"], rel=1e-3)
    told = words(report.document, "splits")
    assert "Not to be compared between models that split differently: R0." in told
    assert "growth rate" in told


def test_no_choice_no_splits():
    section = part(compose(examples.shipped("vaccination")), "splits")
    assert (section.status, section.blocks) == ("absent", ())
    assert "no flow's kind is a choice" in section.why


def test_a_formula_that_is_right_and_one_that_is_not():
    right = compose(examples.plain(), sections=["formula"], formula="beta / (gamma + mu)")
    assert right.companion["formula"]["verdict"] == "equal"
    assert "Verdict: equal" in words(right.document, "formula")
    wrong = compose(examples.plain(), sections=["formula"], formula="beta / gamma")
    found = named(wrong)
    assert "Verdict: different" in words(wrong.document, "formula")
    there = {
        name.removeprefix('formula.counterexample["').removesuffix('"]'): value
        for name, value in found.items()
        if "counterexample" in name
    }
    # By hand, at the point that it names: beta/(gamma + mu) and beta/gamma.
    assert found["formula.R0_there"] == pytest.approx(there["beta"] / (there["gamma"] + there["mu"]), rel=1e-12)
    assert found["formula.formula_there"] == pytest.approx(there["beta"] / there["gamma"], rel=1e-12)


def test_a_formula_that_cannot_be_read_is_refused():
    with pytest.raises(NgmError, match="bata"):
        compose(examples.plain(), formula="bata / gamma")
    assert part(compose(examples.plain()), "formula").why == "not computed: no formula was given"


def test_what_differs_from_another_version():
    before = ngm.loads(examples.plain().text.replace("beta = { value = 0.5", "beta = { value = 0.4"))
    report = compose(examples.plain(), sections=["difference"], before=before)
    found = named(report)
    # By hand: R0 from 4/3 to 5/3, all of it by beta; F moves by 0.1.
    assert found["difference.R0[0]"] == pytest.approx(4 / 3, rel=1e-12)
    assert found["difference.R0[1]"] == pytest.approx(5 / 3, rel=1e-12)
    assert found["difference.contributions[0].in_order"] == pytest.approx(1 / 3, rel=1e-12)
    assert "beta" in words(report.document, "difference")


def test_the_balance_of_contacts():
    report = compose(examples.halves("[[8, 4], [2, 6]]", "[300, 700]"), sections=["groups"])
    found = named(report)
    # By hand: left counts 4 * 300 = 1200 meetings with right, right counts 2 * 700 = 1400 with left; their mean is 1300.
    assert found['report.matrices["C"].breach[0].largest'] == pytest.approx(200 / 1300, rel=1e-12)
    assert found['report.matrices["C"].values[0][0][1]'] == 4
    assert found['report.matrices["C"].balanced[0][0][1]'] == pytest.approx(1300 / 300, rel=1e-12)
    assert found['report.matrices["C"].balanced[0][1][0]'] == pytest.approx(1300 / 700, rel=1e-12)
    assert found['report.matrices["C"].balanced_row_sums[0][0]'] == pytest.approx(8 + 1300 / 300, rel=1e-12)
    told = words(report.document, "groups")
    assert "what right counts with left more than the other way" in told
    assert "C′: balanced, as it is used" in told


def test_a_balance_that_holds_is_said():
    assert "there is no breach" in words(compose(examples.halves(), sections=["groups"]).document, "groups")


def test_the_smallest_supply_is_shared_where_none_was_given():
    report = compose(examples.halves(), sections=["allocation"])
    found = named(report)
    # By hand: all meet alike and R0 = 2, so half of the 1,000 people, whoever they are.
    assert found["allocate.supply"] == pytest.approx(500, rel=1e-6)
    assert found["allocate.best.R0"] == pytest.approx(1, rel=1e-6)
    assert "No supply was given" in words(report.document, "allocation")


def test_a_supply_that_was_given():
    report = compose(examples.halves(), sections=["allocation"], supply=250, sharing={"efficacy": 0.8})
    found = named(report)
    # By hand: 250 * 0.8 of 1,000 are protected: 2 * (1 - 0.2); the smallest that is enough: 500 / 0.8.
    assert found["allocate.best.R0"] == pytest.approx(1.6, rel=1e-9)
    assert found["allocate.smallest.supply"] == pytest.approx(625, rel=1e-6)
    expected = ngm.allocate(examples.halves(), 250, efficacy=0.8).to_json()
    assert report.companion["allocate"] == json.loads(json.dumps(expected))


def test_without_groups_no_supply_is_shared_unless_asked_for():
    assert part(compose(examples.plain()), "allocation").why == "not computed: no supply was given"
    with pytest.raises(NgmError, match="supply"):
        compose(examples.halves(), sections=["allocation"], supply=-1)


def test_the_derivation_product_by_product():
    told = words(compose(examples.shipped("vector-borne"), sections=["next_generation"]).document, "next_generation")
    told = re.sub(r"\\mathrm|[{}]", "", told)
    # By hand: a person is infected by a midge in its infectious stage alone, and the other way round.
    assert "F[E_h, I_v] × stay in I_v of one who enters at E_v" in told
    assert "F[E_v, I_h] × stay in I_h of one who enters at E_h" in told


def test_a_type_number_that_is_the_number_per_cycle_is_said_to_be():
    told = words(compose(examples.shipped("vector-borne"), sections=["control"]).document, "control")
    assert "alone is R0 per cycle" in told
    assert "alone is R0 per cycle" not in words(compose(examples.plain(), sections=["control"]).document, "control")


def test_a_value_that_follows_others_is_no_missing_source():
    section = part(compose(examples.shipped("vector-borne")), "parameters")
    assert (section.status, section.why) == ("present", "")
