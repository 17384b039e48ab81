"""Tests of specification: pure statistics on plain arrays, and which of them apply to which candidate."""

__all__: list[str] = []
