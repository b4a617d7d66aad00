"""How well the checks find planted faults, and how often they cry wolf: ``python -m tests.checking.planted``.

Each module of ``MODULES`` has a function ``cases()`` that yields ``Case``.
"""

from __future__ import annotations

import sys
from importlib import import_module
from typing import TYPE_CHECKING

from pipeline.checking import CHECKS
from tests.checking.cases import (
    CRUISES,
    Case,
    clean_casts,
    clean_samples,
    doubted,
    restless_casts,
    restless_samples,
)
from tests.checking.planted_casts import offset_sensitivity
from tests.checking.planted_profiles import end_sensitivity, sensitivity
from tests.checking.planted_repeats import stuck_sensitivity

if TYPE_CHECKING:
    from collections.abc import Iterator

    import pyarrow as pa

MODULES = ("planted_delivery", "planted_profiles", "planted_repeats", "planted_chemistry", "planted_casts")
HEADINGS = (
    "check",
    "planted",
    "found",
    "look-alikes",
    "silent",
    "clean samples doubted",
    "clean levels doubted",
)


def cases() -> Iterator[Case]:
    """Yield the cases of all modules that are there."""
    for name in MODULES:
        try:
            module = import_module(f"tests.checking.{name}")
        except ModuleNotFoundError as error:
            if error.name != f"tests.checking.{name}":
                raise
            continue
        yield from module.cases()


def clean_tables() -> dict[str, list[pa.Table]]:
    """Return the clean tables of every invented cruise: calm as it was made, and in a restless sea."""
    samples, levels = (clean_samples, restless_samples), (clean_casts, restless_casts)
    return {
        "samples": [make(expocode) for make in samples for expocode in CRUISES],
        "levels": [make(expocode) for make in levels for expocode in CRUISES],
    }


def wolf(check: str, tables: list[pa.Table]) -> tuple[int, int]:
    """Return on how many rows of clean tables a check raises a doubt, and how many rows there are."""
    return sum(len(doubted(check, table)) for table in tables), sum(table.num_rows for table in tables)


def report() -> list[str]:
    """Return what was found, as a Markdown table, and the cases that went wrong."""
    lines = [f"| {' | '.join(HEADINGS)} |", "|" + " --- |" * len(HEADINGS)]
    wrong = []
    every = list(cases())
    clean = clean_tables()
    for check in sorted(CHECKS):
        mine = [(case, case.passes()) for case in every if case.check == check]
        wrong += [f"{check}: {case.label}" for case, passed in mine if not passed]
        planted = [passed for case, passed in mine if case.must_speak]
        alike = [passed for case, passed in mine if not case.must_speak]
        counts = [str(n) for n in (len(planted), sum(planted), len(alike), sum(alike))]
        shares = [_share(*wolf(check, tables)) for tables in clean.values()]
        lines.append(f"| {check} | {' | '.join([*counts, *shares])} |")
    for what, tables in clean.items():
        rows = sum(len(set().union(*(doubted(check, table) for check in CHECKS))) for table in tables)
        lines.append(
            f"Doubted by any check: {_share(rows, sum(t.num_rows for t in tables))} of clean {what}."
        )
    for title, shares_found in (
        ("Spikes of 1.5, 3 and 10 times the limit at random levels, found", sensitivity((1.5, 3.0, 10.0))),
        (
            "Deepest bottles 10, 30 and 100 spike limits off, found by gradient",
            end_sensitivity((10.0, 30.0, 100.0)),
        ),
        ("Casts of which a nutrient is 3, 5 and 10 % too high, found", offset_sensitivity((0.03, 0.05, 0.1))),
        ("Values repeated in 4, 6 and 10 bottles anywhere in a cast, found", stuck_sensitivity((4, 6, 10))),
    ):
        lines.append(f"{title}:")
        for what, found in shares_found.items():
            lines.append(f"  {what}: {', '.join(f'{100 * share:.0f} %' for share in found)}")
    return lines + [f"WRONG {label}" for label in wrong]


def _share(count: int, total: int) -> str:
    return f"{count} of {total} ({100 * count / total:.2f} %)"


if __name__ == "__main__":
    sys.stdout.write("\n".join(report()) + "\n")
