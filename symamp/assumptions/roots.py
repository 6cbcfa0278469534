"""Step 5: what is said of poles and zeros, or of one frequency, once the coefficients are settled."""

from __future__ import annotations

from dataclasses import replace
from math import pi

import numpy as np

from symamp.assumptions.merge import Pooled
from symamp.exact.forms import Expanded, Nested
from symamp.exact.response import Response


def step_on_roots(response: Response, ask: Pooled) -> tuple[Response | None, str, list[str]]:
    """The response after step 5, or None with why, and remarks."""
    if ask.band is not None:
        return _banded(response, float(ask.band))
    if not (ask.dominant_pole or ask.poles_far_apart):
        return response, "", []
    if ask.dominant_pole:
        low_n, low_d = _lowest_powers(response)
        if low_n > 0:
            return None, "a zero lies at DC, so a dominant pole does not apply", []
        if ask.poles_far_apart:
            # Together: every root from its neighbours, the bandwidth from the lowest pole alone.
            return replace(response, apart=True, single_pole=True), "", []
        return _one_pole(response, low_d), "", []
    return replace(response, apart=True), "", []


def _lowest_powers(response: Response) -> tuple[int, int]:
    form = response.form
    if isinstance(form, Expanded):
        rows = (form.numerator, form.denominator)
        return tuple(next((k for k, c in enumerate(row) if not c.is_zero()), 0) for row in rows)  # type: ignore[return-value]
    numerator, denominator = response.exact_coefficients
    return tuple(
        next((k for k in range(p.degree() + 1) if p[k] != 0), 0) for p in (numerator, denominator)
    )  # type: ignore[return-value]


def _one_pole(response: Response, low: int) -> Response:
    """D = b0 + b1·s and N = a0; z1 alone is taken from a0 + a1·s."""
    form = response.form
    if isinstance(form, Expanded):
        kept = Expanded(form.numerator[:1], form.denominator[: low + 2])
        first = Expanded(form.numerator[:2], form.denominator[: low + 2]) if len(form.numerator) > 1 else None
        return replace(response, form=kept, first_zero=first, single_pole=True)
    below = frozenset(range(low + 2))
    nested = replace(form, keep=(frozenset({0}), below))
    first_nested = replace(form, keep=(frozenset({0, 1}), below))
    return replace(response, form=nested, first_zero=first_nested, single_pole=True)


def _banded(response: Response, hertz: float) -> tuple[Response | None, str, list[str]]:
    """Of numerator and denominator the power of s that is largest at the frequency, at the bias point."""
    if response.missing:
        return None, f"a band is judged at the bias point, and {', '.join(response.missing)} has no value", []
    given = response.form.coefficients(response.bias_values, 1)
    omega = 2 * pi * hertz / given.omega
    tops = []
    for row in (given.numerator[:, 0], given.denominator[:, 0]):
        sizes = np.abs(row) * omega ** np.arange(len(row))
        tops.append(int(np.argmax(sizes)))
    form = response.form
    if isinstance(form, Nested):
        kept = replace(form, keep=(frozenset({tops[0]}), frozenset({tops[1]})))
        return replace(response, form=kept), "", []
    zero = form.context.constant(0)
    rows = [
        tuple(c if k == top else zero for k, c in enumerate(row[: top + 1]))
        for row, top in zip((form.numerator, form.denominator), tops, strict=True)
    ]
    # s^3/s^2 and its like are brought to lowest terms again.
    shared = min(tops)
    return replace(response, form=Expanded(rows[0][shared:], rows[1][shared:])), "", []
