"""The first night of many tiny cruises and one with nothing new: ``python -m tests.bench nights [CRUISES]``."""

from __future__ import annotations

import resource
import subprocess
import tempfile
import time
from pathlib import Path

from tests.flows.conftest import ROOT
from tests.flows.prefect_server import COMMAND
from tests.invented import bottle_file


def main(arguments: list[str]) -> None:
    """Run twice over the same inbox."""
    count = int(arguments[0]) if arguments else 1000
    with tempfile.TemporaryDirectory() as folder:
        inbox = Path(folder) / "inbox"
        inbox.mkdir()
        for number in range(count):
            day = f"{2000 + number // 336}{1 + number // 28 % 12:02d}{1 + number % 28:02d}"
            rows = [{"EXPOCODE": f"ZZV1{day}", "DATE": day}] * 3
            (inbox / f"{number:05d}_hy1.csv").write_bytes(bottle_file(*rows))
        for night in ("first night", "nothing new"):
            began = time.monotonic()
            run = [*COMMAND, "run", str(inbox), "--archive", f"{folder}/archive"]
            said = subprocess.run(run, cwd=ROOT, check=True, capture_output=True, text=True).stdout
            print(f"{night}: {time.monotonic() - began:.1f} s. {said.splitlines()[-1].partition('.')[0]}.")
    peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss // 1024
    print(f"{count} cruises, peak {peak} MB")
