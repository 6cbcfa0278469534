"""For claims from published closed forms: a stage with its bias, a claim with its verdict worked out by hand, and the
comparison of both with what is judged.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import sympy
from symbolic import same

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.verdict import Judged

Values = dict[str, float]
HOLDS, HOLDS_HERE, FAILS, WRONG = "holds", "holds here", "fails", "wrong"


@dataclass(frozen=True)
class Circuit:
    """The text of a stage without its bias, and its bias: of a device a table, of a part a number."""

    text: str
    bias: Mapping[str, Any]

    def stage(self, *more: str) -> Stage:
        lines = ["[bias]"]
        for label, given in self.bias.items():
            if isinstance(given, dict):
                lines.append(f"{label} = {{ {', '.join(f'{k} = {v}' for k, v in given.items())} }}")
            else:
                lines.append(f"{label} = {given}")
        whole = "\n".join([self.text, *lines, *more])
        return parse_stage(whole.encode(), file=None, folder=Path())

    @property
    def values(self) -> Values:
        """The bias by symbol: gm of M1 is gm1."""
        found: Values = {}
        for label, given in self.bias.items():
            if isinstance(given, dict):
                found.update({f"{name}{label[1:]}": float(value) for name, value in given.items()})
            else:
                found[label] = float(given)
        return found


@dataclass(frozen=True)
class Row:
    """A claim and what is to be found: the verdict, the error, what is left over, words of the sentence why.

    `error` by hand: in symbols F/E − 1 of a rational quantity, or from values a number (of roots and crossings,
    which have no such formula). `left` by hand: the tacit ratios, whole, None where they are not looked at.
    """

    source: str
    about: str
    formula: str
    verdict: str
    error: Any = 0
    left: tuple[Any, ...] | None = ()
    says: tuple[str, ...] = ()
    within: str = "10 %"

    def __str__(self) -> str:
        return f"{self.about} = {self.formula}"


def judge(stage: Stage, row: Row) -> Judged:
    """The verdict on one claim, its proofs left out."""
    claims = [claim_of(stage, str(row), row.within)]
    return make_check(stage, claims=claims, prove=False, points=64).claims[0]


def of_shape(shape: Any) -> Any:
    """A shape in SymPy's terms, its π a number."""
    return shape.sympy(frozenset()).subs(sympy.Symbol("pi", positive=True), sympy.pi)


def compare(circuit: Circuit, row: Row, *more: str) -> Judged:
    """Holds a claim's judgement against the row."""
    found = judge(circuit.stage(*more), row)
    assert found.verdict == row.verdict, found.why
    for words in row.says:
        assert words in found.why, found.why
    _compare_error(circuit.values, row, found)
    if row.left is not None:
        left = [of_shape(c.ratio) for c in found.conditions]
        assert len(left) == len(row.left), left
        for expected in row.left:
            assert sum(same(each, expected) for each in left) == 1, (expected, left)
    if row.verdict == HOLDS and row.error == 0:
        assert found.conditions == ()
    return found


def _compare_error(values: Values, row: Row, found: Judged) -> None:
    if row.error is None:
        assert found.error is None
        return
    if isinstance(row.error, Callable):  # type: ignore[arg-type]
        expected = row.error(values)
    else:
        symbolic = sympy.sympify(row.error)
        expected = float(symbolic.subs({sympy.Symbol(n, positive=True): v for n, v in values.items()}))
        if found.error_formula is not None and not found.absolute:
            assert same(of_shape(found.error_formula.shape), symbolic), found.error_formula.shape.text()
        else:
            assert expected == 0 or found.absolute, "an error in symbols is compared in symbols"
    assert found.error is not None
    assert math.isclose(abs(found.error), abs(expected), rel_tol=1e-8, abs_tol=1e-11), (found.error, expected)
    if not isinstance(found.error, complex) and abs(expected) > 1e-11:
        assert (found.error > 0) == (expected > 0), (found.error, expected)
