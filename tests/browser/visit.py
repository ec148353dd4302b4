"""What a visitor does in the browser, by the names that stand on the screen."""

from __future__ import annotations

from playwright.sync_api import ConsoleMessage, Locator, Page, expect
from playwright.sync_api import TimeoutError as NotThere

#: Milliseconds until something must be on the screen; machines that build are slow at times.
PATIENCE = 30_000

#: What cells with a list to choose from hold.
CHOICES = {"yes", "no", "transmission", "transition"}


class Visit:
    """One browser tab with the app in it, and what it complained about."""

    def __init__(self, page: Page, url: str) -> None:
        self.page, self.url = page, url
        self.complaints: list[str] = []
        page.set_default_timeout(PATIENCE)
        page.on("pageerror", lambda error: self.complaints.append(f"page error: {error}"))
        page.on("console", self._hear)
        page.on("request", lambda request: self._look(request.url))

    def _hear(self, message: ConsoleMessage) -> None:
        # A page opened by its own address first asks below that address where the server is: Streamlit's way to find out.
        asked = str(message.location.get("url", "")).startswith(self.url) and "/_stcore/" in message.location["url"]
        if message.type == "error" and not (asked and "404" in message.text):
            self.complaints.append(f"console: {message.text} {message.location.get('url', '')}")

    def _look(self, url: str) -> None:
        if not url.startswith((self.url, self.url.replace("http", "ws", 1), "data:", "blob:")):
            self.complaints.append(f"request to another place: {url}")

    def open(self, path: str = "", draft: str | None = None) -> None:
        self.page.goto(f"{self.url}/{path}" + (f"?draft={draft}" if draft else ""))
        self.settled()

    def settled(self) -> None:
        """Wait until the page has been drawn to its end and shows no mistake of the program."""
        self.page.get_by_test_id("stMainBlockContainer").get_by_role("heading", level=1).first.wait_for()
        self.page.locator('[data-testid="stApp"][data-test-script-state="notRunning"]').wait_for()
        expect(self.page.get_by_test_id("stException")).to_have_count(0)
        expect(self.page.get_by_text("could not be finished")).to_have_count(0)

    def at_rest(self) -> None:
        """Wait until nothing is drawn any more for a second: pages go on by themselves when an answer is ready."""
        self.settled()
        self.page.wait_for_function(
            """() => {
                const busy = document.querySelector('[data-testid="stApp"]').dataset.testScriptState !== 'notRunning'
                    || document.querySelector('[data-stale="true"]') !== null
                    || document.getAnimations().some(
                        a => a.playState === 'running' && a.effect.getTiming().iterations !== Infinity);
                const now = performance.now();
                if (busy || window.quietSince === undefined) window.quietSince = now;
                return now - window.quietSince > 1000;
            }"""
        )
        self.settled()

    def go(self, title: str) -> None:
        self.page.get_by_test_id("stSidebarNav").get_by_role("link", name=title, exact=True).click()
        self.heading(title)

    def heading(self, title: str) -> None:
        expect(self.page.get_by_role("heading", name=title, level=1, exact=True)).to_be_visible(timeout=PATIENCE)
        self.settled()

    def button(self, name: str) -> Locator:
        return self.page.get_by_role("button", name=name, exact=True)

    def field(self, name: str) -> Locator:
        return self.page.get_by_role("textbox", name=name, exact=True)

    def R0_is(self, value: str) -> None:
        """Wait until R0 is this, on the page and in the side bar."""
        metric = self.page.get_by_test_id("stMetric").filter(has_text="R0: basic reproduction number").first
        expect(metric.get_by_test_id("stMetricValue")).to_have_text(value, timeout=PATIENCE)
        expect(self.page.get_by_test_id("stSidebar").get_by_text(f"R0 = {value}")).to_be_visible(timeout=PATIENCE)

    def stored_as(self, version: int) -> None:
        """Wait until the page says that what was typed is stored."""
        expect(self.page.get_by_text(f"Stored as version {version}.")).to_be_visible(timeout=PATIENCE)

    def draft(self) -> str:
        self.page.wait_for_url("**draft=*")
        return self.page.url.partition("draft=")[2]

    def start(self, name: str = "With S, I and R to begin with") -> None:
        """Begin a new scenario from the start page."""
        self.open()
        self.button(name).click()
        self.stored_as(1)

    def source(self) -> Locator:
        return self.field("Scenario text (TOML)")

    def type_text(self, text: str) -> None:
        """Replace the scenario's text on its page."""
        self.source().fill(text)
        self.source().press("Control+Enter")

    # The grids are drawn on a canvas; a table that only screen readers see says which cell is selected.

    def grid(self, title: str) -> Locator:
        return self.page.locator(f'[data-testid="stDataFrame"]:has(button[aria-label="Add row: {title}"])')

    def select(self, title: str, row: int, column: int) -> None:
        """Select a cell with the arrow keys; the columns count from 1."""
        grid = self.grid(title)
        grid.locator("canvas").first.focus()
        here = grid.locator('[id^="glide-cell-"][aria-selected=true]')
        for attempt in range(12):
            self.page.wait_for_timeout(300)  # the table for screen readers follows a moment later
            if not here.count():
                # Nothing yet, or the empty line at the end.
                self.page.keyboard.press("ArrowUp" if attempt % 2 else "ArrowDown")
                continue
            _, _, x, y = str(here.first.get_attribute("id")).split("-")
            right, down = column - int(x), row - int(y)
            if not right and not down:
                return
            for key, steps in (("ArrowRight", right), ("ArrowLeft", -right), ("ArrowDown", down), ("ArrowUp", -down)):
                for _ in range(steps):
                    self.page.keyboard.press(key)
        raise AssertionError(f"cell {column}, {row} of {title} cannot be reached by keyboard")

    def cell(self, title: str, row: int, column: int, text: str) -> None:
        """Type into a cell of a table, and let the page take it up, as one who looks up after each entry does."""
        self.type_into(title, row, column, text)
        self.page.keyboard.press("Enter")
        expect(self.grid(title).locator(f"#glide-cell-{column}-{row}")).to_have_text(text, timeout=PATIENCE)
        self.taken_up()

    def taken_up(self) -> None:
        """Wait for the run that an entry begins, and for its end."""
        self.page.wait_for_timeout(250)
        self.settled()

    def add_row(self, title: str, row: int, texts: list[str]) -> None:
        """Add a row to a table, which has `row` rows so far, and type into it; "" leaves a cell empty."""
        grid = self.grid(title)
        expect(grid.locator('[id^="glide-cell-1-"]')).to_have_count(row, timeout=PATIENCE)
        grid.locator("canvas").first.focus()
        if row:
            self.select(title, row - 1, 1)
        self.page.keyboard.press("ArrowDown")  # the empty line at the end
        self.page.wait_for_timeout(100)
        self.page.keyboard.press("Enter")
        expect(grid.locator(f"#glide-cell-1-{row}[aria-selected=true]")).to_have_count(1, timeout=PATIENCE)
        self.taken_up()
        for column, text in enumerate(texts, 1):
            if text:
                self.type_into(title, row, column, text)
                self.page.keyboard.press("Enter")
                self.taken_up()
        for column, text in enumerate(texts, 1):
            expect(grid.locator(f"#glide-cell-{column}-{row}")).to_have_text(text, timeout=PATIENCE)
        self.taken_up()

    def type_into(self, title: str, row: int, column: int, text: str) -> None:
        """Select a cell and type into it, without leaving it."""
        for _ in range(4):
            self.select(title, row, column)
            if text in CHOICES:
                self.page.keyboard.type(text)  # opens the list and narrows it down
                entry = self.page.locator("#portal").get_by_text(text, exact=True).last
            else:
                self.page.keyboard.press("Enter")
                entry = self.page.locator("#portal .gdg-input")
            try:
                entry.wait_for(timeout=3000)
            except NotThere:
                self.settled()
                continue
            if text not in CHOICES:
                entry.fill(text)
            return
        raise AssertionError(f"{text!r} cannot be typed into cell {column}, {row} of {title}")
