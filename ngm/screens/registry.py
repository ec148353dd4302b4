"""The pages, in the order of the menu. The router and the tests read this list, and nothing else names a page.

Their folder is not called `pages`: Streamlit takes a folder of that name beside the main script for a menu of its own,
and then runs a page that is asked for by its address without the router, until somebody has come by the router.
"""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["PAGES", "Page"]


@dataclass(frozen=True, slots=True)
class Page:
    """One page: its file in `views/`, its address, its title."""

    name: str
    title: str

    @property
    def path(self) -> str:
        """The file, from the folder of the router."""
        return f"views/{self.name}.py"


PAGES = (
    Page("scenario", "Scenario"),
    Page("model", "Model"),
    Page("derivation", "Derivation"),
    Page("numbers", "Reproduction numbers"),
    Page("mixing", "Mixing"),
    Page("control", "Control"),
    Page("sensitivity", "Sensitivity"),
    Page("second_opinion", "Second opinion"),
    Page("report", "Report"),
    Page("versions", "Versions"),
)
