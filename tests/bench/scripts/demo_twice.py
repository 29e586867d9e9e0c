"""Play the demo once without and once with the engine, in one process, and write the seconds of each update.

Arguments: the folder to work in. The answer is JSON in seconds.json there: for each of both ways a list of
[wall seconds, processor seconds of this process, whether a version was laid down], one for each week.
"""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Callable
from datetime import datetime
from pathlib import Path
from typing import Any

from treering import __version__
from treering.demo import lay_out, play
from treering.update import RunContext, Summary, read_review, run_update


def without_engine(folder: Path, as_of: datetime) -> Summary:
    """Run one update as plain functions."""
    return run_update(RunContext(read_review(folder), as_of, __version__))


def engine() -> Callable[[Path, datetime], Summary]:
    """Load the flow as the commands do."""
    from treering_flows.engine import prepare_engine

    prepare_engine()
    from treering_flows.weekly import weekly_update

    return lambda folder, as_of: weekly_update(str(folder), as_of.date().isoformat(), as_of)


def timed(folder: Path, run: Callable[[Path, datetime], Summary]) -> list[tuple[float, float, bool]]:
    """Play the demo and return the seconds of each week's update."""
    weeks: list[tuple[float, float, bool]] = []

    def clocked(place: Path, as_of: datetime) -> Any:
        wall, own = time.perf_counter(), time.process_time()
        summary = run(place, as_of)
        weeks.append((time.perf_counter() - wall, time.process_time() - own, summary.version is not None))
        return summary

    lay_out(folder)
    play(folder, clocked, lambda *_: None)
    return weeks


if __name__ == "__main__":
    place = Path(sys.argv[1])
    timed(place / "warm", without_engine)  # the first update of a process loads fonts and libraries
    found = {"plain": timed(place / "plain", without_engine)}
    start = time.perf_counter()
    flow = engine()
    found["import"] = [(time.perf_counter() - start, 0.0, False)]
    found["flow"] = timed(place / "flow", flow)
    (place / "seconds.json").write_text(json.dumps(found), encoding="utf-8")
