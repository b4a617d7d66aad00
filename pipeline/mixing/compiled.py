"""How the kernels of this room are compiled. Importing it loads numba."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from numba import njit

if TYPE_CHECKING:
    from collections.abc import Callable


def compiled(function: Callable[..., Any]) -> Any:
    """Compile for one thread; the machine code is kept on disk where there is a place that can be written."""
    return _compile(function)


def compiled_step(function: Callable[..., Any]) -> Any:
    """Compile a step of a kernel, which makes no arrays, so that it counts no references to those it is given.

    Each count is an atomic operation; a step on a few hundred samples would spend a tenth of its time so.
    Numba refuses to compile a step that makes an array. The option is not one that numba promises to keep:
    a numba without it compiles the step like any other function, and its answers are the same.
    """
    try:
        return _compile(function, _nrt=False)
    except KeyError:  # what numba raises for an option that it does not know
        return _compile(function)


def inlined(function: Callable[..., Any]) -> Any:
    """Compile into every function that calls this one, which saves what handing arrays on costs."""
    return njit(inline="always", error_model="numpy")(function)


def _compile(function: Callable[..., Any], **options: Any) -> Any:
    try:
        return njit(cache=True, nogil=True, error_model="numpy", **options)(function)
    except RuntimeError:
        return njit(nogil=True, error_model="numpy", **options)(function)
