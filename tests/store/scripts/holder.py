"""Hold the lock of a store until killed."""

from __future__ import annotations

import sys
import time

from treering import store

with store.open_store(sys.argv[1]) as opened, opened.exclusive():
    print("held", flush=True)
    time.sleep(600)
