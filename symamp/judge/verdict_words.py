"""The verdict on a claim, and the sentence that says why (room: judge)."""

from __future__ import annotations

import math

from symamp.exact.asked_quantity import is_root
from symamp.exact.shape import shape_of
from symamp.judge.examined import Examined
from symamp.judge.off import factor_words
from symamp.judge.span_errors import SpanFigure
from symamp.judge.verdict import FAILS, HOLDS, HOLDS_HERE, WRONG
from symamp.values import show_value

_ROUNDING = 1e-9  # how far beyond its bound an error may lie that is at it
_LONG = 60  # characters of a ratio that a sentence can carry
_CONSTANTS = (
    2,
    0.5,
    3,
    1 / 3,
    4,
    0.25,
    math.pi,
    2 * math.pi,
    1 / math.pi,
    0.5 / math.pi,
    math.sqrt(2),
    math.sqrt(0.5),
)


def verdict_of(claim: Examined, over: SpanFigure | None) -> tuple[str, str]:
    """The verdict, and why. `over` is the error over the span, None where there is none."""
    if claim.off is not None:
        return WRONG, _off_words(claim)
    if claim.why_missing:
        return _without_error(claim, over)
    assert claim.error is not None
    if claim.balanced.balance is None:
        constant = _constant(claim, over)
        if constant:
            return WRONG, constant
    size, allowed = abs(claim.error), claim.claim.within * (1 + _ROUNDING)
    here = f"{_error(claim, claim.error)} at the bias point"
    if size > allowed:
        return FAILS, here + _large_ratio(claim)
    if over is None:
        empty = claim.known.stage.span.empty
        return HOLDS, f"{here}; the stage gives no span" if empty else here
    if claim.identity:
        return HOLDS, "it is the exact expression"
    worst = max(over.least, over.greatest, key=abs)
    if over.bounds is not None and max(map(abs, over.bounds)) <= allowed and abs(worst) <= allowed:
        outer = worst if over.proved else max(over.bounds, key=abs)
        return (
            HOLDS,
            f"{here}, and proved to stay within {_error(claim, abs(outer)).lstrip('+')} over the span",
        )
    reached = f"up to {_error(claim, worst)} over the span"
    if abs(worst) > allowed:
        return HOLDS_HERE, f"{here}, and {reached}"
    if over.missing:
        return HOLDS_HERE, f"{here}; at {over.missing} points of the span there is no value"
    return HOLDS, f"{here}, and {reached}"


def _large_ratio(claim: Examined) -> str:
    """The condition that is no small ratio at all, or "": what the claim leaves out is larger than what it keeps."""
    ratios = [(abs(tacit.value(claim.values)), tacit) for tacit in claim.tacit]
    value, tacit = max(ratios, key=lambda pair: pair[0], default=(0.0, None))
    if tacit is None or not value > 1:
        return ""
    text = shape_of(tacit.numerator, tacit.denominator, weights=claim.values).text()
    if len(text) > _LONG:
        leading = shape_of(*tacit.shown(claim.values), weights=claim.values).text()
        text = f"a ratio of the order of {leading}"
    return f"; it takes {text} to be small, and that is {show_value(value, '', 3)}"


def _off_words(claim: Examined) -> str:
    off = claim.off
    assert off is not None
    if off.factor and off.factor not in ("1", "-1"):
        return f"{off.words}; multiplied by {off.factor} it would be a limit of the exact expression"
    if claim.balanced.balance is not None and is_root(claim.quantity) and off.factor == "-1":
        return off.words + _sign_of_root(claim)
    return off.words


def _sign_of_root(claim: Examined) -> str:
    """What sign a pole or zero has, for a claim that has the other."""
    what = "pole" if claim.quantity.name == "p" else "zero"
    if claim.quantity.face in ("magnitude", "hz"):
        return f": .{claim.quantity.face} is of the size of the {what}, and positive"
    if not claim.negative():
        return f": the {what} lies in the right half plane, so s is positive"
    return f": the {what} lies in the left half plane, so s is negative; .magnitude may be meant"


def _without_error(claim: Examined, over: SpanFigure | None) -> tuple[str, str]:
    if claim.exact_value == 0 and (claim.identity or claim.claimed == 0):
        worst = 0.0 if over is None or claim.identity else max(over.least, over.greatest, key=abs)
        if abs(worst) > claim.claim.within * (1 + _ROUNDING):
            return HOLDS_HERE, f"both are 0 at the bias point, and up to {_error(claim, worst)} over the span"
        return HOLDS, "both are 0"
    if claim.exact_value == 0 and math.isfinite(claim.claimed):
        return WRONG, "the exact value is 0"
    return FAILS, claim.why_missing


def _constant(claim: Examined, over: SpanFigure | None) -> str:
    """Words for a formula that is off by a sign or a constant factor, or "": seen in numbers alone."""
    error = claim.error
    if claim.absolute or isinstance(error, complex) or error is None or abs(error) <= claim.claim.within:
        return ""
    ratio = 1 + error  # claimed/exact
    if ratio < 0:
        return "its sign is wrong"
    alike = over is not None and not over.modulus and abs(over.greatest - over.least) <= 1e-9 * abs(1 + error)
    known = any(math.isclose(ratio, constant, rel_tol=1e-9) for constant in _CONSTANTS)
    return factor_words(1 / ratio) if ratio and (alike or known) else ""


def _error(claim: Examined, error: float | complex) -> str:
    """An error in words: "−5.04 %", "+0.12 dB"."""
    size = error if isinstance(error, float) else abs(error)
    scaled, unit = (size, claim.unit) if claim.absolute else (100 * size, "%")
    sign = "" if isinstance(error, complex) or not scaled else "+" if scaled > 0 else "−"
    return f"{sign}{show_value(abs(scaled), '', 3)} {unit}"
