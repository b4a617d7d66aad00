"""Print every check with what the code gives now: ``python -m tests.published``. Exit status 1 if one fails."""

from __future__ import annotations

import sys
from collections import Counter

from .table import TABLE


def main() -> int:
    """Print the table and return the exit status."""
    failed = 0
    lines = [f"{'':4}  {'expected':>22}  {'computed':>22}  {'tolerance':>9}  check | status | source"]
    for check in TABLE:
        computed = check.computed()
        holds = check.holds(computed)
        failed += not holds
        lines.append(
            f"{'pass' if holds else 'FAIL'}  {check.expected:>22}  {computed:>22.15g}  {check.tolerance:>9.2g}  "
            f"{check} | {check.status} | {check.source}"
        )
    counts = ", ".join(f"{count} {status}" for status, count in Counter(c.status for c in TABLE).items())
    lines.append(f"{len(TABLE)} checks ({counts}); {failed} failed")
    sys.stdout.write("\n".join(lines) + "\n")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
