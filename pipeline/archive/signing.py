"""The signature of a request in the S3 protocol (AWS Signature Version 4). Pure: no clock, no network."""

from __future__ import annotations

import hashlib
import hmac
from typing import TYPE_CHECKING
from urllib.parse import quote

if TYPE_CHECKING:
    from collections.abc import Mapping
    from datetime import datetime

    from pipeline.archive.endpoint import Endpoint

_METHOD = "AWS4-HMAC-SHA256"
_UNRESERVED = "/-_.~"


def encoded_path(path: str) -> str:
    """Return ``BUCKET/KEY`` as the path of a request."""
    return "/" + quote(path, safe=_UNRESERVED)


def signed_headers(
    endpoint: Endpoint, method: str, path: str, headers: Mapping[str, str], body: bytes, moment: datetime
) -> dict[str, str]:
    """Return the headers of a request with its signature.

    Parameters
    ----------
    endpoint
        The server, and the keys to sign with.
    method, path, headers, body
        The request; ``path`` as ``encoded_path`` gives it. All headers are signed.
    moment
        The time of the request, in UTC; servers refuse one that is a quarter of an hour off.

    References
    ----------
    Amazon S3 API Reference, "Signature Calculations for the Authorization Header: Transferring Payload in a
    Single Chunk (AWS Signature Version 4)". Written from memory; tests compare it with an independent library.

    """
    stamp = moment.strftime("%Y%m%dT%H%M%SZ")
    hashed = hashlib.sha256(body).hexdigest()
    all_headers = {
        **{name.lower(): value for name, value in headers.items()},
        "host": endpoint.host,
        "x-amz-content-sha256": hashed,
        "x-amz-date": stamp,
    }
    if endpoint.session_token:
        all_headers["x-amz-security-token"] = endpoint.session_token
    names = ";".join(sorted(all_headers))
    lines = [f"{name}:{all_headers[name].strip()}" for name in sorted(all_headers)]
    request = "\n".join([method, path, "", *lines, "", names, hashed])
    scope = f"{stamp[:8]}/{endpoint.region}/s3/aws4_request"
    digest = hashlib.sha256(request.encode()).hexdigest()
    key = f"AWS4{endpoint.secret_key}".encode()
    for part in (*scope.split("/"), f"{_METHOD}\n{stamp}\n{scope}\n{digest}"):
        key = hmac.new(key, part.encode(), hashlib.sha256).digest()
    credential = f"{endpoint.access_key}/{scope}"
    all_headers["authorization"] = (
        f"{_METHOD} Credential={credential}, SignedHeaders={names}, Signature={key.hex()}"
    )
    return all_headers
