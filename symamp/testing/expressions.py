"""What may be compared: formulas, SymPy expressions, quantities, each as the tree of a formula (room: testing)."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from functools import reduce
from typing import Any

from symamp.circuit.formulas import read_formula
from symamp.circuit.labels import unit_of, unknown_symbol
from symamp.circuit.stage import Stage
from symamp.errors import ReadError, StageError
from symamp.exact.response import QuantityValue
from symamp.exact.shape import QuadraticRoot, Shape
from symamp.formula import (
    Binary,
    Call,
    Dimension,
    Name,
    Node,
    Number,
    Pi,
    Power,
    dimension_of,
    names,
    parse,
    write,
)
from symamp.values import quoted, read_value

S = "s"
_WAYS = "write a formula as text, or pass a SymPy expression or a response's quantity"


def tree_of(stage: Stage, expression: Any) -> Node:
    """The tree of an expression, all names in it symbols and aliases of the stage, or s.

    Raises ReadError for text that cannot be read and for unknown names, StageError for what is no expression.
    """
    if isinstance(expression, Node):
        return _known(stage, expression)
    if isinstance(expression, str):
        return _read(stage, expression)
    if isinstance(expression, int | float | Fraction) and not isinstance(expression, bool):
        value = expression if isinstance(expression, Fraction) else read_value(expression, "")
        return Number(value)
    if isinstance(expression, QuantityValue):
        if expression.text is None:
            raise StageError(f"{expression.quantity} has no formula", _WAYS)
        return parse(expression.text)
    if isinstance(expression, Shape | QuadraticRoot):
        return parse(expression.text())
    if type(expression).__module__.partition(".")[0] == "sympy":
        return _known(stage, _of_sympy(expression))
    raise StageError(f"{quoted(expression)} is no expression", _WAYS)


def text_of(expression: Any, node: Node) -> str:
    """An expression as the one who wrote it will know it again."""
    return expression.strip() if isinstance(expression, str) else write(node)


def dimension_in(stage: Stage, node: Node) -> Dimension:
    """The dimension of a tree. Raises ReadError where it joins unlike units."""
    return dimension_of(node, lambda name: "rad/s" if name == S else unit_of(stage, name))


def unit_words(dimension: Dimension) -> str:
    """A dimension as a reader says it: "in ohm", "a pure number"."""
    return f"in {dimension.unit}" if dimension.unit else "a pure number"


def _read(stage: Stage, text: str) -> Node:
    """A formula as a claim may have it, in which s may stand beside the symbols and aliases."""
    return read_formula(replace(stage, aliases={**stage.aliases, S: {}}), text)


def _known(stage: Stage, node: Node) -> Node:
    for name in names(node):
        if name != S and name not in stage.symbols and name not in stage.aliases:
            raise unknown_symbol(stage, name, selectors=False)
    return node


def _of_sympy(expression: Any) -> Node:
    """A SymPy expression as a tree, by its structure and without a text between."""
    import sympy

    if expression.is_Symbol:
        return Name(str(expression.name))
    if expression == sympy.pi:
        return Pi()
    if expression.is_Rational:
        return Number(Fraction(int(expression.p), int(expression.q)))
    if expression.is_Float:
        return Number(read_value(float(expression), ""))
    if expression.is_Add:
        return _joined("+", expression.args)
    if expression.is_Mul:
        return _joined("*", expression.args)
    if expression.is_Pow and expression.exp.is_Rational:
        return Power(_of_sympy(expression.base), Fraction(int(expression.exp.p), int(expression.exp.q)))
    if isinstance(expression, sympy.Abs):
        return Call("abs", _of_sympy(expression.args[0]))
    raise ReadError(
        f"{quoted(str(expression))} is nothing that a formula holds",
        "sums, products, powers, sqrt and Abs are",
    )


def _joined(sign: str, parts: Any) -> Node:
    def join(a: Node, b: Node) -> Node:
        return Binary(sign, a, b)

    return reduce(join, map(_of_sympy, parts))
