"""What flatplan costs to import, and what a million times cost in time and memory."""

from __future__ import annotations

import statistics
import subprocess
import sys
import tracemalloc
from dataclasses import fields

import numpy as np

from .jobs import one_bump, with_terms
from .table import EXTRAPOLATED, Row, at_most, by_turns, duration

_IMPORTS = {
    "numpy": "import numpy",
    "import flatplan": "import flatplan",
    "import of all that the main job uses": "from flatplan import Fluid, Limits, Rock, Target, assess, confirm, feedforward, slab, steps",
}


def imports(quick: bool) -> list[Row]:
    """Seconds to import, each in a fresh interpreter, by turns."""
    found: dict[str, list[float]] = {name: [] for name in _IMPORTS}
    for _ in range(2 if quick else 9):
        for name, line in _IMPORTS.items():
            script = f"import time; t = time.process_time(); {line}; print(time.process_time() - t)"
            done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
            found[name].append(float(done.stdout))
    numpy_seconds, ours, everything = (statistics.median(found[name]) for name in _IMPORTS)
    alone, whole = list(_IMPORTS)[1:]
    return [
        at_most(alone, "import numpy", ours, numpy_seconds, 1.2),
        at_most(whole, "import numpy", everything, numpy_seconds, None),
    ]


def million(quick: bool) -> list[Row]:
    """``plan.at`` on a million times: seconds, and peak memory over the size of what it returns."""
    count = 100_000 if quick else 1_000_000
    rows = []
    for job in (one_bump(0.5, 1.8), with_terms(60, 1.8)):
        times = job.times(count)
        (seconds,) = by_turns([lambda job=job, times=times: job.plan.at(times)], 1 if quick else 3)
        tracemalloc.start()
        channels = job.plan.at(times)
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        size = sum(value.nbytes for value in (getattr(channels, f.name) for f in fields(channels)) if isinstance(value, np.ndarray))
        what = f"plan.at, {job.name}, {count:,} times"
        full = seconds * 1_000_000 / count
        per = f"{EXTRAPOLATED if quick else ''}{full:.3g} s per million"
        rows.append(Row(what, "", duration(seconds), "", per, "", "seconds: ≤ 10 s", full <= 10.0))
        ours, other = f"{peak / 2**20:.0f} MiB", f"{size / 2**20:.0f} MiB"
        fits = peak <= 3 * size
        rows.append(Row(f"peak memory of {what}", "size of its output", ours, other, f"{peak / size:.2f} ×", "", "bounded: ≤ 3 ×", fits))
    return rows
