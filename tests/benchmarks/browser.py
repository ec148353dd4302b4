"""The app in a real browser: an edit until the new R0 is on the screen, a cold start, twenty people at once.

Times are taken inside the page, by its own clock, from the key that ends an entry to the frame that shows the new number. Of
twenty visitors one is a browser; the others speak to the server as a browser does, without drawing anything, so that what
is measured is the server and not nineteen browsers on the same machine.
"""

from __future__ import annotations

import asyncio
import os
import statistics
import tempfile
import time
from pathlib import Path

import numpy as np
import psutil
from playwright.sync_api import Page, sync_playwright
from streamlit.proto.BackMsg_pb2 import BackMsg
from streamlit.proto.ForwardMsg_pb2 import ForwardMsg
from websockets.asyncio.client import ClientConnection, connect

from ngm.charts.style import short
from ngm.drafts import Store
from tests.browser.conftest import CHROMIUM, OPTIONS
from tests.browser.server import Server
from tests.browser.visit import Visit
from tests.screens.texts import grouped

__all__ = ["rows"]

Row = tuple[str, str, str]

#: Two infected compartments in five groups: ten infected states; R0 = beta, by hand.
TEN = grouped(5)
EDITS = 40
VISITORS = 20
SECONDS = 30

#: Notes when the key that ends an entry goes down, and when R0 is on the screen as told in `window.wanted`.
WATCH = """() => {
    window.began = window.seen = null;
    document.addEventListener('keydown', e => { if (e.key === 'Enter') { window.began = performance.now(); } }, true);
    const look = () => {
        if (window.began === null || window.seen !== null) return;
        const shown = document.querySelector('[data-testid="stMetricValue"]');
        if (shown && shown.innerText.trim() === window.wanted) {
            requestAnimationFrame(() => { window.seen ??= performance.now(); });
        }
    };
    new MutationObserver(look).observe(document.body, {subtree: true, childList: true, characterData: true});
}"""


def edited(page: Page, value: str) -> float:
    """Type another value into the selected cell; return the milliseconds until R0 is that."""
    page.keyboard.press("Enter")
    page.locator("#portal .gdg-input").fill(value)
    page.evaluate("wanted => { window.wanted = wanted; window.began = window.seen = null; }", value)
    page.keyboard.press("Enter")
    page.wait_for_function("() => window.seen !== null")
    taken = float(page.evaluate("() => window.seen - window.began"))
    page.keyboard.press("ArrowUp")
    page.wait_for_timeout(300)
    return taken


def at_the_rate(page: Page, url: str, key: str) -> Visit:
    """Open the page of the model with the value of beta selected."""
    visit = Visit(page, url)
    visit.open("model", key)
    visit.R0_is("2")
    visit.select("Parameters", 0, 2)
    page.evaluate(WATCH)
    return visit


def first_content(page: Page, url: str) -> float:
    """Return the milliseconds from asking for the page to its first heading."""
    page.add_init_script(
        "new MutationObserver(() => { if (!window.first && document.querySelector('h1')) window.first = performance.now(); })"
        ".observe(document, {subtree: true, childList: true});"
    )
    page.goto(url)
    page.wait_for_function("() => window.first")
    return float(page.evaluate("() => window.first"))


class Light:
    """A visitor without a screen: one connection, one draft, one value changed each second."""

    def __init__(self, url: str, key: str, number: int) -> None:
        self.url, self.key, self.number = url.replace("http", "ws", 1) + "/_stcore/stream", key, number
        self.editor = ""
        self.taken: list[float] = []
        self.foreign = 0

    async def __aenter__(self) -> Light:
        self.line = await connect(self.url, subprotocols=["streamlit"], max_size=None, proxy=None)  # type: ignore[list-item]
        await self._ask(self.line, None)
        await self._answer(self.line, None)
        return self

    async def __aexit__(self, *_: object) -> None:
        await self.line.close()

    async def edit(self, value: str) -> None:
        """Change the value of beta, and wait until the page has said the new R0."""
        await self._ask(self.line, value)
        await self._answer(self.line, short(float(value)))

    async def work(self, until: float) -> None:
        async with self:
            step = 0
            await asyncio.sleep(self.number / VISITORS)
            while time.monotonic() < until:
                due = time.monotonic() + 1
                step += 1
                # A value that no other visitor has: what comes back must be one's own.
                value = f"{1.5 + self.number / 100 + step / 10000:.4f}"
                start = time.perf_counter()
                await self.edit(value)
                self.taken.append(1000 * (time.perf_counter() - start))
                await asyncio.sleep(max(due - time.monotonic(), 0))

    async def _ask(self, line: ClientConnection, value: str | None) -> None:
        message = BackMsg()
        message.rerun_script.query_string = f"draft={self.key}"
        message.rerun_script.page_name = "model"
        if value is not None:
            state = message.rerun_script.widget_states.widgets.add()
            state.id = self.editor
            rows = f'{{"edited_rows": {{"0": {{"value": "{value}"}}}}, "added_rows": [], "deleted_rows": []}}'
            state.string_value = rows
        await line.send(message.SerializeToString())

    async def _answer(self, line: ClientConnection, wanted: str | None) -> None:
        seen = False
        while True:
            message = ForwardMsg()
            message.ParseFromString(bytes(await line.recv(decode=False)))
            kind = message.WhichOneof("type")
            if kind == "delta":
                element = message.delta.new_element
                which = element.WhichOneof("type")
                if which == "metric" and element.metric.label.startswith("R0"):
                    if wanted is not None and element.metric.body == wanted:
                        return
                    self.foreign += wanted is not None and abs(float(element.metric.body) - float(wanted)) > 0.005
                    seen = True
                elif which == "dataframe" and ".parameters" in element.dataframe.id:
                    self.editor = element.dataframe.id
            elif kind == "script_finished" and wanted is None and seen and self.editor:
                return


