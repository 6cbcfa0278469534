"""`frontier` in the terminal: where each claim stops holding (room: show)."""

from __future__ import annotations

from collections.abc import Sequence

from symamp.circuit.stage import Stage
from symamp.judge.frontier import ClaimFrontier, Limit
from symamp.show.check_text import within_words
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import one_line, ratio_line
from symamp.show.page import Page
from symamp.show.words import error_words, ratio_words
from symamp.values import show_value


def frontier_page(page: Page, stage: Stage, frontiers: Sequence[ClaimFrontier]) -> None:
    """All frontiers."""
    page.line(stage.title, "bold")
    for number, each in enumerate(frontiers, start=1):
        page.line()
        _claim(page, each, number)
    if any(each.limits for each in frontiers):
        page.line()
        page.prose(
            "A limit is the ratio at which the error reaches its bound: with the other ratios as they are at the bias "
            "point, and alone, the others being 0."
        )
    page.notes(stage.warnings, stage.remarks)


def _claim(page: Page, frontier: ClaimFrontier, number: int) -> None:
    claim = frontier.claim
    page.prose(f"{number}  {claim.about} = {claim.formula}, within {within_words(claim)}")
    if frontier.error is not None:
        unit = claim.within_unit
        error = error_words(frontier.error, unit, absolute=bool(unit))
        page.prose(f"error at the bias point {error}", "bold", indent=2)
    if frontier.why:
        page.prose(frontier.why, indent=2)
        return
    headers = ["ratio", "at the bias point", "limit", "may grow by", "limit alone", "holds alone while"]
    rows = [_row(limit) for limit in frontier.limits]
    page.block(table_lines(headers, rows, [LEFT, POINT, POINT, POINT, POINT, LEFT], 2, width=page.width))
    for why in dict.fromkeys(limit.why for limit in frontier.limits if limit.why):
        page.prose(f"no limit: {why}", indent=2)


def _row(limit: Limit) -> list[str]:
    grows = "none" if limit.margin is None else f"{limit.margin:.3g} times"
    holds = ""
    if limit.turned is not None and limit.least is not None:
        holds = f"{one_line(limit.turned)} ≥ {show_value(limit.least, '')}"
    return [
        ratio_line(limit.ratio, limit.shown),
        ratio_words(limit.at_bias),
        ratio_words(limit.limit),
        grows,
        ratio_words(limit.alone),
        holds,
    ]
