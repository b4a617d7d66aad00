"""Small invented cruises, and stores that fail where they are told to."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, field
from typing import IO, TYPE_CHECKING

import numpy as np

from pipeline import tables as known
from pipeline.archive import DeliveredFile, Disk, Provenance, read_cruise, read_table, revisions
from pipeline.archive.layout import LOCK, STAGING, SUPERSEDED, table_key
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from pathlib import Path

    import pyarrow as pa

SAMPLES, CASTS, REJECTS = 12, 5, 2


def tables(expocode: str = "77XX20260101", seed: int = 0) -> dict[str, pa.Table]:
    """Five tables of a few rows whose values depend on ``seed``."""
    generator = np.random.default_rng(seed)
    numbers = generator.normal(35.0, 0.1, SAMPLES)
    numbers[3] = np.nan
    samples = known.with_columns(
        known.empty([]),
        {
            "expocode": [expocode] * SAMPLES,
            "station": [str(1 + row // 4) for row in range(SAMPLES)],
            "cast": [1] * SAMPLES,
            "latitude": [10.25] * SAMPLES,
            "bottle_salinity": numbers,
            "bottle_salinity_flag": [2] * (SAMPLES - 1) + [None],
            "nitrate": [None] * SAMPLES,
        },
    )
    casts = known.with_columns(
        known.empty([]), {"expocode": [expocode] * CASTS, "pressure": np.arange(CASTS) + float(seed)}
    )
    rejects = known.with_columns(
        known.empty([]), {"expocode": [expocode] * REJECTS, "raw": ["1,2,x", 'a "quoted" line']}
    )
    return {
        "samples": samples,
        "casts": casts,
        "mixtures": known.empty(known.MIXTURES),
        "findings": known.empty(known.FINDINGS),
        "rejects": rejects,
    }


def provenance(expocode: str = "77XX20260101", seed: int = 0) -> Provenance:
    """What goes with ``tables`` of the same cruise and seed."""
    return Provenance(
        expocode=expocode,
        deliveries=(
            DeliveredFile("a_hy1.csv", f"{seed:064x}", 4321, "bottle", SAMPLES + REJECTS, SAMPLES, REJECTS),
            DeliveredFile("a_ct1.zip", "c" * 64, 987, "ctd", CASTS, CASTS, 0),
        ),
        settings_sha256="5" * 64,
        catalogue_sha256="e" * 64,
        catalogue_title="Sources of an invented ocean",
    )


def digests(root: Path, *, working: bool = False) -> dict[str, str]:
    """Return the SHA-256 of every file of an archive by its path, working places apart."""
    return {
        str(path.relative_to(root)): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(root.rglob("*"))
        if path.is_file() and (working or not path.relative_to(root).parts[0].startswith("."))
    }


def leftovers(root: Path) -> list[str]:
    """Return what a run that ended left in the working places."""
    places = [*(root / STAGING).iterdir()]
    places += [path for path in [root / LOCK] if path.exists() and path.stat().st_size]
    return [str(path.relative_to(root)) for path in places]


def assert_promise(store: Disk, expocode: str, whole: Iterable[int]) -> None:
    """Every published file opens, all are of one revision, and the revisions ``whole`` are whole somewhere."""
    found: dict[int, dict[str, set[str]]] = {}
    for table in TABLE_NAMES:
        if store.size(table_key(table, expocode)) is None:
            continue
        content = read_table(store, expocode, table)
        revision = int(content.schema.metadata[b"seawhence.revision"])
        fingerprint = content.schema.metadata[b"seawhence.fingerprint"].decode()
        found.setdefault(revision, {}).setdefault(fingerprint, set()).add(table)
    assert len(found) <= 1, f"mixed: {found}"
    assert all(len(marks) == 1 for marks in found.values())
    published = {r: set.union(*marks.values()) for r, marks in found.items()}
    for revision in whole:
        aside = {
            path.name.removesuffix(".parquet")
            for path in store.root.glob(f"{SUPERSEDED}/*/r{revision:04d}/*.parquet")
        }
        assert aside | published.get(revision, set()) == set(TABLE_NAMES), f"revision {revision} is lost"
    cruise = read_cruise(store, expocode)
    assert cruise.is_whole == (sum(map(len, published.values())) == len(TABLE_NAMES))
    assert revisions(store, expocode) == tuple(sorted(revisions(store, expocode)))


class Killed(BaseException):
    """Stands for the end of the process: nothing of ours may catch it."""


@dataclass(frozen=True)
class Dying(Disk):
    """A store that ends with ``error`` at its operation number ``fatal``, before, amid or after doing it."""

    fatal: int = -1
    moment: str = "before"
    error: BaseException = field(default_factory=Killed)
    steps: list[str] = field(default_factory=list)

    def _step(self, name: str, act: Callable[[], None], amid: Callable[[], None] | None = None) -> None:
        number = len(self.steps)
        self.steps.append(name)
        if number != self.fatal:
            act()
            return
        if self.moment == "amid" and amid is not None:
            amid()
        elif self.moment == "after":
            act()
        raise self.error

    def write(self, key: str, fill: Callable[[IO[bytes]], object]) -> None:
        def half(sink: IO[bytes]) -> None:
            fill(sink)
            sink.truncate(sink.tell() // 2)

        super_write = super().write
        self._step(f"write {key}", lambda: super_write(key, fill), lambda: super_write(key, half))

    def move(self, key: str, target: str) -> None:
        super_move = super().move
        self._step(f"move {key}", lambda: super_move(key, target))

    def remove(self, key: str) -> None:
        super_remove = super().remove
        self._step(f"remove {key}", lambda: super_remove(key))

    def settle(self, keys: Iterable[str]) -> None:
        super_settle = super().settle
        self._step("settle", lambda: super_settle(keys))
