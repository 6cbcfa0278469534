"""Formulas that a user writes, read into a small tree: a module below all rooms of the house.

The grammar: `+ - * /`, powers `^` or `**`, brackets, `||` for "in parallel", `sqrt`, `abs`, `pi`, names, and
numbers with SI prefix and unit. The parser climbs precedences (Pratt, "Top down operator precedence", 1973).
Text that a user wrote goes nowhere but here: the tree is all that the rest of the program ever evaluates.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from symamp.errors import ReadError
from symamp.formula_algebras import (
    Dimension,
    NotConstant,
    constant,
    dimension_of,
    dimension_of_unit,
    evaluate,
    write,
)
from symamp.formula_scan import Token, error_at, scan
from symamp.formula_tree import (
    Algebra,
    Binary,
    Call,
    Name,
    Negate,
    Node,
    Number,
    Parallel,
    Pi,
    Power,
    fold,
    names,
    operands,
    walk,
)
from symamp.values import quoted

__all__ = [
    "FUNCTIONS",
    "Algebra",
    "Binary",
    "Call",
    "Dimension",
    "Name",
    "Negate",
    "Node",
    "Number",
    "Parallel",
    "Pi",
    "Power",
    "dimension_of",
    "dimension_of_unit",
    "error_at",
    "evaluate",
    "fold",
    "names",
    "parse",
    "parse_tokens",
    "walk",
    "write",
]

FUNCTIONS = ("sqrt", "abs")
LONGEST = 20_000  # characters
DEEPEST = 64  # brackets and signs within one another
LARGEST_EXPONENT = 64


def parse(text: str) -> Node:
    """The tree of a formula. Raises ReadError, with the place shown by a caret, where it cannot be read."""
    if not isinstance(text, str):
        raise ReadError(f"{quoted(text)} is no formula", 'write it as text, such as "-gm1*(ro1 || RL)"')
    if len(text) > LONGEST:
        raise ReadError(f"a formula of {len(text)} characters", f"at most {LONGEST} can be read")
    return parse_tokens(text, list(scan(text)))


def parse_tokens(text: str, tokens: Sequence[Token]) -> Node:
    """The tree of what has been scanned already; errors show `text`, to which the tokens' columns belong."""
    return _Parser(text, tokens).whole()


_BINDING = {"+": 1, "-": 1, "*": 2, "/": 2, "||": 3}


@dataclass
class _Level:
    """What stands in one pair of brackets: where `||` was met, and where any other operator was."""

    parallel: int = 0
    other: str = ""


