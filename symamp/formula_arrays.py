"""Formulas over numpy arrays: a module below all rooms of the house."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import numpy as np

from symamp.formula_tree import Node, fold


def evaluate_arrays(node: Node, value_of_name: Callable[[str], Any]) -> Any:
    """The value over real floats or arrays that broadcast: 1/0 is infinite, 0/0 and the root of a negative NaN."""
    with np.errstate(all="ignore"):
        return fold(node, _Arrays(value_of_name))


class _Arrays:
    """The formula's algebra; see `symamp.formula_tree.Algebra`."""

    def __init__(self, value_of_name: Callable[[str], Any]) -> None:
        self._value_of_name = value_of_name

    def number(self, value: Fraction, unit: str) -> Any:
        return np.float64(value)

    def pi(self) -> Any:
        return np.float64(math.pi)

    def name(self, text: str) -> Any:
        return np.asarray(self._value_of_name(text), dtype=float)[()]

    def add(self, a: Any, b: Any) -> Any:
        return a + b

    def subtract(self, a: Any, b: Any) -> Any:
        return a - b

    def multiply(self, a: Any, b: Any) -> Any:
        return a * b

    def divide(self, a: Any, b: Any) -> Any:
        return np.divide(a, b)

    def power(self, base: Any, exponent: Fraction) -> Any:
        if exponent.denominator == 1:
            return np.power(base, float(exponent.numerator))
        # C's pow has a value for a root of -inf; here no negative number has one.
        return np.power(np.where(np.less(base, 0), math.nan, base), float(exponent))[()]

    def parallel(self, a: Any, b: Any) -> Any:
        return 1.0 / (1.0 / np.asarray(a) + 1.0 / np.asarray(b))  # right for 0 and infinity too

    def negate(self, a: Any) -> Any:
        return -a

    def call(self, function: str, argument: Any) -> Any:
        return np.abs(argument) if function == "abs" else np.sqrt(argument)
