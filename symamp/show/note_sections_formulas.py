"""What a note says of responses (room: show): their formulas and their figures, exact and under the assumptions."""

from __future__ import annotations

from collections.abc import Sequence

from symamp.assumptions.apply import Approximation
from symamp.exact.asked_quantity import Quantity, parse_quantity
from symamp.exact.forms import Nested
from symamp.exact.formulas import Formula, formula_of
from symamp.exact.response import Response
from symamp.exact.shape import QuadraticRoot
from symamp.show.latex_lines import PAGE_WIDTH, Sense, formula_display, response_display, root_display
from symamp.show.latex_words import MathLine
from symamp.show.note_model import LEFT, Block, Equation, Inline, Math, Paragraph, Section, Table, inline
from symamp.show.note_words import (
    quantity_math,
    quantity_words,
    response_letter,
    response_words,
    value_text,
)
from symamp.show.words import root_words

LONGEST = 45  # lines of a formula that a note still prints
_LONGEST_ROOT = 14  # lines of a quantity's formula that a note still prints
_FIGURES = ("dc", "hf", "bandwidth", "gain_bandwidth", "unity_gain_frequency", "phase_margin", "gain_margin")
_BAND = ("peak", "peak_frequency", "low_corner", "high_corner")


def exact_section(responses: Sequence[Response]) -> Section:
    """The exact expressions and figures of every response."""
    return Section(inline("Exact expressions"), tuple(_exact(response) for response in responses))


def simplified_section(found: Sequence[tuple[Response, Approximation]]) -> Section | None:
    """The expressions under the assumptions, of every response that they change; None where there is none."""
    sections = [_simplified(exact, made) for exact, made in found if made.assumptions]
    if not sections:
        return None
    return Section(inline("Simplified expressions"), tuple(sections))


def _exact(response: Response) -> Section:
    blocks = formula_blocks(response)
    if response.missing:
        names = ", ".join(response.missing)
        blocks.append(Paragraph(inline(f"There are no figures, for want of a bias value of {names}.")))
    else:
        blocks += [figures_table(response), *roots_table(response)]
    return Section(inline(response_words(response.asked)), tuple(blocks))


def _simplified(exact: Response, made: Approximation) -> Section:
    title = inline(response_words(exact.asked))
    if made.response is None:
        return Section(title, (Paragraph(inline(f"No response is left under all assumptions: {made.why}.")),))
    blocks = formula_blocks(made.response, relation=r"\approx")
    return Section(title, tuple(blocks))


def formula_blocks(response: Response, *, relation: str = "=") -> list[Block]:
    """H(s) and its quantities as displays; what takes a line each stands in one."""
    whole = response_blocks(response, relation=relation)
    rest = quantity_blocks(response, relation=relation)
    if isinstance(whole[0], Equation) and len(whole[0].lines) == 1 and rest:
        first = rest[0]
        if isinstance(first, Equation) and first.name.startswith("figures"):
            return [Equation(whole[0].lines + first.lines, whole[0].name), *rest[1:]]
    return [*whole, *rest]


def response_blocks(response: Response, *, relation: str = "=") -> list[Block]:
    """H(s) as a display, or why it is not printed."""
    letter = response_letter(response.name, response.unit)
    if isinstance(response.form, Nested):
        terms = f"{response.terms:,}" if response.terms < 10**9 else f"some {response.terms:.1e}"
        words = (
            f"The response stands for {terms} product terms and is not written out; its figures are exact."
        )
        return [Paragraph(inline(words))]
    lines = with_relation(response_display(response, f"{letter}(s)"), relation)
    if len(lines) > LONGEST:
        return [
            Paragraph(inline(f"The expression has {response.terms:,} terms, too many to be read on paper."))
        ]
    return [Equation(lines, f"{response.name} as a function of s")]


def with_relation(lines: tuple[MathLine, ...], relation: str) -> tuple[MathLine, ...]:
    """The display with another sign than = in its first line."""
    first = lines[0]
    if relation == "=" or not first.right.startswith("="):
        return lines
    return (MathLine(first.left, relation + first.right[1:]), *lines[1:])


