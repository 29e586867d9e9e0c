"""Kill an append with SIGKILL at one place after another, and say what was left each time.

Run with the address of an empty store. For each place the append is made by a child process, which kills
itself there; then this process looks at the store and lays the entries down again. One line of JSON for each
place; a place after the end of the append ends the run, with a last look.
"""

from __future__ import annotations

import json
import os
import signal
import sys
from itertools import count
from typing import Any

from sqlalchemy import event

from treering import store
from treering.records import NewEntry
from treering.store import EvidenceStore
from treering.store.chain import check_links
from treering.terms import EntryKind

MOMENT = "2026-05-04T06:00:00Z"


def entries(place: int) -> list[NewEntry]:
    """Return 130 entries of two kinds, so that the ledger, typed tables and tree nodes are all written."""
    trials = [f"T{place}-{number}" for number in range(65)]
    return [
        entry
        for trial in trials
        for entry in (
            NewEntry(EntryKind.STUDY, f"study/{trial}", {"trial": trial}, "2021-03-01"),
            NewEntry(EntryKind.ARM, f"arm/{trial}/a", {"trial": trial, "arm": "a"}, "2021-03-01"),
        )
    ]


def append_and_die(target: str, place: int) -> None:
    """Append in this process and kill it at the place; return when the append ends before."""
    steps = count()

    def step(*_: Any) -> None:
        if next(steps) == place:
            os.kill(os.getpid(), signal.SIGKILL)

    opened = store.open_store(target)
    engine = opened._engine
    for name in ("before_cursor_execute", "after_cursor_execute", "commit"):
        event.listen(engine, name, step)
    opened.append(entries(place), known_at=MOMENT)
    step()  # committed, and nobody was told


def look(opened: EvidenceStore) -> dict[str, Any]:
    """Return size and root of a store after checking all its links."""
    size, _ = check_links(opened.chain_rows())
    head = opened.head()
    typed = sum(len(list(opened.typed_rows(kind))) for kind in (EntryKind.STUDY, EntryKind.ARM))
    return {"links": size, "size": head.size, "root": head.root, "typed": typed}


def main(target: str) -> None:
    """Go through all places."""
    for place in count():
        child = os.fork()
        if child == 0:
            append_and_die(target, place)
            os._exit(0)
        _, status = os.waitpid(child, 0)
        with store.open_store(target) as opened:
            left = look(opened)
            added = opened.append(entries(place), known_at=MOMENT)
            line = {"killed": os.WIFSIGNALED(status), "added": len(added), "left": left}
            if not line["killed"]:
                line["after"] = look(opened)
        print(json.dumps(line), flush=True)
        if not line["killed"]:
            return


if __name__ == "__main__":
    main(sys.argv[1])
