"""Step 5: what is said of poles and zeros, or of one frequency, once the coefficients are settled."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import pi

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.merge import Pooled
from symamp.assumptions.rewrite import tidy
from symamp.circuit.stage import Stage
from symamp.exact.forms import Expanded, Nested, Powers, expanded_of
from symamp.exact.polys import from_coefficients, lowest_terms
from symamp.exact.response import Response

Outcome = tuple[Response | None, str, list[str]]


def step_on_roots(response: Response, ask: Pooled) -> Outcome:
    """The response after step 5, or None with why, and remarks."""
    if ask.band is not None:
        return _banded(response, float(ask.band))
    if not (ask.dominant_pole or ask.poles_far_apart):
        return response, "", []
    powers = response.form.powers
    why = (ask.dominant_pole and _no_dominant_pole(*powers)) or (ask.poles_far_apart and _not_apart(*powers))
    if why:
        return None, why, []
    if ask.poles_far_apart:
        # With a dominant pole too: every root from its neighbours, the bandwidth from the lowest pole alone.
        return replace(response, apart=True, single_pole=ask.dominant_pole), "", []
    return _one_pole(response, powers), "", []


def _no_dominant_pole(above: Sequence[int], below: Sequence[int]) -> str:
    """Why a dominant pole does not apply, "" where it does."""
    if above and above[0] > 0:
        return "a zero lies at DC, so a dominant pole does not apply"
    if below[0] > 1:
        return "several poles lie at DC, so a dominant pole does not apply"
    if 1 not in below and below[-1] > 1:
        return "the denominator has no term in s, so a dominant pole does not apply: its poles come in pairs"
    return ""


def _not_apart(above: Sequence[int], below: Sequence[int]) -> str:
    """Why roots are no ratios of neighbouring coefficients, "" where they are."""
    for what, powers in (("zeros", above), ("poles", below)):
        if powers and len(powers) <= powers[-1] - powers[0]:
            gap = next(k for k in range(powers[0], powers[-1]) if k not in powers)
            letter = "a" if what == "zeros" else "b"
            return f"{letter}{gap} is zero, so the {what} are no ratios of neighbouring coefficients"
    return ""


def _one_pole(response: Response, powers: Powers) -> Response:
    """D = b0 + b1·s and N = a0; z1 alone is taken from a0 + a1·s."""
    form = response.form
    has_zero = 1 in powers[0]
    if isinstance(form, Expanded):
        kept = _cut(response.stage, form.numerator[:1], form.denominator[:2])
        first = Expanded(form.numerator[:2], form.denominator[:1]) if has_zero else None
        return replace(response, form=kept, first_zero=first, single_pole=True)
    above, below = (frozenset(p) & {0, 1} for p in powers)
    first_nested = replace(form, keep=(above, below)) if has_zero else None
    kept_nested = replace(form, keep=(above & {0}, below))
    return replace(response, form=kept_nested, first_zero=first_nested, single_pole=True)


def _banded(response: Response, hertz: float) -> Outcome:
    """Of numerator and denominator the power of s that is largest at the frequency, at the bias point."""
    if response.missing:
        has = "has" if len(response.missing) == 1 else "have"
        return (
            None,
            f"a band is judged at the bias point, and {', '.join(response.missing)} {has} no value",
            [],
        )
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
    rows = [
        tuple(c if k == top else form.context.constant(0) for k, c in enumerate(row[: top + 1]))
        for row, top in zip((form.numerator, form.denominator), tops, strict=True)
    ]
    return replace(response, form=_cut(response.stage, *rows)), "", []


def _cut(stage: Stage, numerator: Sequence[fmpz_mpoly], denominator: Sequence[fmpz_mpoly]) -> Expanded:
    """The form of these coefficients, in lowest terms."""
    ratio = lowest_terms(from_coefficients(numerator), from_coefficients(denominator))
    return expanded_of(*tidy(stage, ratio))
