"""Assertions about formulas, for tests of derivations made by hand (room: testing)."""

from __future__ import annotations

from typing import Any

from symamp.circuit.near import propose
from symamp.circuit.stage import Stage
from symamp.errors import InputError, StageError
from symamp.exact.asked_quantity import Quantity, parse_quantity
from symamp.exact.derive import derive
from symamp.exact.forms import Expanded
from symamp.exact.formulas import PolyRatio, formula_of, rational_of
from symamp.exact.polys import from_coefficients, lowest_terms
from symamp.exact.response import Response
from symamp.exact.shape import shape_of
from symamp.formula import Dimension, Node, write
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.claimed import wanted_dimension
from symamp.judge.ledger import POINTS, SEED
from symamp.judge.verdict import HOLDS
from symamp.show.words import value_words
from symamp.testing.comparing import Comparison, Difference
from symamp.testing.expressions import dimension_in, text_of, tree_of, unit_words
from symamp.testing.plain import plain
from symamp.testing.verdict_text import verdict_text

_LONGEST = 400  # characters of a formula in a message


def assert_equal_expressions(stage: Any, first: Any, second: Any) -> None:
    """Assert that two expressions in a stage's symbols are equal whatever the values.

        assert_equal_expressions(stage, "ro1 || RL", "RL/(1 + gds1*RL)")

    Each is text (a formula as in a stage file, or LaTeX), a SymPy expression, a number, or a response's quantity
    (`stage.response("gain").quantity("dc")`); text may hold s. Rational ones are compared exactly, as ratios of
    polynomials; those with roots in 50 digits at random values. AssertionError says what the one is off from the
    other, and at which bias point both have which value: the stage's own, or one as near to it as will do.
    Raises ReadError for text that cannot be read or joins unlike units.
    """
    __tracebackhide__ = True
    data = plain(stage)
    nodes = [tree_of(data, each) for each in (first, second)]
    texts = [text_of(each, node) for each, node in zip((first, second), nodes, strict=True)]
    units = [dimension_in(data, node) for node in nodes]
    if units[0] != units[1]:
        raise AssertionError(_other_unit(texts[0], units[0], texts[1], units[1]))
    compared = Comparison(data, nodes[0], nodes[1])
    if not compared.equal:
        lines = [f"first:  {_clipped(texts[0])}", f"second: {_clipped(texts[1])}"]
        words = _unlike(compared, units[0].unit, ("first", "second"))
        raise AssertionError("\n".join(["the two expressions differ", *lines, *words]))


def assert_derivation(stage: Any, about: str, formula: Any) -> None:
    """Assert that a formula derived by hand is the exact one.

        assert_derivation(stage, "gain.dc", "-gm1*(ro1 || RL)")
        assert_derivation(stage, "gain", "-gm1*RL/(1 + gds1*RL + s*CL*RL)")

    `about` names a quantity that has a formula (`gain.dc`, `gain.p1`, `gain.b1`), or a response, which is then a
    function of s. `formula` is anything that `assert_equal_expressions` takes. AssertionError says by what the
    formula is off, the leading term of that, and both values at a readable bias point. Raises StageError where
    there is nothing to compare with: an unknown response, a quantity without a formula.
    """
    __tracebackhide__ = True
    data = plain(stage)
    name, dot, rest = about.strip().partition(".")
    response = _response(data, name)
    quantity = parse_quantity(rest) if dot else None
    exact = _exact(response, quantity, about)
    node = tree_of(data, formula)
    text = text_of(formula, node)
    if quantity is None:
        unit, wanted = response.unit, wanted_dimension(Quantity("dc"), response.unit, response.unit, False)
    else:
        unit = response.unit_of(quantity)
        wanted = wanted_dimension(quantity, unit, response.unit, False)
    given = dimension_in(data, node)
    if given != wanted and not _is_zero(node):
        raise AssertionError(_other_unit(text, given, about.strip(), wanted))
    compared = Comparison(data, node, exact)
    if not compared.equal:
        lines = [f"by hand: {_clipped(text)}", f"exact:   {_clipped(_exact_text(response, exact))}"]
        words = _unlike(compared, unit, ("by hand", "exact"))
        raise AssertionError("\n".join([f"{about.strip()} is not what was derived by hand", *lines, *words]))


