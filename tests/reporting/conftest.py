from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from tests.flows.conftest import FIXTURES, call
from tests.reporting.invented import inbox

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture(scope="session")
def archive(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the archive of two invented visits to one section."""
    folder = tmp_path_factory.mktemp("reporting")
    place, sources = inbox(folder, FIXTURES / "sources.toml")
    outcome = call("run", place, "--archive", folder / "archive", "--sources", sources)
    assert outcome.status == 0, outcome.out + outcome.err
    return folder / "archive"


@pytest.fixture(scope="session")
def pages(archive: Path) -> Path:
    """Return the directory of its pages."""
    out = archive.parent / "pages"
    outcome = call("report", archive, "--out", out)
    assert (outcome.status, outcome.err) == (0, ""), outcome.err
    return out
