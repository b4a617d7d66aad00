"""A Dask cluster on whose workers the batches of a run are made: named by an option or the environment.

Every worker has this program in the same version, reaches the archive and the inbox under the same names (a
disk that all share, or a bucket, with its keys in the worker's own environment), and the run's Prefect server.
Nothing of Dask is loaded unless a cluster is named.
"""

from __future__ import annotations

import os
import socket
from typing import TYPE_CHECKING, Any
from urllib.parse import urlsplit

from pipeline.problems import UsageProblem

if TYPE_CHECKING:
    from prefect.task_runners import TaskRunner

ADDRESS = "SEAWHENCE_CLUSTER"  # in the environment, also of those whom a server has run the flow
_PATIENCE = 10.0  # seconds for the scheduler to answer
_LOOPBACK = frozenset({"127.0.0.1", "::1", "localhost"})


def named_cluster() -> str:
    """Return the address of the scheduler that the environment names, "" where it names none."""
    return os.environ.get(ADDRESS, "")


def use_cluster(address: str | None) -> None:
    """Have the flow, which is loaded later, use the cluster of an option; see that it answers.

    Parameters
    ----------
    address
        ``tcp://HOST:PORT`` of the scheduler; None leaves what the environment says.

    Raises
    ------
    UsageProblem
        If that is no address, nobody answers there, or what talks to Dask is not installed.

    """
    if address is None:
        return
    _require_answer(address)
    _require_packages()
    os.environ[ADDRESS] = address


def require_reachable_server(is_configured: bool) -> None:
    """See that workers on other machines have a Prefect server to report to: one of a run's own is on loopback.

    Raises
    ------
    UsageProblem
        If they have none.

    """
    address = named_cluster()
    if address and not is_configured and urlsplit(address).hostname not in _LOOPBACK:
        raise UsageProblem(
            f"--cluster: the workers of {address} report to a Prefect server, and none is named that other machines can"
            " reach; set PREFECT_API_URL to the address of its interface, here and for the workers."
        )


def runner_on(address: str) -> TaskRunner[Any]:
    """Return what runs tasks on the cluster at ``address``.

    Raises
    ------
    UsageProblem
        If what talks to Dask is not installed.

    """
    _require_packages()
    from prefect_dask.task_runners import DaskTaskRunner  # noqa: PLC0415 - takes a second, and where it is asked for only

    return DaskTaskRunner(address=address)


def _require_packages() -> None:
    from importlib.util import find_spec  # noqa: PLC0415

    if find_spec("prefect_dask") is None:
        raise UsageProblem(
            "--cluster: the package prefect-dask is not installed; install what a cluster needs: pip install"
            " 'seawhence[cluster]'."
        )


def _require_answer(address: str) -> None:
    """See that something listens at an address."""
    try:
        parts = urlsplit(address)
        host, port = parts.hostname, parts.port
    except ValueError:
        host = port = None
    if not host or not port or parts.scheme not in {"tcp", "tls"}:
        raise UsageProblem(
            f"--cluster: found '{address}', expected the address of a Dask scheduler, such as tcp://scheduler:8786;"
            " correct it."
        )
    try:
        socket.create_connection((host, port), _PATIENCE).close()
    except OSError as error:
        said = error.strerror or str(error)
        raise UsageProblem(
            f"--cluster: no Dask scheduler answers at {address} ({said}); start it, or correct the address."
        ) from error
