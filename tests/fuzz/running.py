"""Cases in child processes: one that dies or hangs is an outcome, and the next child goes on behind it."""

from __future__ import annotations

import json
import selectors
import subprocess
import sys
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

from tests.fuzz.cases import Outcome, case, run_case

if TYPE_CHECKING:
    from collections.abc import Iterator

ROOT = Path(__file__).parent.parent.parent
MOST_SILENCE = 60  # seconds in which a child says nothing; a case may take ten


def run_cases(start: int, stop: int) -> Iterator[Outcome]:
    """Yield the outcome of every case of a range."""
    while start < stop:
        for outcome in _child(start, stop):
            yield outcome
            start = outcome.number + 1


def _child(start: int, stop: int) -> Iterator[Outcome]:
    """Yield outcomes from one child until it is done, dies or falls silent."""
    command = [sys.executable, "-m", "tests.fuzz.running", str(start), str(stop)]
    with subprocess.Popen(
        command, cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as child:
        assert child.stdout is not None
        assert child.stderr is not None
        selector = selectors.DefaultSelector()
        selector.register(child.stdout, selectors.EVENT_READ)
        following = start
        while following < stop:
            if not selector.select(MOST_SILENCE):
                child.kill()
                yield Outcome(following, case(following)[0].name, "hang", float(MOST_SILENCE))
                return
            line = child.stdout.readline()
            if not line:
                said = f"exit status {child.wait()}: {child.stderr.read()[-2000:]}"
                yield Outcome(following, case(following)[0].name, "crash", said=said)
                return
            outcome = Outcome(**json.loads(line))
            yield outcome
            following = outcome.number + 1


def _main() -> None:
    start, stop = (int(argument) for argument in sys.argv[1:])
    for number in range(start, stop):
        print(json.dumps(asdict(run_case(number))), flush=True)


if __name__ == "__main__":
    _main()
