"""Two people sign in on a server that is set up for it; neither is shown the other's drafts."""

from __future__ import annotations

import pytest
from playwright.sync_api import expect

from ngm.drafts import Store
from tests.browser.provider import Provider
from tests.browser.server import Server
from tests.browser.visit import PATIENCE, Visit


@pytest.fixture
def guarded(tmp_path):
    provider = Provider()
    server = Server(tmp_path)
    secrets = tmp_path / "secrets.toml"
    secrets.write_text(provider.secrets(server.url), encoding="utf-8")
    server.options = ["--secrets.files", str(secrets)]
    server.start()
    yield provider, server
    server.stop()
    provider.stop()


def signed_in(context, provider, server, person):
    provider.person = person
    visit = Visit(context.new_page(), server.url)
    visit.page.goto(server.url)
    expect(visit.page.get_by_test_id("stSidebarNav")).to_have_count(0)
    visit.button("Sign in").click()
    expect(visit.page.get_by_text(f"Signed in as {person['name']}.")).to_be_visible(timeout=PATIENCE)
    return visit


def test_what_one_makes_is_shown_to_nobody_else(context, guarded):
    provider, server = guarded
    browser = context.browser
    first = browser.new_context()
    ada = signed_in(first, provider, server, {"sub": "1", "name": "Ada", "email": "ada@example.org"})
    ada.button("With S, I and R to begin with").click()
    ada.stored_as(1)
    made = ada.draft()
    assert Store(server.drafts).get(made).owner == f"{provider.url}|1"
    ada.go("Versions")
    expect(ada.page.get_by_role("heading", name="Your drafts")).to_be_visible()
    second = browser.new_context()
    ben = signed_in(second, provider, server, {"sub": "2", "name": "Ben", "email": "ada@example.org"})
    ben.button("Quite empty").click()
    ben.stored_as(1)
    ben.go("Versions")
    expect(ben.page.get_by_role("heading", name="Your drafts")).to_be_visible()
    assert made not in ben.page.content()
    # Who is signed out is shown nothing, also not by the address of a draft.
    ada.button("Sign out").click()
    expect(ada.button("Sign in")).to_be_visible(timeout=PATIENCE)
    ada.page.goto(f"{server.url}/?draft={made}")
    expect(ada.button("Sign in")).to_be_visible(timeout=PATIENCE)
    expect(ada.page.get_by_text("Open: ")).to_have_count(0)
    first.close()
    second.close()
