"""treering: the weekly update of a living systematic review."""

__version__ = "0.1.0"
