"""`check` in the terminal: the verdict on each claim, its error, and what it takes to be small (room: show)."""

from __future__ import annotations

from collections.abc import Mapping

from symamp.circuit.stage import Stage
from symamp.judge.claim import Claim
from symamp.judge.span_errors import SpanFigure, Where
from symamp.judge.verdict import HOLDS, HOLDS_HERE, WRONG, Check, Condition, Judged
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import formula_lines, one_line, ratio_line
from symamp.show.page import Page
from symamp.show.words import error_words, ratio_words, value_words, where_words
from symamp.values import show_value

_STYLES = {HOLDS: "bold green", HOLDS_HERE: "bold yellow"}  # colour supports the word
SAMPLED = "Sampled, not proved: a worse point may lie between those tried."
_EXACT_LINES = 8  # of a formula that is shown
_ERROR_LINES = 6
_SYMBOLS = 4
_MOST = 8  # conditions that are listed
_SLIGHT = 0.02  # of the error that is allowed: what adds less is summed up


def check_page(page: Page, check: Check) -> None:
    """All verdicts, and how the span was looked at."""
    page.line(check.stage.title, "bold")
    units = units_of_sides(check.stage)
    told: set[str] = set()
    for number, judged in enumerate(check.claims, start=1):
        page.line()
        judged_page(page, judged, units, number, told)
    page.line()
    held = sum(judged.verdict == HOLDS for judged in check.claims)
    page.line(_sum_words(held, len(check.claims)), "bold")
    span_words(page, check)
    page.notes(check.warnings, check.remarks)


def _sum_words(held: int, count: int) -> str:
    if count == 1:
        return "The claim holds." if held else "The claim does not hold."
    if held == count:
        return f"All {count} claims hold."
    return f"Of {count} claims {held or 'none'} {'hold' if held > 1 else 'holds'}."


def span_words(page: Page, check: Check) -> None:
    """How the span was looked at."""
    if not check.points:
        if check.stage.span.empty:
            page.line("The stage gives no span: all figures are at the bias point.")
        return
    shown = [j.span for j in check.claims if j.span is not None and j.verdict != WRONG]
    sampled = [over for over in shown if not over.proved]
    if check.seed is not None and shown and not sampled:
        page.prose("Over the span: proved, no point of it lies outside; each method is in --json.")
        return
    seed = "" if check.seed is None else f", seed {check.seed}"
    page.prose(f"Over the span: {check.points:,} bias points{seed}; {check.method}.")
    if check.seed is not None and sampled:
        page.line(SAMPLED)


def units_of_sides(stage: Stage) -> dict[str, str]:
    """The symbols that the sides of the box set, with their units."""
    return {side.symbol: stage.symbols[side.symbol].unit for side in stage.span.sides}


def judged_page(
    page: Page,
    judged: Judged,
    units: Mapping[str, str],
    number: int | None = None,
    told: set[str] | None = None,
) -> None:
    """One claim; `number` stands before it. `told` are the quantities whose exact formula has been shown."""
    lead = "" if number is None else f"{number}  "
    page.prose(f"{lead}{judged.claim.about} = {judged.claim.formula}, within {within_words(judged.claim)}")
    page.prose(f"{judged.verdict_words}: {judged.why}", _STYLES.get(judged.verdict, "bold red"), indent=2)
    if judged.root:
        page.prose(
            f"this formula is that of {judged.root}, not of {judged.claim.quantity.text}: error and verdict are "
            f"those of {judged.root}",
            "yellow",
            indent=2,
        )
    _figures(page, judged, units, set() if told is None else told)
    _conditions(page, judged)
    _ways(page, judged)
    for remark in judged.remarks:
        page.prose(f"remark: {remark}", indent=2)


def within_words(claim: Claim) -> str:
    """The error that a claim is allowed: "10 %", "0.5 dB"."""
    if claim.within_unit:
        return f"{show_value(claim.within, '')} {claim.within_unit}"
    return f"{show_value(100 * claim.within, '')} %"


