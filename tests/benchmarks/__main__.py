"""`python -m tests.benchmarks`: run the benchmarks and print one table. `--quick` runs tiny sizes."""

from __future__ import annotations

import argparse
import sys

from rich.console import Console

from .record import FULL, QUICK, Row
from .table import BENCHMARKS, printed


def main() -> None:
    """Run what was asked for; exit 1 where ours and theirs disagree (a missed target is only printed)."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks", description=__doc__)
    parser.add_argument("--quick", action="store_true", help="tiny sizes: whether it runs, not how fast")
    parser.add_argument("--only", action="append", choices=list(BENCHMARKS), help="this one (repeatable)")
    asked = parser.parse_args()
    rows: list[Row] = []
    for name in asked.only or BENCHMARKS:
        print(f"{name} …", file=sys.stderr, flush=True)
        rows += BENCHMARKS[name](QUICK if asked.quick else FULL)
    printed(rows, Console(width=None if sys.stdout.isatty() else 180))
    sys.exit(0 if all(row.agrees for row in rows) else 1)


if __name__ == "__main__":
    main()
