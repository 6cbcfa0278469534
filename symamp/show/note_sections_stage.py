"""What a note says of the stage (room: show): its parts, its bias point and its span."""

from __future__ import annotations

from pathlib import Path

from symamp.circuit.kinds import Kind
from symamp.circuit.latex_names import latex_name
from symamp.circuit.stage import Part, Side, Stage
from symamp.show.assumption_words import assumption_words
from symamp.show.note_model import (
    LEFT,
    POINT,
    Block,
    Bullets,
    Code,
    Inline,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    inline,
)
from symamp.show.note_words import value_text

_KINDS = {
    "mosfet": "MOSFET",
    "bjt": "bipolar transistor",
    "vccs": "voltage-controlled current source",
    "vcvs": "voltage-controlled voltage source",
    "cccs": "current-controlled current source",
    "ccvs": "current-controlled voltage source",
    "opamp": "ideal op amp",
    "transformer": "ideal transformer",
}
_MANY_ROWS = 14  # rows of a table of two columns above which it is set in two halves side by side


def stage_section(stage: Stage) -> Section:
    """Parts, bias and span, each where there is one."""
    blocks: list[Block] = [_parts(stage)]
    if stage.bias:
        blocks.append(_bias(stage))
    blocks += _span(stage)
    return Section(inline("The stage"), tuple(blocks))


def assumptions_section(stage: Stage) -> Section | None:
    """Each assumption in words; None where the stage makes none."""
    if not stage.assumptions:
        return None
    items = []
    for raw in stage.assumptions:
        words = assumption_words(raw, stage)
        items.append((Strong(str(raw["name"])), *inline(": "), *words))
    return Section(inline("Assumptions"), (Bullets(tuple(items)),))


def _parts(stage: Stage) -> Table:
    header = (inline("part"), inline("kind"), inline("nodes"))
    rows = tuple(
        (inline(part.label), inline(_kind_words(part.kind)), inline(_node_words(part)))
        for part in stage.parts.values()
    )
    return Table("Parts. Node gnd is signal ground.", header, rows, (LEFT, LEFT, LEFT))


def _kind_words(kind: Kind) -> str:
    return _KINDS.get(kind.name, kind.name.replace("_", " "))


def _node_words(part: Part) -> str:
    """Nodes by the names of the terminals: "gate in, drain x, source gnd"; two-terminal parts from plus to minus."""
    terminals = part.kind.terminals
    nodes = part.nodes
    if terminals == ("plus", "minus"):
        return f"{nodes[0]} to {nodes[1]}"
    words = [f"{_terminal(terminal)} {node}" for terminal, node in zip(terminals, nodes, strict=False)]
    if part.control is not None:
        words.append(f"controlled by the current through {part.control}")
    return ", ".join(words)


def _terminal(name: str) -> str:
    return name.replace("_plus", " +").replace("_minus", " −").replace("_", " ")


def _bias(stage: Stage) -> Table:
    rows: list[tuple[Inline, ...]] = []
    for name, symbol in stage.symbols.items():
        if name in stage.bias:
            rows.append(
                (inline(Math(latex_name(name))), inline(value_text(float(stage.bias[name]), symbol.unit)))
            )
        else:
            rows.append((inline(Math(latex_name(name))), inline("no value")))
    header = (inline("symbol"), inline("value"))
    if len(rows) <= _MANY_ROWS:
        return Table("Bias point.", header, tuple(rows), (LEFT, POINT))
    half = (len(rows) + 1) // 2
    empty: tuple[Inline, ...] = ((), ())
    beside = [*rows[half:], *[empty] * (2 * half - len(rows))]
    both = tuple(a + b for a, b in zip(rows[:half], beside, strict=True))
    return Table("Bias point.", header * 2, both, (LEFT, POINT) * 2)


def _span(stage: Stage) -> list[Block]:
    span = stage.span
    if span.empty:
        return [Paragraph(inline("No span is given: every figure is at the bias point."))]
    if span.table is not None:
        count = len(span.table.rows)
        names = ", ".join(span.table.columns)
        words = f" with {count} bias point{'s' if count != 1 else ''}, one a row, for "
        return [Paragraph(inline("Span: the table ", Code(Path(span.table.path).name), f"{words}{names}."))]
    rows: list[tuple[Inline, ...]] = [
        (
            inline(_side_math(side, stage)),
            inline(value_text(float(side.low), side.unit)),
            inline(value_text(float(side.high), side.unit)),
        )
        for side in span.sides
    ]
    blocks: list[Block] = []
    if rows:
        header = (inline("symbol"), inline("from"), inline("to"))
        blocks.append(Table("Span.", header, tuple(rows), (LEFT, POINT, POINT)))
    follows = [
        f"{latex_name(f.symbol)} / {latex_name(f.leader)} = {float(f.ratio):.4g}" for f in span.follows
    ]
    if follows:
        pieces = [piece for k, text in enumerate(follows) for piece in inline(", " if k else "", Math(text))]
        blocks.append(Paragraph(inline("Symbols that follow others at their bias ratio: ", *pieces, ".")))
    return blocks


def _side_math(side: Side, stage: Stage) -> Math:
    return Math(
        latex_name(side.name if side.name in stage.symbols or side.name in stage.aliases else side.symbol)
    )
