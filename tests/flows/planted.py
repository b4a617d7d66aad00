"""A cruise that never ends and one that ends its process, for runs whose cruises are made in processes apart."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

from tests.flows.conftest import ROOT

if TYPE_CHECKING:
    from pathlib import Path

ENDLESS, FATAL = "ZZV120090214", "ZZV220210301"

# Found by every Python process that is started; the sleep is a call of C that keeps the interpreter to itself and minds
# no signal but the one that nothing survives.
_SITE = f"""
import os
if os.environ.get("PLANTED"):
    import ctypes, signal
    from pipeline import process
    real = process.process_cruise
    def planted(expocode, *arguments):
        if expocode == "{ENDLESS}":
            ctypes.PyDLL(None).sleep(600)
        if expocode == "{FATAL}":
            os.kill(os.getpid(), signal.SIGSEGV)
        return real(expocode, *arguments)
    process.process_cruise = planted
"""


def plant(place: Path) -> dict[str, str]:
    """Write what plants them below ``place``; return the environment in which it is found."""
    place.mkdir()
    (place / "sitecustomize.py").write_text(_SITE, encoding="utf-8")
    return {"PLANTED": "yes", "PYTHONPATH": f"{place}{os.pathsep}{ROOT}"}
