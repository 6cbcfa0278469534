"""The pictures of a note (room: show): responses against frequency, shares, and errors over the span."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.exact.derive import derive
from symamp.exact.response import Response
from symamp.judge.claim_errors import ClaimTable, each_at
from symamp.judge.ledger import Account, Ledger
from symamp.judge.sample import Sample, sample_of
from symamp.judge.verdict import WRONG, Check, Judged
from symamp.show.bars import Bar, bars
from symamp.show.bode import bode_of
from symamp.show.error_span import Errors, error_span
from symamp.show.note_content import RESPONSE_PICTURES
from symamp.show.picture import Picture

_MOST_SHARES = 6  # pictures of shares
_MOST_SPANS = 6  # pictures of errors over the span


def note_pictures(
    stage: Stage, *, ledger: Ledger | None = None, check: Check | None = None
) -> dict[str, list[Picture]]:
    """All pictures: of responses under their own key, of shares and claims by the name of their quantity."""
    exact = {name: derive(stage, asked) for name, asked in stage.asked.items()}
    found: dict[str, list[Picture]] = {RESPONSE_PICTURES: _responses(stage, exact.values())}
    if ledger is not None:
        for name, picture in _shares(ledger):
            found.setdefault(name, []).append(picture)
    if check is not None and not stage.span.empty:
        for name, picture in _spans(stage, exact, check):
            found.setdefault(name, []).append(picture)
    return found


def _responses(stage: Stage, responses: Iterable[Response]) -> list[Picture]:
    """Bode plots of all responses that have a bias point, exact against approximate."""
    made = read_assumptions(stage)
    found = []
    for exact in responses:
        if exact.missing or not (exact.poles() or exact.zeros()):
            continue
        approximate = Approximator(exact).under(made).response if made else None
        found.append(bode_of(exact, approximate))
    return found


def _shares(ledger: Ledger) -> list[tuple[str, Picture]]:
    worth = [a for a in ledger.accounts if a.error is not None and not a.modulus and _signed_shares(a)]
    return [(account.name, _share_picture(account)) for account in worth[:_MOST_SHARES]]


def _signed_shares(account: Account) -> list[float]:
    """The shares, where all are real and some are not 0."""
    shares = [share.figures["share"] for share in account.assumptions]
    if len(shares) < 2 or any(x is None or isinstance(x, complex) for x in shares):
        return []
    found = [float(x) for x in shares if isinstance(x, int | float)]
    return found if any(found) else []


def _share_picture(account: Account) -> Picture:
    rows = [Bar(s.name, value) for s, value in zip(account.assumptions, _signed_shares(account), strict=True)]
    error = account.error
    total = Bar("all", float(error) if isinstance(error, int | float) else None)
    unit = account.unit if account.absolute else ""
    return bars(rows, unit=unit, total=total, name=f"{account.name}-shares", title=account.name)


def _spans(stage: Stage, exact: Mapping[str, Response], check: Check) -> list[tuple[str, Picture]]:
    """The error of each claim that is no wrong one, over a sample of the span."""
    worth = [j for j in check.claims if j.verdict != WRONG and j.error is not None and j.span is not None]
    sample = sample_of(stage)
    tables = [ClaimTable(exact[j.claim.response], j.claim, _root(j)) for j in worth]
    found = []
    for number, figures in each_at(tables[:_MOST_SPANS], sample.values, sample.points):
        judged = worth[number]
        found.append((judged.claim.about, _span_picture(stage, judged, figures[0], sample, number)))
    return found


def _root(judged: Judged) -> int | None:
    """The index of the pole or zero that the error is taken against."""
    if judged.root:
        return int(judged.root[1:])
    return judged.claim.quantity.index if judged.claim.quantity.name in ("p", "z") else None


def _span_picture(stage: Stage, judged: Judged, errors: np.ndarray, sample: Sample, number: int) -> Picture:
    modulus = bool(np.iscomplexobj(errors) and (np.nan_to_num(errors).imag != 0).any())
    values = np.abs(errors) if modulus else errors.real
    error = judged.error
    bias = None if error is None else abs(error) if modulus else float(complex(error).real)
    rows: Sequence[int] | None = None
    if stage.span.table is not None:
        values = values[1:]  # the bias point stands first in a sample
        rows = range(1, values.size + 1) if values.size == len(stage.span.table.rows) else None
    given = Errors(
        values=np.asarray(values, dtype=float),
        bias=bias,
        within=judged.claim.within,
        unit=judged.claim.within_unit,
        modulus=modulus,
        rows=None if rows is None else np.array(rows),
        what=f"{judged.claim.about} = {judged.claim.formula}",
    )
    return error_span(given, name=f"{judged.claim.about}-{number + 1}-span")
