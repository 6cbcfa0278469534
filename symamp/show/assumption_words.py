"""Assumptions in the words of a designer (room: show): "gds is small against gm", "RL is open"."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from symamp.circuit.latex_names import latex_name
from symamp.circuit.stage import Stage
from symamp.errors import InputError
from symamp.formula import parse
from symamp.show.latex_formula import latex_of
from symamp.show.note_model import Code, Inline, Math, Piece, Text, inline


def assumption_words(raw: Mapping[str, Any], stage: Stage) -> Inline:
    """What an assumption of a stage file states, from its table as written; several kinds are joined by "; "."""
    pieces: list[Piece] = []
    for key, say in _STATEMENTS.items():
        if key in raw and raw[key] is not False:
            pieces += [Text("; ")] if pieces else []
            pieces += say(raw, stage)
    if "for" in raw:
        names = _listed(raw["for"])
        pieces += [Text(" (for "), *_joined([(Code(name),) for name in names]), Text(" alone)")]
    return tuple(pieces)


def symbol_math(text: str, stage: Stage) -> Inline:
    """A selector or a product of symbols, as math; a device's label as it is."""
    if text in stage.parts and text not in stage.symbols:
        return (Text(text),)
    try:
        return (Math(latex_of(parse(text))),)
    except InputError:
        return (Code(text),)


def _listed(value: Any) -> list[str]:
    return [value] if isinstance(value, str) else [str(item) for item in value]


def _joined(items: Sequence[Inline]) -> list[Piece]:
    """a, b and c."""
    found: list[Piece] = []
    for place, item in enumerate(items):
        if place:
            found.append(Text(" and " if place == len(items) - 1 else ", "))
        found.extend(item)
    return found


def _named(value: Any, stage: Stage) -> list[Piece]:
    return _joined([symbol_math(text, stage) for text in _listed(value)])


def _verb(value: Any, one: str, many: str) -> Text:
    return Text(f" {one if len(_listed(value)) == 1 else many}")


def _equal(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    return [
        *_joined([(Text(label),) for label in _listed(raw["equal"])]),
        Text(" are alike, symbol by symbol"),
    ]


def _set(raw: Mapping[str, Any], _: Stage) -> list[Piece]:
    equations = [
        (Math(f"{latex_name(name)} = {latex_of(parse(str(text)))}"),) for name, text in raw["set"].items()
    ]
    return _joined(equations)


def _neglect(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    return [*_named(raw["neglect"], stage), _verb(raw["neglect"], "is neglected", "are neglected")]


def _open(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    return [*_named(raw["open"], stage), _verb(raw["open"], "is open", "are open")]


def _short(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    return [*_named(raw["short"], stage), _verb(raw["short"], "is a short", "are shorts")]


def _dominant_capacitor(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    return [
        Text("every capacitor but "),
        *symbol_math(str(raw["dominant_capacitor"]), stage),
        Text(" is neglected"),
    ]


def _miller(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    table = raw["miller"]
    ends = table.get("ends", "both")
    where = (
        "one part to ground at each end" if ends == "both" else f"one part to ground at node {table['from']}"
    )
    return [
        *symbol_math(str(table["part"]), stage),
        Text(f" between nodes {table['from']} and {table['to']} stands as {where}, by the gain at "),
        Math("s = 0"),
        Text(" (Miller’s theorem)"),
    ]


def _dominance(raw: Mapping[str, Any], stage: Stage) -> list[Piece]:
    verb = _verb(raw["small"], "is small against ", "are small against ")
    return [*_named(raw["small"], stage), verb, *_named(raw["against"], stage)]


def _dominant_pole(_: Mapping[str, Any], __: Stage) -> list[Piece]:
    return list(
        inline(
            "the lowest pole alone counts: the denominator is ",
            Math("b_0 + b_1 s"),
            ", the numerator ",
            Math("a_0"),
        )
    )


def _far_apart(_: Mapping[str, Any], __: Stage) -> list[Piece]:
    return list(
        inline("poles and zeros lie far apart: each is minus the ratio of two neighbouring coefficients")
    )


def _band(raw: Mapping[str, Any], _: Stage) -> list[Piece]:
    where = str(raw["band"])
    return list(
        inline(
            f"near {where} one power of ", Math("s"), " counts in the numerator and one in the denominator"
        )
    )


_STATEMENTS: dict[str, Callable[[Mapping[str, Any], Stage], list[Piece]]] = {
    "equal": _equal,
    "set": _set,
    "neglect": _neglect,
    "open": _open,
    "short": _short,
    "dominant_capacitor": _dominant_capacitor,
    "miller": _miller,
    "small": _dominance,
    "dominant_pole": _dominant_pole,
    "poles_far_apart": _far_apart,
    "band": _band,
}
