"""Kill an append with SIGKILL at one place after another, and say what was left each time.

Run with the address of an empty store. For each place the append is made by a child process, which kills
itself there; then this process looks at the store and lays the entries down again. One line of JSON for each
place; after a place beyond the end of the append comes a last one, killed when the commit is done.
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


def append_and_die(target: str, place: int, *, after: bool) -> None:
    """Append in this process and kill it at the place, or after the commit; return if it ends before."""
    steps = count()

    def step(*_: Any) -> None:
        if next(steps) == place and not after:
            os.kill(os.getpid(), signal.SIGKILL)

    opened = store.open_store(target)
    engine = opened._engine
    for name in ("before_cursor_execute", "after_cursor_execute", "commit"):
        event.listen(engine, name, step)
    opened.append(entries(place), known_at=MOMENT)
    if after:  # committed, and nobody was told
        os.kill(os.getpid(), signal.SIGKILL)


def look(opened: EvidenceStore) -> dict[str, Any]:
    """Return size and root of a store after checking all its links."""
    size, _ = check_links(opened.chain_rows())
    head = opened.head()
    typed = sum(len(list(opened.typed_rows(kind))) for kind in (EntryKind.STUDY, EntryKind.ARM))
    return {"links": size, "size": head.size, "root": head.root, "typed": typed}


def main(target: str) -> None:
    """Go through all places."""
    after = False
    for place in count():
        child = os.fork()
        if child == 0:
            append_and_die(target, place, after=after)
            os._exit(0)
        _, status = os.waitpid(child, 0)
        killed = os.WIFSIGNALED(status)
        with store.open_store(target) as opened:
            left = look(opened)
            added = opened.append(entries(place), known_at=MOMENT)
        print(json.dumps({"killed": killed, "added": len(added), "left": left}), flush=True)
        if after:
            return
        after = not killed


if __name__ == "__main__":
    main(sys.argv[1])
