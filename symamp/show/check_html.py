"""Verdicts and frontiers as plain tables for notebooks (room: show)."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

from symamp.judge.frontier import ClaimFrontier
from symamp.judge.verdict import Check, Condition, Judged
from symamp.show.check_text import within_words
from symamp.show.formulas import ratio_line
from symamp.show.words import error_words, ratio_words, value_words


def check_html(check: Check) -> str:
    """One table of verdicts, and under it what each claim takes to be small."""
    over = any(judged.span is not None for judged in check.claims)
    headers = ["claim", "formula", "within", "verdict", "exact", "claimed", "error"]
    headers += ["error over the span"] if over else []
    rows = [_verdict_cells(judged, over) for judged in check.claims]
    parts = [f"<h4>{escape(check.stage.title)}</h4>", _table(headers, rows)]
    parts += [_conditions(judged) for judged in check.claims if judged.conditions]
    if check.points:
        seed = "" if check.seed is None else f", seed {check.seed}"
        parts.append(f"<p>{check.points:,} bias points{seed}; {escape(check.method)}.</p>")
    notes = [f"warning: {text}" for text in check.warnings] + [f"remark: {text}" for text in check.remarks]
    return "".join([*parts, *(f"<p>{escape(note)}</p>" for note in notes)])


def frontier_html(title: str, frontiers: Sequence[ClaimFrontier]) -> str:
    """For each claim a table of the ratios at which its error reaches its bound."""
    parts = [f"<h4>{escape(title)}</h4>"]
    for each in frontiers:
        parts.append(f"<p><b>{escape(each.claim.about)}</b> = {escape(each.claim.formula)}</p>")
        if each.why:
            parts.append(f"<p>{escape(each.why)}</p>")
            continue
        rows = [
            [
                escape(ratio_line(limit.ratio, limit.shown)),
                ratio_words(limit.at_bias),
                ratio_words(limit.limit),
                ratio_words(limit.alone),
                escape(limit.formula or ""),
            ]
            for limit in each.limits
        ]
        parts.append(
            _table(["ratio", "at the bias point", "limit", "limit alone", "holds alone while"], rows)
        )
    return "".join(parts)


def _verdict_cells(judged: Judged, over: bool) -> list[str]:
    def error(value: complex | float | None, modulus: bool = False) -> str:
        return escape(error_words(value, judged.unit, absolute=judged.absolute, modulus=modulus))

    cells = [escape(judged.claim.about), escape(judged.claim.formula), escape(within_words(judged.claim))]
    cells.append(f"<b>{escape(judged.verdict)}</b>: {escape(judged.why)}")
    cells += [escape(value_words(value, judged.unit)) for value in (judged.exact, judged.claimed)]
    cells.append(error(judged.error))
    if over:
        span = judged.span
        ends = "" if span is None else " … ".join(error(x, span.modulus) for x in (span.least, span.greatest))
        cells.append(ends or "none")
    return cells


def _conditions(judged: Judged) -> str:
    head = f"<p><b>{escape(judged.claim.about)}</b> = {escape(judged.claim.formula)} takes to be small:</p>"
    headers = ["ratio", "at the bias point", "largest over the span", "error it adds"]
    return head + _table(headers, [_condition_cells(condition) for condition in judged.conditions])


def _condition_cells(condition: Condition) -> list[str]:
    taken = f" (taken to be 1: {condition.assumption})" if condition.assumption else ""
    effect = condition.effect
    return [
        escape(ratio_line(condition.ratio, condition.shown) + taken),
        ratio_words(condition.at_bias),
        ratio_words(condition.largest),
        "none" if effect is None else escape(error_words(effect, "", absolute=False)),
    ]


def _table(headers: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    def line(cells: Sequence[str], tag: str) -> str:
        return "<tr>" + "".join(f"<{tag}>{cell}</{tag}>" for cell in cells) + "</tr>"

    return (
        f"<table>{line([escape(h) for h in headers], 'th')}{''.join(line(row, 'td') for row in rows)}</table>"
    )
