"""Exact: what the product terms of a diagram add up to, at many bias points at once.

Each product stands once, so sums of passive networks have no subtractions at all, and the sum of the terms'
magnitudes is had in the same way. Every node's values carry a power of two of their own: neither a thousand
conductances nor a hundred capacitances make a product vanish.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import frexp
from typing import Any

import numpy as np

from symamp.exact.largest_diagram import ProductDiagram
from symamp.exact.largest_elements import Choice, Element

# An element's value: its parts without s and with s, each None, a number or an array over points.
Weight = tuple[Any, Any]
_BLOCK = 256  # points at once: the values of a node then stay in the processor's cache


@dataclass(frozen=True)
class Sums:
    """Coefficients of σ = s/omega from the power `low` up, at P points: `mantissa` (k, P) times 2**`exponent`."""

    low: int
    mantissa: np.ndarray
    exponent: int

    def coefficient(self, power: int) -> np.ndarray:
        """The mantissas of one power of σ, shape (P,)."""
        row = power - self.low
        if 0 <= row < self.mantissa.shape[0]:
            return np.asarray(self.mantissa[row])
        return np.zeros(self.mantissa.shape[1])


def weights_of(items: Sequence[Element], values: Mapping[str, Any], omega: float = 1.0) -> list[Weight]:
    """The value of each element at the values of the symbols, scalars or arrays."""
    found = []
    for element in items:
        parts: list[Any] = [None, None]
        for choice in element.choices:
            value = choice_value(choice, values) * (omega if choice.s_power else 1.0)
            before = parts[choice.s_power]
            parts[choice.s_power] = value if before is None else before + value
        found.append((parts[0], parts[1]))
    return found


def choice_value(choice: Choice, values: Mapping[str, Any]) -> Any:
    """coefficient · symbol**±1 without its power of s."""
    if choice.symbol is None:
        return float(choice.coefficient)
    value = values[choice.symbol]
    return float(choice.coefficient) * value if choice.power > 0 else float(choice.coefficient) / value


def magnitudes_of(items: Sequence[Element], values: Mapping[str, Any], omega: float = 1.0) -> list[Weight]:
    """The same with each choice by its magnitude: under them `sums` adds up the magnitudes of all products."""
    positive = [
        replace(e, choices=tuple(replace(c, coefficient=abs(c.coefficient)) for c in e.choices))
        for e in items
    ]
    return weights_of(positive, {name: np.abs(value) for name, value in values.items()}, omega)


def sums(
    diagram: ProductDiagram,
    weights: Sequence[Weight],
    points: int,
    *,
    highest: int | None = None,
    kept_out: Mapping[int, np.ndarray | float] | None = None,
    signed: bool = True,
) -> Sums:
    """Coefficients of σ up to the power `highest`, all where None.

    `kept_out` maps an element's place to 1 or 0 (a number or an array over points): 0 where it must be taken.
    With `signed` False factors count by magnitude.
    """
    last = last_uses(diagram)
    values: dict[int, tuple[int, np.ndarray, int]] = {0: (0, np.ones((1, points)), 0)}
    if not diagram.factor:
        return Sums(0, np.zeros((1, points)), 0)
    for node in range(1, diagram.top + 1):
        k = diagram.element[node]
        parts = []
        out, taken = diagram.out[node], diagram.taken[node]
        if out is not None:
            parts.append((out, (1.0 if kept_out is None else kept_out.get(k, 1.0)), 0))
        for s, weight in enumerate(weights[k]):
            if weight is not None and taken is not None:
                parts.append((taken, weight, s))
        found = _combined(parts, values, points, highest, signed)
        for edge in (out, taken):
            if edge is not None and last[edge[0]] == node:
                values.pop(edge[0], None)
        if found is not None:
            values[node] = found
    if diagram.top not in values:
        return Sums(0, np.zeros((1, points)), 0)
    low, mantissa, exponent = values[diagram.top]
    factor = float(diagram.factor)
    return Sums(low, mantissa * (factor if signed else abs(factor)), exponent)


def _combined(
    parts: Sequence[tuple[tuple[int, Any], Any, int]],
    values: Mapping[int, tuple[int, np.ndarray, int]],
    points: int,
    highest: int | None,
    signed: bool,
) -> tuple[int, np.ndarray, int] | None:
    """Σ factor · weight · σ^s · value of child, brought to one power of two; None where it is nothing."""
    live = []
    for (child, factor), weight, s in parts:
        if child in values and not (isinstance(weight, float) and weight == 0.0):
            low, value, exponent = values[child]
            if highest is None or low + s <= highest:
                live.append((low + s, value, exponent, float(factor if signed else abs(factor)), weight))
    if not live:
        return None
    low = min(part[0] for part in live)
    top = max(part[0] + part[1].shape[0] for part in live)
    if highest is not None:
        top = min(top, highest + 1)
    exponent = max(part[2] for part in live)
    total: np.ndarray | None = None
    for start, value, own, factor, weight in live:
        scale = factor * 2.0 ** (own - exponent)
        multiplier = weight if scale == 1.0 else weight * scale
        used = value[: top - start]
        if total is None and start == low and used.shape[0] == top - low:
            total = used * multiplier
        else:
            if total is None:
                total = np.zeros((top - low, points))
            total[start - low : start - low + used.shape[0]] += used * multiplier
    assert total is not None
    shift = frexp(float(np.abs(total[:, 0]).max()))[1]
    if abs(shift) > 64:
        total *= 2.0**-shift
        exponent += shift
    return low, total, exponent


def last_uses(diagram: ProductDiagram) -> list[int]:
    last = [0] * (diagram.top + 1)
    for node in range(1, diagram.top + 1):
        for edge in (diagram.out[node], diagram.taken[node]):
            if edge is not None:
                last[edge[0]] = node
    return last
