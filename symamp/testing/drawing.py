"""How a bias point is made by choosing from lists of readable values (room: testing).

Who chooses is left open: Hypothesis does for its strategies, and the search for a counterexample does.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from typing import Protocol, TypeVar

from symamp.circuit.labels import select_symbols
from symamp.circuit.stage import Side, Stage
from symamp.testing.bias_point import BiasPoint
from symamp.testing.readable import readable_values
from symamp.testing.sensible import partners_first, sensible_range

Option = TypeVar("Option")

_LOOSE = 1000.0


class Pick(Protocol):
    """Chooses one of several options, of which the first is the simplest."""

    def __call__(self, options: Sequence[Option], /) -> Option: ...


def selected(stage: Stage, symbols: str | Sequence[str] | None) -> frozenset[str]:
    """The symbols that selectors name; all for None. Raises ReadError for an unknown one."""
    if symbols is None:
        return frozenset(stage.symbols)
    texts = [symbols] if isinstance(symbols, str) else symbols
    return frozenset(name for text in texts for name in select_symbols(stage, text))


def span_point(pick: Pick, stage: Stage, chosen: Collection[str]) -> BiasPoint:
    """A point of the span in which the chosen symbols vary; a sensible point around the bias where there is none."""
    if stage.span.table is not None:
        return pick(_rows(stage, chosen))
    base = {name: float(value) for name, value in stage.bias.items()}
    if stage.span.empty:
        return BiasPoint(stage, _drawn(pick, stage, chosen, base))
    return _box_point(pick, stage, chosen, base)


def sensible_point(pick: Pick, stage: Stage) -> BiasPoint:
    """A physically sensible point, whatever the span and the bias say."""
    return BiasPoint(stage, _drawn(pick, stage, stage.symbols, {}))


def loose_point(pick: Pick, stage: Stage, chosen: Collection[str]) -> BiasPoint:
    """A point in which the chosen symbols go three decades up and down, sensible or not, each by itself."""
    values = _drawn(pick, stage, (), {name: float(value) for name, value in stage.bias.items()})
    for name in stage.symbols:
        start = values[name]
        if name in chosen and start:
            low, high = sorted((start / _LOOSE, start * _LOOSE))
            values[name] = pick(readable_values(low, high, start))
    return BiasPoint(stage, values)


def _rows(stage: Stage, chosen: Collection[str]) -> list[BiasPoint]:
    """The rows of the table, those nearest to the bias first."""
    table = stage.span.table
    assert table is not None
    base = {name: float(value) for name, value in stage.bias.items()}
    found: list[BiasPoint] = []
    for row in table.rows:
        cells = {n: float(cell) for n, cell in zip(table.columns, row, strict=True) if n in chosen}
        point = BiasPoint(stage, {**base, **cells})
        if point not in found:
            found.append(point)
    return sorted(found, key=lambda point: len(point.changed))


def _drawn(pick: Pick, stage: Stage, chosen: Collection[str], base: Mapping[str, float]) -> dict[str, float]:
    """Sensible values of the chosen symbols, and `base` (or sensible ones where it has none) for the others."""
    values = dict(base)
    for name in partners_first(stage, stage.symbols):
        if name not in base or name in chosen:
            low, high = sensible_range(stage, stage.symbols[name], values, base)
            values[name] = pick(readable_values(low, high, base.get(name)))
    return values


def _box_point(pick: Pick, stage: Stage, chosen: Collection[str], base: Mapping[str, float]) -> BiasPoint:
    """A point of the box; what neither the span nor the bias sets is sensible."""
    values = _drawn(pick, stage, (), base)
    sides = [side for side in stage.span.sides if side.symbol in chosen]
    leaders = {follow.symbol: follow for follow in stage.span.follows if follow.symbol in chosen}
    picked = [pick(_side_values(side, base)) for side in sides]
    for side, value in zip(sides, picked, strict=True):
        values[side.symbol] = base[side.symbol] if value is None else value**side.exponent

    def followed(name: str) -> float:
        factor = 1.0
        while name in leaders:
            factor *= float(leaders[name].ratio)
            name = leaders[name].leader
        return values[name] * factor

    for side, value in zip(sides, picked, strict=True):
        for name, power in side.times.items():
            if value is not None:
                values[side.symbol] *= followed(name) ** power
            else:  # a side on beta1 that stays at its bias keeps beta1, and not gpi1, where gm1 moves
                values[side.symbol] *= (followed(name) / base[name]) ** power
    for name in leaders:
        values[name] = followed(name)
    return BiasPoint(stage, values)


def _side_values(side: Side, base: Mapping[str, float]) -> list[float | None]:
    """What a side may be set to, its bias first; None is the bias value itself, to the last digit."""
    low, high = float(side.low), float(side.high)
    start: float | None = None
    if side.symbol in base and all(name in base for name in side.times):
        start = base[side.symbol]
        for name, power in side.times.items():
            start /= base[name] ** power
        start = start**side.exponent  # the exponent is 1 or −1
    found: list[float | None] = list(readable_values(low, high, start))
    return [None, *found[1:]] if start is not None and found[0] == start else found
