"""``python -m pipeline.tracers`` prints what is told of carbon and of the depths of a station, as a table."""

from __future__ import annotations

from pipeline.tracers.told import markdown

print(markdown())
