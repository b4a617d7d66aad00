"""The command line: arguments to calls, results to stdout, messages to stderr, exceptions to exit status."""

from __future__ import annotations

import importlib
import os
import sys
import traceback
from typing import TYPE_CHECKING

from flows.parsers import parser
from flows.records import ExitStatus
from pipeline.problems import DeliveryProblem, Problem

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence

# Command: the module of this package and its function, which takes the arguments and returns the exit status.
COMMANDS = {
    "run": ("running", "run"),
    "nightly": ("serving", "nightly"),
    "check": ("looking", "check"),
    "mapping": ("mapping", "mapping"),
    "show": ("showing", "show"),
    "changes": ("changes", "changes"),
    "sources": ("sources", "sources"),
    "crossovers": ("crossovers", "crossovers"),
    "census": ("census", "census"),
    "export": ("exporting", "export"),
    "dictionary": ("dictionary", "dictionary"),
    "report": ("reporting", "report"),
    "speciation": ("speciation", "print_speciation"),
}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command and return its exit status."""
    try:
        chosen = parser().parse_args(arguments)
    except SystemExit as stop:  # argparse has said what is wrong
        return int(stop.code or 0)
    try:
        return int(_run(chosen))
    except DeliveryProblem as problem:
        return _refuse(problem, ExitStatus.REFUSED)
    except Problem as problem:
        return _refuse(problem, ExitStatus.USAGE)
    except BrokenPipeError:  # the reader of our output has seen enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return int(ExitStatus.GOOD)
    except KeyboardInterrupt:
        print(
            "seawhence: stopped; the archive is whole, and the next run goes on from here.", file=sys.stderr
        )
        return 130
    except Exception:  # noqa: BLE001 - the last place where a fault of ours can be told
        traceback.print_exc()
        print(
            "seawhence: this is a fault of seawhence, not of your files; please report it.", file=sys.stderr
        )
        return int(ExitStatus.FAULT)


def run_and_exit() -> None:
    """Run the command as the process that it is."""
    sys.exit(main())


def _run(chosen: argparse.Namespace) -> int:
    """Call what does the work of a command; only then are the rooms loaded, which takes a second."""
    module, name = COMMANDS[chosen.command]
    return int(getattr(importlib.import_module(f"flows.{module}"), name)(chosen))


def _refuse(problem: Problem, status: ExitStatus) -> int:
    for sentence in str(problem).splitlines():
        print(f"seawhence: {sentence}", file=sys.stderr)
    return int(status)
