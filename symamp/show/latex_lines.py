"""Formulas as displayed lines in LaTeX (room: show): long sums broken at their signs, long fractions named.

A formula is cut into words, a term with its sign and brackets each, and words are set one after the other. A line
that goes on with a term begins with its sign, one that goes on with a factor with a multiplication cross. A fraction
with a half that does not fit on a line is written with a letter for that half, which follows on lines of its own.
Lines need nothing but amsmath's `aligned` and `align*`.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from math import prod

from flint import Ordering, fmpz_mpoly_ctx

from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.exact.forms import Expanded
from symamp.exact.grouped import grouped
from symamp.exact.response import Response
from symamp.exact.shape import VARIABLE, Factor, QuadraticRoot, Shape
from symamp.show.latex_width import math_width
from symamp.show.latex_words import (
    EQUALS,
    MathLine,
    Word,
    index_written,
    joined,
    set_lines,
    terms_of,
    width_of,
    words_of,
    wrapped,
)

PAGE_WIDTH = 38.0  # em that a displayed line of our notes has
PASTE_WIDTH = 33.0  # em that one has in the article class as it comes
_FEW_LINES = 9  # lines of N(s) and D(s) up to which their coefficients are not named


@dataclass(frozen=True)
class Sense:
    """What the symbols of a response are: their order, which are capacitances or inductances, values at bias."""

    order: tuple[str, ...] = ()
    reactive: frozenset[str] = frozenset()
    weights: Mapping[str, float] | None = None

    @classmethod
    def of(cls, response: Response) -> Sense:
        symbols = response.stage.symbols
        reactive = {n for n, symbol in symbols.items() if symbol.nature in (CAPACITANCE, INDUCTANCE)}
        return cls(tuple(symbols), frozenset(reactive), response.bias_values or None)


def formula_display(
    shape: Shape | QuadraticRoot,
    label: str,
    width: float = PAGE_WIDTH,
    *,
    relation: str = "=",
    sense: Sense | None = None,
) -> tuple[MathLine, ...]:
    """`label = formula` as lines of at most `width` em; wider only where a single symbol is.

    `label` is LaTeX. A quadratic root that is too wide is written with a, b and c, grouped by `sense`. Raises
    ValueError where `width` is not positive.
    """
    _check(width)
    room = width - math_width(label) - EQUALS
    whole = shape.latex()
    if math_width(whole) <= room:
        return (MathLine(label, f"{relation} {whole}"),)
    if isinstance(shape, QuadraticRoot):
        sign = "+" if shape.branch > 0 else "-"
        return root_display(shape, label, sign, width, sense)
    above, below = shape.coefficient.as_integer_ratio()
    minus = shape.coefficient < 0
    if below == 1 and not shape.denominator:
        words = words_of(abs(above), shape.numerator, sign="-" if minus else "", brackets=minus)
        return set_lines([words], label, room, relation)
    lead = math_width(r"\mathcal{D}")
    room -= 1.3 * minus + max(0.0, lead - math_width(label))
    halves: list[str] = []
    lines: list[MathLine] = []
    for number, factors, letter in (
        (abs(above), shape.numerator, r"\mathcal{N}"),
        (below, shape.denominator, r"\mathcal{D}"),
    ):
        words = words_of(number, factors)
        text = joined(words)
        if math_width(text) + 0.3 <= room:
            halves.append(text)
        else:
            halves.append(letter)
            lines.extend(set_lines([words], letter, room))
    first = f"{relation} {'-' if minus else ''}\\frac{{{halves[0]}}}{{{halves[1]}}}"
    return (MathLine(label, first), *lines)


def root_display(
    root: QuadraticRoot,
    label: str,
    sign: str,
    width: float = PAGE_WIDTH,
    sense: Sense | None = None,
) -> tuple[MathLine, ...]:
    """A root of a·s² + b·s + c with these letters, which follow; `sign` stands before the square root.

    With `sense` long coefficients are grouped by what stands beside capacitances and inductances.
    """
    radical = r"\sqrt{b^2 - 4 a c}"
    lines = [MathLine(label, rf"= \frac{{-b {sign} {radical}}}{{2 a}}")]
    room = width - max(math_width(label), 0.5) - EQUALS
    for letter, shape in (("a", root.a), ("b", root.b), ("c", root.c)):
        lines.extend(_polynomial([_regrouped(shape, sense)], letter, room))
    return tuple(lines)


def response_display(response: Response, label: str, width: float = PAGE_WIDTH) -> tuple[MathLine, ...]:
    """H(s) = N(s)/D(s) of a response that is written out, as lines of at most `width` em.

    One fraction where it fits; else N(s) and D(s) follow, and where these are long their coefficients n0, n1, …
    and d0, d1, …. `label` is LaTeX, such as `H(s)`. Raises ValueError where the response is nested, or `width`
    not positive.
    """
    _check(width)
    form = response.form
    if not isinstance(form, Expanded):
        raise ValueError(f"{response.name} is nested: no terms are written out")
    sense = Sense.of(response)
    above, below = (
        [_leading_first(grouped(c, sense.reactive, sense.weights), sense.weights) for c in row]
        for row in (form.numerator, form.denominator)
    )
    minus = False
    for row in (above, below):  # N and D begin without a minus; that of the whole stands before the bar
        first = next((shape for each in row for shape in each if shape.coefficient), None)
        if first is not None and first.coefficient < 0:
            minus = not minus
            row[:] = [tuple(-shape for shape in each) for each in row]
    return _ratio_display(above, below, minus, label, width, form.symbols)


def _regrouped(shape: Shape, sense: Sense | None) -> tuple[Shape, ...]:
    """A shape that is one long sum, as shapes that add up to it; any other as it is."""
    factors = shape.numerator
    if (
        sense is None
        or shape.denominator
        or len(factors) != 1
        or not factors[0].is_sum
        or factors[0].power != 1
    ):
        return (shape,)
    terms = terms_of(factors[0])
    held_names = {name for _, product in terms for name, _ in product}
    names = [name for name in sense.order if name in held_names]
    if len(names) < len(held_names) or shape.coefficient.denominator != 1:
        return (shape,)
    context = fmpz_mpoly_ctx.get(names, Ordering.lex)
    held = {
        tuple(dict(product).get(name, 0) for name in names): int(coefficient * shape.coefficient)
        for coefficient, product in terms
    }
    return _leading_first(grouped(context.from_dict(held), sense.reactive, sense.weights), sense.weights)


def _leading_first(shapes: tuple[Shape, ...], weights: Mapping[str, float] | None) -> tuple[Shape, ...]:
    """The shapes, positive ones first and then the larger at the bias point first."""
    if len(shapes) < 2 or weights is None:
        return shapes
    return tuple(sorted(shapes, key=lambda shape: (shape.coefficient < 0, -abs(_value(shape, weights)))))


def _value(shape: Shape, weights: Mapping[str, float]) -> float:
    """What a shape without a denominator is worth at the bias point; a symbol without a value counts as 1."""
    total = float(shape.coefficient)
    for factor in shape.numerator:
        if factor.is_sum:
            base = sum(
                coefficient * prod(weights.get(name, 1.0) ** power for name, power in product)
                for coefficient, product in terms_of(factor)
            )
        else:
            base = weights.get(str(factor.base), 1.0)
        total *= base**factor.power
    return total


def _ratio_display(
    above: Sequence[tuple[Shape, ...]],
    below: Sequence[tuple[Shape, ...]],
    minus: bool,
    label: str,
    width: float,
    taken: Collection[str],
) -> tuple[MathLine, ...]:
    sign = "-" if minus else ""
    room = width - max(math_width(label), math_width("D(s)")) - EQUALS
    texts = [joined([word for addend in _addends(row) for word in addend]) or "0" for row in (above, below)]
    if texts[0] == "0" or texts[1] == "1":
        return _polynomial([tuple(-s for s in each) for each in above] if minus else above, label, room)
    if max(map(math_width, texts)) + 0.3 + 1.3 * minus <= room:
        return (MathLine(label, rf"= {sign}\frac{{{texts[0]}}}{{{texts[1]}}}"),)
    lines = [MathLine(label, rf"= {sign}\frac{{N(s)}}{{D(s)}}")]
    for letter, row in (("N", above), ("D", below)):
        whole = _polynomial(row, f"{letter}(s)", room)
        if len(whole) <= _FEW_LINES or sum(map(_is_there, row)) < 2:
            lines.extend(whole)
        else:
            small = letter.lower()
            if any(f"{small}{k}" in taken for k in range(len(row))):
                small = rf"\mathcal{{{letter}}}"  # a symbol of the stage has that name
            lines.extend(_by_coefficients(row, f"{letter}(s)", small, room))
    return tuple(lines)


def _is_there(coefficient: tuple[Shape, ...]) -> bool:
    return any(shape.coefficient for shape in coefficient)


def _polynomial(row: Sequence[tuple[Shape, ...]], label: str, room: float) -> tuple[MathLine, ...]:
    """label = (…) + (…) s + …: one line, or a line for each power of s."""
    addends = _addends(row) or [[Word("0", 0.5)]]
    one_line = width_of([word for addend in addends for word in addend]) <= room
    apart = not one_line and sum(map(_is_there, row)) > 1
    return set_lines(addends, label, room, apart=apart)


def _by_coefficients(
    row: Sequence[tuple[Shape, ...]], label: str, letter: str, room: float
) -> tuple[MathLine, ...]:
    present = [k for k, coefficient in enumerate(row) if _is_there(coefficient)]
    names = {k: f"{letter}_{index_written(k)}" for k in present}
    terms = [f"{'+ ' if k != present[0] else ''}{names[k]}{_times_s(k)}" for k in present]
    lines = list(set_lines([[Word(term, math_width(term))] for term in terms], label, room))
    for k in present:
        lines.extend(_polynomial([row[k]], names[k], room))
    return tuple(lines)


def _times_s(k: int) -> str:
    return "" if k == 0 else f" {VARIABLE}" if k == 1 else f" {VARIABLE}^{index_written(k)}"


def _addends(row: Sequence[tuple[Shape, ...]]) -> list[list[Word]]:
    """The words of each addend, with its sign and power of s; shapes that share a power of s stand in brackets."""
    addends: list[list[Word]] = []
    for power, coefficient in enumerate(row):
        shapes = [shape for shape in coefficient if shape.coefficient]
        if power and len(shapes) > 1:
            words = [word for k, shape in enumerate(shapes) for word in _addend(shape, 0, first=not k)]
            words = wrapped(words, "+ [" if addends else "[", f"]{_times_s(power)}")
            addends.append(words)
            continue
        for shape in shapes:
            alone = not power and len(shapes) == 1 and sum(map(_is_there, row)) == 1
            addends.append(_addend(shape, power, first=not addends, brackets=not alone))
    return addends


def _addend(shape: Shape, power: int, *, first: bool, brackets: bool = True) -> list[Word]:
    minus = shape.coefficient < 0
    sign = ("-" if minus else "") if first else ("- " if minus else "+ ")
    factors = (*shape.numerator, Factor(VARIABLE, power)) if power else shape.numerator
    plain_sum = len(factors) == 1 and factors[0].is_sum and abs(shape.coefficient) == 1
    if plain_sum and not minus and not power and factors[0].power == 1:
        brackets = False  # + (a + b) among other addends
    return words_of(abs(int(shape.coefficient)), factors, sign=sign, brackets=brackets or minus)


def _check(width: float) -> None:
    if not width > 0:
        raise ValueError(f"width={width!r} must be positive")
