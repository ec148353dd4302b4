"""The pages, in the order of the menu. The router and the tests read this list, and nothing else names a page."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["PAGES", "Page"]


@dataclass(frozen=True, slots=True)
class Page:
    """One page: its file in `pages/`, its address, its title."""

    name: str
    title: str

    @property
    def path(self) -> str:
        """The file, from the folder of the router."""
        return f"pages/{self.name}.py"


PAGES = (
    Page("scenario", "Scenario"),
    Page("model", "Model"),
    Page("derivation", "Derivation"),
    Page("numbers", "Reproduction numbers"),
)
