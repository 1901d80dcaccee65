"""Ladderband: vibrational overlaps, lines and bands over HTTP, each number with a bound."""

__version__ = "0.1.0"
