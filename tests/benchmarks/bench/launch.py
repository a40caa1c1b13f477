"""Runs a command and prints its seconds and peak memory as JSON: `launch.py COMMAND ...`.

A process of its own: a child starts with its parent's peak, and this parent is small.
"""

from __future__ import annotations

import json
import os
import sys
import time

start = time.perf_counter()
child = os.spawnvp(os.P_NOWAIT, sys.argv[1], sys.argv[1:])
_, status, used = os.wait4(child, 0)
json.dump({"seconds": time.perf_counter() - start, "peak_bytes": used.ru_maxrss * 1024,
           "code": os.waitstatus_to_exitcode(status)}, sys.stdout)
