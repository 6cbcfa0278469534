"""Proved figures of a ledger (room: judge): the error of all assumptions, and that of each alone."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import PolyRatio, rational_of
from symamp.exact.polys import times_two_pi
from symamp.exact.response import Response
from symamp.judge.error_formula import error_ratio, partner_ratio
from symamp.judge.errors_at import ErrorTable
from symamp.judge.proving import Prover
from symamp.judge.span_errors import SpanErrors, SpanFigure
from symamp.span.bounding import Proved

_NEAR = 1e-3
_FREQUENCIES = ("bandwidth", "unity_gain_frequency")


def with_proofs(swept: SpanErrors, tables: Sequence[ErrorTable], prover: Prover) -> SpanErrors:
    """The same figures, proved where a proof ends within its budget."""
    figures = dict(swept.figures)
    for table in tables:
        for quantity in table.quantities:
            key = (table.exact.name, quantity)
            figures[key] = _proved(table, quantity, figures[key], prover)
    return replace(swept, figures=figures)


def _proved(
    table: ErrorTable, quantity: Quantity, rows: tuple[SpanFigure | None, ...], prover: Prover
) -> tuple[SpanFigure | None, ...]:
    """Rows as in `Plan`: those that are the error of one set, the same set proved once."""
    masks = {0: table.plan.masks[-1]}
    masks |= {
        1 + row: 1 << k if figure == "alone" else (1 << (k + 1)) - 1
        for row, (k, figure) in enumerate(table.plan.rows)
        if figure == "alone" or (figure == "added" and k == 0)
    }
    found: list[SpanFigure | None] = list(rows)
    known: dict[int, Proved | None] = {}
    for row, mask in masks.items():
        figure = rows[row]
        if figure is None or figure.modulus or figure.missing:
            continue
        if mask not in known:
            known[mask] = _of_set(table, quantity, mask, figure, prover)
        if not is_root(quantity) or _agree(figure, known[mask]):
            found[row] = prover.settled(figure, known[mask])
    return tuple(found)


def _agree(sampled: SpanFigure, proved: Proved | None) -> bool:
    """Whether a proof is about the roots that were sampled: over a box a root may change its partner."""
    if proved is None:
        return True
    near = _NEAR * (1 + abs(sampled.least) + abs(sampled.greatest))
    lower, upper = proved.least.upper, proved.greatest.lower  # what is reached
    return abs(lower - sampled.least) <= near and abs(upper - sampled.greatest) <= near


def _of_set(
    table: ErrorTable, quantity: Quantity, mask: int, sampled: SpanFigure, prover: Prover
) -> Proved | None:
    exact, approximate = table.exact, table.approximations[mask].response
    if approximate is None or quantity.face is not None or not exact.expanded:
        return None
    hint = (sampled.least, sampled.greatest)
    formula = _formula(exact, approximate, quantity)
    if formula is None or formula[0].is_zero():
        return None
    if is_root(quantity):
        return prover.root(exact, quantity, formula, hint)
    if quantity.name in _FREQUENCIES:
        return prover.crossing(exact, quantity, times_two_pi(formula), hint)
    whole = rational_of(exact, quantity)
    if whole is None:
        return None
    ratio = error_ratio(exact, whole, formula)
    return prover.error(formula, whole) if ratio is None else prover.ratio(ratio)


def _formula(exact: Response, approximate: Response, quantity: Quantity) -> PolyRatio | None:
    if approximate is exact:
        return None
    return partner_ratio(exact, approximate, quantity)
