"""`ledger` in the terminal: for each quantity the exact and the approximate formula, and who owes which error."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from symamp.exact.formulas import Formula
from symamp.judge.ledger import Account, Ledger, LostRoot
from symamp.judge.sets import FIGURES
from symamp.judge.span_errors import SpanFigure, Where
from symamp.show.columns import LEFT, POINT, table_groups
from symamp.show.formulas import formula_lines, one_line
from symamp.show.page import Page
from symamp.show.words import error_words, value_words, where_words

_NAME = 30  # characters of an assumption's name in a row; the list above has it whole
_SHORT_NAME = 16  # the same where the page is narrow
_SYMBOLS = 4  # symbols of a bias point in a row
_ROUNDING = 1e-9  # a difference between the least and the greatest of a figure that is none
_CANCELLED = 10  # how many times the error its largest term must be for the others to nearly cancel it
_FORMULA_LINES = 20  # of a formula that is shown
_ERROR_LINES = 12  # lines of an error's formula


def ledger_page(page: Page, ledger: Ledger) -> None:
    """The whole ledger."""
    page.line(ledger.stage.title, "bold")
    _listed(page, ledger)
    told: set[tuple[str, str]] = set()  # responses and kinds of root whose lost ones have been listed
    for account in ledger.accounts:
        kind = account.response, account.quantity.name
        _account(page, account, ledger, kind not in told)
        told.add(kind)
    page.line()
    if ledger.points:
        seed = "" if ledger.seed is None else f", seed {ledger.seed}"
        page.prose(f"Over the span: {ledger.points:,} bias points{seed}; {ledger.method}.")
        shares = ledger.share_points
        if shares is not None and shares < ledger.points:
            page.prose(f"Shares, which need every set of assumptions, at {shares:,} of these points.")
        if ledger.seed is not None:
            page.line("Sampled, not proved: a worse point may lie between those tried.")
    else:
        page.line("The stage gives no span: all figures are at the bias point.")
    page.notes(ledger.warnings, ledger.remarks)


def _listed(page: Page, ledger: Ledger) -> None:
    for k, name in enumerate(ledger.assumptions, start=1):
        page.prose(f"{k}  {name}", indent=2)


def _account(page: Page, account: Account, ledger: Ledger, first: bool) -> None:
    """One account; which roots are lost is said with the first of their kind."""
    page.heading(account.name)
    _formulas(page, account)
    if _untouched(account):
        page.prose(f"exact {_value(account.exact, account)}; no assumption changes it", "bold", indent=2)
        return
    page.prose(_bold_words(account), "bold", indent=2)
    if account.error_absolute:
        page.line(f"  absolute error {value_words(account.error_absolute, account.unit)}")
    _error_formula(page, account)
    if first:
        _roots(page, "lost", account.lost)
        _roots(page, "new", account.new)
    if not _empty(account):
        page.line()
        _table(page, account, ledger)
    _whys(page, account)
    for remark in account.remarks:
        page.prose(f"remark: {remark}", indent=2)


def _bold_words(account: Account) -> str:
    """Exact and approximate value and error, and why there is none."""
    exact = f"exact {_value(account.exact, account)}"
    if account.exact is None and account.approximate is None:
        return f"{exact}: {account.why}"
    if account.error_absolute == 0:
        return f"{exact}, approximate 0 too"
    modulus = account.error is not None and _modulus_here(account)
    error = _error(account.error, account) + (" (modulus)" if modulus else "")
    why = f": {account.why}" if account.why else ""
    return f"{exact}, approximate {_value(account.approximate, account)}, error {error}{why}"


def _error_formula(page: Page, account: Account) -> None:
    """The error as a formula, and its leading term: with its value where the other terms cancel it."""
    formula = account.error_formula
    if formula is None or formula.leading is None:
        return
    text, leading = one_line(formula.shape), one_line(formula.leading)
    lines = [f"error = {text}"]
    if len(lines[0]) + 2 > page.width:
        lines = formula_lines(formula.shape, page.width - 4, label="error")
    if len(lines) <= _ERROR_LINES:
        page.block(lines, indent=2)
    else:
        page.prose("the error's formula is too long to be read here; --json has it", indent=2)
    if leading == text:
        return
    value = formula.leading_value
    if value is None or account.error is None or abs(value) <= 2 * abs(account.error):
        page.prose(f"its leading term {leading}", indent=2)
        return
    words = error_words(value, account.unit, absolute=False)
    most = "nearly" if abs(value) > _CANCELLED * abs(account.error) else "partly"
    page.prose(f"its largest term {leading}, {words}, is {most} cancelled by others", indent=2)


def _empty(account: Account) -> bool:
    """Whether there is no figure at all to be shown."""
    figures = [f for share in account.assumptions for f in share.figures.values()]
    spans = [account.span, *(f for share in account.assumptions for f in share.span.values())]
    return not any(x is not None for x in (account.error, *figures, *spans))


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
        _formula(page, "exact", account.formula_exact)
        return
    _formula(page, "exact", account.formula_exact)
    _formula(page, "approximate", account.formula_approximate)


def _formula(page: Page, label: str, formula: Formula | None) -> None:
    if formula is None:
        return
    lines = formula_lines(formula, page.width - 4, label=label)
    if len(lines) <= _FORMULA_LINES:
        page.block(lines, indent=2)
    else:
        page.prose(f"the {label} formula is too long to be read here", indent=2)


def _roots(page: Page, word: str, roots: Sequence[LostRoot]) -> None:
    if roots:
        listed = ", ".join(f"{root.name} at {value_words(root.hz, 'Hz')}" for root in roots)
        page.prose(f"{word} under all assumptions: {listed}", indent=2)


def _error(value: complex | float | None, account: Account) -> str:
    return error_words(value, account.unit, absolute=account.absolute, modulus=_modulus_here(account))


def _modulus_here(account: Account) -> bool:
    """Whether a figure at the bias point is complex, so that all are shown as moduli."""
    figures = [f for share in account.assumptions for f in share.figures.values()]
    return any(isinstance(f, complex) and bool(f.imag) for f in (account.error, *figures))


def _table(page: Page, account: Account, ledger: Ledger) -> None:
    """One table; where it would be too wide, what is over the span in a second one, and names cut short."""
    for name, apart in ((_NAME, False), (_NAME, True), (_SHORT_NAME, True)):
        groups = _groups(page, account, ledger, name, apart)
        if max(len(line) for table in groups for lines in table for line in lines) <= page.width:
            break
    for k, table in enumerate(groups):
        if k:
            page.line()
        for lines in table[:-1]:
            page.block(lines)
        page.block(table[-1], style="bold")
    if account.span is not None:
        units = _units(ledger)
        worst = _sides(_worst(account.span), units)
        if len(worst) > _SYMBOLS and not _constant(account.span):
            page.prose(f"the worst of all lies at {where_words(worst, units, most=len(worst))}", indent=2)


def _whys(page: Page, account: Account) -> None:
    """Why figures are missing: each has a why of its own; the shortest names the smallest set, which matters."""
    whys = sorted({why for share in account.assumptions for why in share.why.values()}, key=len)
    if whys and account.exact:  # where the exact value is 0 or none, that has been said
        page.prose(whys[0], indent=2)


def _groups(page: Page, account: Account, ledger: Ledger, name: int, apart: bool) -> list[list[list[str]]]:
    """The lines of one table or two, a list a row."""
    numbers = {name: k for k, name in enumerate(ledger.assumptions, start=1)}
    labels = [_label(numbers[share.name], share.name, name) for share in account.assumptions] + ["all"]
    here = [[_error(share.figures[figure], account) for figure in FIGURES] for share in account.assumptions]
    here.append(["", "", "", _error(account.error, account)])
    headers, kinds = list(FIGURES), [POINT] * len(FIGURES)
    figure = _figure_over_span(account)
    if figure is None:
        return [_numbered(labels, "assumption", headers, here, kinds)]
    over_headers, over = _over_span(account, ledger, figure)
    over_kinds = [POINT, POINT, LEFT]
    if not apart:
        both = [a + b for a, b in zip(here, over, strict=True)]
        return [_numbered(labels, "assumption", headers + over_headers, both, kinds + over_kinds)]
    return [
        _numbered(labels, "at the bias point", headers, here, kinds),
        _numbered(labels, "over the span", over_headers, over, over_kinds, page.width),
    ]


def _numbered(
    labels: Sequence[str],
    title: str,
    headers: Sequence[str],
    rows: Sequence[Sequence[str]],
    kinds: Sequence[str],
    width: int | None = None,
) -> list[list[str]]:
    whole = [[label, *row] for label, row in zip(labels, rows, strict=True)]
    return table_groups([title, *headers], whole, [LEFT, *kinds], width=width)


def _figure_over_span(account: Account) -> str | None:
    """Which figure is shown over the span: the shares, else what each adds, else what each does alone."""
    for figure in ("share", "added", "alone"):
        if any(figure in share.span for share in account.assumptions):
            return figure
    return None


def _over_span(account: Account, ledger: Ledger, figure: str) -> tuple[list[str], list[list[str]]]:
    """Headers and cells of what is over the span."""
    units = _units(ledger)
    word = f"{figure} modulus" if account.modulus else figure
    cells = [_over(share.span.get(figure), account, units) for share in account.assumptions]
    cells.append(_over(account.span, account, units))
    return [f"{word} least", f"{word} greatest", "worst at"], cells


def _worst(figure: SpanFigure) -> Where:
    """The bias point of the end that is larger in magnitude."""
    return figure.where_greatest if abs(figure.greatest) >= abs(figure.least) else figure.where_least


def _constant(figure: SpanFigure) -> bool:
    """Whether the figure is the same, but for rounding, all over the span."""
    return figure.greatest - figure.least <= _ROUNDING * abs(figure.greatest)


def _sides(where: Where, units: Mapping[str, str]) -> dict[str, float]:
    """The sides' symbols, or the row: what follows a side says nothing that the side does not."""
    return {name: value for name, value in where.items() if name in units or name == "row"}


def _units(ledger: Ledger) -> dict[str, str]:
    """The symbols that the sides of the box set, with their units."""
    symbols = ledger.stage.symbols
    return {side.symbol: symbols[side.symbol].unit for side in ledger.stage.span.sides}


def _label(number: int, name: str, most: int) -> str:
    return f"{number} {name}" if len(name) <= most else f"{number} {name[: most - 1]}…"


def _over(figure: SpanFigure | None, account: Account, units: dict[str, str]) -> list[str]:
    if figure is None:
        return ["none", "none", ""]
    where = _sides(_worst(figure), units)
    place = where_words(where, units, _SYMBOLS)
    if _constant(figure):
        place = "anywhere" if figure.greatest else ""
    if figure.missing:
        place += f" (no value at {figure.missing} points)"
    ends = (figure.least, figure.greatest)
    words = [error_words(x, account.unit, absolute=account.absolute, modulus=figure.modulus) for x in ends]
    return [*words, place.strip()]
