"""Fuzz the readers of text: ``python -m tests.fuzz parse --for 60``.

Runs add up: the inputs that reached something new are kept in ``.cache/fuzz/TARGET/corpus`` and are where the next run
starts; counts and crashes lie beside them. With atheris installed (``pip install atheris==3.0.0``, for Python 3.11 to
3.13) mutations are guided by coverage of the package's code; without it they are blind, and counted apart.

    python -m tests.fuzz counts                 what has been done so far
    python -m tests.fuzz scenario --for 600     seconds; `all` for every target, one after the other
    python -m tests.fuzz scenario --until 1e6   until so many executions have been counted over all runs
    python -m tests.fuzz again scenario FILE    one input, with its verdict
"""

from __future__ import annotations

import argparse
import importlib
import importlib.util
import random
import resource
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

from tests.fuzz.record import TARGETS, Record

#: Seconds between two savings of the counts.
_OFTEN = 2.0
#: Bytes of address space: an input that wants more meets a MemoryError, and the machine is left in peace.
_ROOM = 4_000_000_000


def blind(name: str, seconds: float, most: float, seed: int | None) -> None:
    """Mutate and run without guidance; what ends in words not met before in this run is kept to start from."""
    from tests.fuzz import targets
    from tests.fuzz.judge import Judge
    from tests.fuzz.mutation import mutated

    target, record = targets.TARGETS[name], Record(name)
    judge, rng = Judge(target.run), random.Random(seed)
    corpus = [*target.seeds, *(path.read_bytes() for path in sorted(record.corpus.iterdir()))]
    start = saved = time.monotonic()
    done = 0
    with judge:
        while done < most and time.monotonic() - start < seconds:
            data = mutated(rng.choice(corpus), rng, target.words, corpus, target.most)
            record.count(judge(data), data)
            record.add(blind=1)
            done += 1
            if time.monotonic() - saved > _OFTEN:
                record.add(seconds=time.monotonic() - saved)
                saved = time.monotonic()
                record.save()
    record.add(seconds=time.monotonic() - saved)
    record.save()


def guided(name: str, seconds: float, most: float, seed: int | None) -> None:
    """Let libFuzzer choose, guided by coverage of the package. Ends the process."""
    atheris: Any = importlib.import_module("atheris")
    with atheris.instrument_imports(include=["ngm"]):
        targets = importlib.import_module("tests.fuzz.targets")
        judges = importlib.import_module("tests.fuzz.judge")
        for text in targets.TARGETS[name].seeds:
            # what a reader imports when it is first used is to be seen too
            judges.Judge(targets.TARGETS[name].run)(text)
    from tests.fuzz.mutation import mutated

    resource.setrlimit(resource.RLIMIT_AS, (_ROOM, resource.getrlimit(resource.RLIMIT_AS)[1]))
    target, record = targets.TARGETS[name], Record(name)
    judge = judges.Judge(target.run)
    for number, text in enumerate(target.seeds):
        (record.corpus / f"seed-{number}").write_bytes(text)
    saved = time.monotonic()

    def one(data: bytes) -> None:
        nonlocal saved
        record.count(judge(data), data)
        if time.monotonic() - saved > _OFTEN:
            record.add(seconds=time.monotonic() - saved)
            saved = time.monotonic()
            record.save()

    def change(data: bytes, most_bytes: int, number: int) -> bytes:
        rng = random.Random(number)
        if rng.random() < 0.4:
            # most of the corpus is refused for one fault, and what comes after that fault would never be reached
            return mutated(rng.choice(target.seeds), rng, target.words, target.seeds, most_bytes)
        if rng.random() < 0.15:
            return bytes(atheris.Mutate(data, most_bytes))
        return mutated(data, rng, target.words, target.seeds, most_bytes)

    arguments = [sys.argv[0], str(record.corpus), f"-max_len={target.most}", f"-max_total_time={int(seconds)}"]
    arguments += [f"-runs={int(most)}"] if most < float("inf") else []
    arguments += [f"-seed={seed}"] if seed is not None else []
    arguments += ["-timeout=120", "-rss_limit_mb=3000", "-verbosity=0", f"-artifact_prefix={record.folder}/stopped-"]
    atheris.Setup(arguments, one, custom_mutator=change)
    with judge:
        atheris.Fuzz()


def shown(name: str) -> str:
    """Return one line with the sums of a target."""
    record = Record(name)
    sums = record.save()
    crashes = record.found()
    line = f"{name:10}{int(sums.get('executions', 0)):>12,} executions ({int(sums.get('blind', 0)):,} blind), "
    line += f"{int(sums.get('accepted', 0)):,} accepted, {int(sums.get('refused', 0)):,} refused, "
    line += f"{len(crashes)} kinds of crash, {sums.get('seconds', 0) / 3600:.2f} h"
    return "\n".join([line, *(f"    {place}  {path}" for place, path in crashes)])


def main() -> int:
    """Run the command; the exit code is 1 where a crash is on record."""
    parser = argparse.ArgumentParser(prog="python -m tests.fuzz", description=__doc__.partition("\n")[0])
    parser.add_argument("target", choices=[*TARGETS, "all", "counts", "again"])
    parser.add_argument("rest", nargs="*", help="again: target and file")
    parser.add_argument("--for", dest="seconds", type=float, default=60.0, help="seconds for each target")
    parser.add_argument("--until", type=float, help="executions over all runs; --for then does not end a run")
    parser.add_argument("--seed", type=int)
    parser.add_argument("--blind", action="store_true", help="do without atheris even where it is installed")
    parser.add_argument("--here", action="store_true", help=argparse.SUPPRESS)
    given = parser.parse_args()
    if given.target == "again":
        name, path = given.rest
        from tests.fuzz import targets
        from tests.fuzz.judge import Judge

        with Judge(targets.TARGETS[name].run) as judge:
            verdict = judge(Path(path).read_bytes())
        print(f"{verdict.kind} {verdict.place}\n{verdict.told}")
        return verdict.kind == "crash"
    names = list(TARGETS) if given.target in ("all", "counts") else [given.target]
    with_atheris = importlib.util.find_spec("atheris") is not None and not given.blind
    for name in names if given.target != "counts" else ():
        most = float("inf")
        if given.until is not None:
            most = given.until - Record(name).save().get("executions", 0)
            if most <= 0:
                continue
        seconds = 1e6 if given.until is not None else given.seconds
        if given.here:
            Record(name).add(runs=1)
            (guided if with_atheris else blind)(name, seconds, most, given.seed)
        else:
            # libFuzzer ends its process: so each target has one of its own
            wanted = ["--for", str(seconds), *(["--seed", str(given.seed)] if given.seed is not None else [])]
            wanted += ["--until", str(given.until)] if given.until is not None else []
            wanted += ["--blind"] if given.blind else []
            with (Record(name).folder / "log").open("w", encoding="utf-8") as log:
                subprocess.run([sys.executable, "-m", "tests.fuzz", name, "--here", *wanted], stderr=log, check=False)
    print(*map(shown, list(TARGETS) if given.target in ("all", "counts") else names), sep="\n")
    return any(Record(name).found() for name in names)


if __name__ == "__main__":
    sys.exit(main())
