"""What a note says of claims (room: show): verdicts, errors, tacit conditions, and what they follow from."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from symamp.exact.shape import Shape
from symamp.formula import Node
from symamp.judge.verdict import Check, Condition, Judged
from symamp.show.latex_formula import latex_in_line, latex_of, shape_in_line
from symamp.show.latex_lines import PAGE_WIDTH, formula_display
from symamp.show.latex_width import math_width
from symamp.show.latex_words import MathLine
from symamp.show.note_model import (
    LEFT,
    POINT,
    Block,
    Box,
    Drawing,
    Equation,
    Figure,
    Inline,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    inline,
)
from symamp.show.note_words import (
    error_text,
    how_known,
    over_the_span,
    place_words,
    quantity_math,
    quantity_text,
    quantity_words,
    range_text,
    worst_place,
)
from symamp.show.words import error_words, ratio_words

OVER_SPAN = "-span"  # how the names of pictures of errors over the span end
_ERROR_LINES = 6
_EXACT_LINES = 10

_MOST_CONDITIONS = 8  # that are listed; the others are summed up
_WHOLE_RATIO = 34  # characters of a ratio that is written whole


def verdict_table(check: Check) -> Table:
    """Every claim with its verdict, in short."""
    known = {how_known(judged.span) for judged in check.claims if judged.span is not None}
    header = [inline("formula"), inline("allowed"), inline("error")]
    header += [inline(over_the_span(known))] if known else []
    header.append(inline("verdict"))
    rows = []
    for judged in check.claims:
        row = [
            inline(f"{judged.claim.response}: ", Math(_claim_math(judged, latex_in_line))),
            inline(within_text(judged)),
            inline(_error(judged)),
        ]
        if known:
            how = "" if judged.span is None or len(known) < 2 else f" ({how_known(judged.span)})"
            row.append(inline(range_text(judged.span, judged.unit, absolute=judged.absolute) + how))
        rows.append((*row, (Strong(judged.verdict_words),)))
    return Table("Hand formulas.", tuple(header), tuple(rows), (LEFT,) * len(header))


def claims_section(check: Check, pictures: Mapping[str, Sequence[Drawing]] | None = None) -> Section:
    """Each claim in full, with the pictures of errors over the span that are kept under the name of its quantity."""
    blocks: list[Block] = []
    for number, judged in enumerate(check.claims):
        about = judged.claim.about
        told = about in [earlier.claim.about for earlier in check.claims[:number]]
        drawn = () if told else tuple((pictures or {}).get(about, ()))
        blocks.append(_claim(judged, check, [p for p in drawn if p.name.endswith(OVER_SPAN)]))
    return Section(inline("Hand formulas in detail"), tuple(blocks))


def _claim_math(judged: Judged, written: Callable[[Node], str]) -> str:
    """The claim as it was written: quantity ≈ formula."""
    claim = judged.claim
    return rf"{quantity_math(claim.response, _response_unit(judged), claim.quantity)} \approx {written(claim.node)}"


def within_text(judged: Judged) -> str:
    """The error that the claim is allowed: "10 %", "0.5 dB"."""
    claim = judged.claim
    return error_text(claim.within, claim.within_unit, absolute=bool(claim.within_unit), modulus=True)


def _response_unit(judged: Judged) -> str:
    """The unit of the claim's response where the quantity shows it; its letter depends on nothing else."""
    return judged.unit if judged.claim.quantity.name in ("dc", "hf", "at") else ""


def _error(judged: Judged) -> str:
    return error_text(
        judged.error, judged.unit, absolute=judged.absolute, modulus=isinstance(judged.error, complex)
    )


def _claim(judged: Judged, check: Check, pictures: Sequence[Drawing]) -> Section:
    claim = judged.claim
    title = inline(f"{claim.response}: {quantity_words(claim.quantity)}")
    blocks: list[Block] = [
        *_as_written(judged),
        Paragraph(
            inline(
                f"Within {within_text(judged)}: ", Strong(judged.verdict_words), f". {_sentence(judged.why)}"
            )
        ),
    ]
    if judged.root:
        words = (
            f"The formula is that of {judged.root}, not of {claim.quantity.text}; so are error and verdict."
        )
        blocks.append(Box("remark", inline(words)))
    blocks.append(Paragraph(_figures(judged, check)))
    blocks += _formulas(judged)
    blocks += _conditions(judged)
    blocks += _ways(judged)
    blocks += [Paragraph(inline(_sentence(remark))) for remark in judged.remarks]
    blocks += [Figure(picture) for picture in pictures]
    return Section(title, tuple(blocks))


