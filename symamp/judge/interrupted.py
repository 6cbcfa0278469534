"""What a run over a span had when it was interrupted (room: judge)."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass

from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees

_NAMED = 6  # errors that are said in words; `so_far` has them all


@dataclass(frozen=True)
class ErrorSoFar:
    """Least and greatest error of a quantity among the points that were looked at, in its own unit or as a ratio."""

    name: str
    quantity: Quantity
    least: float
    greatest: float

    @property
    def words(self) -> str:
        if self.quantity.face == "deg" or self.quantity.name == "phase_margin":
            low, high, unit = self.least, self.greatest, "deg"
        elif in_decibels_or_degrees(self.quantity):
            low, high, unit = self.least, self.greatest, "dB"
        else:
            low, high, unit = 100 * self.least, 100 * self.greatest, "%"
        return f"{self.name} {low:+.3g} to {high:+.3g} {unit}"


@dataclass(frozen=True)
class SoFar:
    """How many bias points of how many had been looked at, and the errors so far. `total` is without the search."""

    done: int
    total: int
    errors: tuple[ErrorSoFar, ...]

    @property
    def words(self) -> str:
        if not self.done:
            return f"none of {self.total:,} bias points was looked at"
        if self.done < self.total:
            head = f"{self.done:,} of {self.total:,} bias points were looked at"
        else:
            head = f"{self.done:,} bias points were looked at, and the search from the worst was under way"
        if not self.errors:
            return head
        listed = ", ".join(each.words for each in self.errors[:_NAMED])
        more = len(self.errors) - _NAMED
        return f"{head}; least and greatest error so far: {listed}" + (
            f", and {more} more" if more > 0 else ""
        )


class Interrupted(KeyboardInterrupt):
    """A run over a span was interrupted; `so_far` is what it had."""

    def __init__(self, so_far: SoFar) -> None:
        self.so_far = so_far
        super().__init__(so_far.words)


@contextmanager
def interruptible(so_far: Callable[[], SoFar]) -> Iterator[None]:
    """An interrupt within says what there was."""
    try:
        yield
    except Interrupted:
        raise
    except KeyboardInterrupt:
        raise Interrupted(so_far()) from None
