"""What shapes are made of, and what those who write them ask of one (room: exact)."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Protocol

# (integer coefficient, ((symbol, exponent), …)), symbols in the order in which they are written
Term = tuple[int, tuple[tuple[str, int], ...]]


@dataclass(frozen=True)
class Factor:
    """A symbol, or a sum of terms, raised to a positive power."""

    base: str | tuple[Term, ...]
    power: int = 1

    @property
    def is_sum(self) -> bool:
        return not isinstance(self.base, str)


class Product(Protocol):
    """coefficient · numerator factors / denominator factors."""

    @property
    def coefficient(self) -> Fraction: ...
    @property
    def numerator(self) -> tuple[Factor, ...]: ...
    @property
    def denominator(self) -> tuple[Factor, ...]: ...
    def __neg__(self) -> Product: ...


class Root(Protocol):
    """(−b ± sqrt(b² − 4·a·c))/(2·a)."""

    @property
    def a(self) -> Product: ...
    @property
    def b(self) -> Product: ...
    @property
    def c(self) -> Product: ...
    @property
    def branch(self) -> int: ...
    @property
    def under_root(self) -> tuple[Product, Product]: ...
    @property
    def below(self) -> Product: ...