def _as_written(judged: Judged) -> list[Block]:
    """The claim's formula as a display, in a line of text where it is too wide for one."""
    whole = _claim_math(judged, latex_of)
    if math_width(whole) > PAGE_WIDTH:
        return [Paragraph(inline(Math(_claim_math(judged, latex_in_line))))]
    left, _, right = whole.partition(r"\approx")
    return [
        Equation((MathLine(left.strip(), rf"\approx {right.strip()}"),), f"{judged.claim.about} as claimed")
    ]


def _sentence(text: str) -> str:
    text = text.strip()
    end = "" if text.endswith((".", "!", "?")) else "."
    return f"{text[:1].upper()}{text[1:]}{end}"


def _figures(judged: Judged, check: Check) -> Inline:
    exact, claimed = (
        quantity_text(value, judged.unit, judged.claim.quantity) for value in (judged.exact, judged.claimed)
    )
    if judged.error is None:
        why = f": {judged.why_not}" if judged.why_not else ""
        return inline(f"Exact {exact}, formula {claimed}; no error{why}.")
    pieces = inline(f"Exact {exact}, formula {claimed}: error ", Strong(_error(judged)))
    figure = judged.span
    if figure is None:
        return (*pieces, *inline(" at the bias point."))
    over = range_text(figure, judged.unit, absolute=judged.absolute)
    pieces = (*pieces, *inline(f" at the bias point, {over} over the span ({how_known(figure)})"))
    if figure.least == figure.greatest:
        return (*pieces, *inline("."))
    return (*pieces, *inline(", worst at "), *place_words(worst_place(figure), check.stage), *inline("."))


def _formulas(judged: Judged) -> list[Block]:
    blocks: list[Block] = []
    if judged.formula_exact is not None:
        claim = judged.claim
        label = quantity_math(claim.response, _response_unit(judged), claim.quantity)
        lines = formula_display(judged.formula_exact, label)
        if len(lines) <= _EXACT_LINES:
            blocks.append(Equation(lines, f"{claim.about}, exact"))
    formula = judged.error_formula
    if formula is not None and formula.shape.coefficient:
        lines = formula_display(formula.shape, r"\varepsilon")
        if len(lines) <= _ERROR_LINES:
            blocks.append(Equation(lines, f"error of the formula for {judged.claim.about}"))
    return blocks


def _conditions(judged: Judged) -> list[Block]:
    blocks: list[Block] = []
    for target, caption in ((0, "What the formula takes to be small."), (1, "What the stage takes to be 1.")):
        listed = [c for c in judged.conditions if c.target == target]
        if not listed:
            continue
        over = any(c.span is not None for c in listed)
        header = [inline("ratio"), inline("at the bias point")]
        header += [inline("largest over the span")] if over else []
        header += [inline("error it adds")] + ([inline("assumption")] if target else [])
        align = [LEFT, *[POINT] * (2 + over), *([LEFT] if target else [])]
        rows = tuple(_condition(c, over) for c in listed[:_MOST_CONDITIONS])
        blocks.append(Table(caption, tuple(header), rows, tuple(align)))
        rest = listed[_MOST_CONDITIONS:]
        if rest:
            total = error_words(sum(c.effect or 0.0 for c in rest), "", absolute=False)
            blocks.append(Paragraph(inline(f"{len(rest)} more, each smaller, add {total} together.")))
    return blocks


def _written_ratio(condition: Condition) -> Shape:
    """The whole ratio where it is short, else its leading terms."""
    return condition.ratio if len(condition.ratio.text()) <= _WHOLE_RATIO else condition.shown


def _condition(condition: Condition, over: bool) -> tuple[Inline, ...]:
    shown: list[Inline] = [
        inline(Math(shape_in_line(_written_ratio(condition)))),
        inline(ratio_words(condition.at_bias)),
    ]
    shown += [inline(ratio_words(condition.largest))] if over else []
    shown.append(
        inline("none" if condition.effect is None else error_text(condition.effect, "", absolute=False))
    )
    return (*shown, inline(condition.assumption)) if condition.target else tuple(shown)


def _ways(judged: Judged) -> list[Block]:
    blocks: list[Block] = []
    for way in judged.ways:
        pieces: list[Math | Strong | str] = []
        for k, name in enumerate(way.names):
            pieces += [" and " if k else "", Strong(name)]
        source = "" if way.own else " (not assumed in the stage file)"
        blocks.append(Paragraph(inline("It follows from ", *pieces, f"{source}.")))
    return blocks
