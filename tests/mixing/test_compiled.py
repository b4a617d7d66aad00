"""How kernels are compiled, and that machine code kept on disk is never that of an older file."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from numba import njit

import pipeline.mixing
from pipeline.mixing import compiled, ensemble_kernel, kernel
from pipeline.mixing.pivoting import PATIENCE, exchanged

ROOM = Path(pipeline.mixing.__file__).parent
BUILT_IN = ("blocks", "making", "pivoting")  # compiled into both kernels


def _digest(names: tuple[str, ...]) -> str:
    return hashlib.sha256(b"".join((ROOM / f"{name}.py").read_bytes() for name in names)).hexdigest()[:16]


@pytest.mark.parametrize("module", [kernel, ensemble_kernel])
def test_machine_code_is_made_anew_when_what_it_is_built_from_has_changed(module: Any) -> None:
    """Numba looks at the time and size of one file: the number makes sure that the kernel's own changes too."""
    digest = _digest(BUILT_IN)
    path = Path(module.__file__)
    assert digest == module.BUILT_FROM, f'write BUILT_FROM = "{digest}" in {path.name}'
    loaded = [name for name in BUILT_IN if f"from pipeline.mixing.{name} import" in path.read_text("utf-8")]
    assert loaded == list(BUILT_IN)


def test_a_numba_without_the_option_of_steps_compiles_them_all_the_same(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    def plain(**options: Any) -> Any:
        if "_nrt" in options:
            raise KeyError("Unrecognized options: _nrt")
        return njit(**options)

    monkeypatch.setattr("pipeline.mixing.compiled.njit", plain)
    step = compiled.compiled_step(exchanged.py_func)
    assert step(0b1111, 0b0101, 9, 0) == exchanged(0b1111, 0b0101, 9, 0) == (0b1010, 2, PATIENCE)


def test_pivoting_exchanges_all_until_that_stalls_and_then_the_last() -> None:
    assert exchanged(0b111, 0b011, 3, PATIENCE) == (0b100, 2, PATIENCE)
    assert exchanged(0b100, 0b011, 2, 1) == (0b111, 2, 0)
    assert exchanged(0b111, 0b101, 2, 0) == (0b011, 2, -1)
    assert exchanged(0b011, 0b010, 2, -1) == (0b001, 1, PATIENCE)


def _python(code: str, **environment: str) -> str:
    finished = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=True,
        env={**os.environ, **environment},
    )
    return finished.stdout.strip()


def test_importing_the_room_neither_loads_numba_nor_compiles() -> None:
    code = (
        "import sys, pipeline.mixing; print('numba' in sys.modules, 'pipeline.mixing.kernel' in sys.modules)"
    )
    assert _python(code) == "False False"


def test_where_machine_code_cannot_be_kept_it_is_compiled_each_time() -> None:
    code = (
        "from pipeline.mixing import kernel; import numpy as np; v = np.zeros(2); "
        "print(kernel._judge(np.array([1, 2]), 0.0, np.array([-1.0, 3.0])))"
    )
    assert _python(code, NUMBA_CACHE_LOCATOR_CLASSES="IPythonCacheLocator") == "(1, -1.0)"
