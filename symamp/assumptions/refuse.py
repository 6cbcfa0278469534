"""What cannot stand together for some response: opposite limits, two values of one symbol, opposite dominance."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import combinations

from symamp.assumptions.dominance import pool
from symamp.assumptions.merge import Contradiction, contradiction, pooled
from symamp.assumptions.record import Assumption
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import locate
from symamp.errors import StageError

_REMEDY = "keep one of them, or limit each to its responses with for = [...]"


def refuse_contradictions(stage: Stage, assumptions: Sequence[Assumption]) -> None:
    """Raise StageError, at the later one in the file, for assumptions of one response that cannot stand together."""
    for response in stage.asked:
        together = [a for a in assumptions if a.applies(response)]
        for check in (_check_bands, _check_dominance, lambda found: _check_pooled(stage, found)):
            _placed(stage, assumptions, together, check)


def _placed(
    stage: Stage,
    assumptions: Sequence[Assumption],
    together: Sequence[Assumption],
    check: Callable[[Sequence[Assumption]], None],
) -> None:
    """Run a check; its error is put at the last assumption that it concerns."""
    try:
        check(together)
    except StageError as error:
        known = error.assumptions if isinstance(error, Contradiction) else _least(together, check)
        index = max(i for i, a in enumerate(assumptions) if a.name in known)
        raise StageError(error.problem, error.remedy, **locate(stage, ("assumption", index))) from None


def _least(together: Sequence[Assumption], check: Callable[[Sequence[Assumption]], None]) -> tuple[str, ...]:
    """The names of a smallest set of assumptions that the check refuses."""
    for size in (1, 2):
        for found in combinations(together, size):
            try:
                check(found)
            except StageError:
                return tuple(a.name for a in found)
    return tuple(a.name for a in together)


def _check_bands(together: Sequence[Assumption]) -> None:
    bands = [a.name for a in together if a.band is not None]
    others = [a.name for a in together if a.band is None and (a.dominant_pole or a.poles_far_apart)]
    both = [a.name for a in together if a.band is not None and (a.dominant_pole or a.poles_far_apart)]
    if both or len(bands) > 1 or (bands and others):
        found = both[:1] or [bands[0], *bands[1:2], *others][:2]
        why = "a band keeps one power of s of numerator and denominator, so nothing else can be said of roots"
        raise contradiction(found, why, _REMEDY)


def _check_dominance(together: Sequence[Assumption]) -> None:
    pool([pair for a in together for pair in a.pairs])


def _check_pooled(stage: Stage, together: Sequence[Assumption]) -> None:
    """The same after step 1, which makes symbols one."""
    pool(pooled(stage, together).pairs)
