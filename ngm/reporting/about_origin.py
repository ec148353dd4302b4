"""The last part of the report: limits, checks, provenance, references, names of the numbers, checklist."""

from __future__ import annotations

import platform
from collections.abc import Sequence
from importlib.metadata import PackageNotFoundError, version

from ngm.reporting import about_stated
from ngm.reporting.checks import check
from ngm.reporting.document import (
    Block,
    Bullets,
    Code,
    Document,
    Line,
    Listing,
    Note,
    Number,
    Paragraph,
    Section,
    Strong,
    Table,
)
from ngm.reporting.material import Material
from ngm.reporting.numbers import number

__all__ = ["CAUTIONS", "checklist", "checks", "limits", "names", "provenance", "references"]

#: Characters of a scenario that are printed in full.
MOST_TEXT = 60_000
#: Lines of the table of names; matrices of large models are in the JSON result alone.
MOST_NAMES = 200

CAUTIONS = (
    "Deterministic and mean-field: everybody of a type meets everybody alike, and chance plays no part. With few "
    "infected an "
    "outbreak can die out by chance although R0 is above 1.",
    "It holds near the infection-free state: as immunity builds up, the number of cases no longer follows it.",
    "R0 is no speed, no severity and no forecast. For speed see the growth rate; severity is not in the model "
    "unless it has it.",
    "R0 belongs to this model at these values. It cannot be compared between models of other structure, or with "
    "another split "
    "into transmission and transition; only the position above or below 1 is common.",
    "R0 below 1 need not mean elimination: infected arrivals, a state with infection that exists below 1, or "
    "changing values can "
    "keep an infection going.",
    "Bounds cover arithmetic and rounding. They say nothing of how uncertain the parameters or the model are.",
    "Decisions rest with the responsible authority under its local rules, and with licensed practice. This is "
    "not medical advice.",
)

REFERENCES = (
    "Diekmann, Heesterbeek & Metz (1990) J. Math. Biol. 28:365. Definition of R0 as a spectral radius.",
    "van den Driessche & Watmough (2002) Math. Biosci. 180:29. F, V and the conditions A1 to A5.",
    "Diekmann, Heesterbeek & Roberts (2010) J. R. Soc. Interface 7:873. K with large domain and K.",
    "Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359; Heesterbeek & Roberts (2007) Math. Biosci. 206:3. "
    "Type-reproduction numbers.",
    "Shuai, Heesterbeek & van den Driessche (2013) J. Math. Biol. 67:1067, corrected 2015, 71:255. Target "
    "reproduction numbers.",
    "Lewis, Shuai & van den Driessche (2019) J. Math. Biol. 78:2317. Numbers of states.",
    "Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127. Discrete time.",
    "Andreasen (2011) Bull. Math. Biol. 73:2305. Final size.",
    "Allen & Lahodny (2012) J. Biol. Dyn. 6:590. Chance of a large outbreak.",
    "Wallinga & Lipsitch (2007) Proc. R. Soc. B 274:599. Growth and generation intervals.",
    "Castillo-Chavez & Song (2004) Math. Biosci. Eng. 1:361. Endemic states at a number of 1.",
    "Wang & Zhao (2008) J. Dyn. Differ. Equ. 20:699. R0 over a season.",
    "Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences. Bounds of Collatz and Wielandt, "
    "M-matrices.",
    "Grassmann, Taksar & Heyman (1985) Oper. Res. 33:1107. Elimination without subtraction.",
)


def limits(m: Material) -> Section:
    """Say what must not be concluded; first what the author of the scenario says."""
    blocks: list[Block] = []
    own = m.scenario.report.get("limits")
    if isinstance(own, tuple) and own:
        blocks += [Paragraph((Strong("As the author states them:"),)), Bullets(tuple((text,) for text in own))]
    cautions = about_stated.CAUTIONS if m.solution.form == "projection" else CAUTIONS
    blocks.append(Bullets(tuple((text,) for text in cautions)))
    warnings = list(dict.fromkeys([*m.scenario.warnings, *m.solution.warnings]))
    if warnings:
        blocks.append(Paragraph((Strong("Warnings of this computation:"),)))
        blocks += [Note((text,)) for text in warnings[:20]]
    return Section("limits", "Limits and cautions", tuple(blocks))


