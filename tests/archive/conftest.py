from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from .objects import name_server, served, spoiled

if TYPE_CHECKING:
    from collections.abc import Iterator

    from .objects import Faults


@pytest.fixture(scope="session")
def server(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """The address of a server of the S3 protocol, with one bucket."""
    with served(tmp_path_factory.mktemp("storage") / "log") as address:
        yield address


@pytest.fixture
def storage(server: str, monkeypatch: pytest.MonkeyPatch) -> str:
    """The same, named by the environment."""
    name_server(server, monkeypatch)
    return server


@pytest.fixture
def faults(server: str, monkeypatch: pytest.MonkeyPatch) -> Iterator[Faults]:
    """What decides the faults of a proxy before the server; the environment names the proxy."""
    with spoiled(server) as (address, decides):
        name_server(address, monkeypatch)
        yield decides
