"""JSON of the shortest formulas, by the keys of the design (room: show)."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from symamp.exact.forms import Expanded
from symamp.exact.shape import polynomial_text
from symamp.judge.response_errors import BAND
from symamp.judge.shortest import Shortening, Shortest, ShortestResponse, TradeOff
from symamp.judge.verdict import Judged
from symamp.show.json_parts import figure_json, head, number, points_json

_NONE = "no formula was found"


def shorten_json(made: Shortening) -> dict[str, Any]:
    """The object of `shorten`."""
    result = head(made.stage, made.warnings, made.remarks)
    result["within"] = made.within
    result["quantities"] = {found.name: _shortest_json(found, made) for found in made.found}
    if made.responses:
        result["responses"] = {found.name: _response_json(found, made) for found in made.responses}
    return result


def _shortest_json(found: Shortest, made: Shortening) -> dict[str, Any]:
    shape = found.shape
    result: dict[str, Any] = {
        "formula": None if shape is None else shape.text(),
        "latex": None if shape is None else shape.latex(),
        "terms": found.terms,
        "exact_terms": found.exact_terms,
        "formula_exact": None if found.formula_exact is None else found.formula_exact.text(),
        "error": None,
        "assumptions": list(found.assumptions),
        "dropped": found.dropped,
        "toml": list(found.tables),
        "tradeoff": _tradeoff(found.tradeoff),
    }
    if shape is None:
        result |= {f"why_{key}": found.why or _NONE for key in ("formula", "latex", "terms")}
    if result["formula_exact"] is None:
        result["why_formula_exact"] = "no closed form is written out"
    if found.judged is None:
        result["why_error"] = found.why or _NONE
    else:
        result["error"] = _error_json(found.judged, made)
    if found.account is not None:
        result["ledger"] = [
            {"name": share.name, **{key: number(value) for key, value in share.figures.items()}}
            | ({"why": dict(share.why)} if share.why else {})
            for share in found.account.assumptions
        ]
    elif found.changes:
        result["ledger"] = [
            _change(name, change) for name, change in zip(found.assumptions, found.changes, strict=True)
        ]
    return result


def _response_json(found: ShortestResponse, made: Shortening) -> dict[str, Any]:
    """A response as N(s)/D(s); its error is the largest over frequency, and never negative."""
    form = None if found.response is None else found.response.form
    result: dict[str, Any] = {
        "numerator": None,
        "denominator": None,
        "formula": None if found.shape is None else found.shape.text(),
        "latex": None if found.shape is None else found.shape.latex(),
        "terms": found.terms,
        "exact_terms": found.exact.terms,
        "measure": f"largest |Ha/H - 1| {BAND}",
        "error": None,
        "assumptions": list(found.assumptions),
        "dropped": found.dropped,
        "toml": list(found.tables),
        "tradeoff": _tradeoff(found.tradeoff),
    }
    if not isinstance(form, Expanded):
        keys = ("numerator", "denominator", "formula", "latex", "terms", "error")
        return result | {f"why_{key}": found.why or _NONE for key in keys}
    result["numerator"] = [polynomial_text(c) for c in form.numerator]
    result["denominator"] = [polynomial_text(c) for c in form.denominator]
    result["error"] = {"at_bias": found.error}
    figure = None if found.span is None else found.span.figure
    if figure is None:
        result["error"] |= {"min": None, "max": None, "why": "the stage gives no span"}
    else:
        result["error"] |= {**figure_json(figure, made.method), **points_json(figure.points, made.seed)}
    result["ledger"] = [
        {"name": name, **figures} | _whys(figures)
        for name, figures in zip(found.assumptions, found.figures, strict=True)
    ]
    return result


def _whys(figures: Mapping[str, float | None]) -> dict[str, Any]:
    lacking = [key for key, value in figures.items() if value is None]
    return {"why": dict.fromkeys(lacking, "not worked out, or without a value")} if lacking else {}


def _tradeoff(steps: Sequence[TradeOff]) -> list[dict[str, Any]]:
    return [
        {
            "terms": step.terms,
            "formula": step.shape.text(),
            "worst": step.worst,
            "assumptions": list(step.assumptions),
        }
        for step in steps
    ]


def _change(name: str, change: float) -> dict[str, Any]:
    if math.isnan(change):
        return {"name": name, "change": None, "why": "it was made with others"}
    return {"name": name, "change": change}


def _error_json(judged: Judged, made: Shortening) -> dict[str, Any]:
    result: dict[str, Any] = {"at_bias": number(judged.error)}
    if judged.error is None:
        result["why_at_bias"] = judged.why_not
    if judged.span is None:
        why = "the stage gives no span" if made.stage.span.empty else judged.why_not
        return {**result, "min": None, "max": None, "why": why or "no value anywhere over the span"}
    span = judged.span
    return {**result, **figure_json(span, made.method), **points_json(span.points, made.seed)}
