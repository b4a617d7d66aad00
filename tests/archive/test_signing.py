from __future__ import annotations

from datetime import UTC, datetime

import pytest
from botocore.auth import S3SigV4Auth
from botocore.awsrequest import AWSRequest
from botocore.credentials import Credentials

from pipeline.archive.endpoint import Endpoint
from pipeline.archive.signing import encoded_path, signed_headers

MOMENT = datetime(2026, 3, 4, 5, 6, 7, tzinfo=UTC)


@pytest.mark.parametrize("token", ["", "a/session+token=="])
@pytest.mark.parametrize(
    ("method", "key", "headers", "body"),
    [
        ("PUT", "ship/archive/.lock", {"If-None-Match": "*"}, b"process 1 on bridge\n"),
        ("PUT", "ship/archive/.lock", {"If-Match": '"5d41402abc4b2a76b9719d911017c592"'}, b""),
        ("GET", "ship/.staging/A%2FB~held", {}, b""),
        ("DELETE", "ship/Süd see+1/x&y=z", {}, b""),
    ],
)
def test_a_signature_is_that_of_an_independent_library(
    monkeypatch: pytest.MonkeyPatch, method: str, key: str, headers: dict[str, str], body: bytes, token: str
) -> None:
    endpoint = Endpoint("https", "storage.example:9000", "north-1", "KEY", "se/cret+", token)
    ours = signed_headers(endpoint, method, encoded_path(key), headers, body, MOMENT)
    monkeypatch.setattr("botocore.auth.get_current_datetime", lambda **_: MOMENT.replace(tzinfo=None))
    request = AWSRequest(
        method, f"https://storage.example:9000{encoded_path(key)}", headers=dict(headers), data=body
    )
    S3SigV4Auth(Credentials("KEY", "se/cret+", token or None), "s3", "north-1").add_auth(request)
    assert ours["authorization"] == request.headers["Authorization"]
    assert ours["x-amz-date"] == request.headers["X-Amz-Date"] == "20260304T050607Z"


def test_keys_are_not_shown() -> None:
    endpoint = Endpoint("https", "storage.example", "north-1", "THE-KEY", "THE-SECRET", "THE-TOKEN")
    assert "THE" not in repr(endpoint) + str(endpoint) + endpoint.address
