"""A Python module run as a program that ends with who started it: ``python -m flows.watched MODULE ARGUMENT...``.

Who starts it holds the other end of its standard input. When that closes, by whatever end of that process, the
program is asked to stop, and made to where it does not.
"""

from __future__ import annotations

import os
import runpy
import signal
import sys
import threading
import time

_GRACE_SECONDS = 15.0


def _watch() -> None:
    while os.read(0, 1024):
        pass
    os.kill(os.getpid(), signal.SIGTERM)
    time.sleep(_GRACE_SECONDS)
    os._exit(1)


if __name__ == "__main__":
    threading.Thread(target=_watch, daemon=True).start()
    sys.argv = sys.argv[1:]
    runpy.run_module(sys.argv[0], run_name="__main__", alter_sys=True)
