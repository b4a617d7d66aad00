"""The command ``seawhence nightly``: the flow on a schedule, served from this process or given to a work pool."""

from __future__ import annotations

import os
import re
import signal
import threading
from datetime import timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from flows import notifying
from flows.cluster import ADDRESS, require_reachable_server, use_cluster
from flows.embedded import Server, prepare_environment, server_is_configured
from flows.records import ExitStatus
from flows.running import run_once
from pipeline.mixing import read_catalogue
from pipeline.problems import UsageProblem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse

    from prefect.deployments.runner import RunnerDeployment

    from flows.places import Place

DEAD_RUNS = "seawhence: a run without heartbeats is marked as crashed"
# Three of the heartbeats that the environment asks of a run.
_WITHOUT_HEARTBEATS = timedelta(seconds=90)
_TIME = re.compile(r"([01]?\d|2[0-3]):([0-5]\d)")


def nightly(chosen: argparse.Namespace) -> int:
    """Run once, serve the flow on its schedule until stopped, or deploy it and return."""
    to = notifying.whom(chosen.notify_command, chosen.notify_url)
    use_cluster(chosen.cluster)
    require_reachable_server(server_is_configured())
    if chosen.once:
        return run_once(chosen, to, as_flow=True, brief=True)
    cron = cron_of(chosen.at)
    _look_over(chosen)
    if chosen.pool:
        return _deploy(chosen, cron)
    if to.command:
        os.environ[notifying.COMMAND] = chosen.notify_command or os.environ[notifying.COMMAND]
    if to.url:
        os.environ[notifying.URL] = to.url
    return _serve(chosen, cron)


def cron_of(at: str) -> str:
    """Return the five fields of cron for a time of day; text of five fields is that already.

    Raises
    ------
    UsageProblem
        If it is neither.

    """
    if found := _TIME.fullmatch(at.strip()):
        return f"{int(found[2])} {int(found[1])} * * *"
    if len(at.split()) == 5:
        return " ".join(at.split())
    raise UsageProblem(
        f"--at: found '{at}', expected a time of day such as 02:30, or the five fields of cron; correct it."
    )


def deployment_name(archive: Place) -> str:
    """Return the name under which a server knows the runs of an archive: its place, so that each has one of its own."""
    return re.sub(r"[^\w.]+", "-", _written(archive)).strip("-") or "root"


def _written(place: Place) -> str:
    """Return a place as a run in another directory finds it."""
    return str(place.absolute()) if isinstance(place, Path) else str(place)


def _look_over(chosen: argparse.Namespace) -> None:
    """Tell at once what each night would be told otherwise."""
    read_settings(chosen.settings)
    if chosen.sources:
        read_catalogue(chosen.sources)
    if isinstance(chosen.inbox, Path) and not chosen.inbox.is_dir():
        raise UsageProblem(
            f"{chosen.inbox}: there is no such directory; give the directory of the delivered files."
        )
    try:
        ZoneInfo(chosen.timezone)
    except (ZoneInfoNotFoundError, ValueError, OSError) as error:
        raise UsageProblem(
            f"--timezone: found '{chosen.timezone}', expected a name of the time zone database, such as UTC or"
            " Atlantic/Reykjavik; correct it."
        ) from error


def _deployment(chosen: argparse.Namespace, cron: str) -> RunnerDeployment:
    """Return what the server is to know of the flow: its schedule, its arguments, and that one run excludes another."""
    from prefect.client.schemas.objects import (  # noqa: PLC0415 - Prefect takes two seconds to load
        ConcurrencyLimitConfig,
        ConcurrencyLimitStrategy,
    )
    from prefect.deployments.runner import RunnerDeployment  # noqa: PLC0415
    from prefect.flows import EntrypointType  # type: ignore[attr-defined]  # noqa: PLC0415
    from prefect.schedules import Cron  # noqa: PLC0415

    from flows.nightly import bring_up_to_date  # noqa: PLC0415

    places = {name: getattr(chosen, name) for name in ("inbox", "archive", "sources", "settings", "summary")}
    pool: dict[str, Any] = {}
    if chosen.pool:
        environment = {name: os.environ[name] for name in (*_FOR_EVERY_RUN, ADDRESS) if name in os.environ}
        pool = {"work_pool_name": chosen.pool, "job_variables": {"env": environment}}
    try:
        return RunnerDeployment.from_flow(
            bring_up_to_date,
            deployment_name(chosen.archive),
            schedule=Cron(cron, timezone=chosen.timezone),
            concurrency_limit=ConcurrencyLimitConfig(
                limit=1, collision_strategy=ConcurrencyLimitStrategy.CANCEL_NEW
            ),
            parameters={name: _written(place) if place else None for name, place in places.items()},
            entrypoint_type=EntrypointType.MODULE_PATH,
            description=f"Brings the archive {_written(chosen.archive)} up to date.",
            **pool,
        )
    except ValueError as error:
        raise UsageProblem(
            f"--at: '{cron}' is no time that cron knows; give a time of day such as 02:30, or the five fields of cron."
        ) from error


