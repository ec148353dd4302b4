"""Nothing is lost: refresh, new tab, killed server, two tabs on one draft."""

from __future__ import annotations

import pytest
from playwright.sync_api import expect

from tests.browser.visit import PATIENCE
from tests.screens.texts import SIR


def title(text: str) -> str:
    return SIR.replace('"Plain"', f'"{text}"')


def test_a_refresh_and_a_new_tab_bring_back_the_last_edit(tab):
    first = tab()
    first.start()
    first.type_text(SIR)
    first.stored_as(2)
    first.page.reload()
    expect(first.source()).to_have_value(SIR, timeout=PATIENCE)
    first.R0_is("2.5")
    draft = first.draft()
    first.go("Model")  # the menu drops what the address says; the page puts it back
    assert first.draft() == draft
    first.page.reload()
    first.R0_is("2.5")
    second = tab()
    second.open("numbers", draft)
    second.R0_is("2.5")


def test_an_address_that_leads_nowhere_is_told(visit):
    visit.open("", "nowhere")
    expect(visit.page.get_by_text("There is no draft at this address here")).to_be_visible()


def test_the_server_is_killed_in_the_middle_of_the_work(visit, server):
    visit.start()
    visit.type_text(SIR)
    visit.stored_as(2)
    visit.go("Model")
    visit.cell("Parameters", 0, 2, "0.8")
    visit.R0_is("4")
    visit.stored_as(3)
    server.kill()
    visit.page.wait_for_timeout(500)
    server.start()
    visit.complaints = [c for c in visit.complaints if not c.startswith("console")]  # it could not reach the server
    visit.R0_is("4")
    # The tab finds the server again by itself, and the next edits count: one in a table, one on another page.
    expect(visit.page.get_by_test_id("stConnectionStatus")).to_have_count(0, timeout=PATIENCE)
    visit.page.wait_for_timeout(4000)
    visit.settled()
    visit.cell("Parameters", 1, 2, "0.4")
    visit.R0_is("2")
    visit.stored_as(4)
    visit.go("Scenario")
    visit.field("Title").fill("After the kill")
    visit.field("Title").press("Enter")
    visit.stored_as(5)
    visit.page.reload()
    expect(visit.field("Title")).to_have_value("After the kill", timeout=PATIENCE)
    assert "value = 0.8" in visit.source().input_value()
    visit.complaints = [c for c in visit.complaints if not c.startswith("console")]


def test_rows_added_before_a_kill_are_there_once(visit, server):
    visit.start()
    visit.go("Model")
    visit.add_row("Compartments", 3, ["E"])
    visit.settled()
    server.kill()
    server.start()
    expect(visit.page.get_by_test_id("stConnectionStatus")).to_have_count(0, timeout=PATIENCE)
    visit.page.wait_for_timeout(4000)
    visit.settled()
    visit.cell("Compartments", 0, 2, "Susceptibles")
    visit.go("Scenario")
    text = visit.source().input_value()
    assert text.count("E = {") == 1
    assert "Susceptibles" in text
    visit.complaints = [c for c in visit.complaints if not c.startswith("console")]


def test_two_tabs_on_one_draft_and_both_changes_are_put_together(tab):
    first, second = tab(), tab()
    first.start()
    first.type_text(SIR)
    first.stored_as(2)
    second.open("", first.draft())
    expect(second.source()).to_have_value(SIR)
    first.field("Title").fill("Theirs")
    first.field("Title").press("Enter")
    first.stored_as(3)
    second.type_text(SIR.replace("value = 0.5", "value = 0.8"))
    expect(second.page.get_by_text("changed in another tab or by somebody else (their version 3)")).to_be_visible()
    expect(second.page.get_by_test_id("stCode")).to_contain_text('-title = "Theirs"')
    second.button("Put both together").click()
    second.R0_is("4")
    expect(second.field("Title")).to_have_value("Theirs")
    # The first tab is told too, and does not change under the hands of its visitor.
    expect(first.page.get_by_text("Changed in another tab")).to_be_visible(timeout=PATIENCE)
    first.R0_is("2.5")
    first.button("Show what is there now").click()
    first.R0_is("4")


@pytest.mark.parametrize(("choice", "value"), [("Go on with theirs", "4"), ("Go on with yours", "2")])
def test_two_tabs_change_the_same_line(tab, choice, value):
    first, second = tab(), tab()
    first.start()
    first.type_text(SIR)
    first.stored_as(2)
    second.open("", first.draft())
    expect(second.source()).to_have_value(SIR)
    first.type_text(SIR.replace("value = 0.5", "value = 0.8"))
    first.R0_is("4")
    second.type_text(SIR.replace("value = 0.5", "value = 0.4"))
    expect(second.button("Put both together")).to_be_disabled()
    second.button(choice).click()
    second.R0_is(value)
    expect(second.button(choice)).to_have_count(0)
    second.go("Versions")  # the other one is there still
    second.page.get_by_role("combobox").first.click()
    expect(second.page.get_by_role("option")).to_have_count(3)


def test_a_lost_connection_comes_back_and_edits_count_again(visit):
    lines = []
    reachable = True

    def through(line):
        if not reachable:
            line.close()
            return
        lines.append((line, line.connect_to_server()))

    visit.page.route_web_socket("**/_stcore/stream", through)
    visit.start()
    visit.type_text(SIR)
    visit.stored_as(2)
    visit.go("Model")
    # The server goes on; only this browser cannot reach it: what is open is cut, and what is tried meanwhile fails.
    reachable = False
    for line, server in lines:
        server.close()
        line.close()
    expect(visit.page.get_by_test_id("stConnectionStatus")).to_be_visible(timeout=PATIENCE)
    visit.page.wait_for_timeout(1500)
    reachable = True
    expect(visit.page.get_by_test_id("stConnectionStatus")).to_have_count(0, timeout=PATIENCE)
    visit.page.wait_for_timeout(4000)
    visit.settled()
    assert len(lines) > 1
    visit.cell("Parameters", 0, 2, "0.8")
    visit.R0_is("4")
    visit.stored_as(3)
    visit.complaints = [c for c in visit.complaints if not c.startswith("console")]  # it could not reach the server
