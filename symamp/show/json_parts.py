"""JSON of responses and ledgers, by the keys of the design: numbers in SI units, null with a "why" beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from symamp.assumptions.apply import Approximation, Dropped
from symamp.circuit.stage import Stage
from symamp.exact.forms import Expanded
from symamp.exact.response import QuantityValue, Response
from symamp.exact.shape import polynomial_text
from symamp.exact.time_constants import TimeConstant
from symamp.judge.ledger import Account, Ledger, LostRoot, Share
from symamp.judge.sets import FIGURES
from symamp.judge.span_errors import SpanFigure

QUANTITIES = (
    "dc",
    "hf",
    "bandwidth",
    "peak",
    "peak_frequency",
    "low_corner",
    "high_corner",
    "unity_gain_frequency",
    "gain_bandwidth",
    "phase_margin",
    "gain_margin",
)

_NO_FORMULA = "no closed form is written out"


def number(value: complex | float | None) -> Any:
    """A JSON number, {"re", "im"} for a complex one, None for none."""
    if value is None:
        return None
    if isinstance(value, complex) or np.iscomplexobj(value):
        return {"re": float(value.real), "im": float(value.imag)}
    return float(value)


def head(stage: Stage, warnings: Sequence[str], remarks: Sequence[str]) -> dict[str, Any]:
    """What every object has."""
    symbols = {}
    for name, symbol in stage.symbols.items():
        value = stage.bias.get(name)
        symbols[name] = {"value": None if value is None else float(value), "unit": symbol.unit}
        if value is None:
            symbols[name]["why"] = "no bias value"
    return {
        "stage": stage.title,
        "symbols": symbols,
        "warnings": list(warnings),
        "remarks": list(remarks),
    }


def quantity_json(found: QuantityValue) -> dict[str, Any]:
    """One quantity of a response."""
    complex_kind = isinstance(found.value, complex)
    result: dict[str, Any] = {
        "formula": found.text,
        "latex": found.latex,
        "value": number(found.value) if complex_kind else found.value,
        "unit": found.unit,
    }
    if found.why is not None:
        result["why"] = found.why
    if found.text is None:
        result["why_formula"] = _NO_FORMULA
    if found.remarks:
        result["remarks"] = list(found.remarks)
    return result


def quantity_names(response: Response) -> list[str]:
    """All quantities that a response has a name for: those of the table, its roots and its coefficients."""
    names = list(QUANTITIES)
    if isinstance(response.form, Expanded):
        poles, zeros = len(response.form.denominator) - 1, len(response.form.numerator) - 1
        if response.first_zero is not None:
            zeros = 1
    elif response.missing:
        return names
    else:
        poles, zeros = len(response.poles()), len(response.zeros())
    names += [f"p{k}" for k in range(1, poles + 1)] + [f"z{k}" for k in range(1, zeros + 1)]
    return names + [f"b{k}" for k in range(poles + 1)] + [f"a{k}" for k in range(zeros + 1)]


def response_json(
    response: Response, constants: Sequence[TimeConstant], frequencies: Sequence[float]
) -> dict[str, Any]:
    """One response of `derive`."""
    form = response.form
    expanded = isinstance(form, Expanded)
    result: dict[str, Any] = {
        "unit": response.unit,
        "form": "expanded" if expanded else "nested",
        "terms": response.terms,
        "numerator": [polynomial_text(c) for c in form.numerator] if isinstance(form, Expanded) else None,
        "denominator": [polynomial_text(c) for c in form.denominator] if isinstance(form, Expanded) else None,
    }
    if not expanded:
        result["why"] = f"{response.terms} product terms are too many to be written out"
    result["quantities"] = {name: quantity_json(response.quantity(name)) for name in quantity_names(response)}
    result |= _roots_json(response)
    result["time_constants"] = [_constant_json(constant) for constant in constants]
    if frequencies:
        result["at"] = [_at_json(response, hz) for hz in frequencies]
    return result


def _roots_json(response: Response) -> dict[str, Any]:
    if response.missing:
        why = f"{', '.join(response.missing)} has no bias value"
        return {"poles": None, "zeros": None, "why_poles": why, "why_zeros": why}
    return {
        "poles": [number(complex(p)) for p in response.poles()],
        "zeros": [number(complex(z)) for z in response.zeros()],
    }


def _at_json(response: Response, hz: float) -> dict[str, Any]:
    if response.missing:
        why = f"{', '.join(response.missing)} has no bias value"
        return {"hz": hz, "re": None, "im": None, "why": why}
    value = response.at(hz)
    if not np.isfinite(value):
        return {"hz": hz, "re": None, "im": None, "why": "the response is infinite there"}
    return {"hz": hz, "re": value.real, "im": value.imag}


def _constant_json(constant: TimeConstant) -> dict[str, Any]:
    result: dict[str, Any] = {
        "part": constant.part,
        "resistance": constant.resistance,
        "seconds": constant.seconds,
        "share": constant.share,
        "formula": None if constant.formula is None else constant.formula.text(),
    }
    if constant.why:
        result["why"] = constant.why
    elif constant.resistance is None:
        result["why_resistance"] = f"{constant.part} is 0 or its time constant is"
    if constant.share is None and not constant.why:
        result["why_share"] = "the time constants have no finite sum"
    if constant.formula is None:
        result["why_formula"] = _NO_FORMULA
    return result


def approximation_json(
    approximation: Approximation,
    exact: Mapping[str, Any],
    constants: Sequence[TimeConstant],
    frequencies: Sequence[float],
) -> dict[str, Any]:
    """One response of `derive --assume`: the approximate one, with the exact one and what was dropped beside it."""
    response = approximation.response
    if response is None:
        result: dict[str, Any] = {
            "unit": exact["unit"],
            "form": exact["form"],
            "terms": 0,
            "numerator": None,
            "denominator": None,
            "why": approximation.why,
            "quantities": {},
            "poles": None,
            "zeros": None,
            "time_constants": [],
        }
    else:
        result = response_json(response, constants, frequencies)
    result["assumptions"] = list(approximation.assumptions)
    result["dropped"] = [_dropped_json(item) for item in approximation.dropped]
    result["kept"] = [{"coefficient": item.coefficient, "term": item.term} for item in approximation.kept]
    result["warnings"] = list(approximation.warnings)
    result["remarks"] = list(approximation.remarks)
    result["exact"] = dict(exact)
    return result


def _dropped_json(item: Dropped) -> dict[str, Any]:
    found = {"coefficient": item.coefficient, "term": item.term, "against": item.against, "ratio": item.ratio}
    return (
        found
        if item.ratio is not None
        else {**found, "why": "a symbol of the two has no bias value, or is 0"}
    )


def ledger_json(ledger: Ledger) -> dict[str, Any]:
    """The object of `ledger`."""
    result = head(ledger.stage, ledger.warnings, ledger.remarks)
    result["quantities"] = {account.name: _account_json(account, ledger) for account in ledger.accounts}
    return result


def _account_json(account: Account, ledger: Ledger) -> dict[str, Any]:
    error = account.error_formula
    result: dict[str, Any] = {
        "unit": account.unit,
        "exact": number(account.exact),
        "approximate": number(account.approximate),
        "formula_exact": None if account.formula_exact is None else account.formula_exact.text(),
        "formula_approximate": None
        if account.formula_approximate is None
        else account.formula_approximate.text(),
        "error": number(account.error),
        "error_unit": account.unit if account.absolute else "",
        "error_formula": None if error is None else error.shape.text(),
        "leading_term": None if error is None or error.leading is None else error.leading.text(),
        "measure": "modulus" if account.modulus else "signed",
        "lost": [_lost_json(root) for root in account.lost],
        "new": [_lost_json(root) for root in account.new],
    }
    if account.why:
        result["why"] = account.why
    for key in ("formula_exact", "formula_approximate", "error_formula"):
        if result[key] is None:
            result[f"why_{key}"] = _NO_FORMULA
    if result["leading_term"] is None:
        result["why_leading_term"] = _NO_FORMULA if error is None else "the error is 0"
    if account.error_absolute is not None:
        result["error_absolute"] = number(account.error_absolute)
    if account.remarks:
        result["remarks"] = list(account.remarks)
    result["assumptions"] = [_share_json(share, ledger) for share in account.assumptions]
    if account.span is not None:
        points = points_json(ledger.points, ledger.seed)
        result["span"] = {"error": {**span_json(account.span, ledger), **points}}
    else:
        result["span"] = None
        result["why_span"] = _why_no_span(ledger)
    return result


def _why_no_span(ledger: Ledger) -> str:
    return "the stage gives no span" if ledger.stage.span.empty else "no value anywhere over the span"


def _lost_json(root: LostRoot) -> dict[str, Any]:
    return {"name": root.name, "hz": root.hz}


def _share_json(share: Share, ledger: Ledger) -> dict[str, Any]:
    result: dict[str, Any] = {"name": share.name}
    for figure in FIGURES:
        result[figure] = number(share.figures[figure])
    if share.why:
        result["why"] = dict(share.why)
    if ledger.stage.span.empty:
        return {**result, "span": None, "why_span": _why_no_span(ledger)}
    over: dict[str, Any] = {
        figure: span_json(share.span[figure], ledger) if figure in share.span else None for figure in FIGURES
    }
    lacking = {
        figure: share.why.get(figure) or _why_no_span(ledger) for figure in FIGURES if over[figure] is None
    }
    result["span"] = {**over, "why": lacking} if lacking else over
    return result


def span_json(figure: SpanFigure, ledger: Ledger) -> dict[str, Any]:
    """A figure of a ledger over the span."""
    fewer = figure.points < ledger.points
    return figure_json(
        figure, f"{ledger.method}; at {figure.points} of the points" if fewer else ledger.method
    )


def figure_json(figure: SpanFigure, method: str) -> dict[str, Any]:
    """A figure over the span; what is sampled, by `method`, is never proved. `bounds` are what a proof reached."""
    result: dict[str, Any] = {
        "min": figure.least,
        "max": figure.greatest,
        "where_min": dict(figure.where_least),
        "where_max": dict(figure.where_greatest),
        "proved": figure.proved,
        "method": figure.method or method,
    }
    if figure.bounds is not None:
        result["bounds"] = list(figure.bounds)
    if figure.missing:
        result["missing"] = figure.missing
    return result


def points_json(points: int, seed: int | None) -> dict[str, Any]:
    """How many bias points were looked at, and the seed with which they were drawn."""
    result: dict[str, Any] = {"points": points, "seed": seed}
    if seed is None:
        result["why_seed"] = "every row is tried, and none is drawn"
    return result
