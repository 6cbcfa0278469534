"""Room `testing`: stages and hand formulas held by pytest and Hypothesis.

    from symamp.testing import assert_derivation, bias_points

Names are brought in when they are first used: pytest imports this package at the start of every run, for the
plugin in it, and most runs need no more. The strategies need Hypothesis (`pip install 'symamp[testing]'`).
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

from symamp.errors import MissingLibraryError

_HOME = {
    "BiasPoint": "symamp.testing.bias_point",
    "assert_claim_holds": "symamp.testing.asserts",
    "assert_derivation": "symamp.testing.asserts",
    "assert_equal_expressions": "symamp.testing.asserts",
    "bias_points": "symamp.testing.strategies",
    "random_stages": "symamp.testing.stage_sketch",
    "stages_of": "symamp.testing.strategies",
}

__all__ = list(_HOME)


def __getattr__(name: str) -> Any:
    if name in _HOME:
        try:
            module = import_module(_HOME[name])
        except ModuleNotFoundError as error:
            if error.name != "hypothesis":
                raise
            way = "install it with pip install 'symamp[testing]'"
            raise MissingLibraryError(f"{name} needs Hypothesis, which is not installed; {way}") from None
        return getattr(module, name)
    raise AttributeError(f"module 'symamp.testing' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