def _figures(page: Page, judged: Judged, units: Mapping[str, str], told: set[str]) -> None:
    """Exact and claimed value, and the error as a formula; the exact formula with the first claim about it."""
    about = f"{judged.claim.about} {judged.root}"
    if judged.formula_exact is not None and about not in told:
        lines = formula_lines(judged.formula_exact, page.width - 4, label="exact")
        if len(lines) <= _EXACT_LINES:
            page.block(lines, indent=2)
        else:
            page.line("  the exact formula is too long to be read here; derive and --json have it")
    told.add(about)
    exact, claimed = (value_words(value, judged.unit) for value in (judged.exact, judged.claimed))
    page.prose(f"exact {exact}, claimed {claimed}", indent=2)
    if judged.verdict == WRONG:
        return
    if judged.span is not None and judged.error is not None:
        page.prose(f"over the span {over_words(judged, judged.span, units)}", indent=2)
    formula = judged.error_formula
    if formula is None or not formula.shape.coefficient:
        return
    lines = [f"error = {one_line(formula.shape)}"]
    if len(lines[0]) + 2 > page.width:
        lines = formula_lines(formula.shape, page.width - 4, label="error")
    if len(lines) <= _ERROR_LINES:
        page.block(lines, indent=2)


def over_words(judged: Judged, over: SpanFigure, units: Mapping[str, str]) -> str:
    """An error over the span, proved or not, and where it is worst."""
    modulus = ", modulus" if over.modulus else ""
    least, greatest = (
        error_words(x, judged.unit, absolute=judged.absolute, modulus=over.modulus)
        for x in (over.least, over.greatest)
    )
    how = "proved" if over.proved else "every row" if "row" in over.where_least else "sampled"
    if least == greatest:
        return f"{least} everywhere ({how}{modulus})"
    worst = over.where_greatest if abs(over.greatest) >= abs(over.least) else over.where_least
    sides = {n: u for n, u in units.items() if not judged.symbols or n in judged.symbols}
    place = where_words(_sides(worst, sides), units, _SYMBOLS)
    return f"{least} to {greatest} ({how}{modulus}), worst at {place}"


def _sides(where: Where, units: Mapping[str, str]) -> dict[str, float]:
    return {name: value for name, value in where.items() if name in units or name == "row"}


def _conditions(page: Page, judged: Judged) -> None:
    """What it takes to be small, and what the stage's own assumptions take to be equal."""
    for target, word in ((0, "it takes to be small"), (1, "the stage takes to be 1")):
        listed = [c for c in judged.conditions if c.target == target]
        if not listed:
            continue
        shown = [c for k, c in enumerate(listed) if k == 0 or (k < _MOST and not _slight(c, judged))]
        over = any(c.span is not None for c in listed)
        headers = [word, "at the bias point", *(["largest over the span"] if over else []), "error it adds"]
        headers += ["assumption"] if target else []
        rows = [_row(c, judged, over) for c in shown]
        kinds = [LEFT, *[POINT] * (2 + over), *([LEFT] if target else [])]
        page.block(table_lines(headers, rows, kinds, 2, width=page.width))
        rest = [c for c in listed if c not in shown]
        if rest:
            total = error_words(sum(c.effect or 0.0 for c in rest), "", absolute=False)
            more = "1 smaller one adds" if len(rest) == 1 else f"{len(rest)} smaller ones add"
            page.prose(f"{more} {total}", indent=2)


def _slight(condition: Condition, judged: Judged) -> bool:
    """Whether a condition adds nothing that matters beside what the claim is allowed, anywhere over the span."""
    if judged.claim.within_unit or condition.effect is None or not condition.at_bias:
        return False
    grows = abs((condition.largest or 0.0) / condition.at_bias)
    return abs(condition.effect) * grows < _SLIGHT * judged.claim.within


def _row(condition: Condition, judged: Judged, over: bool) -> list[str]:
    effect = condition.effect
    cells = [ratio_line(condition.ratio, condition.shown), ratio_words(condition.at_bias)]
    cells += [ratio_words(condition.largest)] if over else []
    cells.append(_effect_words(effect))
    return [*cells, condition.assumption] if condition.target else cells


def _effect_words(effect: float | None) -> str:
    """What a condition adds to first order, which says nothing where the ratio is no small one."""
    if effect is None:
        return "none"
    return error_words(effect, "", absolute=False) if abs(effect) < 1 else "not small"


def _ways(page: Page, judged: Judged) -> None:
    for way in judged.ways:
        names = " and ".join(f"'{name}'" for name in way.names)
        source = "" if way.own else " (not in the stage file)"
        page.prose(f"it follows from {names}{source}", indent=2)
