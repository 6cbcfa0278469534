"""Exact: both sides of a nested response as diagrams of their products."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

from symamp.exact.forms import Nested
from symamp.exact.graded import row_shifts
from symamp.exact.largest_diagram import ProductDiagram, diagram_of, of_order
from symamp.exact.largest_elements import Choice, Element, Elements, Side, elements_of, split_by_order, up_to

SIDES: tuple[Side, Side] = ("numerator", "denominator")
TO_ZERO, TO_INFINITY = 1, -1  # the power of t with which a symbol goes to its limit, as elsewhere


@dataclass(frozen=True)
class Products:
    """The products of the coefficients of s up to the power `highest`, with symbols in `limits` at their limits."""

    numerator: ProductDiagram
    denominator: ProductDiagram
    highest: int
    limits: Mapping[str, int] = field(default_factory=dict)

    def side(self, name: Side) -> ProductDiagram:
        """The diagram of a side."""
        return self.numerator if name == "numerator" else self.denominator

    @cached_property
    def places(self) -> dict[str, list[tuple[Side, int, int]]]:
        """For each symbol where it stands: side, element, choice."""
        found: dict[str, list[tuple[Side, int, int]]] = {}
        for side in SIDES:
            for k, element in enumerate(self.side(side).items):
                for i, choice in enumerate(element.choices):
                    if choice.symbol is not None:
                        found.setdefault(choice.symbol, []).append((side, k, i))
        return found


def products_of(
    nested: Nested,
    highest: int,
    *,
    rename: Mapping[str, str] | None = None,
    limits: Mapping[str, int] | None = None,
) -> Products:
    """The products of a nested response's coefficients of s up to the power `highest`, as they come from the graph.

    `rename` makes symbols one with others. `limits` takes symbols to zero (1) or to infinity (−1), one after another:
    one that grows without bound is in every product. TooLargeError where a diagram grows too large.
    """
    made = [side_diagram(nested, side, highest, rename, limits) for side in SIDES]
    return Products(made[0], made[1], highest, dict(limits or {}))


def side_diagram(
    nested: Nested,
    side: Side,
    highest: int,
    rename: Mapping[str, str] | None = None,
    limits: Mapping[str, int] | None = None,
) -> ProductDiagram:
    """The diagram of one side; where the form takes symbols to a limit together, of its leading products alone."""
    elements = up_to(elements_of(nested.graph, side, rename), highest)
    orders: list[int] | None = None
    if nested.limits:
        elements, orders = split_by_order(elements, nested.limits)
    items: list[Element] = []
    kept_orders: list[int] = []
    forced = []
    for k, element in enumerate(elements.items):
        held = [c for c in element.choices if sense(c, limits or {}) < 0]
        left = held or [c for c in element.choices if sense(c, limits or {}) == 0]
        if held:
            forced.append(len(items))
        if left:
            items.append(Element(element.u, element.v, tuple(left)))
            kept_orders.append(orders[k] if orders else 0)
    diagram = diagram_of(Elements(elements.size, tuple(items), elements.factor), forced)
    if orders is None:
        return diagram
    valuation = nested.valuation[0 if side == "numerator" else 1]
    return of_order(diagram, kept_orders, valuation - sum(row_shifts(nested.graph, nested.limits).values()))


def sense(choice: Choice, limits: Mapping[str, int]) -> int:
    """1 where a choice's value goes to zero, −1 where it grows without bound, 0 where it stays."""
    return limits.get(choice.symbol, 0) * choice.power if choice.symbol is not None else 0
