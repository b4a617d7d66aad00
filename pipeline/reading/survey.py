"""Which cruises a delivered file holds, read from as little of it as can be: for planning a run."""

from __future__ import annotations

import io
import zipfile
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import column_texts
from pipeline.reading.exchange_names import exchange_meanings, heading_of
from pipeline.reading.files import is_workbook, read_delivery
from pipeline.reading.identity import usable_expocode
from pipeline.reading.netcdf import NETCDF_MAGICS, read_netcdf
from pipeline.reading.parquet import PARQUET_MAGIC
from pipeline.reading.sheet import find_sheet, kind_of
from pipeline.reading.text import delivered_text
from pipeline.reading.zips import ZIP_ERRORS, ZIP_MAGICS

if TYPE_CHECKING:
    from pipeline.reading.description import Description
    from pipeline.reading.sheet import Sheet
    from pipeline.settings import ReadingSettings
    from pipeline.variables import Variable

# The header of a cast is far shorter than this.
_HEAD_BYTES = 20_000


def survey_cruises(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None = None
) -> tuple[str, ...]:
    """Return the expocodes in a delivered file, sorted; none where the file will be refused.

    A survey refuses nothing: why a file cannot be used is told when it is read in full.
    """
    try:
        if description is None and data.startswith(ZIP_MAGICS) and not is_workbook(data):
            return _cruises_of_zip(data, limits, description)
        if description is None and is_exchange(name, data):
            return tuple(sorted(_cruises_of_sheet(find_sheet(delivered_text(name, data), limits.columns))))
        return tuple(sorted(read_delivery(name, data, limits, description).cruises))
    except DeliveryProblem:
        return ()


def is_exchange(name: str, data: bytes) -> bool:
    """Return whether a file is text that starts as exchange files do."""
    if data.startswith((*NETCDF_MAGICS, *ZIP_MAGICS, PARQUET_MAGIC)):
        return False
    return kind_of(delivered_text(name, data)) is not None


def _cruises_of_sheet(sheet: Sheet) -> set[str]:
    if "EXPOCODE" in sheet.header:
        written = {sheet.header["EXPOCODE"]}
    else:
        meanings, _ = exchange_meanings(heading_of(sheet))
        position = next(
            (i for i, name in enumerate(sheet.names) if _is_expocode(meanings.values.get(name))), None
        )
        written = set() if position is None else column_texts(sheet, position)
    return {code for text in written if (code := usable_expocode(text))}


def _is_expocode(variable: Variable | None) -> bool:
    return variable is not None and variable.name == "expocode"


def _cruises_of_zip(data: bytes, limits: ReadingSettings, description: Description | None) -> tuple[str, ...]:
    codes: set[str] = set()
    try:
        archive = zipfile.ZipFile(io.BytesIO(data))
    except ZIP_ERRORS:
        return ()
    with archive:
        for member in archive.infolist():
            try:
                with archive.open(member) as stream:
                    head = stream.read(_HEAD_BYTES)
                    if head.startswith(NETCDF_MAGICS) and member.file_size <= limits.unpacked_bytes:
                        whole = head + stream.read(member.file_size)
                        _, read = read_netcdf(member.filename, whole, limits, description)
                        codes |= set(read.table.column("expocode").to_pylist())
                        continue
                codes |= _cruises_of_sheet(find_sheet(delivered_text(member.filename, head), limits.columns))
            except (DeliveryProblem, *ZIP_ERRORS):
                continue  # the next member may be whole
    return tuple(sorted(codes))
