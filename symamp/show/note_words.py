"""Values, quantities and bias points as a note writes them (room: show)."""

from __future__ import annotations

from collections.abc import Collection, Mapping

from symamp.circuit.latex_names import latex_name
from symamp.circuit.stage import Asked, Stage
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.judge.span_errors import SpanFigure, Where
from symamp.show.latex_formula import latex_value
from symamp.show.note_model import Inline, Math, Piece, Text
from symamp.show.words import asked_words, error_words, root_words, value_words

_SPACE = "\u00a0"
_LETTERS = {"ohm": "Z", "S": "Y"}
_WORDS = {
    "dc": "DC value",
    "hf": "value far above all roots",
    "bandwidth": "bandwidth",
    "peak": "peak",
    "peak_frequency": "frequency of the peak",
    "low_corner": "lower corner",
    "high_corner": "upper corner",
    "unity_gain_frequency": "unity-gain frequency",
    "gain_bandwidth": "gain-bandwidth product",
    "phase_margin": "phase margin",
    "gain_margin": "gain margin",
}
_SYMBOLS = {
    "bandwidth": r"f_{\mathrm{bw}}",
    "peak": r"\lvert H \rvert_{\mathrm{max}}",
    "peak_frequency": r"f_{\mathrm{max}}",
    "low_corner": r"f_{\mathrm{low}}",
    "high_corner": r"f_{\mathrm{high}}",
    "unity_gain_frequency": r"f_{\mathrm{u}}",
    "gain_bandwidth": r"\mathrm{GBW}",
    "phase_margin": r"\varphi_{\mathrm{m}}",
    "gain_margin": r"A_{\mathrm{m}}",
}
_FACES = {
    "magnitude": (", magnitude", r"\lvert {} \rvert"),
    "hz": (" in Hz", r"\lvert {} \rvert / 2 \pi"),
    "db": (" in dB", r"{}_{{\mathrm{{dB}}}}"),
    "deg": (", angle", r"\mathrm{{arg}}({})"),
    "re": (", real part", r"\mathrm{{Re}}({})"),
    "im": (", imaginary part", r"\mathrm{{Im}}({})"),
}


def spaced(text: str) -> str:
    """Numbers and units that stay together, with the sign of the ohm: "470 kΩ"."""
    return text.replace("ohm", "Ω").replace(" deg", "°").replace(" ", _SPACE)


def value_text(value: complex | float | None, unit: str, digits: int = 4) -> str:
    """A value: "4.1 mS", "−387.2", "none"."""
    return spaced(value_words(value, unit, digits))


def quantity_text(value: complex | float | None, unit: str, quantity: Quantity) -> str:
    """A quantity's value; of a pole or zero its frequency and damping."""
    if value is None or not is_root(quantity) or quantity.face is not None:
        return value_text(value, unit)
    frequency, damping = root_words(complex(value))
    return f"{spaced(frequency)}, {damping.replace(' = ', _SPACE + '=' + _SPACE)}"


def error_text(value: complex | float | None, unit: str, *, absolute: bool, modulus: bool = False) -> str:
    """An error: "−5.04 %", "+0.12 dB"."""
    return spaced(error_words(value, unit, absolute=absolute, modulus=modulus))


def range_text(figure: SpanFigure | None, unit: str, *, absolute: bool) -> str:
    """The error over the span: "−3.1 % to +2 %"."""
    if figure is None:
        return "none"
    ends = [
        error_text(x, unit, absolute=absolute, modulus=figure.modulus)
        for x in (figure.least, figure.greatest)
    ]
    return ends[0] if ends[0] == ends[1] else f"{ends[0]} to {ends[1]}"


def how_known(figure: SpanFigure) -> str:
    """Whether a figure over the span is proved, sampled, or that of every row of a table."""
    return "proved" if figure.proved else "every row" if "row" in figure.where_least else "sampled"


def over_the_span(known: Collection[str]) -> str:
    """The head of a column of figures over the span: how they are known, where that is one for all."""
    return f"over the span ({next(iter(known))})" if len(known) == 1 else "over the span"


def worst_place(figure: SpanFigure) -> Where:
    """The bias point of the end that is larger in magnitude."""
    return figure.where_greatest if abs(figure.greatest) >= abs(figure.least) else figure.where_least


def place_words(where: Where, stage: Stage) -> Inline:
    """A bias point by the sides of the span: "gm1 = 8 mS, …", or "row 3"."""
    if "row" in where and "row" not in stage.symbols:
        return (Text(f"row {where['row']}"),)
    sides = {side.symbol for side in stage.span.sides}
    shown: Mapping[str, float] = {name: value for name, value in where.items() if name in sides}
    pieces: list[Piece] = []
    for name, value in shown.items():
        pieces += [Text(", ")] if pieces else []
        pieces += [
            Math(latex_name(name)),
            Text(f" = {value_text(value, stage.symbols[name].unit, 3)}".replace(" = ", "\u00a0=\u00a0")),
        ]
    return tuple(pieces)


def response_letter(name: str, unit: str) -> str:
    """The response's symbol in LaTeX: H, Z or Y by its unit, with its name as subscript."""
    escaped = name.replace("_", r"\_")
    return rf"{_LETTERS.get(unit, 'H')}_{{\mathrm{{{escaped}}}}}"


def quantity_math(name: str, unit: str, quantity: Quantity) -> str:
    """A quantity's symbol in LaTeX; `unit` is the response's."""
    letter = response_letter(name, unit)
    if quantity.name == "dc":
        symbol = f"{letter}(0)"
    elif quantity.name == "hf":
        symbol = rf"{letter}(\infty)"
    elif quantity.index is not None:
        index = str(quantity.index)
        symbol = f"{quantity.name}_{index}" if len(index) == 1 else f"{quantity.name}_{{{index}}}"
    elif quantity.name in _SYMBOLS:
        symbol = _SYMBOLS[quantity.name].replace("H", letter)
    else:
        hertz = latex_value(float(quantity.frequency or 0), "Hz")
        symbol = rf"{letter}(j\,2 \pi \cdot {hertz})"
    return symbol if quantity.face is None else _FACES[quantity.face][1].format(symbol)


def quantity_words(quantity: Quantity) -> str:
    """A quantity in words: "DC value", "pole 1", "bandwidth"."""
    if quantity.name in _WORDS:
        words = _WORDS[quantity.name]
    elif quantity.name == "p":
        words = f"pole {quantity.index}"
    elif quantity.name == "z":
        words = f"zero {quantity.index}"
    elif quantity.index is not None:
        words = f"coefficient {quantity.name}{quantity.index}"
    else:
        words = f"value at {value_text(float(quantity.frequency or 0), 'Hz')}"
    return words if quantity.face is None else words + _FACES[quantity.face][0]


def response_words(asked: Asked) -> str:
    """What a response is: "gain: V(out) / VIN"."""
    return f"{asked.name}: {asked_words(asked)}"


def and_words(names: list[str]) -> str:
    """a, b and c."""
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)
