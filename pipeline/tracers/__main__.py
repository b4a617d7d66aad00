"""``python -m pipeline.tracers`` prints what is told of carbon and of the depths of a station, as a table."""

from __future__ import annotations

import sys

from pipeline.tracers.told import markdown

sys.stdout.write(markdown() + "\n")
