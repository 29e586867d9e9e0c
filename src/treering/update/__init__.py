"""One weekly update as plain functions, without the engine.

The names load when they are used, so that laying out a folder does not wait for the numeric libraries.
"""

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from treering.update.context import Review, RunContext, open_evidence, read_review
    from treering.update.weekly import Summary, run_update

__all__ = ["Review", "RunContext", "Summary", "open_evidence", "read_review", "run_update"]

_HOME = {"Summary": "weekly", "run_update": "weekly"}


def __getattr__(name: str) -> object:
    if name not in __all__:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"treering.update.{_HOME.get(name, 'context')}"), name)