def quantity_blocks(response: Response, *, relation: str = "=") -> list[Block]:
    """The DC value, poles, zeros and bandwidth as displays, of those that have a formula short enough to print."""
    blocks: list[Block] = []
    short: list[MathLine] = []  # formulas of a line each stand in one display
    done: set[str] = set()
    for quantity in formula_quantities(response):
        formula = None if quantity.text in done else formula_of(response, quantity)
        if formula is None:
            continue
        twin = twin_root(response, quantity, formula)
        done |= {quantity.text, twin.text if twin else ""}
        lines = with_relation(quantity_lines(response, quantity, formula, twin), relation)
        if len(lines) == 1:
            short.extend(lines)
        elif len(lines) <= _LONGEST_ROOT:
            blocks.append(Equation(lines, f"{quantity_words(quantity)} of {response.name}"))
    first = [Equation(tuple(short), f"figures of {response.name}")] if short else []
    return [*first, *blocks]


def formula_quantities(response: Response) -> list[Quantity]:
    """The quantities whose formulas are listed: DC value, poles, zeros, and bandwidths that have one."""
    names = ["dc"]
    if not isinstance(response.form, Nested):
        names += [f"p{k}" for k in range(1, len(response.form.denominator))]
        zeros = response.first_zero if response.first_zero is not None else response.form
        if not isinstance(zeros, Nested):
            names += [f"z{k}" for k in range(1, len(zeros.numerator))]
    names += ["bandwidth"] if response.unit else ["bandwidth", "gain_bandwidth"]
    return [parse_quantity(name) for name in names]


def twin_root(response: Response, quantity: Quantity, formula: Formula) -> Quantity | None:
    """The other root of the same quadratic, if it is the next one."""
    if not isinstance(formula, QuadraticRoot):
        return None
    other = Quantity(quantity.name, index=(quantity.index or 1) + 1)
    found = formula_of(response, other)
    same = isinstance(found, QuadraticRoot) and (found.a, found.b, found.c) == (
        formula.a,
        formula.b,
        formula.c,
    )
    return other if same else None


def quantity_lines(
    response: Response,
    quantity: Quantity,
    formula: Formula,
    twin: Quantity | None = None,
    *,
    width: float = PAGE_WIDTH,
) -> tuple[MathLine, ...]:
    """A quantity's formula as a display; with `twin`, the other root of the same quadratic, both at once."""
    sense = Sense.of(response)
    label = quantity_math(response.name, response.unit, quantity)
    if twin is None or not isinstance(formula, QuadraticRoot):
        return formula_display(formula, label, width, sense=sense)
    sign = r"\pm" if formula.branch > 0 else r"\mp"
    both = f"{quantity.name}_{{{quantity.index},{twin.index}}}"
    return root_display(formula, both, sign, width, sense)


def figures_table(response: Response) -> Table:
    """What the quantities are worth at the bias point."""
    flat = response.quantity("peak_frequency").value in (0, None)
    rows: list[tuple[Inline, ...]] = []
    for name in (*_FIGURES, *(() if flat else _BAND)):
        found = response.quantity(name)
        if name != "dc" and (found.value is None or (name == "hf" and found.value == 0)):
            continue
        if name == "gain_bandwidth" and response.unit:
            continue  # a product of a gain and a frequency
        quantity = parse_quantity(name)
        words = value_text(found.value, found.unit) if found.value is not None else f"none: {found.why}"
        if name == "dc" and found.value and not response.unit:
            words += f" ({value_text(response.quantity('dc.db').value, 'dB')})"
        symbol = quantity_math(response.name, response.unit, quantity)
        rows.append((inline(quantity_words(quantity)), inline(Math(symbol)), inline(words)))
    header = (inline("quantity"), inline("symbol"), inline("at the bias point"))
    return Table("", header, tuple(rows), (LEFT, LEFT, LEFT))


def roots_table(response: Response) -> list[Block]:
    """Poles and zeros: frequency and damping."""
    rows: list[tuple[Inline, ...]] = []
    for letter, word, roots in (("p", "pole", response.poles()), ("z", "zero", response.zeros())):
        for k, root in enumerate(roots, start=1):
            frequency, damping = root_words(root)
            symbol = quantity_math(response.name, response.unit, parse_quantity(f"{letter}{k}"))
            rows.append((inline(Math(symbol)), inline(word), inline(quantity_hz(frequency)), inline(damping)))
    if not rows:
        return []
    header = (inline("root"), inline("kind"), inline("frequency"), inline("damping"))
    return [Table("", header, tuple(rows), (LEFT, LEFT, LEFT, LEFT))]


def quantity_hz(words: str) -> str:
    return words.replace(" ", "\u00a0")
