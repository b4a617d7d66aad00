"""The archive: five tables per cruise with their provenance, earlier revisions, and the delivered bytes.

store = open_archive(place, create=True)
with locked(store):
    clean_staging(store)
    sha256 = vault.keep(store, path)
    judge(wanted, read_contents(store)).due
    publish(store, provenance, tables)
"""

from __future__ import annotations

from pipeline.archive import vault
from pipeline.archive.accounting import Account, accounts
from pipeline.archive.comparison import RevisionChanges, compare_revisions, is_listing, write_listing
from pipeline.archive.contents import (
    Contents,
    CruiseContents,
    read_contents,
    read_cruise,
    read_table,
    revisions,
)
from pipeline.archive.currency import Currency, Reason, judge
from pipeline.archive.delivered_objects import ObjectPath, objects_below
from pipeline.archive.endpoint import bucket_path, is_bucket
from pipeline.archive.lock import locked
from pipeline.archive.provenance import DeliveredFile, Provenance, content_of, fingerprint
from pipeline.archive.publishing import clean_staging, publish
from pipeline.archive.storage import Disk, Store, is_archive, open_archive
from pipeline.archive.verifying import Verified, verify

__all__ = [
    "Account",
    "Contents",
    "CruiseContents",
    "Currency",
    "DeliveredFile",
    "Disk",
    "ObjectPath",
    "Provenance",
    "Reason",
    "RevisionChanges",
    "Store",
    "Verified",
    "accounts",
    "bucket_path",
    "clean_staging",
    "compare_revisions",
    "content_of",
    "fingerprint",
    "is_archive",
    "is_bucket",
    "is_listing",
    "judge",
    "locked",
    "objects_below",
    "open_archive",
    "publish",
    "read_contents",
    "read_cruise",
    "read_table",
    "revisions",
    "vault",
    "verify",
    "write_listing",
]
