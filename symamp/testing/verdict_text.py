"""A verdict as the text of a failure (room: testing)."""

from __future__ import annotations

from symamp.judge.verdict import Check, Judged
from symamp.show.check_text import judged_page, span_words, units_of_sides
from symamp.show.page import Page

_WIDTH = 100


def verdict_text(check: Check, judged: Judged) -> str:
    """The verdict on one of a check's claims, its error, its tacit conditions, and how the span was looked at."""
    page = Page(_WIDTH)
    judged_page(page, judged, units_of_sides(check.stage))
    span_words(page, check)
    page.notes(check.warnings, check.remarks)
    return page.text().rstrip("\n")