class _Parser:
    def __init__(self, text: str, tokens: Sequence[Token]) -> None:
        self.text = text
        self.tokens = tokens
        self.position = 0
        self.depth = 0
        self.level = _Level()

    def whole(self) -> Node:
        if self.next.what == "end":
            raise error_at(self.text, 1, "the formula is empty", 'write one, such as "-gm1*(ro1 || RL)"')
        node = self.climb(0)
        if self.next.what != "end":
            raise self.unexpected()
        return node

    @property
    def next(self) -> Token:
        return self.tokens[self.position]

    def take(self) -> Token:
        token = self.next
        self.position += 1
        return token

    def deeper(self, step: int) -> None:
        self.depth += step
        if self.depth > DEEPEST:
            raise error_at(
                self.text, self.next.column, f"more than {DEEPEST} brackets or signs within one another"
            )

    def climb(self, least: int) -> Node:
        node = self.signed()
        while self.next.what == "op" and _BINDING.get(self.next.text, -1) >= least:
            token = self.take()
            self.mind_mixing(token)
            right = self.climb(_BINDING[token.text] + 1)
            node = Parallel(node, right) if token.text == "||" else Binary(token.text, node, right)
        return node

    def mind_mixing(self, token: Token) -> None:
        """`a*b || c` reads two ways, so `||` shares its brackets with no other operator."""
        if token.text == "||":
            self.level.parallel = self.level.parallel or token.column
        else:
            self.level.other = self.level.other or token.text
        if self.level.parallel and self.level.other:
            sign = token.text if token.text != "||" else self.level.other
            raise error_at(
                self.text,
                token.column,
                f"|| beside {sign} reads two ways",
                "put brackets around what is in parallel, such as a*(b || c)",
            )

    def signed(self) -> Node:
        if self.next.what == "op" and self.next.text in "+-":
            token = self.take()
            self.mind_mixing(token)
            self.deeper(1)
            node = self.signed()
            self.deeper(-1)
            return Negate(node) if token.text == "-" else node
        return self.power()

    def power(self) -> Node:
        base = self.atom()
        if self.next.what != "op" or self.next.text not in ("^", "**"):
            return base
        column = self.take().column
        self.deeper(1)
        exponent = self.exponent(column)
        self.deeper(-1)
        node = Power(base, exponent)
        if _growth(node) > LARGEST_EXPONENT:
            raise error_at(
                self.text,
                column,
                "the powers within one another are too high",
                f"at most {LARGEST_EXPONENT} in all",
            )
        return node

    def exponent(self, column: int) -> Fraction:
        sign = 1
        while self.next.what == "op" and self.next.text in "+-":
            sign = -sign if self.take().text == "-" else sign
        try:
            value = sign * constant(self.power())
        except NotConstant:
            raise error_at(
                self.text, column, "the exponent is no pure number", "write one, such as 2, -1 or (1/2)"
            ) from None
        if abs(value) > LARGEST_EXPONENT or value.denominator > LARGEST_EXPONENT:
            raise error_at(
                self.text, column, "the exponent is too large", f"at most {LARGEST_EXPONENT} in magnitude"
            )
        return value

    def atom(self) -> Node:
        token = self.next
        if token.number is not None:
            self.take()
            return token.number
        if token.what == "name":
            return self.named()
        if token.text == "(":
            return self.bracketed()
        raise self.unexpected()

    def named(self) -> Node:
        token = self.take()
        if token.text in FUNCTIONS:
            if self.next.text != "(":
                raise error_at(
                    self.text, self.next.column, f"{token.text} needs brackets", f"write {token.text}(...)"
                )
            return Call(token.text, self.bracketed())
        if self.next.text == "(":
            raise error_at(
                self.text,
                token.column,
                f"{quoted(token.text)} is no function",
                f"{' and '.join(FUNCTIONS)} are; a product needs *",
            )
        return Pi() if token.text == "pi" else Name(token.text, token.column)

    def bracketed(self) -> Node:
        opened = self.take()
        outer, self.level = self.level, _Level()
        self.deeper(1)
        node = self.climb(0)
        self.deeper(-1)
        self.level = outer
        if self.next.text != ")":
            if self.next.what == "end":
                raise error_at(self.text, opened.column, "this bracket is not closed", "add )")
            raise self.unexpected()
        self.take()
        return node

    def unexpected(self) -> ReadError:
        token = self.next
        before = self.tokens[self.position - 1] if self.position else None
        if token.what == "end":
            return error_at(
                self.text, token.column, "the formula ends too early", "a name or a number is missing"
            )
        if token.text == ")" and before is not None and (before.what != "op" or before.text == ")"):
            return error_at(self.text, token.column, "a bracket closes that was not opened", "remove )")
        if token.what != "op" or token.text == "(":
            return error_at(
                self.text, token.column, f"an operator is missing before {quoted(token.text)}", "add *"
            )
        return error_at(
            self.text, token.column, f"{token.text} cannot stand here", "a name or a number is missing"
        )


def _growth(node: Node) -> Fraction:
    """The product of the exponents above 1 along the steepest path, which bounds what a power grows to."""
    stack, most = [(node, Fraction(1))], Fraction(1)
    while stack:
        step, power = stack.pop()
        most = max(most, power)
        factor = max(abs(step.exponent), Fraction(1)) if isinstance(step, Power) else Fraction(1)
        stack.extend((operand, power * factor) for operand in operands(step))
    return most
