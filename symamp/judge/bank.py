"""Polynomials of the many responses that sets of assumptions lead to, worked out together (room: judge)."""

from __future__ import annotations

from array import array
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property
from hashlib import blake2b
from math import prod
from typing import Any

import numpy as np
from flint import Ordering, fmpq, fmpq_poly, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.exact.forms import Coefficients, Expanded
from symamp.exact.polys import S, held, into_ring
from symamp.exact.response import Response
from symamp.exact.tape import Tape

_MANY_TERMS = 30_000  # terms above which a tape takes longer to make than it saves
_AT_ONCE = 128  # points for which the values of all monomials are kept

Values = Mapping[str, Any]
Worth = Callable[[Values, int], Sequence[np.ndarray] | np.ndarray]


def poly_key(polynomial: fmpz_mpoly) -> bytes:
    """What tells polynomials apart, in whatever ring: a digest of the polynomial written out."""
    return blake2b(str(polynomial).encode(), digest_size=16).digest()


class Bank:
    """Polynomials of many forms, so that what they share is worked out once a block; equal ones are one."""

    def __init__(self) -> None:
        self._place: dict[bytes, int] = {}
        self._polynomials: list[fmpz_mpoly] = []
        self._given: Any = None
        self._arrays: Sequence[np.ndarray] | np.ndarray = ()
        self._given_exactly: Any = None
        self._fractions: list[fmpq] = []

    def __getstate__(self) -> dict[str, Any]:
        """What travels to another process: how values are worked out, without the last points' values."""
        return {**Bank().__dict__, "_worth": self._worth}

    def place(self, polynomial: fmpz_mpoly) -> int:
        """The number of a polynomial in the bank; equal ones have one number."""
        key = poly_key(polynomial)
        if key not in self._place:
            self._place[key] = len(self._polynomials)
            self._polynomials.append(polynomial)
        return self._place[key]

    def row(self, number: int, values: Values, points: int) -> np.ndarray:
        """The values of one polynomial; all are worked out when the bias points change."""
        if self._given is not values:
            self._arrays, self._given = self._worth(values, points), values
        return np.asarray(self._arrays[number])

    def exact(self, number: int, values: Mapping[str, Fraction]) -> fmpq:
        """The value of one polynomial at a bias point given exactly; all are worked out when that changes."""
        if self._given_exactly is not values:
            self._fractions, self._given_exactly = self._terms.exact(values), values
        return self._fractions[number]

    @cached_property
    def _terms(self) -> TermTable:
        return TermTable(self._polynomials)

    @cached_property
    def _worth(self) -> Worth:
        if sum(map(len, self._polynomials)) > _MANY_TERMS:
            return self._terms.at
        return Tape(self._polynomials)


class TermTable:
    """The terms of polynomials: each monomial that any of them holds stands once, with its number.

    Term i is `factors[i]` times the monomial of number `numbers[i]`; polynomial k has the terms from `ends[k]` to
    `ends[k + 1]`; `powers` are the monomials' exponents, (monomials, symbols).
    """

    def __init__(self, polynomials: Sequence[fmpz_mpoly]) -> None:
        self.symbols = tuple(sorted(held(*polynomials)))
        ring = fmpz_mpoly_ctx.get((*self.symbols, S), Ordering.lex)
        known: dict[tuple[int, ...], int] = {}
        self.numbers, self.ends = array("i"), array("q", [0])  # no lists: there may be millions of terms
        self.factors: list[int] = []
        for polynomial in polynomials:
            for exponents, factor in into_ring(polynomial, ring).to_dict().items():
                self.numbers.append(known.setdefault(exponents, len(known)))
                self.factors.append(int(factor))
            self.ends.append(len(self.factors))
        rows = [[int(e) for e in exponents[:-1]] for exponents in known]
        self.powers = np.array(rows, dtype=np.int64).reshape(len(known), len(self.symbols))

    def at(self, values: Values, points: int) -> np.ndarray:
        """Values of all polynomials at `points` points, (polynomials, points)."""
        found = np.empty((len(self.ends) - 1, points))
        for start in range(0, points, _AT_ONCE):
            stop = min(points, start + _AT_ONCE)
            found[:, start:stop] = self._matrix @ self._monomials(values, slice(start, stop))
        return found

    @cached_property
    def _matrix(self) -> Any:
        from scipy.sparse import csr_array  # a tenth of a second, and small banks do without

        parts = np.array(self.factors, dtype=float), np.asarray(self.numbers), np.asarray(self.ends)
        return csr_array(parts, shape=(len(self.ends) - 1, len(self.powers)))

    def _monomials(self, values: Values, points: slice) -> np.ndarray:
        product = np.ones((len(self.powers), points.stop - points.start))
        for name, powers in zip(self.symbols, self.powers.T, strict=True):
            value = np.asarray(values[name], dtype=float)
            for power in np.unique(powers[powers > 0]):
                product[powers == power] *= (value[points] if value.ndim else value) ** int(power)
        return product

    def exact(self, values: Mapping[str, Fraction]) -> list[fmpq]:
        """The polynomials' values as fractions; terms are added up as integers over one denominator."""
        tops = self.powers.max(axis=0, initial=0).tolist()
        given = [values[name] for name in self.symbols]
        whole = prod(value.denominator**top for value, top in zip(given, tops, strict=True))
        above = []
        for row in self.powers.tolist():
            value = prod((v**e for v, e in zip(given, row, strict=True) if e), start=Fraction(1))
            above.append(value.numerator * (whole // value.denominator))
        found = []
        for start, stop in zip(self.ends, self.ends[1:], strict=False):
            terms = zip(self.factors[start:stop], self.numbers[start:stop], strict=True)
            found.append(fmpq(sum(factor * above[number] for factor, number in terms), whole))
        return found


@dataclass(frozen=True)
class BankedForm:
    """An expanded form whose coefficients come out of a bank."""

    bank: Bank
    numerator: tuple[int, ...]
    denominator: tuple[int, ...]

    @classmethod
    def of(cls, form: Expanded, bank: Bank) -> BankedForm:
        """The form with all its polynomials in the bank."""
        above, below = (tuple(bank.place(c) for c in row) for row in (form.numerator, form.denominator))
        return cls(bank, above, below)

    def coefficients(self, values: Values, points: int) -> Coefficients:
        """As of the form itself."""
        above, below = (
            np.array([self.bank.row(i, values, points) for i in row])
            for row in (self.numerator, self.denominator)
        )
        return Coefficients(above, below)

    def exact_coefficients(self, values: Mapping[str, Fraction]) -> tuple[fmpq_poly, fmpq_poly]:
        """As of the form itself."""
        above, below = (
            fmpq_poly([self.bank.exact(i, values) for i in row]) for row in (self.numerator, self.denominator)
        )
        return above, below


def in_bank(variant: Response, bank: Bank) -> Any:
    """The variant with its coefficients out of the bank; a nested one as it is."""
    if not isinstance(variant.form, Expanded):
        return variant
    # A banked form gives coefficients as the form itself does, which is all that figures ask of it.
    form: Any = BankedForm.of(variant.form, bank)
    first: Any = variant.first_zero
    if isinstance(first, Expanded):
        first = BankedForm.of(first, bank)
    return replace(variant, form=form, first_zero=first)
