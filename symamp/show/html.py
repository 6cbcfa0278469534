"""HTML for notebooks: a ledger as plain tables."""

from __future__ import annotations

from html import escape

from symamp.judge.ledger import Account, Ledger
from symamp.judge.sets import FIGURES
from symamp.show.words import error_words, value_words


def ledger_html(ledger: Ledger) -> str:
    """The ledger as one table a quantity, with the worst error over the span."""
    body = "".join(_account(account) for account in ledger.accounts)
    method = f"<p>{ledger.points:,} bias points; {escape(ledger.method)}.</p>" if ledger.points else ""
    return f"<h4>{escape(ledger.stage.title)}</h4>{body}{method}"


def _account(account: Account) -> str:
    def error(value: complex | float | None) -> str:
        return escape(error_words(value, account.unit, absolute=account.absolute))

    def cells(values: list[str], tag: str = "td") -> str:
        return "<tr>" + "".join(f"<{tag}>{value}</{tag}>" for value in values) + "</tr>"

    over = account.span is not None
    rows = cells(["assumption", *FIGURES, *(["share over the span"] if over else [])], "th")
    for share in account.assumptions:
        values = [escape(share.name), *(error(share.figures[figure]) for figure in FIGURES)]
        if over:
            found = share.span.get("share")
            values.append("none" if found is None else f"{error(found.least)} … {error(found.greatest)}")
        rows += cells(values)
    total = ["<b>all</b>", "", "", "", f"<b>{error(account.error)}</b>"]
    if account.span is not None:
        total.append(f"{error(account.span.least)} … {error(account.span.greatest)}")
    rows += cells(total)
    exact, approximate = (
        escape(value_words(value, account.unit)) for value in (account.exact, account.approximate)
    )
    head = f"<p><b>{escape(account.name)}</b>: exact {exact}, approximate {approximate}</p>"
    return f"{head}<table>{rows}</table>"
