"""Reading: a delivered file in, a `Delivery` out: one table, every row accounted for.

Nothing here computes anything or decides what is good; values and flags are kept as delivered.
"""

from pipeline.reading.delivery import Delivery, DeliveryKind, stack
from pipeline.reading.files import read_delivery
from pipeline.reading.survey import survey_cruises

__all__ = ["Delivery", "DeliveryKind", "read_delivery", "stack", "survey_cruises"]
