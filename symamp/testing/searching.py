"""The search for a counterexample that reads well (room: testing).

A small shrinker over choices: what is sought is first looked for with no choice made, then with one, then with
many at random, and then as many choices as can be are taken back. MacIver and Donaldson, "Test-case reduction via
test-case generation", ECOOP 2020, shrink sequences of choices so (from memory).
"""

from __future__ import annotations

import random
from collections.abc import Callable, Iterator, Sequence
from typing import TypeVar

from symamp.testing.drawing import Option, Pick

Found = TypeVar("Found")
_Indices = tuple[int, ...]

_TRIES = 400  # of choices made at random
_SEED = 20011


def simplest(make: Callable[[Pick], Found], holds: Callable[[Found], bool]) -> Found | None:
    """What `make` makes of the simplest choices for which it holds; None where none are found."""

    def fits(indices: _Indices) -> bool:
        return holds(make(_Choices(indices)))

    best = next(filter(fits, _candidates(make)), None)
    if best is None:
        return None
    while (better := next(filter(fits, _simpler(best)), None)) is not None:
        best = better
    return make(_Choices(best))


class _Choices:
    """Chooses by indices; where they have come to their end, the first option, or one at random from `draw`."""

    def __init__(self, indices: _Indices = (), draw: random.Random | None = None) -> None:
        self.indices = indices
        self.draw = draw
        self.made: list[int] = []
        self.counts: list[int] = []

    def __call__(self, options: Sequence[Option], /) -> Option:
        place, count = len(self.counts), len(options)
        if place < len(self.indices):
            index = min(self.indices[place], count - 1)
        else:
            index = 0 if self.draw is None else self.draw.randrange(count)
        self.made.append(index)
        self.counts.append(count)
        return options[index]


def _candidates(make: Callable[[Pick], Found]) -> Iterator[_Indices]:
    none = _Choices()
    make(none)
    start = tuple(none.made)
    yield start
    for place, count in enumerate(none.counts):
        for index in range(1, count):
            yield _with(start, place, index)
    draw = random.Random(_SEED)
    for _ in range(_TRIES):
        many = _Choices(draw=draw)
        make(many)
        yield tuple(many.made)


def _simpler(indices: _Indices) -> Iterator[_Indices]:
    """The same with a choice taken back, then with one made simpler."""
    made = [place for place, index in enumerate(indices) if index]
    for place in made:
        yield _with(indices, place, 0)
    for place in made:
        for index in range(1, indices[place]):
            yield _with(indices, place, index)


def _with(indices: _Indices, place: int, index: int) -> _Indices:
    return (*indices[:place], index, *indices[place + 1 :])
