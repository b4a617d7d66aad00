"""What the files of a report are called."""

from __future__ import annotations

from pipeline.archive.layout import safe_name

INDEX = "index.html"
DATA = "data"


def file_name(expocode: str) -> str:
    """Return the path of a cruise's page."""
    return f"cruise_{safe_name(expocode)}.html".replace("%", "=")


def csv_path(stem: str, table: str) -> str:
    """Return the path of a CSV file; a percent sign in a name would be read as an escape in a link."""
    return f"{DATA}/{safe_name(stem)}_{table}.csv".replace("%", "=")
