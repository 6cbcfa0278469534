"""What a note says of the ledger (room: show): what each assumption adds to the error of each quantity."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from symamp.judge.ledger import Account, Ledger, Share
from symamp.judge.sets import FIGURES
from symamp.judge.span_errors import SpanFigure
from symamp.show.latex_lines import formula_display
from symamp.show.note_model import (
    LEFT,
    POINT,
    Block,
    Drawing,
    Equation,
    Figure,
    Inline,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    inline,
)
from symamp.show.note_words import (
    and_words,
    error_text,
    how_known,
    over_the_span,
    place_words,
    quantity_math,
    quantity_text,
    quantity_words,
    range_text,
    value_text,
    worst_place,
)

_ERROR_LINES = 4  # lines of an error's formula that a note prints
_ROUNDING = 1e-9  # a difference between the ends of a figure over the span that is none


def result_table(ledger: Ledger) -> Table:
    """Every quantity: exact, simplified, error at the bias point and over the span."""
    known = {how_known(account.span) for account in ledger.accounts if account.span is not None}
    header = [inline("quantity"), inline("exact"), inline("simplified"), inline("error")]
    header += [inline(over_the_span(known))] if known else []
    rows = []
    for account in ledger.accounts:
        row = [
            inline(f"{account.response}: {quantity_words(account.quantity)}"),
            inline(quantity_text(account.exact, account.unit, account.quantity)),
            inline(_approximate(account)),
            (Strong(error_at_bias(account)),),
        ]
        if known:
            how = "" if account.span is None or len(known) < 2 else f" ({how_known(account.span)})"
            row.append(inline(range_text(account.span, account.unit, absolute=account.absolute) + how))
        rows.append(tuple(row))
    caption = "All assumptions together, at the bias point" + (" and over the span." if known else ".")
    return Table(caption, tuple(header), tuple(rows), (LEFT,) * len(header))


def _approximate(account: Account) -> str:
    if account.approximate is None:
        return "lost" if account.lost else "none"
    return quantity_text(account.approximate, account.unit, account.quantity)


def error_at_bias(account: Account) -> str:
    """The error at the bias point: relative, or in dB or degrees."""
    return error_text(
        account.error, account.unit, absolute=account.absolute, modulus=isinstance(account.error, complex)
    )


def ledger_section(ledger: Ledger, pictures: Mapping[str, Sequence[Drawing]] | None = None) -> Section:
    """A table for each quantity that an assumption changes, and which ones none changes.

    `pictures` stand beside the account by whose name they are kept; of accounts with the same figures the first
    one's are enough. Those of errors over the span are left to the claims, where there are any.
    """
    blocks: list[Block] = [Paragraph(_reading(ledger))]
    touched = [account for account in ledger.accounts if not _untouched(account)]
    untouched = [_name(account) for account in ledger.accounts if _untouched(account)]
    blocks += [_accounts(group, ledger, pictures or {}) for group in alike(touched)]
    if untouched:
        verb = "is" if len(untouched) == 1 else "are"
        blocks.append(Paragraph(inline(f"No assumption changes {and_words(untouched)}, which {verb} exact.")))
    blocks += _lost_and_new(ledger)
    return Section(inline("What each assumption adds to the error"), tuple(blocks))


def _lost_and_new(ledger: Ledger) -> list[Block]:
    """Roots without a partner, once for each response and kind."""
    told: dict[str, None] = {}
    for account in ledger.accounts:
        for roots, word in ((account.lost, "Lost"), (account.new, "New")):
            if roots:
                listed = and_words([f"{root.name} at {value_text(root.hz, 'Hz')}" for root in roots])
                told[f"{word} under all assumptions, of {account.response}: {listed}."] = None
    return [Paragraph(inline(text)) for text in told]


def _reading(ledger: Ledger) -> Inline:
    return inline(
        "The error is (simplified − exact)/exact. ",
        Strong("Alone"),
        ": with that assumption only. ",
        Strong("Added"),
        ": when it joins those listed before it. ",
        Strong("Last"),
        ": when it joins all the others. ",
        Strong("Share"),
        ": the mean over all orders; shares add up to the whole error.",
    )


def _name(account: Account) -> str:
    return f"{account.response}: {quantity_words(account.quantity)}"


def alike(accounts: Sequence[Account]) -> list[list[Account]]:
    """The accounts, those together of which all figures are the same, such as the lowest pole and the bandwidth."""
    groups: dict[tuple[object, ...], list[Account]] = {}
    for account in accounts:
        key: tuple[object, ...] = (id(account),)
        if account.error is not None and not account.remarks:
            key = _shares(account).rows
        groups.setdefault(key, []).append(account)
    return list(groups.values())


def _accounts(group: Sequence[Account], ledger: Ledger, pictures: Mapping[str, Sequence[Drawing]]) -> Section:
    """Quantities that share their figures, in one table."""
    first = group[0]
    blocks: list[Block] = [Paragraph(_sentence(account, ledger, whole=account is first)) for account in group]
    formula = next((account.error_formula for account in group if account.error_formula is not None), None)
    if formula is not None and formula.shape.coefficient:
        lines = formula_display(formula.shape, r"\varepsilon")
        if len(lines) <= _ERROR_LINES:
            blocks.append(Equation(lines, f"error of {first.name}"))
    if any(f is not None for share in first.assumptions for f in share.figures.values()):
        blocks.append(_shares(first))
    whys = sorted({why for share in first.assumptions for why in share.why.values()}, key=len)
    if whys and first.exact:
        blocks.append(Paragraph(inline(f"{whys[0][:1].upper()}{whys[0][1:]}.")))
    blocks += [Paragraph(inline(f"{remark}.")) for remark in first.remarks]
    blocks += [Figure(picture) for picture in pictures.get(first.name, ())]
    return Section(inline("; ".join(map(_name, group))), tuple(blocks))


def _unit(account: Account, ledger: Ledger) -> str:
    """The unit of the account's response: that of its DC value."""
    for other in ledger.accounts:
        if other.response == account.response and other.quantity.text == "dc":
            return other.unit
    return ""


