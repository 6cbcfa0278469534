"""`shorten` in the terminal: the shortest formula that holds, what it rests on, and what shorter ones would cost."""

from __future__ import annotations

import math

from symamp.judge.ledger import Account
from symamp.judge.shorten import Shortening, Shortest
from symamp.show.check_text import SAMPLED, over_words, units_of_sides
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import formula_lines, one_line
from symamp.show.page import Page
from symamp.show.words import error_words, percent_words, value_words

_EXACT_LINES = 8
_WORTH_A_LINE = 0.002


def shorten_page(page: Page, made: Shortening) -> None:
    """All formulas, and how the span was looked at."""
    page.line(made.stage.title, "bold")
    for found in made.found:
        page.line()
        _shortest(page, found, made)
    page.line()
    verdicts = [f.judged.span for f in made.found if f.judged is not None and f.judged.span is not None]
    if made.seed is not None and verdicts and all(figure.proved for figure in verdicts):
        page.prose("Over the span: proved, no point of it lies outside; each method is in --json.")
    elif made.points:
        seed = "" if made.seed is None else f", seed {made.seed}"
        page.prose(f"Over the span: {made.points:,} bias points{seed}; {made.method}.")
        if made.seed is not None:
            page.line(SAMPLED)
    else:
        page.line("The stage gives no span: all figures are at the bias point.")
    page.notes(made.warnings, made.remarks)


def _shortest(page: Page, found: Shortest, made: Shortening) -> None:
    page.line(found.name, "bold")
    if found.formula_exact is not None:
        lines = formula_lines(found.formula_exact, page.width - 4, label="exact")
        if len(lines) <= _EXACT_LINES:
            page.block(lines, indent=2)
    if found.shape is None or found.judged is None:
        page.prose(f"none: {found.why}", indent=2)
        _tradeoff(page, found, made)
        return
    page.block(formula_lines(found.shape, page.width - 4, label="shortest"), indent=2)
    judged = found.judged
    page.prose(
        f"{found.terms} terms in place of {_count(found.exact_terms)}, within {_percent(made.within)}",
        indent=2,
    )
    exact, claimed = (value_words(value, judged.unit) for value in (judged.exact, judged.claimed))
    error = error_words(judged.error, judged.unit, absolute=False)
    page.prose(f"exact {exact}, shortest {claimed}, error {error}", "bold", indent=2)
    if judged.span is not None:
        page.prose(f"over the span {over_words(judged, judged.span, units_of_sides(made.stage))}", indent=2)
    _rests_on(page, found)
    _tradeoff(page, found, made)


def _count(terms: int) -> str:
    return f"{terms:,}".replace(",", " ") if terms < 10**6 else f"{terms:.2g}"


def _percent(within: float) -> str:
    return percent_words(within).replace(".00 %", " %").replace("0.0 %", "0 %")


def _rests_on(page: Page, found: Shortest) -> None:
    """The assumptions with what each adds to the error."""
    if found.dropped and not found.assumptions:
        page.prose(f"it rests on no assumption with a name; {_dropped(found.dropped)}", indent=2)
        return
    if not found.assumptions:
        page.prose("it is the exact formula", indent=2)
        return
    account = found.account
    if account is not None:
        page.block(_shares(found, account, page.width))
    else:
        _changes(page, found)
    if found.dropped:
        page.prose(_dropped(found.dropped), indent=2)


def _dropped(count: int) -> str:
    return f"then {count} single term{'s' if count > 1 else ''} left out"


def _shares(found: Shortest, account: Account, width: int) -> list[str]:
    rows = []
    for number, share in enumerate(account.assumptions):
        figures = [error_words(share.figures[name], "", absolute=False) for name in ("alone", "share")]
        rows.append([share.name, *figures, "" if number < found.own else "not in the stage file"])
    return table_lines(
        ["it rests on", "alone", "share", ""], rows, [LEFT, POINT, POINT, LEFT], 2, width=width
    )


def _changes(page: Page, found: Shortest) -> None:
    """What each changed, of those that changed something worth a line; the others by name."""
    pairs = list(zip(found.assumptions, found.changes, strict=True))
    listed = sorted((p for p in pairs if p[1] >= _WORTH_A_LINE), key=lambda pair: -pair[1])
    if listed:
        rows = [[name, error_words(change, "", absolute=False, modulus=True)] for name, change in listed]
        page.block(table_lines(["it rests on", "changes"], rows, [LEFT, POINT], 2, width=page.width))
    others = [name for name, change in pairs if math.isnan(change)]
    slight = [name for name, change in pairs if change < _WORTH_A_LINE]
    if others:
        page.prose(f"{'and' if listed else 'it rests'} on: {', '.join(others)}", indent=2)
    if slight:
        page.prose(
            f"and on what changes less than {percent_words(_WORTH_A_LINE)} each: {', '.join(slight)}",
            indent=2,
        )


def _tradeoff(page: Page, found: Shortest, made: Shortening) -> None:
    """Each number of terms with its worst error over the sample."""
    if len(found.tradeoff) < 2:
        return
    rows = []
    for step in found.tradeoff:
        formula = one_line(step.shape)
        room = page.width - 40
        shown = formula if len(formula) <= room else "…"
        mark = "within" if step.worst <= made.within else ""
        rows.append([str(step.terms), error_words(step.worst, "", absolute=False, modulus=True), mark, shown])
    page.block(table_lines(["terms", "worst error", "", "formula"], rows, [POINT, POINT, LEFT, LEFT], 2))
