"""symamp: exact small-signal analysis of transistor stages, and what each hand assumption costs.

    stage = symamp.load("cascode.stage.toml")
    gain = stage.response("gain")
    print(stage.ledger())

Names are brought in when they are first used, so that importing the package costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "ApproximateResponse": "symamp.api",
    "Stage": "symamp.api",
    "StageBuilder": "symamp.api",
    "StageCheck": "symamp.results",
    "StageFrontier": "symamp.results",
    "StageLedger": "symamp.results",
    "StageResponse": "symamp.api",
    "StageShortening": "symamp.results",
    "load": "symamp.api",
    "SymampError": "symamp.errors",
    "InputError": "symamp.errors",
    "ReadError": "symamp.errors",
    "StageError": "symamp.errors",
    "NetworkError": "symamp.errors",
    "TooLargeError": "symamp.errors",
    "MissingLibraryError": "symamp.errors",
}

__all__ = ["__version__", *_HOME]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'symamp' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
