"""The verb `report`: its options, and what it prints."""

from __future__ import annotations

import argparse
import json
import shlex
from typing import TYPE_CHECKING, Any

from ngm.errors import Problem, ScenarioError
from ngm.typed import by_group, number

if TYPE_CHECKING:
    from ngm import Scenario

__all__ = ["add_options", "write_report"]

#: Options of the part on a supply -> what they are, as for `allocate`. Each is passed on as typed.
SHARING = {
    "groups": "groups that share the supply; all where left out",
    "efficacy": "efficacy against infection, 0 to 1: one number, or G=NUMBER for each group; 1 where left out",
    "against-spread": "efficacy against onward spread, 0 to 1, likewise; 0 where left out",
    "cost": "cost a head, likewise; 1 where left out",
    "upper": "highest coverage, 0 to 1, likewise; 1 where left out",
    "sizes": "members of groups, G=NUMBER, in place of those that the model tells",
}


def add_options(parser: argparse.ArgumentParser) -> None:
    """Add the options of `report`."""
    parser.add_argument("--to", metavar="PATH", required=True, help="the file: .html .md .tex .docx .pdf")
    parser.add_argument("--sections", metavar="KEY,KEY", help="only these parts; all where left out")
    parser.add_argument("--without", metavar="KEY,KEY", help="all parts but these")
    parser.add_argument("--companion", action="store_true", help="also NAME.json: every number with its name")
    parser.add_argument("--draws", metavar="N", type=int, help="draws for the part on uncertainty")
    parser.add_argument("--seed", metavar="K", type=int, default=0, help="of the draws")
    parser.add_argument("--formula", metavar="TEXT", help="a formula from a paper, to be compared with R0")
    parser.add_argument(
        "--before", metavar="FILE", help="another version of the scenario: what differs from it is told"
    )
    parser.add_argument(
        "--supply",
        metavar="N",
        help="doses or a budget for the part on allocation; where left out, and there are groups, the smallest that is "
        "enough",
    )
    for name, text in SHARING.items():
        parser.add_argument(f"--{name}", metavar="G", nargs="+", default=[], help=f"allocation: {text}; after FILE")


def write_report(options: argparse.Namespace, scenario: Scenario) -> str:
    """Write a report, with the command that makes it again in it, and return what is printed."""
    import ngm
    from ngm.worker import warm

    warm()  # the child that writes formulas gets ready while the rest of the program is loaded
    made = ngm.report(
        scenario,
        options.to,
        sections=_sections(options),
        companion=options.companion,
        draws=options.draws,
        seed=options.seed,
        formula=options.formula,
        before=None if options.before is None else ngm.load(options.before),
        supply=None if options.supply is None else number(options.supply, "--supply"),
        sharing=_sharing(options),
        command=_command(options),
    )
    told = made.to_json()
    if options.json:
        return json.dumps(told, ensure_ascii=False)
    lines = [f"{told['path']} ({told['form']})", f"sections: {', '.join(told['sections'])}"]
    return "\n".join([*lines, *(f"warning: {warning}" for warning in told["warnings"])])


def _sections(options: argparse.Namespace) -> list[str] | None:
    from ngm.reporting.narrative import SECTIONS

    if options.without is None:
        return None if options.sections is None else _keys(options.sections)
    if options.sections is not None:
        raise ScenarioError(Problem("--without", "cannot stand beside --sections. Keep one of them."))
    without = _keys(options.without)
    for key in without:
        if key not in SECTIONS:
            raise ScenarioError(Problem("--without", f"{key[:80]!r} is none of {', '.join(SECTIONS)}."))
    return [key for key in SECTIONS if key not in without]


def _keys(text: str) -> list[str]:
    return [key.strip() for key in text.split(",")]


def _sharing(options: argparse.Namespace) -> dict[str, Any]:
    out: dict[str, Any] = {}
    for name in SHARING:
        key = name.replace("-", "_")
        given = getattr(options, key)
        if given:
            out[key] = given if name == "groups" else by_group(given, f"--{name}")
    if "sizes" in out and not isinstance(out["sizes"], dict):
        raise ScenarioError(Problem("--sizes", "expected GROUP=NUMBER, for example 65+=18000."))
    return out


def _command(options: argparse.Namespace) -> str:
    """Return the command that makes the report again."""
    words = ["python", "-m", "ngm", "report", options.file, "--to", options.to]
    for item in options.values:
        words += ["--set", item]
    for name in ("sections", "without", "formula", "before", "supply"):
        if getattr(options, name) is not None:
            words += [f"--{name}", getattr(options, name)]
    if options.draws is not None:
        words += ["--draws", str(options.draws), "--seed", str(options.seed)]
    for name in SHARING:
        given = getattr(options, name.replace("-", "_"))
        words += [f"--{name}", *given] if given else []
    return shlex.join(words)
