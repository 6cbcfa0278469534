"""Errors of a response's quantities under every set of assumptions, at any number of bias points at once."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import Assumption
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, is_root
from symamp.exact.figures import Figures, face
from symamp.exact.forms import Coefficients, Expanded
from symamp.exact.response import Response
from symamp.exact.tape import Tape, term_dict
from symamp.judge.pairing import partners
from symamp.judge.sets import Plan
from symamp.judge.stacking import StackedFigures, stacked

_Figures = Figures | StackedFigures

_ROUNDING = 1e-14  # a relative difference below this is rounding, and no error of an assumption


class Bank:
    """Polynomials of many forms on one tape, so that what they share is worked out once a block."""

    def __init__(self) -> None:
        self._place: dict[Any, int] = {}
        self._polynomials: list[Any] = []
        self._tape: Tape | None = None
        self._given: Any = None
        self._arrays: list[np.ndarray] = []

    def place(self, polynomial: Any) -> int:
        """The number of a polynomial in the bank; equal ones have one number."""
        key = _poly_key(polynomial)
        if key not in self._place:
            self._place[key] = len(self._polynomials)
            self._polynomials.append(polynomial)
        return self._place[key]

    def row(self, number: int, values: Mapping[str, Any], points: int) -> np.ndarray:
        """The values of one polynomial; all are worked out when the bias points change."""
        if self._given is not values:
            self._tape = self._tape or Tape(self._polynomials)
            self._arrays = self._tape(values, points)
            self._given = values
        return self._arrays[number]


@dataclass(frozen=True)
class BankedForm:
    """An expanded form whose coefficients come out of a bank."""

    bank: Bank
    numerator: tuple[int, ...]
    denominator: tuple[int, ...]

    @classmethod
    def of(cls, form: Expanded, bank: Bank) -> BankedForm:
        """The form with all its polynomials in the bank."""
        return cls(
            bank, tuple(bank.place(c) for c in form.numerator), tuple(bank.place(c) for c in form.denominator)
        )

    def coefficients(self, values: Mapping[str, Any], points: int) -> Coefficients:
        """As of the form itself."""
        return Coefficients(
            np.array([self.bank.row(i, values, points) for i in self.numerator]),
            np.array([self.bank.row(i, values, points) for i in self.denominator]),
        )


class ErrorTable:
    """One response under all sets of its assumptions."""

    def __init__(
        self, exact: Response, assumptions: Sequence[Assumption], quantities: Sequence[Quantity]
    ) -> None:
        self.exact = exact
        self.assumptions = tuple(a for a in assumptions if a.applies(exact.name))
        self.quantities = tuple(quantities)
        self.plan = Plan(len(self.assumptions))
        engine = Approximator(exact)
        self.approximations: dict[int, Approximation] = {
            mask: engine.under([a for k, a in enumerate(self.assumptions) if mask >> k & 1])
            for mask in self.plan.masks
        }
        self.variants: list[Response] = []
        self._variant_of: dict[int, int | None] = {}
        self._number_variants()
        bank = Bank()
        self._banked = [_banked(variant, bank) for variant in self.variants]

    def _number_variants(self) -> None:
        """Sets that lead to the same response share its numbers."""
        known: dict[Any, int] = {}
        for mask, approximation in self.approximations.items():
            response = approximation.response
            if response is None:
                self._variant_of[mask] = None
                continue
            key = _key(response)
            if key not in known:
                known[key] = len(self.variants)
                self.variants.append(response)
            self._variant_of[mask] = known[key]

    def response(self, mask: int) -> Response | None:
        """The response under a set."""
        return self.approximations[mask].response

    def at_bias(self) -> dict[Quantity, tuple[np.ndarray, np.ndarray]]:
        """For each quantity its values under every set (sets, 1), and the errors; at the bias point."""
        figures = [variant.bias_figures for variant in self.variants]
        zeros = [variant.zero_figures(variant.bias_values, 1) for variant in self.variants]
        return self._all(figures, zeros)

    def at(self, values: Mapping[str, Any], points: int) -> dict[Quantity, tuple[np.ndarray, np.ndarray]]:
        """The same at `points` bias points: (sets, points)."""
        with np.errstate(all="ignore"):
            figures = stacked([variant.figures(values, points) for variant in self._banked])
            zeros = [variant.zero_figures(values, points) for variant in self._banked]
            return self._all(figures, zeros)

    def _all(
        self, figures: Sequence[_Figures], zeros: Sequence[Figures | None]
    ) -> dict[Quantity, tuple[np.ndarray, np.ndarray]]:
        paired: dict[tuple[int, str], np.ndarray] = {}
        base = self._variant_of[0]
        assert base is not None
        found = {}
        for quantity in self.quantities:
            rows = [_value(quantity, v, figures, zeros, base, paired) for v in range(len(self.variants))]
            errors = [error_of(quantity, row, rows[base]) for row in rows]
            found[quantity] = (self._by_set(rows), self._by_set(errors))
        return found

    def _by_set(self, rows: list[np.ndarray]) -> np.ndarray:
        nothing = np.full(rows[0].shape, np.nan, dtype=rows[0].dtype)
        return np.array(
            [nothing if (v := self._variant_of[mask]) is None else rows[v] for mask in self.plan.masks]
        )


def _banked(variant: Response, bank: Bank) -> Any:
    """The variant with its coefficients out of the bank; a nested one as it is."""
    if not isinstance(variant.form, Expanded):
        return variant
    # A banked form gives coefficients as the form itself does, which is all that figures ask of it.
    form: Any = BankedForm.of(variant.form, bank)
    first: Any = variant.first_zero
    if isinstance(first, Expanded):
        first = BankedForm.of(first, bank)
    return replace(variant, form=form, first_zero=first)


def _key(response: Response) -> Any:
    """What tells two responses apart."""
    form, first = response.form, response.first_zero
    return (
        _form_key(form),
        response.apart,
        response.single_pole,
        None if first is None else _form_key(first),
    )


def _form_key(form: Any) -> Any:
    if not isinstance(form, Expanded):
        return id(form)
    return tuple(tuple(_poly_key(c) for c in row) for row in (form.numerator, form.denominator))


def _poly_key(polynomial: Any) -> Any:
    return frozenset(term_dict(polynomial).items())


def _value(
    quantity: Quantity,
    variant: int,
    figures: Sequence[_Figures],
    zeros: Sequence[Figures | None],
    base: int,
    paired: dict[tuple[int, str], np.ndarray],
) -> np.ndarray:
    """The quantity's values of one variant; of a root, those of the partner of the exact root."""
    if not is_root(quantity):
        return np.asarray(figures[variant].value(quantity))
    name, index = quantity.name, quantity.index or 1
    exact = _roots(figures[base], name)
    missing = np.full(exact.shape[1], complex(np.nan, np.nan))
    if variant == base:
        found = exact[index - 1] if index <= exact.shape[0] else missing
        return np.asarray(face(_real_if_all_are(found), quantity.face, quantity))
    if (variant, name) not in paired:
        own = zeros[variant] if name == "z" else None
        approximate = _roots(own or figures[variant], name)
        paired[variant, name] = partners(exact, approximate[:1] if own else approximate)
    row = paired[variant, name]
    found = row[index - 1] if index <= row.shape[0] else missing
    return np.asarray(face(_real_if_all_are(found), quantity.face, quantity))


def _real_if_all_are(roots: np.ndarray) -> np.ndarray:
    """Roots as real numbers where none is complex (nan aside), which all that follows takes far faster."""
    return roots if (np.abs(roots.imag) > 0).any() else np.ascontiguousarray(roots.real)


def _roots(figures: _Figures, name: str) -> np.ndarray:
    return np.asarray(figures.poles if name == "p" else figures.zeros)


def error_of(quantity: Quantity, approximate: np.ndarray, exact: np.ndarray) -> np.ndarray:
    """(a − e)/e, or a − e for dB and degrees; nan where either has no value, or the exact one is 0."""
    difference = approximate - exact
    if quantity.face == "deg":
        return np.asarray(180.0 - (180.0 - difference) % 360.0)
    if in_decibels_or_degrees(quantity):
        return np.asarray(difference)
    with np.errstate(all="ignore"):
        relative = difference / exact
    relative = np.where(np.abs(relative) < _ROUNDING, 0.0, relative)
    return relative if exact.all() else np.where(exact == 0, np.nan, relative)
