"""Defaults of the engine, set before Prefect is imported; a user's own setting wins.

Nothing that must be right depends on the engine's database: the evidence store is the record.
"""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

#: Nothing phones out, and the telemetry task that disturbs a first start is gone.
PRIVATE = {"DO_NOT_TRACK": "1", "PREFECT_SERVER_ANALYTICS_ENABLED": "false"}
#: The first start on a new machine migrates the engine's own database and takes about 20 s, its limit.
PATIENT = {"PREFECT_SERVER_EPHEMERAL_STARTUP_TIMEOUT_SECONDS": "120", "PREFECT_CLI_PROMPT": "false"}
#: The temporary server writes to our stderr; harmless tracebacks of its recorder would frighten people. The
#: client would print each refusal as a traceback, twice; the command says it in one sentence.
QUIET = {
    "PREFECT_SERVER_LOGGING_LEVEL": "CRITICAL",
    "PREFECT_LOGGING_LEVEL": "CRITICAL",
    "PREFECT_LOGGING_ROOT_LEVEL": "CRITICAL",  # its workers log under names of their own
    "PREFECT_LOGGING_INTERNAL_LEVEL": "CRITICAL",
}
#: A schedule runs unwatched: what fails must stand in its log.
LOGGED = {"PREFECT_SERVER_LOGGING_LEVEL": "CRITICAL", "PREFECT_LOGGING_LEVEL": "WARNING"}


def prepare_engine(*, verbose: bool = False, unwatched: bool = False) -> None:
    """Set the engine's defaults in the environment.

    Parameters
    ----------
    verbose : bool
        Leave the log levels alone.
    unwatched : bool
        Keep the engine's warnings and errors, because nobody sees what a command says.
    """
    defaults = {**PRIVATE, **PATIENT, **({} if verbose else LOGGED if unwatched else QUIET)}
    for name, value in defaults.items():
        os.environ.setdefault(name, value)
    if "PREFECT_HOME" not in os.environ and not _writable(Path.home()):
        os.environ["PREFECT_HOME"] = tempfile.mkdtemp(prefix="treering-engine-")


def _writable(folder: Path) -> bool:
    return folder.is_dir() and os.access(folder, os.W_OK)
