"""DIC and alkalinity of one sample beside each other: what does not fit together, and what is only unusual."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.checking import check
from pipeline.settings import Settings
from tests.checking.cases import changed, doubted
from tests.checking.oceans import BRACKISH_LEVELS, QUANTITIES, ocean, row

NAME = "alkalinity-less-dic"