_FOR_EVERY_RUN = ("PREFECT_SERVER_ANALYTICS_ENABLED", "DO_NOT_TRACK", "PREFECT_FLOWS_HEARTBEAT_FREQUENCY")


def _deploy(chosen: argparse.Namespace, cron: str) -> int:
    if not server_is_configured():
        raise UsageProblem(
            "--pool: no Prefect server is named; set PREFECT_API_URL to the address of its interface."
        )
    if chosen.notify_command or chosen.notify_url:
        raise UsageProblem(
            f"--pool: whom to notify is told to the worker, as {notifying.COMMAND} or {notifying.URL} in its"
            " environment; everybody who sees the server would see it here. Leave the option out."
        )
    prepare_environment()
    deployment = _deployment(chosen, cron)
    _see_to_dead_runs()
    _apply(deployment, chosen.pool)
    print(
        f"Deployed to the work pool '{chosen.pool}' as '{deployment.flow_name}/{deployment.name}', {_when(chosen)}."
        f" A worker runs it: prefect worker start --pool '{chosen.pool}' --type process"
    )
    return int(ExitStatus.GOOD)


def _apply(deployment: RunnerDeployment, pool: str) -> None:
    from prefect.deployments.runner import DeploymentApplyError  # noqa: PLC0415
    from prefect.exceptions import ObjectNotFound  # noqa: PLC0415

    try:
        deployment.apply()
    except (DeploymentApplyError, ObjectNotFound) as error:
        raise UsageProblem(
            f"--pool: the server does not know a work pool '{pool}'; make it with: prefect work-pool create '{pool}'"
            " --type process"
        ) from error


def _serve(chosen: argparse.Namespace, cron: str) -> int:
    """Serve until stopped; where the server of our own ends before, so does this."""
    prepare_environment()
    own = None if server_is_configured() else Server(one_run=False)
    from prefect import serve  # noqa: PLC0415

    deployment = _deployment(chosen, cron)
    if own is not None:
        own.wait()
    _see_to_dead_runs()
    print(
        f"The archive {chosen.archive} is brought up to date with {chosen.inbox} {_when(chosen)}; {_where(own)}."
        f" To run it now: prefect deployment run '{deployment.flow_name}/{deployment.name}'. Stop with Ctrl-C.",
        flush=True,
    )
    lost = threading.Event()
    if own is not None:
        threading.Thread(target=_end_with, args=(own, lost), daemon=True).start()
    # Asked to end, the runner ends its runs and says so to the server; interrupted, it says nothing.
    signal.signal(signal.SIGINT, lambda *_: signal.raise_signal(signal.SIGTERM))
    # The server refuses a second run of the deployment; left to this process it would only wait for the first.
    serve(deployment, pause_on_shutdown=False, print_starting_message=False)
    if lost.is_set():
        raise UsageProblem("the Prefect server ended, and so does this; start it again.")
    return int(ExitStatus.GOOD)


def _when(chosen: argparse.Namespace) -> str:
    often = "every day at" if _TIME.fullmatch(chosen.at.strip()) else "at the times of cron"
    return f"{often} {chosen.at.strip()}, {chosen.timezone}"


def _where(own: Server | None) -> str:
    if own is None:
        return "the server that PREFECT_API_URL names keeps the runs"
    return f"{own.address} shows the runs, with PREFECT_API_URL={own.address}/api for the commands of Prefect"


def _end_with(own: Server, lost: threading.Event) -> None:
    own.process.wait()
    if not own.stopping:
        lost.set()
        os.kill(os.getpid(), signal.SIGTERM)


def _see_to_dead_runs() -> None:
    """Have the server mark a run as crashed that died with its machine: it would stand as running for ever."""
    from prefect.client.orchestration import get_client  # noqa: PLC0415
    from prefect.client.schemas.objects import StateType  # noqa: PLC0415
    from prefect.events.actions import ChangeFlowRunState  # noqa: PLC0415
    from prefect.events.schemas.automations import AutomationCore, EventTrigger, Posture  # noqa: PLC0415

    ends = {f"prefect.flow-run.{name}" for name in ("Completed", "Failed", "Cancelled", "Crashed")}
    with get_client(sync_client=True) as client:
        if client.read_automations_by_name(DEAD_RUNS):
            return
        client.create_automation(
            AutomationCore(
                name=DEAD_RUNS,
                trigger=EventTrigger(
                    # The first heartbeat comes half a minute after the start.
                    after={"prefect.flow-run.Running", "prefect.flow-run.heartbeat"},
                    expect={"prefect.flow-run.heartbeat", *ends},
                    match={"prefect.resource.id": "prefect.flow-run.*"},
                    match_related={
                        "prefect.resource.name": "seawhence",
                        "prefect.resource.role": "flow",
                    },
                    for_each={"prefect.resource.id"},
                    posture=Posture.Proactive,
                    threshold=1,
                    within=_WITHOUT_HEARTBEATS,
                ),
                actions=[
                    ChangeFlowRunState(
                        state=StateType.CRASHED,
                        message="No heartbeat came: the process or its machine ended. The next run goes on from there.",
                    )
                ],
            )
        )
