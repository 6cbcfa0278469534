"""For closed forms: stages from their text, responses as SymPy expressions, and when two of these are one."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import sympy

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.exact.derive import derive
from symamp.exact.response import Response

s = sympy.Symbol("s")

# Formulas do not depend on the bias; it says which parameters a device has.
_SOME_VALUE = {"gm": 5e-3, "gmb": 1e-3, "gds": 2e-4, "gpi": 1e-4, "go": 1e-5}
_SOME_CAPACITANCE = 1e-13


def symbols(names: str) -> Any:
    """Positive symbols, as the stage's own are."""
    return sympy.symbols(names, positive=True)


def parallel(*impedances: Any) -> Any:
    """The impedance of several side by side."""
    return 1 / sum(1 / each for each in impedances)


def stage_from(text: str, **parameters: str) -> Stage:
    """The stage of that text, with devices that have these parameters: M1="gm gds cgs"."""
    bias = ["[bias]"]
    for label, names in parameters.items():
        given = ", ".join(f"{name} = {_SOME_VALUE.get(name, _SOME_CAPACITANCE)}" for name in names.split())
        bias.append(f"{label} = {{ {given} }}")
    whole = "\n".join([text, *(bias if parameters else [])])
    return parse_stage(whole.encode(), file=None, folder=Path())


def exact(stage: Stage, name: str) -> Response:
    """The exact response of that name."""
    return derive(stage, stage.asked[name])


def assumed(stage: Stage, name: str) -> Response:
    """The response under all of the stage's assumptions."""
    made = Approximator(exact(stage, name)).under(read_assumptions(stage))
    assert made.response is not None, made.why
    return made.response


def expression(response: Response) -> Any:
    """numerator(s)/denominator(s)."""
    above, below = response.numerator, response.denominator
    assert above is not None
    assert below is not None
    return _in_s(above) / _in_s(below)


def _in_s(coefficients: list[Any]) -> Any:
    return sum(c * s**k for k, c in enumerate(coefficients))


def coefficients(response: Response) -> tuple[Any, list[Any]]:
    """N(s) and [1, b1, b2, …], both over b0."""
    above, below = response.numerator, response.denominator
    assert above is not None
    assert below is not None
    return _in_s(above) / below[0], [c / below[0] for c in below]


def formula(response: Response, quantity: str) -> Any:
    """A quantity's formula."""
    found = response.quantity(quantity).formula
    assert found is not None, quantity
    return found


def same(found: Any, expected: Any) -> bool:
    """Whether two rational functions are one: their cross products expand to the same polynomial."""
    a, b = (sympy.fraction(sympy.together(each)) for each in (found, expected))
    return sympy.expand(a[0] * b[1] - b[0] * a[1]) == 0
