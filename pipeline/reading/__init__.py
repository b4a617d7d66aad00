"""Reading: a delivered file in, a `Delivery` out: one table, every row accounted for.

Nothing here computes anything or decides what is good; values and flags are kept as delivered.
"""

from pipeline.reading.cruise_file import CRUISE_FILE, CruiseFile, read_cruise_file
from pipeline.reading.delivery import Delivery, DeliveryKind, stack
from pipeline.reading.description import Description
from pipeline.reading.files import read_delivery
from pipeline.reading.survey import survey_cruises

__all__ = [
    "CRUISE_FILE",
    "CruiseFile",
    "Delivery",
    "DeliveryKind",
    "Description",
    "read_cruise_file",
    "read_delivery",
    "stack",
    "survey_cruises",
]
