"""What each quantity means: a sentence, its formula, its unit and where it comes from. One table, for every page.

Formulas are LaTeX without signs of dollars. Sources are cited from memory where the README says so.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["MEANINGS", "Meaning", "help_text", "table"]


@dataclass(frozen=True, slots=True)
class Meaning:
    """A quantity: what it is called, what it says in a sentence, its formula, its unit, its source ("": none needed)."""

    name: str
    says: str
    formula: str
    unit: str = "no unit"
    source: str = ""


_DHR = "Diekmann, Heesterbeek & Roberts 2010, J. R. Soc. Interface 7:873"
_VDW = "van den Driessche & Watmough 2002, Math. Biosci. 180:29"

MEANINGS: dict[str, Meaning] = {
    "R0": Meaning(
        "R0, basic reproduction number",
        "How many new cases one typical case causes, per generation, where nobody is infected yet: above 1 an infection can "
        "spread.",
        r"R_0 = \rho(F V^{-1}) = \rho(K)",
        source=f"Diekmann, Heesterbeek & Metz 1990, J. Math. Biol. 28:365; {_VDW}",
    ),
    "bounds": Meaning(
        "proven bounds",
        "Two numbers between which R0 lies for certain, for the decimals of the scenario.",
        r"\min_i \frac{(Kx)_i}{x_i} \le R_0 \le \max_i \frac{(Kx)_i}{x_i},\quad x > 0",
        source="Collatz-Wielandt; Berman & Plemmons 1994, Nonnegative Matrices in the Mathematical Sciences",
    ),
    "per_cycle": Meaning(
        "R0 per cycle",
        "How many cases of the same kind one case leads to when the infection has come back to where it began.",
        r"R_0^{\,d},\quad d \text{ the period of } K",
        source=_DHR,
    ),
    "growth_rate": Meaning(
        "growth rate r",
        "How fast an epidemic grows while nearly everybody is still susceptible; it has the sign of R0 - 1.",
        r"r = \max \operatorname{Re} \operatorname{eig}(F - V)",
        "per time unit",
        _VDW,
    ),
    "doubling_time": Meaning(
        "doubling time", "The time in which early cases double.", r"\ln 2 / r", "time unit", "from the growth rate"
    ),
    "F": Meaning(
        "F, transmission",
        "Entry (i, j): new infections of type i that one of type j causes per time unit at the infection-free state.",
        r"F_{ij} = \partial \mathcal F_i / \partial x_j",
        "per time unit",
        _VDW,
    ),
    "V": Meaning(
        "V, transition",
        "Everything else that happens to the infected, with its sign turned: leaving on the diagonal, arriving below zero.",
        r"V_{ij} = \partial \mathcal V_i / \partial x_j",
        "per time unit",
        _VDW,
    ),
    "stays": Meaning(
        "mean stays",
        "Entry (i, j) of the inverse of V: mean time spent in state i by one who enters at j.",
        r"\tau_{ij} = (V^{-1})_{ij}",
        "time unit",
        _VDW,
    ),
    "K": Meaning(
        "K, next-generation matrix",
        "Entry (i, j): infections of type i that one case of type j causes over its whole course.",
        r"K = F V^{-1} \text{, rows and columns of the types at infection}",
        "infections per case",
        _DHR,
    ),
    "infection_free": Meaning(
        "infection-free state",
        "The state at rest with nobody infected; R0 is computed there.",
        r"\dot x = 0,\quad \text{infected compartments } = 0",
        "individuals",
        _VDW,
    ),
    "class": Meaning(
        "class and period",
        "Types that all lead to each other form a class; its period is the common divisor of its cycles.",
        r"R_0 = \max_{\text{classes}} \rho(K_{\text{class}})",
        source="Berman & Plemmons 1994",
    ),
    "eigenvalues": Meaning(
        "eigenvalues of K",
        "R0 is the largest in size; others on the same circle mean a period, or classes that tie.",
        r"\det(x I - K) = 0",
    ),
    "stable_distribution": Meaning(
        "stable distribution, case mix",
        "The share of each type among new infections, once the mix has settled.",
        r"K w = R_0 w,\quad \textstyle\sum_i w_i = 1",
        "share",
        _DHR,
    ),
    "reproductive_value": Meaning(
        "reproductive value",
        "What one case of a type counts for all later generations.",
        r"v K = R_0 v,\quad v \cdot w = 1",
        source=_DHR,
    ),
    "T": Meaning(
        "T, type-, target- and state-reproduction number",
        "The infections that control of the targets must undo, directly or by way of others. It passes 1 together with R0.",
        r"T = \rho\big(P K (I - (I - P) K)^{-1}\big)",
        source="Roberts & Heesterbeek 2003, Proc. R. Soc. B 270:1359; Shuai, Heesterbeek & van den Driessche 2013, "
        "J. Math. Biol. 67:1067",
    ),
    "critical_effort": Meaning(
        "critical effort",
        "The share of the targets' infections to prevent for the infection to die out.",
        r"1 - 1/T",
        "share",
        "Roberts & Heesterbeek 2003",
    ),
    "control": Meaning(
        "control reproduction number",
        "As R0, with an intervention in force: the state without infection, F and V are worked out anew under it.",
        r"R_c = \rho(F_c V_c^{-1})",
        source=_VDW,
    ),
    "effective": Meaning(
        "effective number",
        "Cases that one typical case causes at the immunity of today. It is not R0.",
        r"R_e = \rho(F V^{-1}) \text{ at the state of today}",
        source=_DHR,
    ),
    "coverage": Meaning(
        "coverage needed",
        "The share of a group to vaccinate; e is the efficacy against infection (a) and onward spread (b) together.",
        r"\frac{1 - 1/T}{e},\quad e = 1 - (1 - a)(1 - b)",
        "share",
        "Roberts & Heesterbeek 2003",
    ),
    "elasticity": Meaning(
        "elasticity",
        "By how many per cent R0 rises if a parameter rises by 1 %.",
        r"\frac{p}{R_0} \frac{\partial R_0}{\partial p}",
        source="Caswell 2001, Matrix Population Models",
    ),
    "above_one": Meaning(
        "P(R0 > 1)",
        "The share of draws with R0 above 1, under the distributions of the scenario.",
        r"\#\{R_0 > 1\} / \#\{\text{draws with an } R_0\}",
        "share",
    ),
    "rank_correlation": Meaning(
        "partial rank correlation",
        "How closely R0 goes with one parameter over the draws, the others' part taken out.",
        r"\operatorname{corr}\big(\text{residual of rank } p,\ \text{residual of rank } R_0\big)",
        "from -1 to 1",
        "Marino et al. 2008, J. Theor. Biol. 254:178",
    ),
    "sobol": Meaning(
        "Sobol indices",
        "The share of R0's variance that a parameter explains by itself (first) and with all its interplay (total).",
        r"S_i = \operatorname{Var}(E(R_0 \mid p_i)) / \operatorname{Var}(R_0)",
        "share",
        "Saltelli et al. 2010, Comput. Phys. Commun. 181:259",
    ),
    "final_size": Meaning(
        "share infected in the end",
        "The share z of the susceptible who are infected in an outbreak that takes off, nothing changing in its course.",
        r"1 - z_i = \exp\big(-\textstyle\sum_j K_{ij} N_j z_j / N_i\big)",
        "share",
        "Andreasen 2011, Bull. Math. Biol. 73:2305",
    ),
    "large_outbreak": Meaning(
        "probability of a large outbreak",
        "The chance that one case does not die out by chance: q is the least root, f the chances of its offspring.",
        r"1 - q,\quad q = f(q)",
        "probability",
        "Harris 1963, The Theory of Branching Processes",
    ),
    "generation_interval": Meaning(
        "generation interval",
        "The age of an infection at the moment when it infects, over new cases as they settle.",
        r"g(a) \propto v F e^{-V a} w",
        "time unit",
        "Wallinga & Lipsitch 2007, Proc. R. Soc. B 274:599",
    ),
    "reciprocity": Meaning(
        "reciprocity",
        "Contacts of group i with j are as many as those of j with i: N is the size of a group.",
        r"N_i C_{ij} = N_j C_{ji}",
        "contacts per time unit",
    ),
    "assortativity": Meaning(
        "assortativity Q, r",
        "How far groups keep to themselves: 0 as by chance, 1 each only with itself.",
        r"Q = \frac{\operatorname{tr} P - 1}{n - 1},\quad P_{ij} = C_{ij} / \textstyle\sum_k C_{ik}",
        source="Gupta, Anderson & May 1989, AIDS 3:807; Newman 2003, Phys. Rev. E 67:026126",
    ),
}


def help_text(key: str) -> str:
    """Return what a quantity means as Markdown: the sentence, the formula, unit and source."""
    meaning = MEANINGS[key]
    tail = f" Source: {meaning.source}." if meaning.source else ""
    return f"{meaning.says}\n\n${meaning.formula}$\n\nUnit: {meaning.unit}.{tail}"


def table(keys: Sequence[str]) -> str:
    """Return several quantities as a Markdown list, each with its sentence, formula, unit and source."""
    out = []
    for key in keys:
        meaning = MEANINGS[key]
        tail = f" *{meaning.source}.*" if meaning.source else ""
        out.append(f"- **{meaning.name}**: {meaning.says} ${meaning.formula}$ ({meaning.unit}).{tail}")
    return "\n".join(out)
