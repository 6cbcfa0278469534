"""Bias points looked at in chunks, here or through an executor: the bits are the same (room: span).

How points are cut into chunks does not depend on who looks at them, and what each chunk comes to is merged in the order
of the chunks; so any number of workers of one kind of machine gives what this process alone would give.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from functools import lru_cache
from threading import get_ident
from typing import Any, Protocol

import numpy as np

from symamp.span.executing import Engine, run_in_order
from symamp.span.extremes import Summary
from symamp.span.parcels import packed, unpacked
from symamp.span.points import Box

_KEPT = 32  # looks that a worker keeps unpacked: one for each of its threads, and of the last few runs


@dataclass(frozen=True)
class Chunk:
    """Bias points: where they are, (d, P), and the values of symbols there where these do not follow from it.

    `which` names the figures that are wanted, in words of the look's own.
    """

    which: str
    places: np.ndarray
    values: Mapping[str, Any] | None = None

    @property
    def points(self) -> int:
        return int(self.places.shape[1])


def cut(which: str, u: np.ndarray, size: int) -> Iterator[Chunk]:
    """Points of a box (d, P) in chunks of `size` at most."""
    for start in range(0, u.shape[1], size):
        yield Chunk(which, u[:, start : start + size])


def values_at(chunk: Chunk, box: Box | None) -> Mapping[str, Any]:
    """The values of symbols at a chunk's points: its own, else those of the box (never None then)."""
    if chunk.values is not None:
        return chunk.values
    assert box is not None
    return box.values(chunk.places)


class Look(Protocol):
    """What works out figures at bias points. It must be fit for `packed`."""

    def at(self, chunk: Chunk) -> Sequence[Summary]:
        """What the figures come to, always in the same order."""


def looked_at(
    look: Look, chunks: Iterable[Chunk], executor: Executor | Engine | None = None
) -> Iterator[tuple[Chunk, Sequence[Summary]]]:
    """Each chunk with what it comes to, in order; in this process where there is no executor.

    Raises WorkerError where a chunk ends each worker that is given it.
    """
    if executor is None:
        for chunk in chunks:
            yield chunk, look.at(chunk)
        return
    engine = executor if isinstance(executor, Engine) else Engine.through(executor)
    yield from run_in_order(engine, _look_at, packed(look), chunks, named=_named)


def _named(chunk: Chunk) -> str:
    return f"{chunk.points:,} bias points"


def _look_at(parcel: bytes, chunk: Chunk) -> Sequence[Summary]:
    """What a worker does."""
    return _unpacked(parcel, get_ident()).at(chunk)


# A worker gets the same parcel with each of its chunks, and unpacking it is worth seconds on large stages. This is no
# setting: what comes out is the same without it. Threads do not share a look, for looks keep arrays between calls.
@lru_cache(maxsize=_KEPT)
def _unpacked(parcel: bytes, _thread: int) -> Look:
    look: Look = unpacked(parcel)
    return look
