"""The other side of a second opinion: node voltages by lcapy, in a process of its own.

Reads one JSON object from standard input, {"networks": [{"elements": [...], "read": [node, …]}, …]}, and
answers with {"answers": [...]}: for each network either {"voltages": [[numerator, denominator], …]}, rational
coefficients of s ascending as text, or {"error": words}; or, where lcapy is missing, {"missing": words}.

lcapy evaluates the text it is given. So the text is made here, of whole numbers and fractions alone: an
element is {"what": a key of `_SHAPES`, "nodes": [int, …], "value": "p/q", "control": number of an element}.
"""

from __future__ import annotations

import contextlib
import json
import sys
import warnings
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

# What an element is to lcapy: how many nodes it takes, and whether it reads the current of another element.
_SHAPES = {
    "R": (2, False),
    "C": (2, False),
    "L": (2, False),
    "V": (2, False),
    "I": (2, False),
    "G": (4, False),
    "E": (4, False),
    "F": (2, True),
    "H": (2, True),
    "TF": (4, False),
}
_SOURCES = ("V", "I")


def netlist_text(elements: Sequence[Mapping[str, Any]]) -> str:
    """The netlist of numbered elements. Raises ValueError or KeyError for an element of any other form."""
    lines = []
    for number, element in enumerate(elements):
        what = element["what"]
        if what not in _SHAPES:
            raise ValueError(f"no element is called {what!r}")
        count, reads = _SHAPES[what]
        nodes = [str(int(node)) for node in element["nodes"]]
        if len(nodes) != count:
            raise ValueError(f"{what} takes {count} nodes, not {len(nodes)}")
        words = [f"{what}{number}", *nodes]
        if reads:
            words.append(f"V{int(element['control'])}")
        if what in _SOURCES:
            words.append("s")  # the value is that of the transform, so that 1 is an impulse
        words.append(f"{{{Fraction(element['value'])}}}")
        lines.append(" ".join(words))
    return "\n".join(lines) + "\n"


def voltages(lcapy: Any, sympy: Any, network: Mapping[str, Any]) -> list[list[list[str]]]:
    """Numerator and denominator in s of the voltage of each node in "read"."""
    # A leading blank line tells lcapy that a netlist of one element is no file's name.
    circuit = lcapy.Circuit("\n" + netlist_text(network["elements"]))
    found = []
    for node in network["read"]:
        if node == 0:
            found.append([["0"], ["1"]])
            continue
        expression = circuit[str(int(node))].V(lcapy.s).sympy
        s = next(iter(expression.free_symbols), sympy.Symbol("s"))
        fraction = sympy.fraction(sympy.cancel(expression))
        found.append([_coefficients(sympy.Poly(side, s)) for side in fraction])
    return found


def _coefficients(polynomial: Any) -> list[str]:
    return [str(Fraction(int(c.p), int(c.q))) for c in reversed(polynomial.all_coeffs())]


def main() -> None:
    """Answer the one question on standard input."""
    warnings.simplefilter("ignore")  # importing lcapy warns, and so do its sign conventions
    question = json.load(sys.stdin)
    with contextlib.redirect_stdout(sys.stderr):  # what a library prints must not mix with the answer
        answer = _answer(question["networks"])
    json.dump(answer, sys.stdout)


def _answer(networks: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    try:
        import lcapy
        import sympy
    except ImportError as error:
        return {"missing": str(error)}
    answers: list[dict[str, Any]] = []
    for network in networks:
        try:
            answers.append({"voltages": voltages(lcapy, sympy, network)})
        except (ArithmeticError, AttributeError, KeyError, RuntimeError, TypeError, ValueError) as error:
            answers.append({"error": f"{type(error).__name__}: {error}"})
    return {"answers": answers}


if __name__ == "__main__":
    main()
