"""Single objects put only if nobody else did, read with their age, and removed: what pyarrow does not offer.

Its removal of a file also leaves an empty object in the place of a directory that became empty.
"""

from __future__ import annotations

import http.client
import os
import re
import ssl
import time
from dataclasses import dataclass
from datetime import UTC, datetime
from email.utils import parsedate_to_datetime
from typing import TYPE_CHECKING

from pipeline.archive.endpoint import ANSWER_SECONDS
from pipeline.archive.signing import encoded_path, signed_headers

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.archive.endpoint import Endpoint

# Between attempts at a request, seconds.
WAITS = (0.2, 0.5, 1.0, 2.0, 4.0, 8.0)
_OVERLOADED = frozenset({408, 429, 500, 502, 503, 504})
_CONFLICT = 409  # another conditional request on the same object was under way
_UNMET = 412
_MISSING = 404
_OPERATIONS = {"PUT": "PutObject", "GET": "GetObject", "DELETE": "DeleteObject"}


@dataclass(frozen=True, slots=True)
class Found:
    """A small object as it was read."""

    body: bytes
    tag: str  # the server's mark of this very content
    age: float  # seconds since it was put, by the server's own clock


@dataclass(frozen=True, slots=True)
class _Answer:
    status: int
    headers: Mapping[str, str]  # names in lower case
    body: bytes


def put(endpoint: Endpoint, path: str, body: bytes, *, replacing: str | None) -> str | None:
    """Put an object and return its tag; None where the condition does not hold, and then nothing is changed.

    Parameters
    ----------
    endpoint, path
        The server, and ``BUCKET/KEY``.
    body
        Its bytes.
    replacing
        The tag of the object that must be there, None if there must be none.

    Raises
    ------
    OSError
        As every function here: if the server refuses, or does not answer after all attempts.

    """
    condition = {"If-None-Match": "*"} if replacing is None else {"If-Match": replacing}
    answer = _send(endpoint, "PUT", path, condition, body)
    if answer.status in {_UNMET, _CONFLICT, _MISSING}:
        return None
    return answer.headers.get("etag", "")


def get(endpoint: Endpoint, path: str) -> Found | None:
    """Return an object, None where there is none."""
    answer = _send(endpoint, "GET", path, {}, b"")
    if answer.status == _MISSING:
        return None
    headers = answer.headers
    age = parsedate_to_datetime(headers["date"]) - parsedate_to_datetime(headers["last-modified"])
    return Found(answer.body, headers.get("etag", ""), age.total_seconds())


def remove(endpoint: Endpoint, path: str) -> None:
    """Remove an object, if it is there."""
    _send(endpoint, "DELETE", path, {}, b"")


def _send(endpoint: Endpoint, method: str, path: str, headers: Mapping[str, str], body: bytes) -> _Answer:
    """Send a request, again while the server is overloaded or silent; refusals are raised."""
    for wait in (*WAITS, None):
        try:
            answer = _exchange(endpoint, method, path, headers, body)
        except (OSError, http.client.HTTPException) as error:
            if wait is None:
                said = type(error).__name__ if isinstance(error, http.client.HTTPException) else str(error)
                raise OSError(_words("NETWORK_CONNECTION", None, method, said)) from error
        else:
            if wait is None or answer.status not in _OVERLOADED:
                break
        time.sleep(wait)
    expected = answer.status in {_UNMET, _CONFLICT, _MISSING} and b"<Code>NoSuchBucket<" not in answer.body
    if answer.status >= 300 and not expected:
        raise _refusal(answer, method)
    return answer


def _exchange(endpoint: Endpoint, method: str, path: str, headers: Mapping[str, str], body: bytes) -> _Answer:
    where = encoded_path(path)
    signed = signed_headers(endpoint, method, where, headers, body, datetime.now(UTC))
    connection: http.client.HTTPConnection
    if endpoint.scheme == "https":
        context = ssl.create_default_context(cafile=os.environ.get("AWS_CA_BUNDLE") or None)
        connection = http.client.HTTPSConnection(endpoint.host, timeout=ANSWER_SECONDS, context=context)
    else:
        connection = http.client.HTTPConnection(endpoint.host, timeout=ANSWER_SECONDS)
    try:
        connection.request(method, where, body, signed)
        answer = connection.getresponse()
        return _Answer(
            answer.status, {name.lower(): value for name, value in answer.getheaders()}, answer.read()
        )
    finally:
        connection.close()


def _refusal(answer: _Answer, method: str) -> OSError:
    text = answer.body.decode(errors="replace")
    code = re.search(r"<Code>([^<]*)</Code>", text)
    message = re.search(r"<Message>([^<]*)</Message>", text)
    words = _words(
        code[1] if code else "UNKNOWN", answer.status, method, message[1] if message else "no words"
    )
    return OSError(words)


def _words(code: str, status: int | None, method: str, message: str) -> str:
    """Return a refusal as pyarrow words it, so that one place reads both."""
    name = re.sub(r"(?<=[a-z])(?=[A-Z])", "_", code).upper()
    told = f" (HTTP status {status})" if status else ""
    return f"AWS Error {name}{told} during {_OPERATIONS[method]} operation: {message}"
