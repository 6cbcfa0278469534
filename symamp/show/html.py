"""HTML for notebooks: a ledger as plain tables."""

from __future__ import annotations

from html import escape

from symamp.judge.ledger import Account, Ledger
from symamp.judge.sets import FIGURES, SHARES_LIMIT
from symamp.judge.span_errors import SpanFigure
from symamp.show.words import error_words, value_words


def ledger_html(ledger: Ledger) -> str:
    """The ledger as one table a quantity, with the worst error over the span."""
    body = "".join(_account(account) for account in ledger.accounts)
    seed = "" if ledger.seed is None else f", seed {ledger.seed}"
    method = f"<p>{ledger.points:,} bias points{seed}; {escape(ledger.method)}.</p>" if ledger.points else ""
    notes = [f"warning: {text}" for text in ledger.warnings] + [f"remark: {text}" for text in ledger.remarks]
    below = method + "".join(f"<p>{escape(note)}</p>" for note in notes)
    return f"<h4>{escape(ledger.stage.title)}</h4>{body}{below}"


def _account(account: Account) -> str:
    def error(value: complex | float | None, modulus: bool = False) -> str:
        return escape(error_words(value, account.unit, absolute=account.absolute, modulus=modulus))

    def ends(figure: SpanFigure) -> str:
        return f"{error(figure.least, figure.modulus)} … {error(figure.greatest, figure.modulus)}"

    def cells(values: list[str], tag: str = "td") -> str:
        return "<tr>" + "".join(f"<{tag}>{value}</{tag}>" for value in values) + "</tr>"

    over = account.span is not None
    figure = "share" if len(account.assumptions) <= SHARES_LIMIT else "added"
    over_header = f"{figure} over the span" + (", modulus" if account.modulus else "")
    rows = cells(["assumption", *FIGURES, *([over_header] if over else [])], "th")
    for share in account.assumptions:
        values = [escape(share.name), *(error(share.figures[figure]) for figure in FIGURES)]
        if over:
            found = share.span.get(figure)
            values.append("none" if found is None else ends(found))
        rows += cells(values)
    total = ["<b>all</b>", "", "", "", f"<b>{error(account.error)}</b>"]
    if account.span is not None:
        total.append(ends(account.span))
    rows += cells(total)
    exact, approximate = (
        escape(value_words(value, account.unit)) for value in (account.exact, account.approximate)
    )
    head = f"<p><b>{escape(account.name)}</b>: exact {exact}, approximate {approximate}</p>"
    return f"{head}<table>{rows}</table>"
