"""Things packed so that another process can unpack them: what figures are worked out from (room: span).

Polynomials of python-flint do not pickle, so they are packed as their terms. A parcel is read back by workers that this
very run has started or was told of, and comes from nowhere else.
"""

from __future__ import annotations

import io
import pickle
from collections.abc import Callable
from copyreg import dispatch_table
from typing import Any

from flint import Ordering, fmpq, fmpq_poly, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Table

_Recipe = tuple[Callable[..., Any], tuple[Any, ...]]


def packed(thing: Any) -> bytes:
    """A parcel that holds the thing, whatever polynomials it has; equal bits come out of what is unpacked.

    Tables of bias points travel without their rows: each chunk brings its own.
    """
    parcel = io.BytesIO()
    _Packer(parcel, pickle.HIGHEST_PROTOCOL).dump(thing)
    return parcel.getvalue()


def unpacked(parcel: bytes) -> Any:
    """What is in a parcel of `packed`."""
    return pickle.loads(parcel)


def _of_polynomial(polynomial: fmpz_mpoly) -> _Recipe:
    context = polynomial.context()
    terms = {tuple(map(int, powers)): int(factor) for powers, factor in polynomial.terms()}
    return _polynomial, (context.names(), context.ordering().name, terms)


def _polynomial(names: tuple[str, ...], ordering: str, terms: dict[tuple[int, ...], int]) -> fmpz_mpoly:
    return _context(names, ordering).from_dict(terms)


def _of_context(context: fmpz_mpoly_ctx) -> _Recipe:
    return _context, (context.names(), context.ordering().name)


def _context(names: tuple[str, ...], ordering: str) -> fmpz_mpoly_ctx:
    return fmpz_mpoly_ctx.get(names, Ordering[ordering])


def _of_fraction(fraction: fmpq) -> _Recipe:
    return fmpq, (int(fraction.p), int(fraction.q))


def _of_series(polynomial: fmpq_poly) -> _Recipe:
    return fmpq_poly, (list(polynomial.coeffs()),)


def _of_table(table: Table) -> _Recipe:
    return Table, (table.path, table.columns, ())


class _Packer(pickle.Pickler):
    # The packer's own table: the one of the whole process is not ours to add to.
    dispatch_table = {  # noqa: RUF012
        **dispatch_table,
        fmpz_mpoly: _of_polynomial,
        fmpz_mpoly_ctx: _of_context,
        fmpq: _of_fraction,
        fmpq_poly: _of_series,
        Table: _of_table,
    }
