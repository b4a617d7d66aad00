"""Who may write in a bucket, with a real server: one holder at a time, whatever becomes of the others."""

from __future__ import annotations

import threading
import time
import uuid
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING

import pytest

from pipeline.archive import clean_staging, conditional, lease, locked, publish, read_cruise
from pipeline.archive.bucket import Bucket, open_bucket
from pipeline.archive.endpoint import read_endpoint
from pipeline.problems import ArchiveBusy, ArchiveProblem

from .invented import provenance, tables
from .objects import BUCKET, contents

if TYPE_CHECKING:
    from .objects import Faults


@pytest.fixture
def store(storage: str) -> Bucket:
    assert storage
    return open_bucket(f"s3://{BUCKET}/{uuid.uuid4().hex}", create=True)


def put_as_another(store: Bucket, words: bytes = b"process 7 on bridge since Monday\nx 0\n") -> None:
    assert conditional.put(read_endpoint(), f"{store.root}/.lock", words, replacing=None)


def test_a_second_run_is_refused_and_told_who_holds(store: Bucket, storage: str) -> None:
    with locked(store):
        words = contents(storage, store.root)[".lock"].decode()
        assert words.startswith("process ")
        with pytest.raises(ArchiveBusy) as caught, locked(store):
            pass
    who = words.partition("\n")[0]
    assert str(caught.value) == (
        f"s3://{store.root}/.lock: held by {who}, who renewed it 0 s ago; wait for it to end, or end it, and run again:"
        " what is published can be read meanwhile. The hold of a run that was killed ends by itself 45 s after it was"
        " last renewed."
    )
    assert contents(storage, store.root) == {}
    with locked(store):
        pass


def test_a_hold_that_nobody_renews_is_taken_over(store: Bucket, monkeypatch: pytest.MonkeyPatch) -> None:
    put_as_another(store)
    with pytest.raises(ArchiveBusy, match="held by process 7 on bridge since Monday, who"), locked(store):
        pass
    monkeypatch.setattr(lease, "LAST", 0.5)
    began = time.monotonic()
    with locked(store, 10.0):
        assert time.monotonic() - began < 5.0


def test_of_many_that_take_over_one_succeeds(store: Bucket, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(lease, "LAST", 1.5)
    monkeypatch.setattr(lease, "RENEW", 0.3)
    put_as_another(store)
    time.sleep(2.0)
    inside: list[int] = []
    most: list[int] = []

    def work(number: int) -> None:
        with locked(store, 30.0):
            inside.append(number)
            most.append(len(inside))
            time.sleep(0.05)
            inside.remove(number)

    with ThreadPoolExecutor(6) as pool:
        list(pool.map(work, range(6)))
    assert most == [1] * 6


def test_a_hold_lasts_while_it_is_renewed(store: Bucket, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(lease, "LAST", 1.5)
    monkeypatch.setattr(lease, "RENEW", 0.2)
    with locked(store):
        time.sleep(2.5)
        with pytest.raises(ArchiveBusy), locked(store):
            pass
        store.write("samples/x", lambda sink: sink.write(b"x"))


def test_a_holder_that_cannot_renew_writes_nothing_more(
    store: Bucket, faults: Faults, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(lease, "RENEW", 0.1)
    monkeypatch.setattr(lease, "TRUSTED", 1.0)
    monkeypatch.setattr(conditional, "WAITS", ())
    with locked(store):
        publish(store, provenance(), tables())
        faults.answer = lambda _number, method, path: (
            503 if method == "PUT" and path.endswith(".lock") else None
        )
        time.sleep(1.3)
        with pytest.raises(
            ArchiveProblem, match=r"\.lock: the hold on it was lost, because the storage did not answer"
        ):
            publish(store, provenance(seed=1), tables(seed=1))
    assert read_cruise(store, "77XX20260101").fingerprint == provenance().fingerprint


def test_a_holder_that_was_taken_over_writes_nothing_more_and_leaves_the_other_alone(
    store: Bucket, storage: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(lease, "RENEW", 0.1)
    with locked(store):
        conditional.remove(read_endpoint(), f"{store.root}/.lock")
        put_as_another(store)
        time.sleep(0.5)
        with pytest.raises(
            ArchiveProblem, match="another run took it over; nothing more was written; run again"
        ):
            publish(store, provenance(), tables())
    assert contents(storage, store.root)[".lock"].startswith(b"process 7")


def test_a_renewal_whose_answer_was_lost_is_known_again(
    store: Bucket, faults: Faults, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = conditional._exchange
    lost = threading.Event()

    def losing(*arguments: object) -> object:
        answer = real(*arguments)  # type: ignore[arg-type]
        if arguments[1] == "PUT" and not lost.is_set():
            lost.set()
            raise ConnectionResetError
        return answer

    monkeypatch.setattr(lease, "RENEW", 0.1)
    assert faults.seen is not None
    with locked(store):
        monkeypatch.setattr(conditional, "_exchange", losing)
        assert lost.wait(5.0)
        time.sleep(1.0)
        store.write("samples/x", lambda sink: sink.write(b"x"))
    lost.clear()
    with locked(store):  # and so is a first put
        assert lost.is_set()


def test_storage_without_conditions_is_refused(store: Bucket, monkeypatch: pytest.MonkeyPatch) -> None:
    real = conditional._send

    def forgetful(endpoint: object, method: str, path: str, headers: object, body: bytes) -> object:
        assert headers is not None
        return real(endpoint, method, path, {}, body)  # type: ignore[arg-type]

    monkeypatch.setattr(conditional, "_send", forgetful)
    with pytest.raises(ArchiveProblem, match="puts objects whatever the condition"), locked(store):
        pass


def test_what_killed_runs_left_is_cleaned(
    store: Bucket, storage: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    store.write(".staging/77XX20260101/samples.parquet", lambda sink: sink.write(b"x"))
    store.write(".staging/abc~part", lambda sink: sink.write(b"x"))
    conditional.put(read_endpoint(), f"{store.root}/.staging/77XX20260101~held", b"x\n", replacing=None)
    monkeypatch.setattr(lease, "LAST", 0.5)
    time.sleep(1.1)
    with locked(store):
        clean_staging(store)
    assert contents(storage, store.root) == {}
