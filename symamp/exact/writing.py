"""How a shape is written on one line (room: exact): one set of rules, and a notation for each way to write.

A `Notation` says how a symbol, a power, a fraction and a root look; the rules for order, signs and brackets
are the same for the grammar of stage files, LaTeX and the terminal.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from symamp.circuit.latex_names import latex_name
from symamp.exact.terms import Factor, Product, Root, Term


@dataclass(frozen=True)
class Written:
    """A piece as written; `level` is SUM, PRODUCT or SINGLE (a name, a number, or a power of one)."""

    text: str
    level: int


SUM, PRODUCT, SINGLE = 0, 1, 2


@dataclass(frozen=True)
class Notation:
    """One way to write. `fraction` takes what is above and below the bar."""

    symbol: Callable[[str], str]
    power: Callable[[str, int], str]
    fraction: Callable[[Written, Written], str]
    root: Callable[[str], str]
    times: str
    minus: str = "-"


def bracketed(piece: Written, level: int) -> str:
    """The piece, in brackets if it binds less tightly than `level`."""
    return piece.text if piece.level >= level else f"({piece.text})"


def inline_fraction(above: Written, below: Written) -> str:
    """above/below, with the brackets that it needs."""
    return f"{bracketed(above, PRODUCT)}/{bracketed(below, SINGLE)}"


PLAIN = Notation(
    symbol=str,
    power=lambda base, power: f"{base}**{power}",
    fraction=inline_fraction,
    root="sqrt({})".format,
    times="*",
)
LATEX = Notation(
    symbol=latex_name,
    power=lambda base, power: f"{base}^{power}" if power < 10 else f"{base}^{{{power}}}",
    fraction=lambda above, below: rf"\frac{{{above.text}}}{{{below.text}}}",
    root=r"\sqrt{{{}}}".format,
    times=" ",
)


def term_words(terms: Sequence[Term], notation: Notation) -> list[str]:
    """The terms, each with its sign: `gm1*R1`, `+ gds2`, `- 2*gm2`."""
    words: list[str] = []
    for coefficient, symbols in terms:
        number = abs(coefficient)
        parts = [str(number)] if number != 1 or not symbols else []
        parts += [_powered(notation.symbol(symbol), power, notation) for symbol, power in symbols]
        words.append(_signed(notation.times.join(parts), coefficient < 0, notation, first=not words))
    return words


def sum_written(terms: Sequence[Term], notation: Notation) -> str:
    """The terms as a sum; empty for none."""
    return " ".join(term_words(terms, notation))


def product_written(number: int, factors: Sequence[Factor], notation: Notation) -> Written:
    """number · factors, for a positive number."""
    numbers = [str(number)] if number != 1 or not factors else []
    if len(factors) == 1 and not numbers and factors[0].power == 1:
        base = factors[0].base
        if isinstance(base, str):
            return Written(notation.symbol(base), SINGLE)
        return Written(sum_written(base, notation), SUM)
    pieces = [factor_written(factor, notation) for factor in factors]
    level = SINGLE if len(numbers) + len(pieces) == 1 else PRODUCT
    return Written(notation.times.join(numbers + pieces), level)


def factor_written(factor: Factor, notation: Notation) -> str:
    """A factor within a product: a sum is in brackets."""
    if isinstance(factor.base, str):
        return _powered(notation.symbol(factor.base), factor.power, notation)
    return _powered(f"({sum_written(factor.base, notation)})", factor.power, notation)


def parts_written(shape: Product, notation: Notation) -> tuple[Written, Written | None]:
    """What stands above and below the bar, without the sign; no second part where it is 1."""
    above = product_written(abs(shape.coefficient.numerator), shape.numerator, notation)
    if shape.coefficient.denominator == 1 and not shape.denominator:
        return above, None
    return above, product_written(shape.coefficient.denominator, shape.denominator, notation)


def shape_written(shape: Product, notation: Notation) -> str:
    """The shape on one line."""
    piece = _unsigned(shape, notation)
    if shape.coefficient < 0:
        return notation.minus + bracketed(piece, PRODUCT)
    return piece.text


def root_parts(root: Root, notation: Notation) -> tuple[Written, Written | None]:
    """What stands above and below the bar of a quadratic root; no second part where it is 1."""
    square, rest = root.under_root
    inside = _shapes_sum([square, rest], notation)
    # A root of nothing but zero is left as sqrt(0): the caller asked for a root where there is a double one.
    radical = notation.root(inside or "0")
    ahead = _shapes_sum([-root.b], notation)
    sign = "+" if root.branch > 0 else notation.minus
    if ahead:
        above = Written(f"{ahead} {sign} {radical}", SUM)
    else:
        above = Written(radical if root.branch > 0 else notation.minus + radical, PRODUCT)
    below = _unsigned(root.below, notation)
    if root.below.coefficient < 0:
        below = Written(notation.minus + bracketed(below, PRODUCT), SUM)
    return above, None if below.text == "1" else below


def root_written(root: Root, notation: Notation) -> str:
    """The quadratic root on one line."""
    above, below = root_parts(root, notation)
    return above.text if below is None else notation.fraction(above, below)


def _unsigned(shape: Product, notation: Notation) -> Written:
    above, below = parts_written(shape, notation)
    return above if below is None else Written(notation.fraction(above, below), PRODUCT)


def _shapes_sum(shapes: Sequence[Product], notation: Notation) -> str:
    """The sum of shapes, zeros left out; empty if nothing is left."""
    text = ""
    for shape in shapes:
        if shape.coefficient == 0:
            continue
        alone = not text and shape.coefficient > 0
        piece = _unsigned(shape, notation)
        word = piece.text if alone else bracketed(piece, PRODUCT)
        signed = _signed(word, shape.coefficient < 0, notation, first=not text)
        text = f"{text} {signed}" if text else signed
    return text


def _powered(base: str, power: int, notation: Notation) -> str:
    return base if power == 1 else notation.power(base, power)


def _signed(text: str, negative: bool, notation: Notation, *, first: bool) -> str:
    if first:
        return notation.minus + text if negative else text
    return f"{notation.minus if negative else '+'} {text}"
