"""Where S3-compatible storage answers and with which keys, told by the environment alone; keys are never shown."""

from __future__ import annotations

import functools
import os
from dataclasses import dataclass, field
from typing import Any
from urllib.parse import urlsplit

from pipeline.problems import ArchiveProblem

SCHEME = "s3://"
DEFAULT_REGION = "us-east-1"  # what servers that have no regions call theirs

# The library waits between attempts for a random time below 1, 2, 4, 8, 16, 20 s: at most 51 s in all.
ATTEMPTS = 7
ANSWER_SECONDS = 60.0  # to wait for the first byte of an answer
CONNECT_SECONDS = 10.0


@dataclass(frozen=True, slots=True)
class Endpoint:
    """A server of the S3 protocol and who asks it."""

    scheme: str
    host: str  # with its port, if any
    region: str
    access_key: str = field(repr=False)
    secret_key: str = field(repr=False)
    session_token: str = field(default="", repr=False)

    @property
    def address(self) -> str:
        """The server as the user knows it."""
        return f"{self.scheme}://{self.host}"


def is_bucket(place: str) -> bool:
    """Return whether a place is named as one in a bucket."""
    return place.startswith(SCHEME)


def bucket_path(place: str) -> str:
    """Return ``BUCKET/PATH`` of ``s3://BUCKET/PATH``, with no slash at its end.

    Raises
    ------
    ArchiveProblem
        Where the bucket is not named, or a part of the path is empty or a dot.

    """
    path = place.removeprefix(SCHEME).rstrip("/")
    parts = path.split("/")
    if not all(parts) or not {".", ".."}.isdisjoint(parts):
        raise ArchiveProblem(f"{place}: expected s3://BUCKET/PATH, with no empty part and no dots for one.")
    return path


def read_endpoint() -> Endpoint:
    """Return what the environment says of the storage.

    Raises
    ------
    ArchiveProblem
        Where the keys are missing, or the address is none.

    """
    missing = [name for name in ("AWS_ACCESS_KEY_ID", "AWS_SECRET_ACCESS_KEY") if not os.environ.get(name)]
    if missing:
        raise ArchiveProblem(
            f"{' and '.join(missing)}: not set in the environment; places that begin with {SCHEME} need them, and"
            " nothing else is looked at for keys; set them and run again."
        )
    region = os.environ.get("AWS_REGION") or os.environ.get("AWS_DEFAULT_REGION") or DEFAULT_REGION
    address = os.environ.get("AWS_ENDPOINT_URL_S3") or os.environ.get("AWS_ENDPOINT_URL")
    parts = urlsplit(address or f"https://s3.{region}.amazonaws.com")
    if parts.scheme not in {"http", "https"} or not parts.hostname or parts.path.strip("/") or parts.username:
        raise ArchiveProblem(
            "AWS_ENDPOINT_URL: found an address that cannot be used; expected http://HOST:PORT or https://HOST, with no"
            " path and no name before the host."
        )
    return Endpoint(
        parts.scheme, parts.netloc, region,
        os.environ["AWS_ACCESS_KEY_ID"], os.environ["AWS_SECRET_ACCESS_KEY"],
        os.environ.get("AWS_SESSION_TOKEN", ""),
    )  # fmt: skip


@functools.lru_cache(maxsize=4)
def files_of(endpoint: Endpoint) -> Any:
    """Return the endpoint as a file system of pyarrow; one per process, since it keeps its connections."""
    from pyarrow import fs  # noqa: PLC0415 - for storage of this kind only

    authorities = os.environ.get("AWS_CA_BUNDLE")
    return fs.S3FileSystem(
        access_key=endpoint.access_key,
        secret_key=endpoint.secret_key,
        session_token=endpoint.session_token or None,
        region=endpoint.region,
        scheme=endpoint.scheme,
        endpoint_override=endpoint.host,
        request_timeout=ANSWER_SECONDS,
        connect_timeout=CONNECT_SECONDS,
        retry_strategy=fs.AwsStandardS3RetryStrategy(max_attempts=ATTEMPTS),
        allow_delayed_open=True,  # a small file is one request
        **({"tls_ca_file_path": authorities} if authorities else {}),
    )
