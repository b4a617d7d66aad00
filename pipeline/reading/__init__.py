"""Reading: a delivered file in, a `Delivery` out: one table, every row accounted for.

Nothing here computes anything or decides what is good; values and flags are kept as delivered.
"""

from pipeline.reading.cruise_file import CRUISE_FILE, CruiseFile, read_cruise_file
from pipeline.reading.delivery import Delivery, DeliveryKind, stack
from pipeline.reading.description import Description
from pipeline.reading.files import is_workbook, read_delivery
from pipeline.reading.survey import survey_cruises
from pipeline.reading.zips import ZipAccount, read_members, unpacked_size

__all__ = [
    "CRUISE_FILE",
    "CruiseFile",
    "Delivery",
    "DeliveryKind",
    "Description",
    "ZipAccount",
    "is_workbook",
    "read_cruise_file",
    "read_delivery",
    "read_members",
    "stack",
    "survey_cruises",
    "unpacked_size",
]
