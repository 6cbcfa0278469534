"""A process of its own: one ledger of the cascode at so many points, its time and the peak memory of the process."""

from __future__ import annotations

import json
import resource
import sys
import time

from stages import QUANTITIES, cascode  # beside this file, which is run by its path

from symamp.judge.ledger import make_ledger


def main() -> None:
    """Print {"points", "seconds", "bytes", "at_bias"}."""
    points = int(sys.argv[1])
    start = time.perf_counter()
    made = make_ledger(cascode(), quantities=[f"gain.{name}" for name in QUANTITIES], points=points)
    spent = time.perf_counter() - start
    unit = 1 if sys.platform == "darwin" else 1024
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
    at_bias = [abs(account.error) for account in made.accounts if account.error]
    print(json.dumps({"points": made.points, "seconds": spent, "bytes": peak, "at_bias": at_bias}))


if __name__ == "__main__":
    main()
