"""One weekly update as plain functions, without the engine."""

from treering.update.context import Review, RunContext, open_evidence, read_review
from treering.update.weekly import Summary, run_update

__all__ = ["Review", "RunContext", "Summary", "open_evidence", "read_review", "run_update"]