def checks(m: Material) -> Section:
    """Say how the results were checked."""
    s, found = m.solution, check(m)
    items: list[Line] = []
    if s.infection_free is not None:
        residual = number(s.residual, "report.residual")
        items.append(("The infection-free state was put back into the flows; residual ", residual, "."))
    if found.product is not None:
        items.append(
            (
                "K with large domain times V gives F again, without an inverse: largest difference, as a share "
                "of the largest "
                "entry of F, ",
                number(found.product, "report.checks.product"),
                ".",
            )
        )
    if found.root is not None:
        items.append(
            (
                "R0 against the largest modulus of the eigenvalues of K from a general routine: difference ",
                number(found.root, "report.checks.root"),
                ".",
            )
        )
    if found.closed is not None:
        items.append(
            ("The closed form at the values in force gives ", number(found.closed, "report.checks.closed"), ".")
        )
    if found.sign is not None:
        items.append(
            (
                "R0 − 1 and the growth rate, which is found from F − V without K, "
                + (
                    "have the same sign, as they must."
                    if found.sign
                    else "HAVE DIFFERENT SIGNS: do not use these results."
                ),
            )
        )
    if s.R0_bounds is not None:
        low, high = s.R0_bounds
        items.append(
            (
                f"Width of the {'proven' if s.season is None else 'estimated'} bounds on R0: ",
                number(high - low, "report.checks.width"),
                ".",
            ),
        )
    if s.R0 is None:
        items.append(("There is no R0 to check at these values.",))
    return Section("checks", "How it was checked", (Bullets(tuple(items)),))


def provenance(m: Material) -> Section:
    """Name scenario, versions, date, seed and the command that makes this report again."""
    g = m.spread
    items: list[Line] = [
        ("Scenario: first 16 digits of its SHA-256 ", Code(m.solution.digest)),
        ("Written on ", m.made_on),
        ("Versions: ", ", ".join(f"{name} {found}" for name, found in _versions())),
        ("Seed of the draws: ", str(g["seed"]) if g else "none, nothing was drawn"),
        ("Made again by ", Code(m.command)),
    ]
    files = [f for matrix in m.scenario.matrices.values() for f in _files(matrix.file)]
    if files:
        items.append(("Matrices are read from ", ", ".join(dict.fromkeys(files)), " in the folder of the scenario."))
    blocks: list[Block] = [Bullets(tuple(items)), Paragraph(("The scenario in full:",))]
    text = m.scenario.text
    blocks.append(Listing(text[:MOST_TEXT].rstrip("\n")))
    if len(text) > MOST_TEXT:
        blocks.append(
            Note((f"{len(text) - MOST_TEXT} more characters are left out; the hash is that of the whole text.",))
        )
    return Section("provenance", "Provenance", tuple(blocks))


def _files(file: str | tuple[str, ...] | None) -> tuple[str, ...]:
    return () if file is None else (file,) if isinstance(file, str) else file


def _versions() -> list[tuple[str, str]]:
    out = [("Python", platform.python_version())]
    for package in ("numpy", "scipy", "sympy", "python-flint"):
        try:
            out.append((package, version(package)))
        except PackageNotFoundError:
            continue
    return out


def references(_m: Material) -> Section:
    """List the sources of the method; those of the values stand beside the parameters."""
    return Section("references", "References", (Bullets(tuple((text,) for text in REFERENCES)),))


def names(document: Document) -> Section:
    """List the numbers of the report at full precision with the names by which the JSON results have them."""
    found: dict[str, Number] = {}
    for _, item in document.numbers():
        if item.value != 0 or "[" not in item.name:
            found.setdefault(item.name, item)
    order = sorted(found.values(), key=lambda item: _weight(item.name))
    shown = order[:MOST_NAMES]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        ((Code(item.name),), (Number(repr(float(item.value)), item.value, item.name),)) for item in shown
    )
    told = (
        "A name begins with the command that prints the number with --json: solve, control, compare, sensitivity, "
        "allocate, units, splits, formula, difference; report: what the companion file of this report adds. Counted "
        "from 0; entries that are 0 are left out."
    )
    blocks: list[Block] = [Table(("Numbers at full precision.",), ("name", "value"), rows, frozenset({1}))]
    if len(order) > len(shown):
        blocks.append(Paragraph((f"{len(order) - len(shown)} more are in the companion file.",)))
    return Section("names", "Numbers and their names", (Paragraph((told,)), *blocks))


def _weight(name: str) -> int:
    """Return how late a number comes in the list of names, which may be cut: what decisions rest on comes first."""
    if name.startswith(("solve.F[", "solve.V[", "solve.K_large[", "report.")):
        return 5
    if name.startswith("solve.K["):
        return 3
    return {"solve": 0, "control": 1, "compare": 2, "allocate": 2}.get(name.partition(".")[0], 4)


def checklist(sections: Sequence[Section], left_out: Sequence[tuple[str, str]]) -> Section:
    """List every part: present, absent because not computed, missing from the scenario, or left out on request."""
    words = {"present": "present", "absent": "absent", "missing": "missing"}
    rows: list[tuple[Line, ...]] = []
    for section in sections:
        status = words[section.status]
        if section.status == "missing" and section.blocks:
            status = "present, incomplete"
        rows.append(((section.title,), (status,), (section.why,)))
    rows += [((title,), ("left out",), ("on request",)) for _, title in left_out]
    table = Table(("What this report holds.",), ("part", "state", "because"), tuple(rows))
    return Section("checklist", "Checklist", (table,))
