"""JSON of verdicts and frontiers, by the keys of the design (room: show)."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from symamp.circuit.stage import Stage
from symamp.judge.claim import Claim
from symamp.judge.frontier import ClaimFrontier, Limit
from symamp.judge.span_errors import SpanFigure
from symamp.judge.verdict import Check, Condition, Judged
from symamp.show.json_parts import figure_json, head, number, points_json

_NO_FORMULA = "no closed form is written out"


def check_json(check: Check) -> dict[str, Any]:
    """The object of `check`."""
    result = head(check.stage, check.warnings, check.remarks)
    result["claims"] = [_judged_json(judged, check) for judged in check.claims]
    return result


def _claim_head(claim: Claim) -> dict[str, Any]:
    return {
        "about": claim.about,
        "formula": claim.formula,
        "within": claim.within,
        "within_unit": claim.within_unit,
    }


def _judged_json(judged: Judged, check: Check) -> dict[str, Any]:
    result = _claim_head(judged.claim)
    result |= {
        "unit": judged.unit,
        "exact": number(judged.exact),
        "claimed": number(judged.claimed),
        "error": number(judged.error),
        "error_unit": judged.unit if judged.absolute else "",
        "measure": "modulus" if judged.modulus else "signed",
        "formula_exact": None if judged.formula_exact is None else judged.formula_exact.text(),
        "error_formula": None if judged.error_formula is None else judged.error_formula.shape.text(),
        "verdict": judged.verdict,
        "why": judged.why,
    }
    for key in ("exact", "claimed", "error"):
        if result[key] is None:
            result[f"why_{key}"] = judged.why_not or judged.why
    for key in ("formula_exact", "error_formula"):
        if result[key] is None:
            result[f"why_{key}"] = _NO_FORMULA
    if judged.root:
        result["root"] = judged.root
    result["span"] = None if judged.span is None else _over_json(judged.span, check)
    if judged.span is None:
        result["why_span"] = _why_no_span(judged, check)
    result["tacit"] = [_condition_json(condition, check) for condition in judged.conditions]
    result["follows_from"] = [
        {"assumptions": list(way.names), "in_stage_file": way.own, "toml": list(way.keys)}
        for way in judged.ways
    ]
    result["remarks"] = list(judged.remarks)
    return result


def _why_no_span(judged: Judged, check: Check) -> str:
    if check.stage.span.empty:
        return "the stage gives no span"
    return judged.why_not or "no value anywhere over the span"


def _over_json(figure: SpanFigure, check: Check) -> dict[str, Any]:
    return {**figure_json(figure, check.method), **points_json(figure.points, check.seed)}


def _condition_json(condition: Condition, check: Check) -> dict[str, Any]:
    result: dict[str, Any] = {
        "ratio": condition.ratio.text(),
        "taken_to_be": condition.target,
        "at_bias": condition.at_bias,
        "largest": condition.largest,
        "effect": condition.effect,
    }
    if condition.at_bias is None:
        result["why"] = condition.why or "its formula has no value at the bias point"
    if condition.effect is None:
        result["why_effect"] = "the ratio, or the exact quantity with it, has no value at the bias point"
    if condition.assumption:
        result["assumption"] = condition.assumption
    if condition.span is not None:
        result["span"] = _over_json(condition.span, check)
    return result


def frontier_json(stage: Stage, frontiers: Sequence[ClaimFrontier]) -> dict[str, Any]:
    """The object of `frontier`."""
    result = head(stage, stage.warnings, stage.remarks)
    result["claims"] = [_frontier_json(each) for each in frontiers]
    return result


def _frontier_json(frontier: ClaimFrontier) -> dict[str, Any]:
    result = _claim_head(frontier.claim)
    result["error"] = number(frontier.error)
    if frontier.error is None:
        result["why_error"] = frontier.why or "the exact quantity has no value, or is 0, at the bias point"
    result["conditions"] = [_limit_json(limit) for limit in frontier.limits]
    if frontier.why:
        result["why"] = frontier.why
    return result


def _limit_json(limit: Limit) -> dict[str, Any]:
    result: dict[str, Any] = {
        "ratio": limit.ratio.text(),
        "limit": limit.limit,
        "limit_alone": limit.alone,
        "limit_formula": limit.formula,
        "at_bias": limit.at_bias,
        "margin": limit.margin,
    }
    if limit.limit is None:
        result["why"] = limit.why
    if limit.alone is None:
        result["why_alone"] = limit.why_alone
    if limit.formula is None:
        result["why_formula"] = limit.why_formula
    if limit.margin is None:
        result["why_margin"] = limit.why or "the ratio is 0 at the bias point"
    if limit.at_bias is None:
        result["why_at_bias"] = "a symbol in its denominator is 0"
    return result
