"""Checks against the outside world: published numbers, each with its source beside it."""
