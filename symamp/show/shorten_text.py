"""`shorten` in the terminal: the shortest formula that holds, what it rests on, and what shorter ones would cost."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.exact.forms import Expanded
from symamp.exact.grouped import grouped
from symamp.exact.response import Response
from symamp.judge.response_errors import BAND
from symamp.judge.shortest import Shortening, Shortest, ShortestResponse, TradeOff
from symamp.show.check_text import SAMPLED, over_words, units_of_sides
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import formula_lines, one_line, polynomial_lines
from symamp.show.page import Page
from symamp.show.words import error_words, percent_words, value_words, where_words

_EXACT_LINES = 8
_WORTH_A_LINE = 0.002
_SIDES = 4  # symbols of the worst point that are shown


def shorten_page(page: Page, made: Shortening) -> None:
    """All formulas, and how the span was looked at."""
    page.line(made.stage.title, "bold")
    for found in made.found:
        page.line()
        _shortest(page, found, made)
    for whole in made.responses:
        page.line()
        _response(page, whole, made)
    page.line()
    if made.responses:
        page.prose(f"The error of a response is the largest |Ha/H − 1| {BAND}.")
    verdicts = [f.judged.span for f in made.found if f.judged is not None and f.judged.span is not None]
    proved = bool(verdicts) and all(figure.proved for figure in verdicts)
    if made.seed is not None and proved and not any(whole.span for whole in made.responses):
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
        _tradeoff(page, found.tradeoff, made.within)
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
    _tradeoff(page, found.tradeoff, made.within)


def _response(page: Page, found: ShortestResponse, made: Shortening) -> None:
    page.line(f"{found.name} = N(s)/D(s)", "bold")
    if found.response is None or found.error is None:
        page.prose(f"none: {found.why}", indent=2)
        _tradeoff(page, found.tradeoff, made.within)
        return
    _sides_of(page, found.response)
    page.prose(
        f"{found.terms} terms in place of {_count(found.exact.terms)}, within {_percent(made.within)}",
        indent=2,
    )
    error = error_words(found.error, "", absolute=False, modulus=True)
    page.prose(f"largest error at the bias point {error}", "bold", indent=2)
    figure = None if found.span is None else found.span.figure
    if figure is not None:
        how = "every row" if "row" in figure.where_greatest else "sampled"
        most = error_words(figure.greatest, "", absolute=False, modulus=True)
        units = units_of_sides(made.stage)
        worst = {n: v for n, v in figure.where_greatest.items() if n in units or n == "row"}
        place = where_words(worst, units, _SIDES)
        page.prose(f"over the span at most {most} ({how}), worst at {place}", indent=2)
    if found.assumptions:
        page.block(_shares(found, found.figures, page.width))
    if found.dropped:
        page.prose(_dropped(found.dropped), indent=2)
    _tradeoff(page, found.tradeoff, made.within)


def _sides_of(page: Page, response: Response) -> None:
    """N(s) and D(s) by powers of s."""
    form, symbols = response.form, response.stage.symbols
    assert isinstance(form, Expanded)
    reactive = {n for n in form.symbols if symbols[n].nature in (CAPACITANCE, INDUCTANCE)}
    for label, row in (("N(s)", form.numerator), ("D(s)", form.denominator)):
        shapes = [grouped(c, reactive, response.bias_values) for c in row]
        page.block(polynomial_lines(shapes, page.width - 4, label=label), indent=2)


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
        figures = [share.figures for share in account.assumptions]
        page.block(_shares(found, figures, page.width))
    else:
        _changes(page, found)
    if found.dropped:
        page.prose(_dropped(found.dropped), indent=2)


def _dropped(count: int) -> str:
    return f"then {count} single term{'s' if count > 1 else ''} left out"


def _shares(
    found: Shortest | ShortestResponse, figures: Sequence[Mapping[str, Any]], width: int
) -> list[str]:
    rows = []
    for number, (name, each) in enumerate(zip(found.assumptions, figures, strict=True)):
        words = [error_words(each[figure], "", absolute=False) for figure in ("alone", "share")]
        rows.append([name, *words, "" if number < found.own else "not in the stage file"])
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


def _tradeoff(page: Page, steps: Sequence[TradeOff], within: float) -> None:
    """Each number of terms with its worst error over the sample."""
    if len(steps) < 2:
        return
    rows = []
    for step in steps:
        formula = one_line(step.shape)
        room = page.width - 40
        shown = formula if len(formula) <= room else "…"
        mark = "within" if step.worst <= within else ""
        rows.append([str(step.terms), error_words(step.worst, "", absolute=False, modulus=True), mark, shown])
    page.block(table_lines(["terms", "worst error", "", "formula"], rows, [POINT, POINT, LEFT, LEFT], 2))
