"""One delivered file, whatever its format, to a Delivery: which reader reads it, told by its first bytes."""

from __future__ import annotations

import hashlib
import io
import zipfile
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading.delivery import Delivery
from pipeline.reading.described import read_described
from pipeline.reading.exchange import read_sheet
from pipeline.reading.netcdf import NETCDF_MAGICS, read_netcdf
from pipeline.reading.parquet import PARQUET_MAGIC
from pipeline.reading.sheet import find_sheet, kind_of
from pipeline.reading.text import delivered_text
from pipeline.reading.workbook import OLD_SPREADSHEET_MAGIC, WORKBOOK
from pipeline.reading.zips import ZIP_ERRORS, ZIP_MAGICS, read_zip

if TYPE_CHECKING:
    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.delivery import DeliveryKind
    from pipeline.reading.description import Description
    from pipeline.reading.text import DeliveredText
    from pipeline.settings import ReadingSettings


def read_delivery(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None = None
) -> Delivery:
    """Read one delivered file.

    Parameters
    ----------
    name
        What to call the file in sentences and tables.
    data
        Its bytes.
    limits
        How much of a broken file is borne.
    description
        What a ``cruise.toml`` beside the file says of it, if any.

    Raises
    ------
    DeliveryProblem
        Where the file is refused whole.

    """
    sha256 = hashlib.sha256(data).hexdigest()
    if data.startswith(ZIP_MAGICS) and not is_workbook(data):
        return read_zip(name, data, sha256, limits, description)
    kind, read = _read(name, data, limits, description)
    return Delivery(
        name, sha256, len(data), kind, read.table, read.rows, read.rejects, read.findings,
        spread=read.spread, words=read.words,
    )  # fmt: skip


def _read(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None
) -> tuple[DeliveryKind, ReadRows]:
    """Read a file that is one table."""
    if data.startswith(NETCDF_MAGICS):
        return read_netcdf(name, data, limits, description)
    if data.startswith((PARQUET_MAGIC, *ZIP_MAGICS)):
        return _read_table(name, data, limits, description)
    if data.startswith(OLD_SPREADSHEET_MAGIC):
        raise DeliveryProblem(
            "old-spreadsheet",
            f"{name}: found a spreadsheet of the old kind (.xls), or one that is locked with a password; expected .xlsx"
            " or text; save it so, without a password, and deliver it again.",
        )
    if description is not None and description.layout.encoding is not None:
        return _read_table(name, data, limits, description)
    text = delivered_text(name, data)
    if description is not None and not is_sheet(text, limits):
        return _read_table(name, data, limits, description)
    sheet = find_sheet(text, limits.columns)
    return sheet.kind, read_sheet(sheet, limits, description)


def _read_table(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None
) -> tuple[DeliveryKind, ReadRows]:
    """Read a table whose columns mean nothing without a description."""
    if description is None:
        what = "Parquet table" if data.startswith(PARQUET_MAGIC) else "spreadsheet"
        raise DeliveryProblem(
            "not-described",
            f"{name}: found a {what} and no cruise.toml beside it that says what its columns are; nothing is"
            f" guessed; run `seawhence mapping {name}` for a draft of one, or ask for the cruise in the exchange"
            " format.",
        )
    return read_described(name, data, limits, description)


def is_sheet(text: DeliveredText, limits: ReadingSettings) -> bool:
    """Return whether a text is an exchange file; a table whose first column is called Bottle only starts like one."""
    if kind_of(text) is None:
        return False
    try:
        find_sheet(text, limits.columns)
    except DeliveryProblem as problem:
        return problem.reason != "not-a-cruise-file"
    return True


def is_workbook(data: bytes) -> bool:
    """Return whether a zip is a spreadsheet's."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            return WORKBOOK in archive.namelist()
    except ZIP_ERRORS:
        return False
