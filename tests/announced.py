"""The command, which says on standard error when its long work begins: run by the tests as a program of its own."""

from __future__ import annotations

import sys
from typing import Any

from symamp.cli import main
from symamp.show import run

_made = run.make_ledger


def _announced(*given: Any, **named: Any) -> Any:
    print("begun", file=sys.stderr, flush=True)
    return _made(*given, **named)


if __name__ == "__main__":  # workers bring this file in too, under another name
    run.make_ledger = _announced
    main()
