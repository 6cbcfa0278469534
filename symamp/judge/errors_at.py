"""Errors of a response's quantities under every set of assumptions, at any number of bias points at once."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from copy import copy
from dataclasses import replace
from functools import cached_property
from typing import Any

import numpy as np

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import Assumption
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, is_root
from symamp.exact.figures import Figures, face
from symamp.exact.forms import Expanded
from symamp.exact.response import Response
from symamp.judge.bank import Bank, in_bank, poly_key
from symamp.judge.pairing import partners
from symamp.judge.sets import Plan, names_of
from symamp.judge.stacking import StackedFigures, stacked

Progress = Callable[[str, int, int], None]  # of what so many are done, of so many in all
_Figures = Figures | StackedFigures

_ROUNDING = 1e-14  # a relative difference below this is rounding, and no error of an assumption


class ErrorTable:
    """One response under all sets of its assumptions, or under those that a plan needs."""

    def __init__(
        self,
        exact: Response,
        assumptions: Sequence[Assumption],
        quantities: Sequence[Quantity],
        progress: Progress | None = None,
    ) -> None:
        self.exact = exact
        self.assumptions = tuple(a for a in assumptions if a.applies(exact.name))
        self.quantities = tuple(quantities)
        self.plan = Plan(len(self.assumptions))
        self.approximations: dict[int, Approximation] = {}
        self._told: dict[str, tuple[int, str]] = {}  # a warning's beginning: the set, and the whole warning
        self._approximate(progress)
        self._number_variants()

    def _approximate(self, progress: Progress | None) -> None:
        """The response under every set, without the account of what was dropped, which is large."""
        engine = Approximator(self.exact)
        for done, mask in enumerate(self.plan.masks, start=1):
            found = engine.under([a for k, a in enumerate(self.assumptions) if mask >> k & 1])
            self._hear(mask, found.warnings)
            self.approximations[mask] = replace(found, dominated=None)
            if progress:
                progress("sets of assumptions", done, len(self.plan.masks))

    def _hear(self, mask: int, warnings: Sequence[str]) -> None:
        """Keep each warning once, which dropped term it names aside: under all assumptions, else the smallest set."""
        for warning in warnings:
            about = warning.partition(", so ")[0]
            before = self._told.get(about)
            whole = mask == self.plan.masks[-1]
            if before is None or whole or mask.bit_count() < before[0].bit_count():
                self._told[about] = mask, warning

    @property
    def warnings(self) -> tuple[str, ...]:
        """Those of all sets, each with the set that it is of unless that is all assumptions."""
        found = []
        for mask, warning in self._told.values():
            listed = " and ".join(repr(name) for name in names_of(mask, [a.name for a in self.assumptions]))
            found.append(warning if mask == self.plan.masks[-1] else f"{warning} (with {listed} alone)")
        return tuple(found)

    def _number_variants(self) -> None:
        """Sets that lead to the same response share its numbers."""
        self.variants: list[Response] = []
        self._variant_of: dict[int, int | None] = {}
        known: dict[Any, int] = {}
        for mask in self.plan.masks:
            response = self.approximations[mask].response
            if response is None:
                self._variant_of[mask] = None
                continue
            key = _key(response)
            if key not in known:
                known[key] = len(self.variants)
                self.variants.append(response)
            self._variant_of[mask] = known[key]
        bank = Bank()
        self._banked = [in_bank(variant, bank) for variant in self.variants]

    @cached_property
    def without_shares(self) -> ErrorTable:
        """The same for the few sets that all figures but the shares need."""
        table = copy(self)
        table.plan = self.plan.without_shares
        table._number_variants()
        return table

    def bare(self, with_few: bool = False) -> ErrorTable:
        """A copy that works out errors and is good for nothing else: small, to be sent elsewhere.

        `with_few` gives it `without_shares` too.
        """
        base = self._variant_of[0]
        assert base is not None
        table = copy(self)
        table.__dict__.pop("without_shares", None)
        table.exact, table.approximations, table._told = self._banked[base], {}, {}
        table.assumptions, table.variants = (), list(self._banked)
        if with_few:
            table.__dict__["without_shares"] = self.without_shares.bare()
        return table

    def response(self, mask: int) -> Response | None:
        """The response under a set."""
        return self.approximations[mask].response

    def at_bias(self) -> dict[Quantity, tuple[np.ndarray, np.ndarray]]:
        """For each quantity its values under every set (sets, 1), and the errors; at the bias point."""
        values = self.exact.bias_values  # one object for all, by which the bank knows the point again
        with np.errstate(all="ignore"):
            figures = [v.figures(values, 1) if v.apart else v.bias_figures for v in self._banked]
            zeros = [variant.zero_figures(values, 1) for variant in self._banked]
        return {quantity: (found, errors) for quantity, found, errors in self._each(figures, zeros)}

    def at(self, values: Mapping[str, Any], points: int) -> dict[Quantity, tuple[np.ndarray, np.ndarray]]:
        """The same at `points` bias points: (sets, points)."""
        return {quantity: (found, errors) for quantity, found, errors in self.each_at(values, points)}

    def each_at(
        self, values: Mapping[str, Any], points: int
    ) -> Iterator[tuple[Quantity, np.ndarray, np.ndarray]]:
        """The same, one quantity after the other."""
        with np.errstate(all="ignore"):
            figures = stacked([variant.figures(values, points) for variant in self._banked])
            zeros = [variant.zero_figures(values, points) for variant in self._banked]
        yield from self._each(figures, zeros)

    def _each(
        self, figures: Sequence[_Figures], zeros: Sequence[Figures | None]
    ) -> Iterator[tuple[Quantity, np.ndarray, np.ndarray]]:
        paired: dict[tuple[int, str], np.ndarray] = {}
        base = self._variant_of[0]
        assert base is not None
        for quantity in self.quantities:
            with np.errstate(all="ignore"):
                rows = [_value(quantity, v, figures, zeros, base, paired) for v in range(len(self.variants))]
                errors = [error_of(quantity, row, rows[base]) for row in rows]
            yield quantity, self._by_set(rows), self._by_set(errors)

    def _by_set(self, rows: list[np.ndarray]) -> np.ndarray:
        nothing = np.full(rows[0].shape, np.nan, dtype=rows[0].dtype)
        return np.array(
            [nothing if (v := self._variant_of[mask]) is None else rows[v] for mask in self.plan.masks]
        )


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
    return tuple(tuple(poly_key(c) for c in row) for row in (form.numerator, form.denominator))


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
