"""Dominance on a response that is not written out: on the terms of its coefficients generated in order of size.

The terms of each coefficient of s are generated at the bias point, the largest first, until what is left is little
(`symamp.exact.largest`); dominance is then put to these as to terms that are written out.
"""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass

from symamp.assumptions.merge import Pooled
from symamp.errors import TooLargeError
from symamp.exact.forms import EXPAND_LIMIT, Expanded, Nested, expanded_of
from symamp.exact.largest import Dominant, dominant_terms
from symamp.exact.largest_elements import Side
from symamp.exact.largest_products import SIDES
from symamp.exact.largest_written import may_share
from symamp.exact.polys import S, inverted, lowest_terms, ring_of
from symamp.exact.response import Response

GOAL = 1e-4  # of a coefficient: terms are generated until what is left is no more
ALL = -1.0  # what is left is never so little
ENOUGH = 0.02  # what may be left of a coefficient where TERM_LIMIT terms are not enough for that
TERM_LIMIT = 50_000  # terms of one coefficient that are generated at most
_FIRST = 3_000  # terms after which it is plain whether there is hope:
_HOPELESS = 0.3  # where they leave more than this of a coefficient, TERM_LIMIT terms are not enough either
_LETTERS = {"numerator": "a", "denominator": "b"}

Coefficient = tuple[Side, int]


@dataclass(frozen=True)
class Generated:
    """The generated terms of a response as a form, in lowest terms.

    `left` says of each coefficient ("b2") of which not all terms were generated what those that were not are worth at
    the bias point, as a part of it: a bound, for it is the sum of their magnitudes.
    """

    form: Expanded
    left: Mapping[str, float]
    remarks: tuple[str, ...]


