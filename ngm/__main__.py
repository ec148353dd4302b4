"""The command line: ``python -m ngm VERB FILE [options]``.

Prints the result to standard output, and what is wrong to standard error. Exit code 0: done; 2: the input is wrong; 1:
anything else.
"""

from __future__ import annotations

import argparse
import io
import json
import sys
from collections.abc import Sequence
from typing import TYPE_CHECKING

from ngm.console_draws import add_assurance_options, add_sensitivity_options, assured, assured_text
from ngm.console_draws import sensitivity as run_sensitivity
from ngm.errors import NgmError, Problem, ScenarioError, printable
from ngm.results import ControlResult, Solution
from ngm.results_control import Allocation, Comparison, Coverage, Strength
from ngm.results_opinion import Difference, FormulaOpinion, Splits, Units
from ngm.results_sensitivity import Calibration, Sensitivity
from ngm.typed import by_group, number

if TYPE_CHECKING:
    from ngm import Scenario

__all__ = ["main"]

VERBS = {
    "solve": "derive F, V and K from the flows; R0 with bounds, structure, growth",
    "compare": "every intervention beside the baseline: control reproduction number, growth, share removed, cost",
    "control": "type, target and state reproduction numbers, and the share to remove",
    "strength": "how much of an intervention brings the number down to 1, or to another target",
    "coverage": "the share of chosen groups to be vaccinated for the number to fall to 1, or to another target",
    "allocate": "the best way to share a supply of vaccine among groups, beside simple rules",
    "sensitivity": "how R0 and the growth rate answer to each parameter, and to each entry of K",
    "calibrate": "the value of a parameter at which R0 is the one that is wanted",
    "outbreak": "how many are infected in the end, the chance that cases start a large outbreak, generation intervals",
    "twin": "the model beside the same flows in the other time, discrete or continuous, and which number to report",
    "course": "the first weeks: the flows followed from a few cases, beside growth rate, stable mix and generations",
    "threshold": "whether infection can persist where the number is below 1, and from where on it cannot",
    "report": "the derivation ready to hand in: HTML, Markdown, LaTeX, Word or PDF by the ending of the file",
    "units": "whether the units fit, what is converted, and the mean stay in every stage",
    "splits": "R0 under every defensible division of the flows into new infections and the rest",
    "formula": "whether a formula from a paper is the model's R0, a number related to it, or another one",
    "difference": "what differs between two models, and what each change does to R0",
}

#: The verbs that contradict.
OPINIONS = ("units", "splits", "formula", "difference")


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
            sub.add_argument(
                "--entry",
                dest="entries",
                metavar="INFECTED<-BY",
                action="append",
                default=[],
                help="an entry of K; given more than once: the number of acting on all of them together",
            )
        if verb == "sensitivity":
            add_sensitivity_options(sub)
        if verb == "report":
            from ngm.console_report import add_options

            add_options(sub)
        if verb == "calibrate":
            sub.add_argument("--parameter", metavar="NAME", required=True, help="the parameter to find")
            wanted = sub.add_mutually_exclusive_group(required=True)
            wanted.add_argument("--R0", metavar="X", type=float, help="the wanted R0")
            wanted.add_argument("--growth-rate", metavar="X", type=float, help="the wanted growth rate, per time unit")
        if verb == "outbreak":
            from ngm.console_outbreak import add_options as outbreak_options

            outbreak_options(sub)
        if verb in ("course", "threshold"):
            from ngm.console_course import add_options as course_options

            course_options(sub, verb)
        if verb in ("strength", "coverage", "allocate"):
            _needs_options(sub, verb)
        if verb == "formula":
            sub.add_argument(
                "--text", metavar="FORMULA", required=True, help="in the expression syntax or simple LaTeX"
            )
            sub.add_argument("--seed", metavar="K", type=int, default=1, help="of the random points, 1 where left out")
        if verb == "difference":
            sub.add_argument("--to", metavar="FILE", required=True, help="the second scenario file")
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


