"""What a stage may be handed over as (room: testing)."""

from __future__ import annotations

import os
from typing import Any

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import read_stage
from symamp.errors import StageError
from symamp.values import quoted


def plain(stage: Any) -> Stage:
    """The plain data of a stage: of one of the Python front, of a stage file's path, or the data itself.

    Raises StageError for all else, and as `symamp.load` for a file that cannot be read.
    """
    found = getattr(stage, "data", stage)
    if isinstance(found, Stage):
        return found
    if isinstance(stage, str | os.PathLike):
        return read_stage(stage)
    raise StageError(f"{quoted(stage)} is no stage", 'pass symamp.load("my.stage.toml"), or the path itself')
