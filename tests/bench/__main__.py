"""Benchmarks: ``python -m tests.bench NAME``. One module here per name, with a ``main(arguments)``."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from pathlib import Path

# Before numpy is imported: a benchmark of one thread means one thread everywhere.
for _library in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ.setdefault(_library, "1")


def main(arguments: list[str]) -> int:
    """Run the benchmark that is named first; the rest are its own arguments."""
    names = sorted(path.stem for path in Path(__file__).parent.glob("[!_]*.py"))
    if not arguments or arguments[0] not in names:
        print(f"usage: python -m tests.bench NAME, where NAME is one of: {', '.join(names)}", file=sys.stderr)
        return 2
    import_module(f"tests.bench.{arguments[0]}").main(arguments[1:])
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
