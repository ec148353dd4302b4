"""Random models through the whole pipeline: ``python -m tests.adversaries --until 10000``.

Models are numbered; each run goes on where the last one ended, and the counts of all runs add up in
``.cache/adversaries``. What broke a law is kept there with its kind and number.

    python -m tests.adversaries                    what has been done so far
    python -m tests.adversaries --until 10000      models over all runs and kinds
    python -m tests.adversaries --one cyclic 17    one model: its scenario and its laws
"""

from __future__ import annotations

import argparse
import sys
import traceback
from pathlib import Path

from tests.adversaries.laws import check
from tests.adversaries.models import KINDS, draw
from tests.fuzz.judge import Verdict
from tests.fuzz.record import Record

HOME = Path(__file__).parents[2] / ".cache" / "adversaries"
#: Models between two savings of the counts.
_OFTEN = 10


def one(kind: str, number: int) -> tuple[bool, list[str]]:
    """Return what became of a model: whether it has an R0, and the laws that it broke."""
    try:
        return check(draw(kind, number), number)
    except Exception:
        return False, [f"no answer: {traceback.format_exc(limit=-6)}"]


def hunt(kind: str, count: int, home: Path = HOME) -> None:
    """Go on with a kind until `count` models have been counted over all runs."""
    record = Record(kind.replace(" ", "-"), home)
    number = int(record.save().get("executions", 0))
    while number < count:
        has, broken = one(kind, number)
        record.count(Verdict("accepted" if has else "refused"), b"")
        for line in broken:
            law = line.partition(":")[0]
            record.count_crash(
                Verdict("crash", f"{kind} {number}\n{line}", f"{kind}, {law}"), f"{kind} {number}".encode()
            )
        number += 1
        if number % _OFTEN == 0 or number == count:
            record.save()


def main() -> int:
    """Run the command; the exit code is 1 where a law is broken."""
    parser = argparse.ArgumentParser(prog="python -m tests.adversaries", description=__doc__.partition("\n")[0])
    parser.add_argument("--until", type=float, default=0)
    parser.add_argument("--one", nargs=2, metavar=("KIND", "NUMBER"))
    given = parser.parse_args()
    if given.one:
        kind, number = given.one[0], int(given.one[1])
        print(draw(kind, number).scenario_text)
        has, broken = one(kind, number)
        print("has an R0" if has else "has no R0", *(broken or ["no law is broken"]), sep="\n")
        return bool(broken)
    # a few of each kind in turn, so that a run broken off has seen them all
    each = -(-int(given.until) // len(KINDS))
    for step in range(25, each + 25, 25):
        for kind in KINDS:
            hunt(kind, min(step, each))
    total, found = 0, []
    for kind in KINDS:
        record = Record(kind.replace(" ", "-"), HOME)
        sums = record.save()
        total += int(sums.get("executions", 0))
        found += record.found()
        print(
            f"{kind:16}{int(sums.get('executions', 0)):>8,} models, {int(sums.get('accepted', 0)):,} with an R0, "
            f"{int(sums.get('crash', 0)):,} broken laws"
        )
    print(f"{'all':16}{total:>8,} models", *(f"    {place}  {path}" for place, path in found), sep="\n")
    return bool(found)


if __name__ == "__main__":
    sys.exit(main())
