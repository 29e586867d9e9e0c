"""Run one command as `treering` does, then ask the engine's API what it recorded.

Arguments: a file for the answer, then the command line. The answer is JSON; stdout and stderr hold what the
command printed and nothing of this script.
"""

from __future__ import annotations

import json
import os
import sys
import time
from pathlib import Path
from typing import Any

from treering.cli import main


def run_command(arguments: list[str]) -> int:
    """Run the command and return its exit status."""
    sys.argv = ["treering", *arguments]
    try:
        main()
    except SystemExit as stopped:
        return int(stopped.code or 0)
    raise AssertionError("the command came back without a status")


def ask() -> dict[str, Any]:
    """Return flow runs, task runs and artifacts; the engine records task runs with a short delay."""
    from prefect.client.orchestration import get_client

    with get_client(sync_client=True) as client:
        patience = time.monotonic() + 30
        while True:
            flows = client.read_flow_runs()
            tasks = client.read_task_runs()
            if all(task.state and task.state.is_final() for task in tasks) and len(tasks) >= len(flows) * 7:
                break
            if time.monotonic() > patience:
                break
            time.sleep(0.2)
        return {
            "api": str(client.api_url),
            "flows": [(flow.name, flow.state_name) for flow in flows],
            "tasks": [(task.name, task.state_name) for task in sorted(tasks, key=lambda t: t.created)],
            "artifacts": [(a.key, a.type, a.data) for a in client.read_artifacts()],
        }


if __name__ == "__main__":
    target, *command = sys.argv[1:]
    status = run_command(command)
    answer = ask() | {
        "status": status,
        "environment": {
            name: value for name, value in os.environ.items() if name.startswith(("PREFECT", "DO_NOT"))
        },
    }
    Path(target).write_text(json.dumps(answer), encoding="utf-8")
