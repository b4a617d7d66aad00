"""Which cruises a delivered file holds, read from as little of it as can be: for planning a run."""

from __future__ import annotations

import io
import zipfile
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import column_texts
from pipeline.reading.columns import plan_columns
from pipeline.reading.files import ZIP_ERRORS, ZIP_MAGICS
from pipeline.reading.identity import usable_expocode
from pipeline.reading.sheet import find_sheet
from pipeline.reading.text import delivered_text

if TYPE_CHECKING:
    from pipeline.reading.sheet import Sheet
    from pipeline.settings import ReadingSettings

# The header of a cast is far shorter than this.
_HEAD_BYTES = 20_000


def survey_cruises(name: str, data: bytes, limits: ReadingSettings) -> tuple[str, ...]:
    """Return the expocodes in a delivered file, sorted; none where the file will be refused.

    A survey refuses nothing: why a file cannot be used is told when it is read in full.
    """
    try:
        if data.startswith(ZIP_MAGICS):
            return _cruises_of_zip(data, limits)
        return tuple(sorted(_cruises_of_sheet(find_sheet(delivered_text(name, data), limits.columns))))
    except DeliveryProblem:
        return ()


def _cruises_of_sheet(sheet: Sheet) -> set[str]:
    if "EXPOCODE" in sheet.header:
        written = {sheet.header["EXPOCODE"]}
    else:
        columns, _ = plan_columns(sheet)
        position = next((column.position for column in columns if column.name == "expocode"), None)
        written = set() if position is None else column_texts(sheet, position)
    return {code for text in written if (code := usable_expocode(text))}


def _cruises_of_zip(data: bytes, limits: ReadingSettings) -> tuple[str, ...]:
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
                codes |= _cruises_of_sheet(find_sheet(delivered_text(member.filename, head), limits.columns))
            except (DeliveryProblem, *ZIP_ERRORS):
                continue  # the next member may be whole
    return tuple(sorted(codes))
