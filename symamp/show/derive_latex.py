"""Expressions alone, ready to be pasted into a document (room: show): `derive --latex`."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from symamp.assumptions.apply import Approximation
from symamp.exact.forms import Expanded
from symamp.exact.formulas import formula_of
from symamp.exact.response import Response
from symamp.show.latex_lines import PASTE_WIDTH, response_display
from symamp.show.latex_words import display
from symamp.show.note_sections_formulas import formula_quantities, quantity_lines, twin_root, with_relation
from symamp.show.note_words import response_letter
from symamp.show.words import asked_words

_NEEDS = "% these displays need the package amsmath"


@dataclass(frozen=True)
class Shown:
    """A response as `derive` found it, and what the assumptions make of it."""

    exact: Response
    approximation: Approximation | None = None


def latex_page(found: Sequence[Shown]) -> str:
    """The expressions of all responses as LaTeX displays, each below a comment that says what it is.

    Of each response H(s), then the quantities that have a formula. Where there is an approximation its formulas
    stand in place of the exact ones, with a sign for approximately equal. What has no formula is said in a comment.
    """
    blocks = [_NEEDS]
    for each in found:
        blocks += _response(each)
    return "\n".join(blocks) + "\n"


def _response(shown: Shown) -> list[str]:
    name = f"{shown.exact.name}: {asked_words(shown.exact.asked)}"
    made = shown.approximation
    if made is None:
        return ["", _comment(name), *_formulas(shown.exact, "=")]
    if not made.assumptions:
        return ["", _comment(f"{name}, exact: no assumption made is for it"), *_formulas(shown.exact, "=")]
    lines = ["", _comment(f"{name}, under {', '.join(repr(text) for text in made.assumptions)}")]
    if made.response is None:
        return [*lines, _comment(f"no response is left: {made.why}")]
    return [*lines, *_formulas(made.response, r"\approx")]


def _formulas(response: Response, relation: str) -> list[str]:
    if not isinstance(response.form, Expanded):
        return [
            _comment(f"nested: {response.terms:,} product terms are not written out, so there is no formula")
        ]
    letter = f"{response_letter(response.name, response.unit)}(s)"
    blocks = [display(with_relation(response_display(response, letter, PASTE_WIDTH), relation))]
    without: list[str] = []
    done: set[str] = set()
    for quantity in formula_quantities(response):
        formula = formula_of(response, quantity)
        if formula is None:
            without += [quantity.text] if quantity.name in ("p", "z") else []
        elif quantity.text not in done:
            twin = twin_root(response, quantity, formula)
            names = [quantity.text] + ([twin.text] if twin else [])
            done.update(names)
            lines = quantity_lines(response, quantity, formula, twin, width=PASTE_WIDTH)
            blocks += [_comment(", ".join(names)), display(with_relation(lines, relation))]
    if without:
        blocks.append(_comment(f"no formula: {', '.join(without)}"))
    return blocks


def _comment(text: str) -> str:
    """A comment of one line, whatever the text holds."""
    return "% " + re.sub(r"[\x00-\x1f\x7f-\x9f\u2028\u2029]+", " ", text).replace("−", "-")
