"""Where a cruise's tables came from, as a record that travels inside each of them."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, field, fields
from typing import TYPE_CHECKING, Any, Literal

from pipeline.archive.accounting import Account
from pipeline.problems import ArchiveProblem
from pipeline.version import VERSION

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

SCHEMA_VERSION = 1  # of the tables and of this record; raised when a reader of the old would misread the new

RECORD = "seawhence"  # the metadata key of the whole record; ``seawhence.NAME`` hold single facts
PLAIN = ("schema_version", "pipeline_version", "expocode", "revision", "fingerprint")


@dataclass(frozen=True, slots=True)
class DeliveredFile:
    """A delivered file and what became of its rows: ``rows == kept + rejected + set_aside``."""

    name: str
    sha256: str
    size: int  # bytes
    kind: Literal["bottle", "ctd"]
    rows: int
    kept: int
    rejected: int
    set_aside: int = 0  # rows of an edition that gave way to another
    described_by: str = ""  # SHA-256 of the cruise.toml that says what is in it, if one does
    account: Account | None = None  # step by step; None in archives of before it was kept

    @property
    def content(self) -> str:
        """What decides the rows that are read from it."""
        return content_of(self.sha256, self.described_by)


def content_of(sha256: str, described_by: str) -> str:
    """Return what decides the rows of a delivered file: its bytes, and what a ``cruise.toml`` says of them."""
    return f"{sha256}+{described_by}" if described_by else sha256


@dataclass(frozen=True, slots=True)
class Provenance:
    """Everything that decided a cruise's tables. ``revision`` and ``tables`` are set by publishing."""

    expocode: str
    deliveries: tuple[DeliveredFile, ...]
    settings_sha256: str
    catalogue_sha256: str | None = None
    catalogue_title: str = ""
    schema_version: int = SCHEMA_VERSION
    pipeline_version: str = VERSION
    revision: int = 0
    tables: Mapping[str, int] = field(default_factory=dict)  # rows by table
    corrections: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)  # by quantity

    @property
    def fingerprint(self) -> str:
        """Hash over what decides the content: equal fingerprints, equal tables."""
        return fingerprint(
            [(file.name, file.content) for file in self.deliveries],
            self.settings_sha256,
            self.catalogue_sha256,
            schema_version=self.schema_version,
            pipeline_version=self.pipeline_version,
        )

    def to_json(self) -> str:
        """Return the record as JSON, the same text for the same record."""
        values = {**_values(self), "deliveries": [_file_values(file) for file in self.deliveries]}
        return json.dumps(values, sort_keys=True, separators=(",", ":"))

    @classmethod
    def from_json(cls, text: str | bytes) -> Provenance:
        """Return the record that ``to_json`` wrote; what a later writer added to it is passed over.

        Raises
        ------
        ValueError
            If the text is no such record.

        """
        try:
            values = json.loads(text)
            files = [_delivered_file(file) for file in values.pop("deliveries")]
            return cls(deliveries=tuple(files), **_known(cls, values))
        except (TypeError, KeyError, AttributeError) as error:
            raise ValueError(f"no provenance record ({error})") from error

    def to_metadata(self, table: str) -> dict[str, str]:
        """Return the file metadata of ``table``: the record, and plain keys that need no JSON to read."""
        return self.metadata_of((table,))[table]

    def metadata_of(self, tables: Iterable[str]) -> dict[str, dict[str, str]]:
        """Return the file metadata of several tables, by their names."""
        record = self.to_json()
        plain = {name: str(getattr(self, name)) for name in PLAIN}
        return {
            table: {
                RECORD: record,
                **{f"{RECORD}.{name}": text for name, text in plain.items()},
                f"{RECORD}.table": table,
                "PANDAS_ATTRS": json.dumps({**plain, "table": table}),  # what pandas shows as DataFrame.attrs
            }
            for table in tables
        }

    @classmethod
    def from_metadata(cls, metadata: Mapping[bytes, bytes] | None, place: str) -> Provenance:
        """Return the record kept in the metadata of the file at ``place``.

        Raises
        ------
        ArchiveProblem
            If the file is not one of ours, or was written by a later version.

        """
        text = (metadata or {}).get(RECORD.encode())
        if text is None:
            raise ArchiveProblem(
                f"{place}: this Parquet file was not written by seawhence; move it out of the archive."
            )
        try:
            record = cls.from_json(text)
        except ValueError as error:
            raise ArchiveProblem(
                f"{place}: its provenance cannot be read ({error}); move the file out of the archive and run again."
            ) from error
        if record.schema_version > SCHEMA_VERSION:
            raise ArchiveProblem(
                f"{place}: written by seawhence {record.pipeline_version} with tables of version "
                f"{record.schema_version}, this one knows {SCHEMA_VERSION}; use that version or a later one."
            )
        return record


def fingerprint(
    delivered: Iterable[tuple[str, str]],
    settings_sha256: str,
    catalogue_sha256: str | None,
    *,
    schema_version: int = SCHEMA_VERSION,
    pipeline_version: str = VERSION,
) -> str:
    """Return the hash over what decides a cruise's tables, in hexadecimal; the files need not be read for it.

    Parameters
    ----------
    delivered
        Name and content of each delivered file (``content_of``), in any order.
    settings_sha256, catalogue_sha256
        Hashes of the effective settings and of the source catalogue, None where there is no catalogue.
    schema_version, pipeline_version
        Those of this program by default.

    """
    decisive = [schema_version, pipeline_version, sorted(delivered), settings_sha256, catalogue_sha256]
    return hashlib.sha256(json.dumps(decisive, separators=(",", ":")).encode()).hexdigest()


def _values(record: Provenance | DeliveredFile | Account) -> dict[str, Any]:
    return {f.name: getattr(record, f.name) for f in fields(record)}


def _file_values(file: DeliveredFile) -> dict[str, Any]:
    return {**_values(file), "account": _values(file.account) if file.account else None}


def _delivered_file(values: Mapping[str, Any]) -> DeliveredFile:
    known = _known(DeliveredFile, values)
    told = known.pop("account", None)
    return DeliveredFile(**known, account=Account(**_known(Account, told)) if told else None)


def _known(record: type[Any], values: Mapping[str, Any]) -> dict[str, Any]:
    names = {f.name for f in fields(record)}
    return {name: value for name, value in values.items() if name in names}
