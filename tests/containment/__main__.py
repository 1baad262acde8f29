"""Run the containment check on random cases: ``python -m tests.containment [--cases N] [--seed S]``."""

from __future__ import annotations

import argparse
import os
import sys
import time
from pathlib import Path

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_threads] = "1"  # set before numpy loads
sys.path.insert(0, str(Path(__file__).resolve().parents[1]))  # the references lie beside this package

from .run import Tally, run  # noqa: E402


def main(arguments: list[str] | None = None) -> int:
    """Check as many cases as asked for and print what was found; 1 where a value was farther off than certified."""
    parser = argparse.ArgumentParser(prog="python -m tests.containment", description=__doc__)
    parser.add_argument("--cases", type=int, default=2000, help="cases to check, beside those refused or too long (default: 2000)")
    parser.add_argument("--seed", type=int, default=1, help="of the random draws (default: 1)")
    parser.add_argument("--minutes", type=float, default=None, help="draw no further case after this long")
    chosen = parser.parse_args(arguments)
    begin, tally = time.perf_counter(), Tally()
    run(chosen.cases, chosen.seed, tally, chosen.minutes)
    print(tally.text(), f"time: {time.perf_counter() - begin:.0f} s", sep="\n")
    return 1 if tally.violations or tally.faults else 0


if __name__ == "__main__":
    sys.exit(main())
