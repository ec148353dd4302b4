"""The pages, in the order of the menu. The router and the tests read this list, and nothing else names a page.

Their folder is not called `pages`: Streamlit takes a folder of that name beside the main script for a menu of its own,
and then runs a page that is asked for by its address without the router, until somebody has come by the router.
"""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["PAGES", "Page"]


@dataclass(frozen=True, slots=True)
class Page:
    """One page: its file in `views/`, its address, its title, and the quantities that it explains at its foot."""

    name: str
    title: str
    explains: tuple[str, ...] = ()

    @property
    def path(self) -> str:
        """The file, from the folder of the router."""
        return f"views/{self.name}.py"


PAGES = (
    Page("scenario", "Scenario"),
    Page("model", "Model"),
    Page("derivation", "Derivation", ("infection_free", "F", "V", "stays", "K", "R0", "bounds")),
    Page(
        "numbers",
        "Reproduction numbers",
        (
            *("R0", "bounds", "per_cycle", "growth_rate", "doubling_time", "effective", "K", "class", "eigenvalues"),
            *("stable_distribution", "reproductive_value", "T", "critical_effort"),
        ),
    ),
    Page("outbreak", "Outbreak", ("R0", "final_size", "large_outbreak", "generation_interval", "growth_rate")),
    Page("first_weeks", "First weeks", ("growth_rate", "doubling_time", "K")),
    Page("below_one", "Below one", ("R0", "control")),
    Page("mixing", "Mixing", ("R0", "reciprocity", "assortativity", "stable_distribution", "elasticity")),
    Page("control", "Control", ("R0", "control", "T", "critical_effort", "coverage")),
    Page("sensitivity", "Sensitivity", ("R0", "elasticity", "above_one", "rank_correlation", "sobol")),
    Page("second_opinion", "Second opinion"),
    Page("report", "Report"),
    Page("versions", "Versions", ("R0", "F", "V", "K", "growth_rate")),
)
