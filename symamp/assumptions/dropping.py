"""Step 4 on a whole response: what dominance leaves of its coefficients, and an account of what it drops."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.dominance import Dominance, Terms
from symamp.exact.forms import Expanded, expanded_of
from symamp.exact.polys import from_coefficients, lowest_terms
from symamp.exact.response import Response
from symamp.exact.shape import polynomial_text

_CANCELLING = 10.0  # Σ|term|/|Σ term| above which kept terms are said to nearly cancel


@dataclass(frozen=True)
class Dropped:
    """A dropped term of a coefficient ("denominator s^1"), and their ratio at the bias point (None without values)."""

    coefficient: str
    polynomials: tuple[fmpz_mpoly, fmpz_mpoly]
    ratio: float | None

    @cached_property
    def term(self) -> str:
        """The dropped term."""
        return polynomial_text(self.polynomials[0])

    @cached_property
    def against(self) -> str:
        """The term of the same coefficient to which it fell."""
        return polynomial_text(self.polynomials[1])


@dataclass(frozen=True)
class Kept:
    """A term of a coefficient that nothing in it outweighs."""

    coefficient: str
    polynomial: fmpz_mpoly

    @cached_property
    def term(self) -> str:
        """The term."""
        return polynomial_text(self.polynomial)


class TermTable:
    """The terms of all coefficients of a form."""

    def __init__(self, form: Expanded) -> None:
        self.form = form
        self.rows = tuple(tuple(Terms(c) for c in row) for row in (form.numerator, form.denominator))

    def named(self) -> Iterator[tuple[str, Terms]]:
        """Each coefficient with its name."""
        for where, row in zip(("numerator", "denominator"), self.rows, strict=True):
            for power, terms in enumerate(row):
                yield f"{where} s^{power}", terms


@dataclass(frozen=True, eq=False)
class Dominated:
    """A form after step 4. `falls` hold, for each coefficient in turn, where each of its terms falls to."""

    form: Expanded
    table: TermTable
    falls: tuple[np.ndarray, ...]
    exact: Response

    @classmethod
    def of(cls, table: TermTable, dominance: Dominance, exact: Response) -> Dominated:
        """Put pooled vectors to every coefficient, and bring what stays to lowest terms."""
        falls = tuple(dominance.judge(terms) for _, terms in table.named())
        if all((to == np.arange(len(to))).all() for to in falls):
            return cls(table.form, table, falls, exact)
        kept = [_kept(terms, to) for (_, terms), to in zip(table.named(), falls, strict=True)]
        split = len(table.rows[0])
        ratio = lowest_terms(from_coefficients(kept[:split]), from_coefficients(kept[split:]))
        return cls(expanded_of(*ratio), table, falls, exact)

    @cached_property
    def dropped(self) -> tuple[Dropped, ...]:
        """Each dropped term with a term that stays and outweighs it."""
        found: list[Dropped] = []
        for (name, terms), to in zip(self.table.named(), self.falls, strict=True):
            gone = np.flatnonzero(to != np.arange(len(to)))
            if gone.size:
                values = self._values(terms)
                for i in gone:
                    ratio = None if values is None else float(values[i] / values[to[i]])
                    pair = terms.only([int(i)]), terms.only([int(to[i])])
                    found.append(Dropped(name, pair, ratio))
        return tuple(found)

    @cached_property
    def kept(self) -> tuple[Kept, ...]:
        """Each term that stays, as it stands before what is left is brought to lowest terms."""
        return tuple(
            Kept(name, terms.only([int(i)]))
            for (name, terms), to in zip(self.table.named(), self.falls, strict=True)
            for i in np.flatnonzero(to == np.arange(len(to)))
        )

    @cached_property
    def warnings(self) -> tuple[str, ...]:
        """Where terms that stay in a coefficient nearly cancel at the bias point, and which dropped one may matter."""
        found = []
        for (name, terms), to in zip(self.table.named(), self.falls, strict=True):
            stays = to == np.arange(len(to))
            if stays.all() or len({terms.factors[i] > 0 for i in np.flatnonzero(stays)}) < 2:
                continue
            values = self._values(terms)
            if values is None or np.abs(values[stays]).sum() <= _CANCELLING * abs(values[stays].sum()):
                continue
            largest = int(np.argmax(np.where(stays, -1.0, np.abs(values))))
            found.append(
                f"{self.exact.name}: kept terms of the {name} nearly cancel at the bias point, so the dropped "
                f"term {polynomial_text(terms.only([largest]))} may matter"
            )
        return tuple(found)

    def _values(self, terms: Terms) -> np.ndarray | None:
        """The terms' values at the bias point, to a common power of ten; None where a symbol has no value."""
        used = [(name, i) for name, i in terms.place.items() if terms.exponents[:, i].any()]
        bias = self.exact.bias_values
        if any(name not in bias for name, _ in used):
            return None
        factors = np.array([float(c) for c in terms.factors])
        sizes, signs = np.zeros(len(terms)), np.sign(factors)
        for name, i in used:
            power = terms.exponents[:, i]
            signs = signs * np.where(power % 2, np.sign(bias[name]), np.where(power, bias[name] != 0, 1.0))
            sizes = sizes + power * np.log(abs(bias[name]) or 1.0)
        sizes = sizes + np.log(np.abs(factors))
        return np.asarray(signs * np.exp(sizes - sizes.max(initial=-np.inf, where=signs != 0)))


def _kept(terms: Terms, falls_to: np.ndarray) -> fmpz_mpoly:
    stays = np.flatnonzero(falls_to == np.arange(len(falls_to)))
    return terms.polynomial if len(stays) == len(terms) else terms.only(stays)
