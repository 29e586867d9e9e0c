"""From dropped files to entries of the evidence store.

The order of one update: :func:`read_folder`, :func:`read_records`, :func:`check`, :func:`entries_for`, the
store appends them, :func:`settle` on the new state, the store appends again, then :func:`file_away` and
:func:`give_back`.
"""

from treering.intake.agreement import agreement
from treering.intake.check import check
from treering.intake.compare import Comparison, Difference, compare_readings
from treering.intake.entries import entries_for
from treering.intake.folder import file_away, give_back, read_folder
from treering.intake.read import read_records
from treering.intake.settle import Settled, settle
from treering.intake.values import Checked, Dropped, Fault, Located, Parsed, Place, Remark
from treering.intake.view import StateView, StoredView

__all__ = [
    "Checked",
    "Comparison",
    "Difference",
    "Dropped",
    "Fault",
    "Located",
    "Parsed",
    "Place",
    "Remark",
    "Settled",
    "StateView",
    "StoredView",
    "agreement",
    "check",
    "compare_readings",
    "entries_for",
    "file_away",
    "give_back",
    "read_folder",
    "read_records",
    "settle",
]