def _needs_options(sub: argparse.ArgumentParser, verb: str) -> None:
    """Add the options of `strength`, `coverage` and `allocate`; a number may be typed as 0.7 or 70 %."""

    def several(option: str, metavar: str, text: str, **more: object) -> None:
        sub.add_argument(option, metavar=metavar, nargs="+", help=f"{text}; after FILE", **more)  # type: ignore[arg-type]

    sub.add_argument("--target", metavar="X", default="1", help="the number to be reached, 1 where left out")
    several("--with", "NAME", "interventions in force besides, in order", dest="besides", default=[])
    if verb in ("strength", "coverage"):
        add_assurance_options(sub)
    if verb == "strength":
        sub.add_argument("--intervention", metavar="NAME", required=True, help="one of the file's interventions")
        return
    several("--groups", "G", "groups of hosts, or types at infection; all where left out")
    each = "one number for all groups or G=NUMBER for each"
    several("--efficacy", "E", f"efficacy against infection, 0 to 1: {each}; 1 where left out", default=["1"])
    several("--against-spread", "S", f"efficacy against onward spread, 0 to 1: {each}; 0 where left out", default=["0"])
    if verb == "coverage":
        sub.add_argument("--kind", choices=["leaky", "all-or-nothing"], default="leaky", help="of vaccine")
        sub.add_argument("--turnover", metavar="T", help="births per head and time unit, where protection wanes")
        sub.add_argument("--waning", metavar="W", default="0", help="rate at which protection is lost, per time unit")
    else:
        sub.add_argument("--supply", metavar="N", required=True, help="doses, or a budget in the unit of --cost")
        several("--cost", "C", f"cost a head: {each}; 1 where left out", default=["1"])
        several("--upper", "U", f"highest coverage, 0 to 1: {each}; 1 where left out", default=["1"])
        several("--sizes", "G=N", "members of groups, in place of those that the model tells", default=[])


def _values(given: Sequence[str]) -> dict[str, str]:
    out: dict[str, str] = {}
    problems = []
    for item in given:
        name, sign, value = item.partition("=")
        if not sign or not name.strip() or not value.strip():
            problems.append(Problem("--set", f"expected NAME=VALUE, for example --set beta=0.3, not {item[:80]!r}."))
        elif name.strip() in out:
            problems.append(Problem("--set", f"{name.strip()[:80]} is given twice. Keep one."))
        else:
            out[name.strip()] = value.strip()
    if problems:
        raise ScenarioError(problems)
    return out


