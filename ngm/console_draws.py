"""Draws on the command line: where they come from, what is asked of them, where they go, how much is enough over them."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ngm.errors import Problem, ScenarioError
from ngm.results_draws import Assured
from ngm.typed import by_group, number, pairs
from ngm.wording import assured_words, figure

if TYPE_CHECKING:
    from ngm import Scenario
    from ngm.results_sensitivity import Sensitivity

__all__ = ["add_assurance_options", "add_sensitivity_options", "assured", "assured_text", "sensitivity"]

DESIGNS = ("latin-hypercube", "sobol")


def _add_draws(sub: argparse.ArgumentParser, why: str) -> None:
    """Add the options that say where draws come from. `why`: what they are for."""
    sub.add_argument(
        "--draws", metavar="N", type=int, help=f"draw the parameters N times from their distributions: {why}"
    )
    sub.add_argument("--seed", metavar="K", type=int, default=0, help="of the draws; the same seed, the same numbers")
    sub.add_argument("--from", dest="draw_file", metavar="TABLE", help="take joint draws from a CSV or Parquet file")
    sub.add_argument("--design", choices=DESIGNS, default=DESIGNS[0], help="of the draws from distributions")
    sub.add_argument(
        "--correlate",
        metavar="A,B=R",
        nargs="+",
        default=[],
        help="rank correlation of two parameters that are drawn, -1 to 1; after FILE",
    )


def add_assurance_options(sub: argparse.ArgumentParser) -> None:
    """Add the options with which `strength` and `coverage` ask every draw."""
    _add_draws(sub, "how much is enough in most of them")
    sub.add_argument("--assurance", metavar="A", default="0.95", help="share of the draws, 0.95 where left out")


def add_sensitivity_options(sub: argparse.ArgumentParser) -> None:
    """Add the options of `sensitivity`: draws, what is worked out at each, and where every draw is written."""
    _add_draws(sub, "what their spread does to R0")
    sub.add_argument(
        "--of",
        metavar="NUMBER",
        nargs="+",
        default=[],
        help="also the distribution of growth_rate, 'T(type, type)' or 'T(infected <- by)'; after FILE",
    )
    sub.add_argument("--table", metavar="PATH", help="also write every draw with its numbers as CSV")


def _is_drawn(options: argparse.Namespace) -> bool:
    """Return whether draws are asked for; refuse what makes sense with draws only.

    Raises
    ------
    ngm.ScenarioError
        Two sources of draws, or an option that needs draws without them.
    """
    if options.draws is not None and options.draw_file is not None:
        raise ScenarioError(Problem("--from", "draws come from a file or from --draws. Give one of the two."))
    if options.draws is not None or options.draw_file is not None:
        return True
    for option in ("of", "table", "correlate"):
        if getattr(options, option, None):
            raise ScenarioError(Problem(f"--{option}", "needs draws. Give --draws N or --from TABLE, too."))
    return False


def _draws(options: argparse.Namespace, scenario: Scenario) -> int | dict[str, Any] | None:
    """Return how many draws are asked for, or the draws of a file; None without either."""
    import ngm

    if not _is_drawn(options):
        return None
    if options.draw_file is not None:
        return dict(ngm.read_draws(scenario, options.draw_file))
    return int(options.draws)


def _settings(options: argparse.Namespace) -> dict[str, Any]:
    """Return the keywords that say how draws are made."""
    return {
        "seed": options.seed,
        "kind": options.design.replace("-", "_"),
        "correlation": pairs(options.correlate, "--correlate") if options.correlate else None,
    }


def _save(text: str, path: str) -> None:
    """Write a table.

    Raises
    ------
    ngm.ScenarioError
        It cannot be written there.
    """
    try:
        Path(path).write_text(text, encoding="utf-8", newline="")
    except OSError as error:
        raise ScenarioError(Problem("--table", f"{path} cannot be written ({error.strerror or error}).")) from None


def sensitivity(options: argparse.Namespace, scenario: Scenario) -> Sensitivity:
    """Run `sensitivity`, and write every draw where that is asked for."""
    import ngm

    draws = _draws(options, scenario)
    if draws is None:
        return ngm.sensitivity(scenario, formulas=True)
    settings = _settings(options)
    found = ngm.sensitivity(scenario, draws=draws, formulas=True, of=options.of, **settings)
    if options.table is not None:
        _save(ngm.draw_table(scenario, draws, of=options.of, **settings).to_csv(), options.table)
    return found


def assured(options: argparse.Namespace, scenario: Scenario, target: float) -> Assured | None:
    """Return how much is enough over the draws, for `strength` and `coverage`; None where no draws are asked for."""
    import ngm

    draws = _draws(options, scenario)
    if draws is None:
        return None
    besides = ngm.combined(scenario, options.besides).intervention if options.besides else None
    wanted = number(options.assurance, "--assurance")
    settings = _settings(options)
    if options.verb == "strength":
        return ngm.assured_strength(
            scenario, options.intervention, draws, assurance=wanted, target=target, with_also=besides, **settings
        )
    return ngm.assured_coverage(
        scenario,
        draws,
        options.groups,
        efficacy=by_group(options.efficacy, "--efficacy"),
        against_spread=by_group(options.against_spread, "--against-spread"),
        turnover=None if options.turnover is None else number(options.turnover, "--turnover"),
        waning=number(options.waning, "--waning"),
        assurance=wanted,
        target=target,
        intervention=besides,
        **settings,
    )


def assured_text(result: Assured) -> list[str]:
    """Return what is enough over the draws, as lines of text."""
    step = max(1, (len(result.curve) - 1) // 10)
    lines = ["", assured_words(result), "", f"Over {result.draws:,} draws, by {result.what}"]
    lines += [f"  {figure(x)}: below {result.target:g} in {100 * share:.4g} %" for x, share in result.curve[::step]]
    return lines + [f"  ! {warning}" for warning in result.warnings]
