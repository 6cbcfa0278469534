"""`ledger` in the terminal: for each quantity the exact and the approximate formula, and who owes which error."""

from __future__ import annotations

import math
from collections.abc import Sequence

from symamp.judge.ledger import Account, Ledger, LostRoot, Share
from symamp.judge.span_errors import SpanFigure
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import formula_lines, one_line
from symamp.show.page import Page
from symamp.show.words import error_words, value_words, where_words

_NAME = 30  # characters of an assumption's name in a row; the list above has it whole


def ledger_page(page: Page, ledger: Ledger) -> None:
    """The whole ledger."""
    page.line(ledger.stage.title, "bold")
    _listed(page, ledger)
    for account in ledger.accounts:
        _account(page, account, ledger)
    page.line()
    if ledger.points:
        seed = "" if ledger.seed is None else f", seed {ledger.seed}"
        page.line(f"Over the span: {ledger.points:,} bias points{seed}; {ledger.method}.")
        if ledger.seed is not None:
            page.line("Sampled, not proved: a worse point may lie between those tried.")
    else:
        page.line("The stage gives no span: all figures are at the bias point.")
    page.notes(ledger.warnings, ledger.remarks)


def _listed(page: Page, ledger: Ledger) -> None:
    for k, name in enumerate(ledger.assumptions, start=1):
        page.line(f"  {k}  {name}")


def _account(page: Page, account: Account, ledger: Ledger) -> None:
    page.heading(account.name)
    _formulas(page, account)
    if _untouched(account):
        page.line(f"  exact {_value(account.exact, account)}; no assumption changes it", "bold")
        return
    values = f"exact {_value(account.exact, account)}, approximate {_value(account.approximate, account)}"
    error = _error(account.error, account)
    page.line(f"  {values}, error {error}" + (f": {account.why}" if account.why else ""), "bold")
    if account.error_absolute is not None:
        page.line(f"  absolute error {value_words(account.error_absolute, account.unit)}")
    if account.error_formula is not None and account.error_formula.leading is not None:
        text = one_line(account.error_formula.shape)
        leading = one_line(account.error_formula.leading)
        if len(text) <= page.width - 14:
            page.line(f"  error = {text}")
        if leading != text:
            page.line(f"  its leading term {leading}")
    _roots(page, "lost", account.lost)
    _roots(page, "new", account.new)
    page.line()
    _table(page, account, ledger)
    page.block([f"remark: {remark}" for remark in account.remarks], indent=2)


def _untouched(account: Account) -> bool:
    """Whether every figure is zero, at the bias point and over the span."""
    spans = [f for share in account.assumptions for f in share.span.values()]
    spans += [account.span] if account.span is not None else []
    figures = [f for share in account.assumptions for f in share.figures.values() if f is not None]
    return account.error == 0 and not any(figures) and not any(f.least or f.greatest for f in spans)


def _value(value: complex | float | None, account: Account) -> str:
    """A value; of a pole or zero its frequency too."""
    words = value_words(value, account.unit)
    if value is not None and account.unit == "rad/s" and account.quantity.face is None:
        words += f" ({value_words(abs(value) / (2 * math.pi), 'Hz')})"
    return words


def _formulas(page: Page, account: Account) -> None:
    if _untouched(account):
        if account.formula_exact is not None:
            page.block(formula_lines(account.formula_exact, page.width - 4, label="exact"), indent=2)
        return
    for label, shape in (("exact", account.formula_exact), ("approximate", account.formula_approximate)):
        if shape is not None:
            page.block(formula_lines(shape, page.width - 4, label=label), indent=2)


def _roots(page: Page, word: str, roots: Sequence[LostRoot]) -> None:
    if roots:
        listed = ", ".join(f"{root.name} at {value_words(root.hz, 'Hz')}" for root in roots)
        page.line(f"  {word} under all assumptions: {listed}")


def _error(value: complex | float | None, account: Account) -> str:
    return error_words(value, account.unit, absolute=account.absolute)


def _table(page: Page, account: Account, ledger: Ledger) -> None:
    units = {name: symbol.unit for name, symbol in ledger.stage.symbols.items()}
    over = account.span is not None
    headers = ["assumption", "alone", "added", "last", "share"]
    if over:
        word = "modulus" if account.modulus else "share"
        headers += [f"{word} least", f"{word} greatest", "worst at"]
    numbers = {name: k for k, name in enumerate(ledger.assumptions, start=1)}
    rows = [_row(share, account, units, over, numbers[share.name]) for share in account.assumptions]
    rows.append(_total(account, units, over))
    kinds = [LEFT, *[POINT] * 4, *([POINT, POINT, LEFT] if over else [])]
    lines = table_lines(headers, rows, kinds)
    page.block(lines[:-1])
    page.line(lines[-1], "bold")
    # Each figure has a why of its own; the shortest names the smallest set, which is what matters.
    whys = sorted({why for share in account.assumptions for why in share.why.values()}, key=len)
    page.block(whys[:1], indent=2)


def _row(share: Share, account: Account, units: dict[str, str], over: bool, number: int) -> list[str]:
    row = [_label(number, share.name), *(_error(share.figures[figure], account) for figure in ("alone", "added", "last", "share"))]
    if over:
        row += _over(share.span.get("share") or share.span.get("added"), account, units)
    return row


def _label(number: int, name: str) -> str:
    return f"{number} {name}" if len(name) <= _NAME else f"{number} {name[: _NAME - 1]}…"


def _total(account: Account, units: dict[str, str], over: bool) -> list[str]:
    row = ["all", "", "", "", _error(account.error, account)]
    if over:
        row += _over(account.span, account, units)
    return row


def _over(figure: SpanFigure | None, account: Account, units: dict[str, str]) -> list[str]:
    if figure is None:
        return ["none", "none", ""]
    worst = figure.where_greatest if abs(figure.greatest) >= abs(figure.least) else figure.where_least
    if figure.least == figure.greatest == 0:
        place = ""
    else:
        place = where_words(worst, units)
    if figure.missing:
        place += f" (no value at {figure.missing} points)"
    return [
        error_words(x, account.unit, absolute=account.absolute, modulus=figure.modulus)
        for x in (figure.least, figure.greatest)
    ] + [place]
