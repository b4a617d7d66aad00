"""Seawhence's library: cruises in, checked and resolved tables out. It never loads Prefect.

For whoever reads an archive: ``pipeline.open_archive(place)``. Nothing is loaded before it is asked for.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pipeline.opening import Archive, View, open_archive

__all__ = ["Archive", "View", "open_archive"]


def __getattr__(name: str) -> Any:
    if name in __all__:
        from pipeline import opening  # noqa: PLC0415 - the light import of the package stays light

        return getattr(opening, name)
    raise AttributeError(f"module 'pipeline' has no attribute '{name}'")