def assert_claim_holds(
    stage: Any, about: str, formula: str, within: str = "5 %", *, points: int = POINTS, seed: int = SEED
) -> None:
    """Assert that a hand formula holds within an error over the stage's span (at its bias point if it has none).

        assert_claim_holds(stage, "gain.dc", "-gm1*RL", within="10 %")

    It is judged as `symamp check` judges a claim. AssertionError has the verdict, the error and where it is
    largest, and the tacit conditions, the most harmful first. Raises ReadError or StageError for a claim that
    means nothing.
    """
    __tracebackhide__ = True
    data = plain(stage)
    try:
        claim = claim_of(data, f"{about} = {formula}", within)
    except InputError as error:  # its key is that of a command's option
        raise type(error)(error.problem, error.remedy, key=None) from None
    check = make_check(data, claims=[claim], points=points, seed=seed)
    (judged,) = check.claims
    if judged.verdict != HOLDS:
        raise AssertionError(verdict_text(check, judged))


def _response(stage: Stage, name: str) -> Response:
    if name not in stage.asked:
        raise StageError(f"there is no response {name!r}", propose(name, stage.asked, "responses"))
    return derive(stage, stage.asked[name])


def _exact(response: Response, quantity: Quantity | None, about: str) -> Node | PolyRatio:
    """What a derivation is held against. Raises StageError where there is no formula."""
    form = response.form
    if not isinstance(form, Expanded):
        raise StageError(
            f"{response.name} stands for {response.terms:,} terms, too many to be written out",
            "assert_claim_holds judges a formula of it in numbers",
        )
    if quantity is None:
        return lowest_terms(from_coefficients(form.numerator), from_coefficients(form.denominator))
    known = rational_of(response, quantity) if quantity.face is None else None
    if known is not None:
        return known
    shape = formula_of(response, quantity)
    if shape is None:
        raise StageError(
            f"{about.strip()} has no formula",
            "assert_claim_holds judges one of it in numbers; coefficients such as b1 always have a formula",
        )
    return tree_of(response.stage, shape)


def _exact_text(response: Response, exact: Node | PolyRatio) -> str:
    if not isinstance(exact, tuple):
        return write(exact)
    return shape_of(*exact, weights=response.bias_values or None).text()


def _is_zero(node: Node) -> bool:
    """Zero has every unit."""
    return getattr(node, "value", None) == 0


def _other_unit(first: str, unit: Dimension, second: str, other: Dimension) -> str:
    return f"{_clipped(first)} is {unit_words(unit)}, and {_clipped(second)} is {unit_words(other)}"


def _unlike(compared: Comparison, unit: str, names: tuple[str, str]) -> list[str]:
    """By what the first is off from the second, and where that is seen."""
    found = []
    factor, off = compared.factor, compared.off
    if factor is not None:
        sign = "; the sign is wrong" if factor.text() == "-1" else ""
        found.append(f"{names[0]} is {factor.text()} times {names[1]}{sign}")
    elif off is not None:
        error, leading = off
        found.append(f"{names[0]}/{names[1]} - 1 = {_clipped(error.text())}")
        if leading is not None and leading.text() != error.text():
            found.append(f"  leading term {leading.text()}")
    where = compared.difference()
    if where is None:
        found.append("no bias point was found at which both have values that differ")
    else:
        found += _seen(where, unit, names)
    return found


def _seen(where: Difference, unit: str, names: tuple[str, str]) -> list[str]:
    at = "" if where.hz is None else f" and {value_words(where.hz, 'Hz')}"
    width = max(map(len, names)) + 1
    lines = [f"at {where.point.words}{at}:"]
    digits = _digits(where.first, where.second)
    for name, value in zip(names, (where.first, where.second), strict=True):
        shown = value_words(value if value.imag else value.real, unit, digits)
        lines.append(f"  {name + ':':<{width}} {shown}")
    return lines


def _digits(a: complex, b: complex) -> int:
    """So many that the two print differently."""
    for digits in range(4, 16):
        if f"{a:.{digits - 1}e}" != f"{b:.{digits - 1}e}":
            return digits
    return 16


def _clipped(text: str) -> str:
    return text if len(text) <= _LONGEST else f"{text[: _LONGEST - 3]}..."
