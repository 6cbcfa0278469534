"""Roots without a partner: lost ones of the exact response, new ones of the approximate (room: judge)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from symamp.exact.response import Response
from symamp.judge.pairing import left_over


@dataclass(frozen=True)
class LostRoot:
    """A root without a partner: its name in the response it belongs to, and its frequency in Hz."""

    name: str
    hz: float


def lost_and_new(
    exact: Response, approximate: Response, kind: str
) -> tuple[tuple[LostRoot, ...], tuple[LostRoot, ...]]:
    """Lost and new poles ("p") or zeros ("z") at the bias point."""
    mine, own = ((r.poles() if kind == "p" else r.zeros()) for r in (exact, approximate))
    lost, new = left_over(np.array(mine, dtype=complex), np.array(own, dtype=complex))
    return _named(kind, lost, mine), _named(kind, new, own)


def _named(kind: str, roots: Sequence[complex], among: Sequence[complex]) -> tuple[LostRoot, ...]:
    """Each with its index, those of a multiple root one after the other."""
    left = list(enumerate(among, start=1))
    named = []
    for root in roots:
        index, _ = found = next(pair for pair in left if pair[1] == root)
        left.remove(found)
        named.append(LostRoot(f"{kind}{index}", abs(root) / (2 * np.pi)))
    return tuple(named)
