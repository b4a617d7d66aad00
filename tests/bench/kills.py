"""Runs killed at 50 random moments, and as flows at a few: ``python -m tests.bench kills [RUNS [FLOWS]]``."""

from __future__ import annotations

import tempfile
import time
from pathlib import Path

from tests.flows.killing import kill_direct_runs, kill_flow_runs, make_scene
from tests.flows.prefect_server import prefect_server

SEED = 20_260


def main(arguments: list[str]) -> None:
    """Kill runs, look at what they left, and run again."""
    runs, flows = (*map(int, arguments), *(50, 5)[len(arguments) :])
    with tempfile.TemporaryDirectory() as folder:
        place = Path(folder)
        scene = make_scene(place)
        began = time.monotonic()
        killed = kill_direct_runs(scene, runs, SEED)
        print(f"{runs} runs, every fifth killed twice: {killed} kills came before their end")
        print("every table opened, no cruise was mixed, each next run gave the bytes of an undisturbed one")
        print(f"{time.monotonic() - began:.0f} s")
        if flows:
            with prefect_server(place / "server") as server:
                killed = kill_flow_runs(scene, flows, SEED, server.address)
            print(f"{flows} runs as flows: {killed} kills came before their end; the same holds")
