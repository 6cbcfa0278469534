"""The ledger: what each assumption adds to the error of each quantity, at the bias point and over the span."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from symamp.assumptions.read import Assumption, read_assumptions
from symamp.circuit.stage import Stage
from symamp.errors import InputError, StageError
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, is_root, parse_quantity
from symamp.exact.formulas import Formula, formula_of
from symamp.exact.missing_figures import remarks_beside, why_missing
from symamp.judge.error_formula import ErrorFormula, error_formula
from symamp.judge.errors_at import ErrorTable, Progress
from symamp.judge.ledger_proofs import with_proofs
from symamp.judge.ledger_tables import Notes, tables_of
from symamp.judge.lost_roots import LostRoot, lost_and_new
from symamp.judge.proving import Prover
from symamp.judge.sets import FIGURES, names_of
from symamp.judge.span_errors import SpanErrors, SpanFigure, span_errors
from symamp.span.executing import Engine
from symamp.values import show_value

POINTS = 4096
_BEYOND = "the value is beyond the range of numbers"
SEED = 1


@dataclass(frozen=True)
class Share:
    """One assumption's part in a quantity's error: figures at the bias point (None with `why`) and over the span."""

    name: str
    figures: Mapping[str, float | complex | None]
    why: Mapping[str, str]
    span: Mapping[str, SpanFigure]


@dataclass(frozen=True)
class Account:
    """The account of one quantity of one response under all its assumptions."""

    response: str
    quantity: Quantity
    unit: str
    exact: float | complex | None
    approximate: float | complex | None
    error: float | complex | None
    why: str
    error_absolute: float | complex | None
    formula_exact: Formula | None
    formula_approximate: Formula | None
    error_formula: ErrorFormula | None
    modulus: bool
    absolute: bool
    lost: tuple[LostRoot, ...]
    new: tuple[LostRoot, ...]
    assumptions: tuple[Share, ...]
    span: SpanFigure | None
    remarks: tuple[str, ...] = ()

    @property
    def name(self) -> str:
        return f"{self.response}.{self.quantity.text}"


@dataclass(frozen=True)
class Ledger:
    """The accounts of all quantities asked for, with what a reader should know beside them."""

    stage: Stage
    assumptions: tuple[str, ...]
    accounts: tuple[Account, ...]
    warnings: tuple[str, ...]
    remarks: tuple[str, ...]
    points: int = 0
    seed: int | None = None
    method: str = ""

    @property
    def share_points(self) -> int | None:
        """The bias points at which shares have been worked out, None where there are none."""
        found = [
            share.span["share"] for a in self.accounts for share in a.assumptions if "share" in share.span
        ]
        return min((figure.points for figure in found), default=None)

    def __getitem__(self, name: str) -> Account:
        for account in self.accounts:
            if account.name == name:
                return account
        known = ", ".join(account.name for account in self.accounts)
        raise KeyError(f"{name}: this ledger has {known}")


def make_ledger(
    stage: Stage,
    *,
    quantities: Sequence[str] = (),
    assumptions: Sequence[Assumption] | None = None,
    points: int = POINTS,
    seed: int = SEED,
    prove: bool = True,
    progress: Progress | None = None,
    executor: Executor | Engine | None = None,
) -> Ledger:
    """The ledger of a stage: all its assumptions, or those given.

    `quantities` such as "gain.p1"; without any, those of `default_quantities` of every response. `points` Sobol
    points are drawn from a box with that seed; with `prove` errors are then proved where a proof ends within its
    budget. An executor, or an engine of `span.workers`, looks at the points, with the same bits. Raises StageError
    where a bias value is missing or a name unknown, and as `span_errors`.
    """
    made = tuple(read_assumptions(stage) if assumptions is None else assumptions)
    if not made:
        raise StageError(
            "this stage makes no assumption, so there is no error to account for",
            'add one, such as [[assumption]] with name = "no body effect" and neglect = ["gmb"]',
            key="assumption",
            file=stage.file,
        )
    asked = _asked(stage, quantities)
    notes = Notes(list(stage.warnings), list(stage.remarks))
    tables = {name: tables_of(stage, name, made, wanted, notes, progress) for name, wanted in asked.items()}
    every = [table for each in tables.values() for table in each]
    swept = span_errors(stage, every, points, seed, progress, executor)
    prover = Prover.of(stage) if prove else None
    if swept is not None and prover is not None:
        swept = with_proofs(swept, every, prover)
    accounts: list[Account] = []
    for name, (table, *others) in tables.items():
        found = [account for each in (table, *others) for account in _accounts(name, each, swept)]
        order = asked[name] or [account.quantity for account in found]
        accounts.extend(sorted(found, key=lambda account: order.index(account.quantity)))
        if not table.plan.shares:
            notes.remarks.append(
                f"{name}: shares are worked out for up to 12 assumptions, and there are {table.plan.count}"
            )
    return Ledger(
        stage,
        tuple(a.name for a in made),
        tuple(accounts),
        tuple(dict.fromkeys(notes.warnings)),
        tuple(dict.fromkeys(notes.remarks)),
        swept.points if swept else 0,
        swept.seed if swept else None,
        swept.method if swept else "",
    )


def _asked(stage: Stage, names: Sequence[str]) -> dict[str, tuple[Quantity, ...] | None]:
    """{response: its quantities, or None for the default ones}."""
    if not names:
        return dict.fromkeys(stage.asked)
    found: dict[str, list[Quantity]] = {}
    for name in names:
        response, dot, rest = name.partition(".")
        if response not in stage.asked or not dot:
            known = ", ".join(stage.asked)
            raise StageError(
                f"{name!r} names no quantity of a response",
                f"write RESPONSE.QUANTITY, such as {next(iter(stage.asked))}.dc; responses are {known}",
                key="--quantity",
            )
        try:
            quantity = parse_quantity(rest)
        except InputError as error:
            raise error.at(key="--quantity") from None
        found.setdefault(response, [])
        if quantity not in found[response]:
            found[response].append(quantity)
    return {name: tuple(found[name]) for name in stage.asked if name in found}


def _accounts(name: str, table: ErrorTable, swept: SpanErrors | None) -> list[Account]:
    at_bias = table.at_bias()
    return [_account(name, table, quantity, *at_bias[quantity], swept) for quantity in table.quantities]


def _account(
    name: str,
    table: ErrorTable,
    quantity: Quantity,
    values: np.ndarray,
    errors: np.ndarray,
    swept: SpanErrors | None,
) -> Account:
    exact, full = table.exact, table.approximations[table.plan.masks[-1]]
    figures = table.plan.figures(errors)[:, 0]
    whys = _Whys(table, quantity, values[:, 0])
    span = swept.of(name, quantity) if swept else None
    lost, new = _left_over(table, quantity)
    approximate = full.response
    value_e, value_a = _number(values[0, 0]), _number(values[-1, 0])
    if quantity.face == "deg" and value_e is not None and value_a is not None:
        value_a = value_e + float(np.real(errors[-1, 0]))  # the turn that lies nearest the exact angle
    why = _why(table, quantity, values, lost)
    formula = None if approximate is None else error_formula(exact, approximate, quantity)
    return Account(
        response=name,
        quantity=quantity,
        unit=exact.unit_of(quantity),
        exact=value_e,
        approximate=value_a,
        error=_number(figures[0]),
        why=why,
        error_absolute=value_a - value_e if value_e == 0 and value_a is not None else None,
        formula_exact=formula_of(exact, quantity),
        formula_approximate=None if approximate is None else _approximate_formula(table, quantity, values),
        error_formula=formula,
        modulus=any(figure is not None and figure.modulus for figure in span or ())
        or bool(np.iscomplexobj(figures) and (np.where(np.isnan(figures), 0.0, figures).imag != 0).any()),
        absolute=in_decibels_or_degrees(quantity),
        lost=lost,
        new=new,
        assumptions=_shares(whys, figures, errors[:, 0], span),
        span=span[0] if span else None,
        remarks=tuple(remarks_beside(exact.bias_figures, quantity)) if value_e is not None else (),
    )


def _approximate_formula(table: ErrorTable, quantity: Quantity, values: np.ndarray) -> Formula | None:
    """The approximate quantity as a formula: of a root, that of the partner, whatever its index."""
    response = table.approximations[table.plan.masks[-1]].response
    assert response is not None
    if not is_root(quantity):
        return formula_of(response, quantity)
    value = values[-1, 0]
    if np.isnan(value) or quantity.face is not None:
        return None
    roots = response.poles() if quantity.name == "p" else response.zeros()
    for k, root in enumerate(roots, start=1):
        if root == value:
            return formula_of(response, Quantity(quantity.name, index=k))
    return None


def _why(table: ErrorTable, quantity: Quantity, values: np.ndarray, lost: Sequence[LostRoot]) -> str:
    """Why there is no error at the bias point, or ""."""
    exact, full = table.exact, table.approximations[table.plan.masks[-1]]
    if not np.isfinite(values[0, 0]):
        return why_missing(exact.bias_figures, quantity) or _BEYOND
    if full.response is None:
        return full.why
    if not np.isfinite(values[-1, 0]):
        mine = f"{quantity.name}{quantity.index}"
        if is_root(quantity):
            hz = next((root.hz for root in lost if root.name == mine), None)
            where = "" if hz is None else f", at {show_value(hz, 'Hz')},"
            return f"{mine}{where} is lost: it has no partner"
        return why_missing(full.response.bias_figures, quantity) or _BEYOND
    if values[0, 0] == 0:
        return "the exact value is 0, so there is no relative error"
    return ""


def _left_over(table: ErrorTable, quantity: Quantity) -> tuple[tuple[LostRoot, ...], tuple[LostRoot, ...]]:
    """Lost and new roots under all assumptions, of the kind that the quantity is."""
    approximate = table.approximations[table.plan.masks[-1]].response
    if not is_root(quantity) or approximate is None:
        return (), ()
    return lost_and_new(table.exact, approximate, quantity.name)


def _shares(
    whys: _Whys, figures: np.ndarray, errors: np.ndarray, span: Sequence[SpanFigure | None] | None
) -> tuple[Share, ...]:
    plan, shares = whys.table.plan, []
    for k, name in enumerate(whys.names):
        values: dict[str, float | complex | None] = {}
        why: dict[str, str] = {}
        over: dict[str, SpanFigure] = {}
        for figure in FIGURES:
            row = 1 + plan.rows.index((k, figure)) if (k, figure) in plan.rows else None
            if row is None:
                values[figure] = None
                why[figure] = "shares are worked out for up to 12 assumptions"
                continue
            values[figure] = _number(figures[row])
            if values[figure] is None:
                why[figure] = whys.of(plan.smallest_missing(row, errors))
            found = span[row] if span else None
            if found is not None:
                over[figure] = found
        shares.append(Share(name, values, why, over))
    return tuple(shares)


@dataclass
class _Whys:
    """Why a figure of a quantity has no value at the bias point; `values` are the quantity's under every set."""

    table: ErrorTable
    quantity: Quantity
    values: np.ndarray

    @cached_property
    def names(self) -> list[str]:
        return [assumption.name for assumption in self.table.assumptions]

    def of(self, mask: int | None) -> str:
        """Why there is no error under the smallest set that a figure needs; the set is named."""
        if not np.isfinite(self.values[0]) or mask is None:
            why = why_missing(self.table.exact.bias_figures, self.quantity)
            return f"the exact {self.quantity.text} has no value" + (f": {why}" if why else "")
        listed = " and ".join(repr(name) for name in names_of(mask, self.names))
        if np.isfinite(self.values[self.table.plan.masks.index(mask)]):
            return f"the exact value is 0, so there is no relative error under {listed}"
        if is_root(self.quantity) and self.table.response(mask) is not None:
            return f"under {listed} {self.quantity.name}{self.quantity.index} is lost: it has no partner"
        return f"under {listed} the quantity has no value: {self._words(mask)}"

    def _words(self, mask: int) -> str:
        approximation = self.table.approximations[mask]
        if approximation.response is None:
            return approximation.why
        return why_missing(approximation.response.bias_figures, self.quantity)


def _number(value: Any) -> float | complex | None:
    """A number as plain Python, None where it is not finite; real where the imaginary part is exactly 0."""
    if not np.isfinite(value):
        return None
    if np.iscomplexobj(value):
        return complex(value) if value.imag else float(value.real)
    return float(value)
