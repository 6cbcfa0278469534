"""Claims read (room: judge): tables of a stage file and the text of an option into records, names resolved."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

from symamp.circuit.formulas import read_formula
from symamp.circuit.near import propose
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import SINGLE_QUOTES, locate
from symamp.errors import InputError, ReadError, StageError
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, parse_quantity, unit_of
from symamp.formula import Node, Number, walk
from symamp.judge.claim import Claim
from symamp.values import quoted, read_percent, read_value

WITHIN = "5 %"  # the error that a claim of an option is allowed unless it says so
_KEYS = ("about", "formula", "within")
_EXAMPLE = 'about = "gain.dc", formula = "-gm1*ro1", within = "10 %"'
# What is left of \frac, \beta, \right, \tau, \times and the like where TOML has taken \f, \b, \r and \t as escapes.
_ESCAPED = re.compile(r"[\b\f]|\r(?=[a-z])|\t(?=imes|frac|ext|au|heta)")
_OPTION = "write RESPONSE.QUANTITY = FORMULA, such as 'gain.dc = -gm1*ro1'"


def read_claims(stage: Stage) -> tuple[Claim, ...]:
    """All claims of a stage, in listed order.

    Raises StageError or ReadError, with file, line and key, for the first table that cannot be read.
    """
    found = []
    for index, raw in enumerate(stage.claims):
        try:
            found.append(_from_table(stage, raw, f"claim.{index + 1}"))
        except InputError as error:
            path = ("claim", index, *(error.key.split(".") if error.key else ()))
            raise type(error)(error.problem, error.remedy, **locate(stage, path)) from None
    return tuple(found)


def claim_of(stage: Stage, text: str, within: str) -> Claim:
    """The claim that an option says, "gain.dc = -gm1*ro1", and the error that it is allowed.

    Raises StageError or ReadError whose key is the option.
    """
    about, equals, formula = text.partition("=")
    if not equals or not about.strip() or not formula.strip():
        raise StageError(f"{quoted(text)} is no claim", _OPTION, key="--claim")
    try:
        response, quantity = _about(stage, about.strip())
        node = read_formula(stage, formula.strip())
        decibels = _in_decibels(response, quantity, node)
    except InputError as error:
        raise error.at(key="--claim") from None
    amount, unit = read_within(within, quantity, "--within")
    return Claim(response, quantity, formula.strip(), node, amount, unit, decibels, "--claim")


def read_within(raw: Any, quantity: Quantity, key: str = "within") -> tuple[float, str]:
    """An allowed error and its unit: (0.1, "") of "10 %", (0.5, "dB") of "0.5 dB" for a quantity in dB."""
    if in_decibels_or_degrees(quantity):
        unit = unit_of(quantity, "")
        example = f'"0.5 {unit}"' if unit == "dB" else f'"2 {unit}"'
        amount = _number_with_unit(raw, unit, f"{quantity.text} is in {unit}: write {example}", key)
    elif isinstance(raw, str):
        try:
            amount, unit = float(read_percent(raw)), ""
        except ReadError as error:
            raise error.at(key=key) from None
    else:
        amount, unit = _number_with_unit(raw, "", 'write a percentage, such as "10 %"', key), ""
    if not amount > 0:
        raise StageError(
            f"within is {quoted(raw)}, which no rounding would meet",
            'allow a little, such as "0.1 %"',
            key=key,
        )
    return amount, unit


def _number_with_unit(raw: Any, unit: str, remedy: str, key: str) -> float:
    text = raw.strip() if isinstance(raw, str) else raw
    if isinstance(text, str) and unit:
        if not text.endswith(unit) and not (unit == "deg" and text.endswith("°")):
            raise ReadError(f"{quoted(raw)} is no number of {unit}", remedy, key=key)
        text = text.removesuffix(unit).removesuffix("°").strip()
    try:
        return float(read_value(text, ""))
    except ReadError as error:
        raise ReadError(error.problem, remedy, key=key) from None


def _from_table(stage: Stage, raw: Mapping[str, Any], key: str) -> Claim:
    for name in raw:
        if name not in _KEYS:
            raise StageError(
                f"a claim has no key {quoted(name)}", propose(str(name), _KEYS, "keys of a claim"), key=name
            )
    for name in _KEYS:
        if name not in raw:
            raise StageError(f"a claim without {name} says nothing", f"a claim has {_EXAMPLE}", key=None)
    try:
        response, quantity = _about(stage, raw["about"])
    except InputError as error:
        raise error.at(key="about") from None
    formula = raw["formula"]
    if isinstance(formula, bool) or not isinstance(formula, str | int | float):
        raise StageError(f"formula is {quoted(formula)}", "write it as text", key="formula")
    if isinstance(formula, str) and _ESCAPED.search(formula):
        raise StageError(
            "formula holds a control character, which TOML makes of a backslash between double quotes",
            SINGLE_QUOTES,
            key="formula",
        )
    try:
        node = read_formula(stage, str(formula))
        decibels = _in_decibels(response, quantity, node)
    except InputError as error:
        raise error.at(key="formula") from None
    amount, unit = read_within(raw["within"], quantity)
    return Claim(response, quantity, str(formula).strip(), node, amount, unit, decibels, key)


def _about(stage: Stage, raw: Any) -> tuple[str, Quantity]:
    """The response and the quantity that a claim is about."""
    example = f"{next(iter(stage.asked))}.dc"
    if not isinstance(raw, str) or not raw.strip():
        raise StageError(f"about is {quoted(raw)}", f"write RESPONSE.QUANTITY, such as {example}")
    response, dot, rest = raw.strip().partition(".")
    if response not in stage.asked:
        remedy = propose(response, stage.asked, "responses")
        raise StageError(f"there is no response {quoted(response)}", remedy)
    if not dot:
        raise StageError(
            f"{quoted(raw)} names a response and no quantity", f"write RESPONSE.QUANTITY, such as {example}"
        )
    return response, parse_quantity(rest)


def _in_decibels(response: str, quantity: Quantity, node: Node) -> bool:
    """Whether the formula of a quantity in dB is in dB itself; a bare number would read both ways."""
    numbers = [step for step in walk(node) if isinstance(step, Number)]
    other = next((step.unit for step in numbers if step.unit in ("dB", "deg")), "")
    if (quantity.face == "db" or quantity.name == "gain_margin") and other != "deg":
        if any(step.unit == "dB" for step in numbers):
            return True
        if quantity.face == "db" and all(isinstance(step, Number) or _joins(step) for step in walk(node)):
            raise ReadError(
                f"a bare number for {quantity.text} reads two ways",
                'write "40 dB"; a number without dB is the size itself, so claim that without .db',
            )
        return quantity.name == "gain_margin"
    own = unit_of(quantity, "") if in_decibels_or_degrees(quantity) else ""
    if other and other != own:
        raise ReadError(f"{quantity.text} is not in {other}", _with_face(response, quantity, own, other))
    return False


def _with_face(response: str, quantity: Quantity, own: str, other: str) -> str:
    """The way out for a formula in dB or degrees of a quantity that is not in them."""
    if own or quantity.face is not None:
        return f"write it in {own}" if own else f"write it in the unit of {quantity.text}"
    try:
        return f"claim {response}.{parse_quantity(f'{quantity.text}.{other.lower()[:3]}').text}"
    except InputError:
        return f"write it in the unit of {quantity.text}"


def _joins(step: Node) -> bool:
    """Whether a node joins others, and is no name."""
    return hasattr(step, "a") or hasattr(step, "base") or hasattr(step, "argument")
