"""Write the golden files of the report again: ``python tests/golden/report/make.py`` from the project root.

``version.json`` is the input, kept as plain JSON (invented numbers from the demo review), so that the golden
bytes do not move when a pooling routine does. Run this only when a change of the report is wanted, and say
why in the commit message.
"""

from __future__ import annotations

import json
from pathlib import Path

from treering.protocol import Protocol
from treering.report import ReportView, build_files, build_view

HERE = Path(__file__).parent
KEPT = ("report.json", "trials.csv", "syntheses.csv", "looks.csv", "changes.csv")


def golden_view() -> ReportView:
    """Build the view from the stored input."""
    parts = json.loads((HERE / "version.json").read_text(encoding="utf-8"))
    records = parts.pop("records")
    protocol = Protocol.model_validate(parts.pop("protocol"))
    return build_view(protocol=protocol, **parts, **records)


if __name__ == "__main__":
    made = build_files(golden_view())
    for name in KEPT:
        (HERE / name).write_bytes(made[name])
