from __future__ import annotations

import hashlib
import io
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import dataclass
from pathlib import Path

import pytest

from flows.cli import main

ROOT = Path(__file__).parent.parent.parent
FIXTURES = ROOT / "fixtures"


@dataclass(frozen=True)
class Outcome:
    """What one call of the command gave."""

    status: int
    out: str
    err: str


def call(*arguments: str | Path) -> Outcome:
    """Call the command in this process."""
    out, err = io.StringIO(), io.StringIO()
    with redirect_stdout(out), redirect_stderr(err):
        status = main([str(argument) for argument in arguments])
    return Outcome(status, out.getvalue(), err.getvalue())


def hashes(folder: Path) -> dict[str, str]:
    """Return the hash of every file below a folder."""
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != ".lock"
    }


@pytest.fixture(scope="session")
def demonstration(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Outcome]:
    """Return the archive that the invented cruises give, and what the command said."""
    archive = tmp_path_factory.mktemp("demonstration") / "archive"
    outcome = call(
        "run", FIXTURES / "inbox", "--archive", archive, "--sources", FIXTURES / "sources.toml",
        "--summary", archive.parent / "summary.json",
    )  # fmt: skip
    return archive, outcome
