"""``python -m tests.fuzz [CASES] [FIRST]``: broken files by the thousand, and what became of them."""

from __future__ import annotations

import sys
import time
from collections import Counter
from concurrent.futures import ThreadPoolExecutor
from itertools import chain

from tests.fuzz.running import run_cases

PROCESSES = 2


def main() -> int:
    """Run the cases in two processes and print the outcomes by seed; 1 where any was not as it must be."""
    n_case = int(sys.argv[1]) if len(sys.argv) > 1 else 20_000
    first = int(sys.argv[2]) if len(sys.argv) > 2 else 0
    began = time.perf_counter()
    share = -(-n_case // PROCESSES)
    ranges = [(first + i * share, min(first + (i + 1) * share, first + n_case)) for i in range(PROCESSES)]
    with ThreadPoolExecutor(PROCESSES) as pool:
        outcomes = list(chain.from_iterable(pool.map(lambda ends: list(run_cases(*ends)), ranges)))
    counts = Counter((outcome.seed, outcome.result) for outcome in outcomes)
    for seed in sorted({outcome.seed for outcome in outcomes}):
        words = ", ".join(f"{result} {counts[seed, result]}" for (s, result) in sorted(counts) if s == seed)
        print(f"{seed}: {words}")
    bad = [outcome for outcome in outcomes if not outcome.good]
    for outcome in bad[:20]:
        print(f"\ncase {outcome.number} of {outcome.seed}: {outcome.result}\n{outcome.said}")
    slowest = max(outcome.seconds for outcome in outcomes)
    print(
        f"{len(outcomes)} cases, {len(bad)} not as they must be; slowest {slowest:.2f} s;"
        f" {time.perf_counter() - began:.0f} s in all"
    )
    return 1 if bad else 0


if __name__ == "__main__":
    sys.exit(main())
