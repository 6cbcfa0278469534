"""The error of a claim over two symbols (room: judge): a grid of values about the bias point."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.circuit.labels import unit_of
from symamp.circuit.near import propose
from symamp.circuit.stage import Follow, Stage
from symamp.errors import StageError
from symamp.judge.claim import Claim
from symamp.judge.claim_errors import each_at
from symamp.judge.examined import Examined

STEPS = 161
_DECADE = 10.0


@dataclass(frozen=True)
class Axis:
    """A symbol or alias, the values it takes (geometric where positive), and its bias value."""

    name: str
    unit: str
    values: np.ndarray
    bias: float


@dataclass(frozen=True)
class ErrorMap:
    """`error[j, i]` is the claim's error at x.values[i], y.values[j]: a ratio, or dB or degrees; of a complex error
    the modulus; nan where there is no value."""

    claim: Claim
    x: Axis
    y: Axis
    error: np.ndarray
    modulus: bool


def error_map(claim: Examined, x: str, y: str, steps: int = STEPS) -> ErrorMap:
    """The map over two symbols or aliases: over the sides of the span that they have, else a decade either way.

    Followers of the two keep their ratio; all else stays at the bias point. Raises StageError for an unknown
    name, for two names of one symbol or of one that follows the other, for one without a positive bias value and
    no side, and for a wrong claim.
    """
    stage = claim.known.stage
    if claim.mismatch:
        raise StageError(f"the claim is wrong: {claim.mismatch}", "there is no error to map", key="--map")
    axes = [_axis(stage, name, steps) for name in (x, y)]
    _apart(stage, x, y)
    grid = np.meshgrid(axes[0].values, axes[1].values)
    given = {axis.name: values.ravel() for axis, values in zip(axes, grid, strict=True)}
    try:
        values = _with_followers(stage, claim.exact.with_values(given))
    except StageError as error:
        raise error.at(key="--map") from None
    ((_, figures),) = each_at([claim.table], values, steps * steps)
    found = figures[0]
    modulus = bool(np.iscomplexobj(found) and (np.nan_to_num(found).imag != 0).any())
    shown = np.asarray(np.abs(found) if modulus else found.real, dtype=float)
    return ErrorMap(claim.claim, axes[0], axes[1], shown.reshape(steps, steps), modulus)


def _apart(stage: Stage, x: str, y: str) -> None:
    """Raises StageError for two axes that cannot move each by itself."""
    if x == y:
        raise StageError(f"both axes are {x}", "name two symbols, such as --map gm1 gds1", key="--map")
    leader = {follow.symbol: follow.leader for follow in stage.span.follows}
    for one, other in ((x, y), (y, x)):
        moved = set(stage.aliases.get(other, {other: 1}))
        for symbol in stage.aliases.get(one, {one: 1}):
            above = symbol
            while above in leader:
                above = leader[above]
                if above in moved:
                    raise StageError(
                        f"{symbol} follows {above}, so {x} and {y} do not move each by itself",
                        "map two symbols of which neither follows the other",
                        key="--map",
                    )


def _axis(stage: Stage, name: str, steps: int) -> Axis:
    known = [*stage.symbols, *stage.aliases]
    if name not in known:
        raise StageError(f"there is no symbol {name!r}", propose(name, known, "symbols"), key="--map")
    bias = 1.0
    for symbol, power in stage.aliases.get(name, {name: 1}).items():
        if name in stage.symbols:
            power = 1
        bias *= float(stage.bias[symbol if name not in stage.symbols else name]) ** power
    low, high = _ends(stage, name, bias)
    values = np.geomspace(low, high, steps) if low > 0 else np.linspace(low, high, steps)
    return Axis(name, unit_of(stage, name), values, bias)


def _ends(stage: Stage, name: str, bias: float) -> tuple[float, float]:
    for side in stage.span.sides:
        if side.name == name and side.low < side.high:
            return float(side.low), float(side.high)
        if side.symbol == name and side.exponent == 1 and not side.times and side.low < side.high:
            return float(side.low), float(side.high)
    table = stage.span.table
    if table is not None and name in table.columns:
        column = [float(row[table.columns.index(name)]) for row in table.rows]
        if min(column) < max(column):
            return min(column), max(column)
    if bias <= 0:
        raise StageError(
            f"{name} is {bias:g} at the bias point, so a decade about it means nothing",
            f'give it a side, such as [span] {name} = ["…", "…"]',
            key="--map",
        )
    return bias / _DECADE, bias * _DECADE


def _with_followers(stage: Stage, values: Mapping[str, Any]) -> dict[str, Any]:
    """Symbols that follow a leader take their ratio of it."""
    found = dict(values)
    for follow in _leaders_first(stage):
        found[follow.symbol] = found[follow.leader] * float(follow.ratio)
    return found


def _leaders_first(stage: Stage) -> list[Follow]:
    waiting = {follow.symbol: follow for follow in stage.span.follows}
    order: list[Follow] = []
    while waiting:
        ready = [f for f in waiting.values() if f.leader not in waiting]
        for follow in ready:
            del waiting[follow.symbol]
        order += ready
    return order