def together(page: Page, server: Server, store: Store) -> tuple[list[float], list[float], int, float]:
    """Return the browser's and the other visitors' milliseconds, what came from others' work, MB for each visitor."""
    assert server.process is not None
    keys = [store.create(TEN, "ten.toml").id for _ in range(VISITORS)]
    at_the_rate(page, server.url, keys[0])
    for k in range(3):
        edited(page, f"2.0{k + 1}")
    process = psutil.Process(server.process.pid)
    before = process.memory_info().rss
    others = [Light(server.url, key, k) for k, key in enumerate(keys[1:], 1)]

    async def all_of_them() -> None:
        until = time.monotonic() + SECONDS
        await asyncio.gather(*(one.work(until) for one in others))

    import threading

    worker = threading.Thread(target=lambda: asyncio.run(all_of_them()))
    worker.start()
    page.wait_for_timeout(4000)
    mine = []
    k = 0
    while worker.is_alive():
        k += 1
        mine.append(edited(page, f"3.{k:03d}".rstrip("0")))
        page.wait_for_timeout(max(0, 1000 - mine[-1] - 350))
    worker.join()
    after = process.memory_info().rss
    return mine, [t for one in others for t in one.taken], sum(o.foreign for o in others), (after - before) / 2**20 / 19


def rows() -> list[Row]:
    """Return what was measured, the figure, and what it has to keep."""
    out: list[Row] = []
    with tempfile.TemporaryDirectory() as name, sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=OPTIONS)
        cold = []
        for k in range(5):
            server = Server(Path(name) / str(k))
            server.drafts.parent.mkdir()
            server.start()
            page = browser.new_page()
            cold.append(first_content(page, server.url))
            page.close()
            if k < 4:
                server.stop()
        out.append(
            ("first content of a server just started, median of 5", f"{statistics.median(cold) / 1000:.2f} s", "1.5 s")
        )
        store = Store(server.drafts)
        page = browser.new_page(viewport={"width": 1280, "height": 900})
        at_the_rate(page, server.url, store.create(TEN, "ten.toml").id)
        for k in range(3):
            edited(page, f"2.0{k + 1}")
        alone = [edited(page, f"4.{k:03d}".rstrip("0")) for k in range(101, 101 + EDITS)]
        middle, late = np.percentile(alone, [50, 95])
        what = (
            f"edit of a rate in the table to the new R0 on the screen, 10 infected states, {EDITS} edits: median, 95 %"
        )
        out.append((what, f"{middle / 1000:.2f}, {late / 1000:.2f} s", "0.3 s"))
        page.close()
        page = browser.new_page(viewport={"width": 1280, "height": 900})
        mine, others, foreign, memory = together(page, server, store)
        what = f"{VISITORS} people at once, one edit a second each: in the browser of one, median, 95 %"
        out.append((what, f"{np.median(mine) / 1000:.2f}, {np.percentile(mine, 95) / 1000:.2f} s", "0.6 s"))
        what = f"the same, {len(others)} edits of the 19 others until the new R0 was sent: median, 95 %"
        out.append((what, f"{np.median(others) / 1000:.2f}, {np.percentile(others, 95) / 1000:.2f} s", "0.6 s"))
        out.append(("the same: numbers that came from another's work", str(foreign), "0"))
        out.append(("the same: memory for each person more", f"{memory:.1f} MB", "5 MB"))
        out.append(("load average of the machine at the end", f"{os.getloadavg()[0]:.1f} (2 processors)", ""))
        server.stop()
        browser.close()
    return out
