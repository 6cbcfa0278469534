"""Shapes as SymPy expressions (room: exact), built from their symbols and never from text.

Imported only where a SymPy expression is asked for, because SymPy takes half a second to load.
"""

from __future__ import annotations

from collections.abc import Sequence

import sympy

from symamp.exact.terms import Factor, Product, Root, Term


def symbol_sympy(name: str, negative_ok: frozenset[str] = frozenset()) -> sympy.Symbol:
    """The symbol: positive; real where `negative_ok` names it; complex where it is s; pi is the number."""
    if name == "s":
        return sympy.Symbol(name)
    if name == "pi":
        return sympy.pi
    return sympy.Symbol(name, real=True) if name in negative_ok else sympy.Symbol(name, positive=True)


def shape_sympy(shape: Product, negative_ok: frozenset[str]) -> sympy.Expr:
    """coefficient · numerator / denominator, the factors as they are."""
    above = [_factor(factor, 1, negative_ok) for factor in shape.numerator]
    below = [_factor(factor, -1, negative_ok) for factor in shape.denominator]
    ratio = sympy.Rational(shape.coefficient.numerator, shape.coefficient.denominator)
    return sympy.Mul(ratio, *above, *below)


def root_sympy(root: Root, negative_ok: frozenset[str]) -> sympy.Expr:
    """(−b ± sqrt(b² − 4·a·c))/(2·a)."""
    a, b, c = (shape_sympy(each, negative_ok) for each in (root.a, root.b, root.c))
    return (-b + root.branch * sympy.sqrt(b**2 - 4 * a * c)) / (2 * a)


def sum_sympy(terms: Sequence[Term], negative_ok: frozenset[str]) -> sympy.Expr:
    """A sum of terms."""
    symbols: dict[str, sympy.Symbol] = {}
    products = []
    for coefficient, powers in terms:
        factors = []
        for name, power in powers:
            symbol = symbols.setdefault(name, symbol_sympy(name, negative_ok))
            factors.append(sympy.Pow(symbol, power))
        products.append(sympy.Mul(sympy.Integer(coefficient), *factors))
    return sympy.Add(*products)


def _factor(factor: Factor, sign: int, negative_ok: frozenset[str]) -> sympy.Expr:
    if isinstance(factor.base, str):
        base = symbol_sympy(factor.base, negative_ok)
    else:
        base = sum_sympy(factor.base, negative_ok)
    return sympy.Pow(base, sign * factor.power)
