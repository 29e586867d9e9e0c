"""What reviewers hand in, as validated values, and the entry each turns into.

The records are frozen and refuse unknown fields; they know the vocabulary and nothing else, so both the
intake and the store can use :class:`NewEntry` without knowing each other.
"""

from treering.records.entry import NewEntry

__all__ = ["NewEntry"]
