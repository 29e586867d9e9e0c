"""Run `treering update FOLDER` up to the step "publish", tell that it stands there, and wait to be killed."""

from __future__ import annotations

import sys
import time
from pathlib import Path
from typing import Any

from treering.cli import main
from treering.update import weekly

folder, sign = sys.argv[1:]


def hold(*_: Any) -> None:
    """Stand still after the version was laid down and before its report is published."""
    Path(sign).touch()
    time.sleep(600)


weekly.step_publish = hold
main(["update", folder])