def _entries(given: Sequence[str]) -> list[tuple[str, str]]:
    out = []
    for item in given:
        row, arrow, column = item.partition("<-")
        if not arrow or not row.strip() or not column.strip():
            raise ScenarioError(
                Problem("--entry", f"expected INFECTED<-BY, for example --entry 'I_h<-I_v', not {item[:80]!r}.")
            )
        out.append((row.strip(), column.strip()))
    return out


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return the exit code."""
    if isinstance(sys.stdout, io.TextIOWrapper):
        # where the terminal has another encoding than UTF-8: what it cannot show must not end the program
        sys.stdout.reconfigure(errors="replace")
    options = _parser().parse_args(arguments)
    try:
        text = _run(options)
    except NgmError as error:
        print(error, file=sys.stderr)
        return 2
    if not options.json:
        text = printable(text)
    elif "utf" not in (sys.stdout.encoding or "utf").lower() or printable(text) != text:
        text = json.dumps(json.loads(text))  # letters beyond ASCII escaped
    try:
        print(text)
        sys.stdout.flush()
    except BrokenPipeError:
        sys.stderr.close()
        return 1
    return 0


def _run(options: argparse.Namespace) -> str:
    import ngm

    if options.verb in ("solve", "formula"):
        from ngm import worker

        worker.warm()  # the child loads what formulas need while this process reads the file
    scenario = ngm.load(options.file)
    values = _values(options.values)
    if values:
        scenario = scenario.with_values(**values)
    answer = _answer(options, scenario)
    if options.json or options.verb in ("units", "report"):
        return answer
    from ngm.console_opinion import conversions_text

    doubts = [str(finding) for finding in ngm.slips(scenario)]
    return conversions_text(ngm.conversions(scenario), scenario.time_unit, doubts) + answer


def _answer(options: argparse.Namespace, scenario: Scenario) -> str:
    import ngm

    if options.verb in ("strength", "coverage", "allocate"):
        return _needs(options, scenario)
    if options.verb == "report":
        from ngm.console_report import write_report

        return write_report(options, scenario)
    if options.verb in OPINIONS:
        return _opinion(options, scenario)
    if options.verb in ("course", "threshold"):
        from ngm.console_course import run as run_course

        return run_course(options, scenario)
    if options.verb in ("outbreak", "twin"):
        return _course(options, scenario)
    from ngm.console import result_text

    result: Solution | Comparison | ControlResult | Sensitivity | Calibration
    match options.verb:
        case "compare":
            result = ngm.compare(scenario, combinations=options.combinations)
        case "control":
            result = ngm.control(scenario, by=options.by, entries=_entries(options.entries))
        case "sensitivity":
            result = run_sensitivity(options, scenario)
        case "calibrate":
            result = ngm.calibrate(scenario, options.parameter, options.R0, growth_rate=options.growth_rate)
        case _:
            result = ngm.solve(scenario)
    return json.dumps(result.to_json(), ensure_ascii=False) if options.json else result_text(result)


def _course(options: argparse.Namespace, scenario: Scenario) -> str:
    """Run one of the verbs on the course of an outbreak."""
    import ngm
    from ngm.console_outbreak import options_of, outbreak_text, twin_text

    if options.verb == "twin":
        beside = ngm.twin(scenario)
        return json.dumps(beside.to_json(), ensure_ascii=False) if options.json else twin_text(beside)
    found = ngm.outbreak(scenario, **options_of(options))  # type: ignore[arg-type]
    return json.dumps(found.to_json(), ensure_ascii=False) if options.json else outbreak_text(found)


def _opinion(options: argparse.Namespace, scenario: Scenario) -> str:
    """Run one of the verbs that give a second opinion."""
    import ngm
    from ngm.console_opinion import opinion_text

    result: Units | Splits | FormulaOpinion | Difference
    match options.verb:
        case "splits":
            result = ngm.splits(scenario)
        case "formula":
            result = ngm.formula(scenario, options.text, seed=options.seed)
        case "difference":
            result = ngm.difference(scenario, ngm.load(options.to))
        case _:
            result = ngm.units(scenario)
    return json.dumps(result.to_json(), ensure_ascii=False) if options.json else opinion_text(result)


def _needs(options: argparse.Namespace, scenario: Scenario) -> str:
    """Run one of the verbs that say how much is needed."""
    import ngm
    from ngm.console_control import needs_text

    besides = ngm.combined(scenario, options.besides).intervention if options.besides else None
    target = number(options.target, "--target")
    result: Strength | Coverage | Allocation
    if options.verb == "strength":
        result = ngm.strength_needed(scenario, options.intervention, target=target, with_also=besides)
    else:
        efficacy = by_group(options.efficacy, "--efficacy")
        against_spread = by_group(options.against_spread, "--against-spread")
        if options.verb == "coverage":
            result = ngm.coverage_needed(
                scenario,
                options.groups,
                efficacy=efficacy,
                against_spread=against_spread,
                kind=options.kind,
                turnover=None if options.turnover is None else number(options.turnover, "--turnover"),
                waning=number(options.waning, "--waning"),
                target=target,
                intervention=besides,
            )
        else:
            sizes = by_group(options.sizes, "--sizes")
            if not isinstance(sizes, dict):
                raise ScenarioError(Problem("--sizes", "expected GROUP=NUMBER, for example 65+=18000."))
            result = ngm.allocate(
                scenario,
                number(options.supply, "--supply"),
                groups=options.groups,
                efficacy=efficacy,
                against_spread=against_spread,
                cost=by_group(options.cost, "--cost"),
                upper=by_group(options.upper, "--upper"),
                sizes=sizes,
                target=target,
                intervention=besides,
            )
    over = None if options.verb == "allocate" else assured(options, scenario, target)
    if options.json:
        told = {**result.to_json(), "in_force": list(options.besides)}
        return json.dumps(told if over is None else {**told, "assured": over.to_json()}, ensure_ascii=False)
    return needs_text(result, options.besides, () if over is None else assured_text(over))


if __name__ == "__main__":
    sys.exit(main())