class Generator:
    """Generates the terms of nested forms of one response; a form's are kept."""

    def __init__(self, exact: Response) -> None:
        self._exact = exact
        self._made: dict[Hashable, Generated | str] = {}
        self._forms: list[Nested] = []  # whose identity stands for them

    def of(self, form: Nested, ask: Pooled) -> Generated | str:
        """The form's terms; or, in words, why dominance is not put to it."""
        rename = {n: leader for n, leader in ask.rename.items() if n in self._touched(form)}
        wanted = _wanted(form, ask)
        key = (id(form), frozenset(rename.items()), wanted)
        if key not in self._made:
            self._forms.append(form)
            self._made[key] = self._refused(form, ask) or self._generate(form, rename, wanted)
        return self._made[key]

    @staticmethod
    def _touched(form: Nested) -> frozenset[str]:
        return frozenset(name for name, _ in form.computed)

    def _refused(self, form: Nested, ask: Pooled) -> str:
        """Why the terms of a form are not generated, "" where they are."""
        base = self._not_written(form)
        missing = sorted(form.symbols - set(self._exact.stage.bias))
        if missing:
            return f"{base}; to generate the largest it needs a bias value for {', '.join(missing)}"
        renamed = {name for name, leader in ask.rename.items() if leader not in ask.replace}
        if self._touched(form) - renamed or any(name in ask.rename for name in form.limits):
            return (
                f"{base}; beside a formula that is set for a symbol, a bridge in two, or parts that are made equal and "
                "taken to a limit, they are not generated either"
            )
        return ""

    def _generate(
        self, form: Nested, rename: Mapping[str, str], wanted: tuple[Coefficient, ...]
    ) -> Generated | str:
        values = self._exact.bias_values
        # The coefficients in the middle have the most terms: what fails there is known soonest.
        last = {side: max(k for s, k in wanted if s == side) for side in {side for side, _ in wanted}}
        goal = ALL if form.terms <= EXPAND_LIMIT else GOAL
        found: dict[Coefficient, Dominant] = {}
        for side, power in sorted(wanted, key=lambda c: abs(c[1] - last[c[0]] / 2)):
            name = f"{_LETTERS[side]}{power}"
            try:
                for limit in (min(_FIRST, TERM_LIMIT), TERM_LIMIT):
                    terms = dominant_terms(
                        form, side, power, values, rest=goal, limit=limit, rename=rename or None
                    )
                    if terms.complete or not goal < terms.left <= _HOPELESS:
                        break
            except TooLargeError as error:
                return f"{self._not_written(form)}; {error}"
            if not (terms.complete or terms.left <= ENOUGH):
                return (
                    f"{self._not_written(form)}; the {len(terms.terms):,} largest of {name} leave terms worth "
                    f"{100 * terms.left:.2g} % of it at the bias point, which is too much; neglect what hardly "
                    "matters, or ask for less with dominant_pole"
                )
            found[side, power] = terms
        left = {
            f"{_LETTERS[side]}{power}": found[side, power].left
            for side, power in wanted
            if not found[side, power].complete
        }
        if left and form.skeleton.common:
            return f"{self._not_written(form)}; and it has poles that zeros cancel whatever the values"
        # Where all terms are there, lowest terms are looked for as always; of some it is settled on the graph.
        shares = not left or bool(form.limits) or may_share(form.graph)
        return Generated(self._form(form, found, not shares), left, self._remarks(form, left, shares))

    def _form(self, form: Nested, found: Mapping[Coefficient, Dominant], apart: bool) -> Expanded:
        """The terms as polynomials, in lowest terms, with the response's scale."""
        held = {name for terms in found.values() for monomial, _ in terms.terms for name, _ in monomial}
        context = ring_of(self._exact.stage.symbols, held)
        place = {name: i for i, name in enumerate(context.names())}
        sides: tuple[dict[tuple[int, ...], int], ...] = ({}, {})
        inverse: set[str] = set()
        for (side, power), terms in found.items():
            scale = form.scale.numerator if side == "numerator" else form.scale.denominator
            for monomial, coefficient in terms.terms:
                exponents = [0] * context.nvars()
                exponents[place[S]] = power
                for name, exponent in monomial:
                    exponents[place[name]] = abs(exponent)
                    if exponent < 0:
                        inverse.add(name)
                sides[SIDES.index(side)][tuple(exponents)] = coefficient * scale
        ratio = inverted(context.from_dict(sides[0]), context.from_dict(sides[1]), inverse)
        return expanded_of(*lowest_terms(*ratio, apart=apart))

    def _remarks(self, form: Nested, left: Mapping[str, float], shares: bool) -> tuple[str, ...]:
        bias = self._exact.stage.bias
        said = []
        if left:
            worth = ", ".join(f"{100 * part:.2g} % of {name}" for name, part in left.items())
            said.append(
                f"dominance was put to the largest of {form.terms:,} product terms; those that were not generated are "
                f"worth at most {worth} at the bias point; errors are measured against the exact response and have "
                "that in them"
            )
            if shares and not form.limits:
                said.append("numerator and denominator share a factor that the generated terms still have")
        nothing = sorted(name for name in form.symbols if bias[name] == 0)
        if nothing:
            said.append(f"terms with {', '.join(nothing)}, zero at the bias point, were not generated")
        return tuple(said)

    def _not_written(self, form: Nested) -> str:
        return (
            f"dominance compares written-out terms, and this response stands for {form.terms:,} product terms that "
            "are not written out"
        )


def _wanted(form: Nested, ask: Pooled) -> tuple[Coefficient, ...]:
    """The coefficients that what follows dominance looks at: of a dominant pole a0, a1, b0 and b1 alone.

    Where both sides share a factor in s, all that the graph has: it is divided out once they are written out.
    """
    powers: tuple[Sequence[int], Sequence[int]] = form.powers
    if form.skeleton.common:
        low, degrees = form.skeleton.low, form.skeleton.degrees
        powers = range(degrees[0] - low + 1), range(degrees[1] - low + 1)
    few = ask.dominant_pole and not (ask.poles_far_apart or form.skeleton.common)
    few = few and all(p and p[0] == 0 for p in powers) and 1 in powers[1]
    return tuple(
        (side, power)
        for side, row in zip(SIDES, powers, strict=True)
        for power in row
        if power < 2 or not few
    )
