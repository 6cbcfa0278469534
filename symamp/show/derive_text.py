"""`derive` in the terminal: exact and approximate expressions, quantities, roots and time constants."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence

from symamp.assumptions.apply import Approximation, Dropped
from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.exact.forms import Expanded, Nested
from symamp.exact.grouped import grouped
from symamp.exact.response import QuantityValue, Response
from symamp.exact.time_constants import TimeConstant
from symamp.show.columns import LEFT, POINT, table_lines
from symamp.show.formulas import formula_lines, one_line, polynomial_lines
from symamp.show.json_parts import QUANTITIES
from symamp.show.page import Page
from symamp.show.words import MINUS, asked_words, percent_words, root_words, value_words

_DROPPED = 30  # dropped terms that are shown
_AROUND_PEAK = ("peak_frequency", "low_corner", "high_corner")
_QUANTITIES = tuple(name for name in QUANTITIES if name != "peak")


def response_page(
    page: Page, response: Response, constants: Sequence[TimeConstant], frequencies: Sequence[float]
) -> None:
    """One exact response."""
    page.heading(f"{response.name}: {asked_words(response.asked)}   ({form_words(response)})")
    _body(page, response, frequencies)
    if constants:
        _constants(page, constants)


def approximation_page(
    page: Page, approximation: Approximation, exact: Response, frequencies: Sequence[float]
) -> None:
    """The same response under assumptions, and what was dropped."""
    names = ", ".join(f"{name!r}" for name in approximation.assumptions)
    if not approximation.assumptions:
        page.heading(f"{exact.name}: no assumption made is for this response")
        return
    page.heading(f"{exact.name} under {names}")
    if approximation.response is None:
        page.prose(f"there is no approximate response: {approximation.why}", indent=2)
    else:
        _body(page, approximation.response, frequencies)
    _dropped(page, approximation)
    page.notes(approximation.warnings, approximation.remarks)


def form_words(response: Response) -> str:
    """How the response is held."""
    form = response.form
    if isinstance(form, Nested):
        return f"nested: {form.graph.minors} minors stand for {_count(response.terms)} product terms"
    return f"written out, {response.terms} term{'s' if response.terms != 1 else ''}"


def _count(n: int) -> str:
    return f"{n:,}" if n < 10**9 else f"some {n:.1e}"


def _body(page: Page, response: Response, frequencies: Sequence[float]) -> None:
    form = response.form
    if isinstance(form, Expanded):
        weights = response.bias_values or None
        symbols = response.stage.symbols
        reactive = {n for n in form.symbols if symbols[n].nature in (CAPACITANCE, INDUCTANCE)}
        page.line()
        for label, row in (("N(s)", form.numerator), ("D(s)", form.denominator)):
            shapes = [grouped(c, reactive, weights) for c in row]
            page.block(polynomial_lines(shapes, page.width - 4, label=label), indent=2)
        page.line()
        dc = response.quantity("dc")
        if dc.shape is not None:
            page.block(formula_lines(dc.shape, page.width - 4, label="dc"), indent=2)
    _quantities(page, response)
    _roots(page, response)
    for hz in frequencies:
        _at(page, response, hz)


def _at(page: Page, response: Response, hz: float) -> None:
    """The response at a frequency: as a complex number, and as magnitude, dB and degrees."""
    where = f"at {value_words(hz, 'Hz')}"
    if response.missing:
        page.line(f"  {where}: none, for want of bias values")
        return
    value = response.at(hz)
    words = [value_words(value, response.unit), f"magnitude {value_words(abs(value), response.unit)}"]
    if value and not response.unit:
        words.append(value_words(20 * math.log10(abs(value)), "dB"))
    if value:
        words.append(value_words(math.degrees(cmath.phase(value)), "deg"))
    page.line(f"  {where}: {', '.join(words)}")


def _quantities(page: Page, response: Response) -> None:
    if response.missing:
        return
    rows, notes = [], []
    # Of a response that is largest at DC the corners say no more than the bandwidth.
    flat = response.quantity("peak_frequency").value in (0, None)
    for name in _QUANTITIES:
        if flat and name in _AROUND_PEAK:
            continue
        found = response.quantity(name)
        if found.value is None and name not in ("dc", "bandwidth"):
            continue
        rows.append([name, value_words(found.value, found.unit), _beside(response, name, found)])
        notes += [f"{name}: {remark}" for remark in found.remarks]
    page.line()
    page.block(table_lines(["quantity", "value", ""], rows, [LEFT, POINT, LEFT], width=page.width))
    for note in notes:
        page.prose(f"remark: {note}", indent=2)


def _beside(response: Response, name: str, found: QuantityValue) -> str:
    """What stands beside a value: why there is none, dB for levels without a unit, a short formula."""
    if found.value is None:
        return found.why or ""
    if name in ("dc", "hf") and not response.unit and found.value:
        words = value_words(response.quantity(f"{name}.db").value, "dB")
        return f"{words}   {_short(found)}" if name == "hf" else words
    return _short(found) if name != "dc" else ""


def _short(found: QuantityValue, most: int = 60) -> str:
    if found.shape is None:
        return ""
    text = one_line(found.shape)
    return text if 1 < len(text) <= most else ""


def _roots(page: Page, response: Response) -> None:
    if response.missing:
        _roots_without_numbers(page, response)
        return
    rows = []
    for letter, word, roots in (("p", "pole", response.poles()), ("z", "zero", response.zeros())):
        for k, root in enumerate(roots, start=1):
            found = response.quantity(f"{letter}{k}")
            rows.append([f"{letter}{k}", word, *root_words(root), _short(found)])
    if rows:
        page.line()
        headers = ["", "", "frequency", "damping", "formula (rad/s)" if any(r[4] for r in rows) else ""]
        page.block(table_lines(headers, rows, [LEFT, LEFT, POINT, LEFT, LEFT], width=page.width))


def _roots_without_numbers(page: Page, response: Response) -> None:
    """Poles and zeros as formulas, where they can be told apart without values."""
    form = response.form
    if isinstance(form, Expanded):
        for letter, row in (("p", form.denominator), ("z", form.numerator)):
            for k in range(1, len(row)):
                shape = response.quantity(f"{letter}{k}").shape
                if shape is not None:
                    page.block(formula_lines(shape, page.width - 4, label=f"{letter}{k}"), indent=2)
    page.prose(f"{', '.join(response.missing)} has no bias value, so there are no numbers", indent=2)


def _constants(page: Page, constants: Sequence[TimeConstant]) -> None:
    rows = []
    for constant in constants:
        formula = "" if constant.formula is None else one_line(constant.formula)
        share = "none" if constant.share is None else percent_words(constant.share)
        rows.append(
            [
                constant.part,
                _resistance_words(constant),
                value_words(constant.seconds, "s"),
                share,
                formula if len(formula) <= 60 else "",
            ]
        )
    page.line()
    headers = ["open-circuit", "resistance", "time constant", "share of b1", ""]
    page.block(table_lines(headers, rows, [LEFT, POINT, POINT, POINT, LEFT], width=page.width))


def _resistance_words(constant: TimeConstant) -> str:
    if constant.resistance is None and "infinite" in constant.why:
        return "infinite"
    return value_words(constant.resistance, "ohm")


def _dropped(page: Page, approximation: Approximation) -> None:
    if not approximation.dropped:
        return
    rows = []
    listed, below = _listed(approximation.dropped)
    for item in listed:
        ratio = "none" if item.ratio is None else percent_words(item.ratio)
        rows.append([item.coefficient, _dots(item.term), _dots(item.against), ratio])
    page.line()
    headers, kinds = ["dropped from", "term", "fell to", "ratio at bias"], [LEFT, LEFT, LEFT, POINT]
    lines = table_lines(headers, rows, kinds)
    if max(map(len, lines)) > page.width:  # with the ratio in front, what is long may stand below
        order = (0, 3, 1, 2)
        headers, kinds, *rows = ([row[i] for i in order] for row in (headers, kinds, *rows))
        lines = table_lines(headers, rows, kinds, width=page.width)
    page.block(lines)
    if below:
        more = len(approximation.dropped) - len(listed)
        page.prose(f"and {more:,} more, each at most {below} of what it fell to; --json lists all", indent=2)


def _listed(dropped: Sequence[Dropped]) -> tuple[Sequence[Dropped], str]:
    """The dropped terms to be shown, all or the largest, and how large the others are at most ("" for none)."""
    if len(dropped) <= _DROPPED:
        return dropped, ""
    sizes = [math.inf if item.ratio is None else abs(item.ratio) for item in dropped]
    order = sorted(range(len(dropped)), key=lambda i: -sizes[i])
    next_one = sizes[order[_DROPPED]]
    words = percent_words(next_one) if math.isfinite(next_one) else "an unknown part"
    return [dropped[i] for i in sorted(order[:_DROPPED])], words


def _dots(text: str) -> str:
    return (
        text.replace("**2", "²").replace("**3", "³").replace("**", "^").replace("*", "·").replace("-", MINUS)
    )
