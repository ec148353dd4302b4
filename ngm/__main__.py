"""The command line: ``python -m ngm VERB FILE [options]``.

Prints the result to standard output, and what is wrong to standard error. Exit code 0: done; 2: the input is wrong; 1:
anything else.
"""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Sequence

from ngm.errors import NgmError, Problem, ScenarioError
from ngm.results import ControlResult, Solution
from ngm.results_control import Comparison
from ngm.results_sensitivity import Calibration, Sensitivity

__all__ = ["main"]

VERBS = {
    "solve": "derive F, V and K from the flows; R0 with bounds, structure, growth",
    "compare": "every intervention beside the baseline: control reproduction number, growth, share removed, cost",
    "control": "type, target and state reproduction numbers, and the share to remove",
    "sensitivity": "how R0 and the growth rate answer to each parameter, and to each entry of K",
    "calibrate": "the value of a parameter at which R0 is the one that is wanted",
}


class _Parser(argparse.ArgumentParser):
    """A parser whose complaints are short and go to standard error with exit code 2."""

    def error(self, message: str) -> None:  # type: ignore[override]
        self.exit(2, f"{message[:1500]}\nusage: python -m ngm {{{','.join(VERBS)}}} FILE [--set NAME=VALUE] [--json]\n")


def _parser() -> argparse.ArgumentParser:
    parser = _Parser(prog="python -m ngm", description="From compartments and flows to R0.", allow_abbrev=False)
    verbs = parser.add_subparsers(dest="verb", required=True, metavar="VERB", parser_class=_Parser)
    for verb, what in VERBS.items():
        sub = verbs.add_parser(verb, help=what, description=what, allow_abbrev=False)
        sub.add_argument("file", metavar="FILE", help="a scenario file")
        sub.add_argument(
            "--set",
            dest="values",
            metavar="NAME=VALUE",
            action="append",
            default=[],
            help="another value for a parameter, in its own unit; may be given more than once",
        )
        sub.add_argument("--json", action="store_true", help="print one JSON object")
        if verb == "control":
            sub.add_argument("--by", metavar="DIMENSION", help="also the number of each group of this dimension")
        if verb == "calibrate":
            sub.add_argument("--parameter", metavar="NAME", required=True, help="the parameter to find")
            sub.add_argument("--R0", metavar="X", required=True, type=float, help="the wanted R0")
        if verb == "compare":
            sub.add_argument(
                "--combine",
                dest="combinations",
                metavar="NAME",
                nargs="+",
                action="append",
                default=[],
                help="names of interventions to apply together, in order; after FILE; may be given more than once",
            )
    return parser


def _values(given: Sequence[str]) -> dict[str, str]:
    out: dict[str, str] = {}
    problems = []
    for item in given:
        name, sign, value = item.partition("=")
        if not sign or not name.strip() or not value.strip():
            problems.append(Problem("--set", f"expected NAME=VALUE, for example --set beta=0.3, not {item[:80]!r}."))
        else:
            out[name.strip()] = value.strip()
    if problems:
        raise ScenarioError(problems)
    return out


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return the exit code."""
    options = _parser().parse_args(arguments)
    try:
        text = _run(options)
    except NgmError as error:
        print(error, file=sys.stderr)
        return 2
    try:
        print(text)
        sys.stdout.flush()
    except BrokenPipeError:
        sys.stderr.close()
        return 1
    return 0


def _run(options: argparse.Namespace) -> str:
    import ngm
    from ngm.console import result_text

    scenario = ngm.load(options.file)
    values = _values(options.values)
    if values:
        scenario = scenario.with_values(**values)
    result: Solution | Comparison | ControlResult | Sensitivity | Calibration
    match options.verb:
        case "compare":
            result = ngm.compare(scenario, combinations=options.combinations)
        case "control":
            result = ngm.control(scenario, by=options.by)
        case "sensitivity":
            result = ngm.sensitivity(scenario)
        case "calibrate":
            result = ngm.calibrate(scenario, options.parameter, options.R0)
        case _:
            result = ngm.solve(scenario)
    return json.dumps(result.to_json(), ensure_ascii=False) if options.json else result_text(result)


if __name__ == "__main__":
    sys.exit(main())
