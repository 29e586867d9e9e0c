"""What differs between two versions of the evidence, split by cause."""

from treering.changes.compare import compare

__all__ = ["compare"]