def _sentence(account: Account, ledger: Ledger, *, whole: bool) -> Inline:
    symbol = Math(quantity_math(account.response, _unit(account, ledger), account.quantity))
    exact = quantity_text(account.exact, account.unit, account.quantity)
    values = f": exact {exact}, simplified {_approximate(account)}"
    if account.error is None:
        return inline(symbol, f"{values}; no error: {account.why or 'none'}.")
    modulus = " (modulus)" if isinstance(account.error, complex) else ""
    pieces = inline(symbol, f"{values}; error ", Strong(error_at_bias(account)), modulus)
    figure = account.span
    if figure is None or not whole:
        return (*pieces, *inline("."))
    pieces = (
        *pieces,
        *inline(f"; over the span {range_text(figure, account.unit, absolute=account.absolute)}"),
    )
    if figure.modulus:
        pieces = (*pieces, *inline(" (modulus)"))
    if _constant(figure):
        return (*pieces, *inline("."))
    return (*pieces, *inline(", worst at "), *place_words(worst_place(figure), ledger.stage), *inline("."))


def _constant(figure: SpanFigure) -> bool:
    return figure.greatest - figure.least <= _ROUNDING * abs(figure.greatest)


def _shares(account: Account) -> Table:
    over = _over(account)
    header = [inline("assumption"), *(inline(figure) for figure in FIGURES)]
    align = [LEFT, *[POINT] * len(FIGURES)]
    if over:
        header += [inline(f"{over} over the span")]
        align += [LEFT]
    rows = [_share(share, account, over) for share in account.assumptions]
    total: list[Inline] = [(Strong("all"),), *[()] * (len(FIGURES) - 1), (Strong(error_at_bias(account)),)]
    if over:
        total.append((Strong(range_text(account.span, account.unit, absolute=account.absolute)),))
    return Table("", tuple(header), (*rows, tuple(total)), tuple(align))


def _over(account: Account) -> str:
    """Which figure is shown over the span."""
    for figure in ("share", "added", "alone"):
        if any(figure in share.span for share in account.assumptions):
            return figure
    return ""


def _share(share: Share, account: Account, over: str) -> tuple[Inline, ...]:
    cells = [inline(share.name)]
    for figure in FIGURES:
        value = share.figures[figure]
        words = error_text(value, account.unit, absolute=account.absolute, modulus=isinstance(value, complex))
        cells.append(inline(words))
    if over:
        cells.append(inline(range_text(share.span.get(over), account.unit, absolute=account.absolute)))
    return tuple(cells)


def _untouched(account: Account) -> bool:
    """Whether every figure is zero, at the bias point and over the span."""
    figures = [f for share in account.assumptions for f in share.figures.values() if f is not None]
    spans = [f for share in account.assumptions for f in share.span.values()]
    spans += [account.span] if account.span is not None else []
    return account.error == 0 and not any(figures) and not any(f.least or f.greatest for f in spans)
