"""Print the table of all checks as Markdown: ``python -m pipeline.checking``."""

from __future__ import annotations

import sys

from pipeline.checking import CHECKS, CONCLUSIONS
from pipeline.checking.table import markdown

sys.stdout.write(markdown([*CHECKS.values(), *CONCLUSIONS.values()]) + "\n")
