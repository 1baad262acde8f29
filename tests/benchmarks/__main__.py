"""Run the benchmarks: ``python -m tests.benchmarks [--quick] [--only NAME ...]``."""

from __future__ import annotations

import argparse
import importlib
import os
import sys
import time

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_threads] = "1"  # one thread on either side; set before numpy loads

# name -> where it is
SUBJECTS = {
    "rate": "rate:double_path",
    "extended": "rate:extended_path",
    "confirm": "confirmation:confirmation",
    "growth": "growth:growth",
    "import": "footprint:imports",
    "million": "footprint:million",
    "bounds": "tightness:tightness",
}


def main(arguments: list[str] | None = None) -> int:
    """Measure what is asked for and print the table."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks", description="Print measured ratios as one Markdown table.")
    parser.add_argument("--quick", action="store_true", help="fewer repeats and smaller references; below a minute")
    parser.add_argument("--only", action="append", choices=sorted(SUBJECTS), help="one subject; may be repeated")
    chosen = parser.parse_args(arguments)
    from .table import EXTRAPOLATED, markdown

    rows = []
    for name, place in SUBJECTS.items():
        if chosen.only and name not in chosen.only:
            continue
        begin = time.perf_counter()
        module, function = place.split(":")
        rows += getattr(importlib.import_module(f".{module}", __package__), function)(chosen.quick)
        print(f"{name}: {time.perf_counter() - begin:.1f} s", file=sys.stderr)
    print(markdown(rows))
    print("\nProcessor time on one thread, medians of turns taken in one run; agreement relative to the peak.")
    print(f"{EXTRAPOLATED}: not measured in full, see the column 'against'.")
    return 0


if __name__ == "__main__":
    sys.exit(main())
