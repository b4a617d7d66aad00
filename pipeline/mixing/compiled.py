"""How the kernels of this room are compiled. Importing it loads numba."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from numba import njit

if TYPE_CHECKING:
    from collections.abc import Callable


def compiled(function: Callable[..., Any]) -> Any:
    """Compile for one thread; the machine code is kept on disk where there is a place that can be written."""
    try:
        return njit(cache=True, nogil=True, error_model="numpy")(function)
    except RuntimeError:
        return njit(nogil=True, error_model="numpy")(function)


def inlined(function: Callable[..., Any]) -> Any:
    """Compile into every function that calls this one, which saves what handing arrays on costs."""
    return njit(inline="always", error_model="numpy")(function)
