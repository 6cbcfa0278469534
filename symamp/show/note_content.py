"""What a design note says (room: show): the result first, then what it stands on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.exact.derive import derive
from symamp.exact.forms import Nested
from symamp.exact.response import Response
from symamp.judge.ledger import Ledger
from symamp.judge.verdict import HOLDS, Check
from symamp.show.note_model import (
    REMARK,
    WARNING,
    Block,
    Box,
    Bullets,
    Document,
    Drawing,
    Figure,
    Inline,
    Paragraph,
    Section,
    Strong,
    inline,
)
from symamp.show.note_sections_claims import OVER_SPAN, claims_section, verdict_table
from symamp.show.note_sections_formulas import exact_section, figures_table, simplified_section
from symamp.show.note_sections_ledger import ledger_section, result_table
from symamp.show.note_sections_stage import assumptions_section, stage_section
from symamp.show.note_words import response_words

RESPONSE_PICTURES = "response"


def note_document(
    stage: Stage,
    *,
    ledger: Ledger | None = None,
    check: Check | None = None,
    pictures: Mapping[str, Sequence[Drawing]] | None = None,
) -> Document:
    """The note of a stage: verdicts and simplified formulas first, then the stage, exact expressions and accounts.

    `ledger` and `check` are None where the stage makes no assumption, or no claim. `pictures` are those of the
    responses against frequency ("response"), and by the name of a quantity ("gain.dc") those of its shares and of
    errors over the span, whose names end in "-span".
    """
    drawn = dict(pictures or {})
    responses = [derive(stage, asked) for asked in stage.asked.values()]
    made = read_assumptions(stage)
    approximated = [(r, Approximator(r).under(made)) for r in responses] if made else []
    blocks: list[Block | None] = [
        *_notices(stage, ledger, check, approximated),
        _result(responses, ledger, check),
        simplified_section(approximated),
        assumptions_section(stage),
        _pictures("Frequency response", drawn.get(RESPONSE_PICTURES, ())),
        stage_section(stage),
        claims_section(check, drawn) if check else None,
        ledger_section(ledger, _without_spans(drawn) if check else drawn) if ledger else None,
        exact_section(responses),
        _method(responses, ledger, check),
        _cautions(),
    ]
    return Document(stage.title, _subtitle(stage), tuple(block for block in blocks if block is not None))


def _without_spans(pictures: Mapping[str, Sequence[Drawing]]) -> dict[str, list[Drawing]]:
    return {name: [p for p in kept if not p.name.endswith(OVER_SPAN)] for name, kept in pictures.items()}


def _subtitle(stage: Stage) -> Inline:
    what = "; ".join(response_words(asked) for asked in stage.asked.values())
    return inline(f"Small-signal design note. {what}")


def _notices(
    stage: Stage,
    ledger: Ledger | None,
    check: Check | None,
    approximated: Sequence[tuple[Response, Approximation]],
) -> list[Block]:
    """Warnings and remarks, each once."""
    warnings, remarks = list(stage.warnings), list(stage.remarks)
    for source in (ledger, check):
        if source is not None:
            warnings += source.warnings
            remarks += source.remarks
    for exact, each in approximated:
        warnings += each.warnings
        remarks += [f"{exact.name}: {remark}" for remark in each.remarks]
    boxes: list[Block] = [Box(WARNING, inline(text)) for text in dict.fromkeys(warnings)]
    return [*boxes, *(Box(REMARK, inline(text)) for text in dict.fromkeys(remarks))]


def _result(responses: Sequence[Response], ledger: Ledger | None, check: Check | None) -> Section:
    blocks: list[Block] = []
    if check is not None:
        held = sum(judged.verdict == HOLDS for judged in check.claims)
        count = len(check.claims)
        words = (
            f"{held} of {count} hand formula{'s' if count != 1 else ''} {'holds' if held == 1 else 'hold'}"
        )
        where = " at the bias point." if check.stage.span.empty else " over the whole span."
        blocks += [Paragraph((Strong(words), *inline(where))), verdict_table(check)]
    if ledger is not None:
        blocks.append(result_table(ledger))
    if not blocks:
        for response in responses:
            if not response.missing:
                blocks.append(Paragraph((Strong(response_words(response.asked)),)))
                blocks.append(figures_table(response))
        if not blocks:
            blocks.append(
                Paragraph(inline("The expressions below are exact; the stage gives no bias point."))
            )
    return Section(inline("Result"), tuple(blocks))


def _pictures(title: str, pictures: Sequence[Drawing]) -> Section | None:
    if not pictures:
        return None
    return Section(inline(title), tuple(Figure(picture) for picture in pictures))


def _method(responses: Sequence[Response], ledger: Ledger | None, check: Check | None) -> Section:
    """What is exact, what was proved and what sampled."""
    nested = [r.name for r in responses if isinstance(r.form, Nested)]
    items = [
        inline(
            "Expressions are exact: modified nodal analysis, in integer polynomials brought to lowest terms. Poles and "
            "zeros at the bias point come from exact coefficients."
        )
    ]
    if nested:
        items.append(inline(f"Not written out, and evaluated as a graph of minors: {', '.join(nested)}."))
    for what, found in (("the errors of the assumptions", ledger), ("the hand formulas", check)):
        if found is not None and found.points:
            items.append(inline(f"Over the span, {what}: {_looked_at(found)}"))
    items += [
        inline(f"Proved for every point of the span{_by(method)}: {', '.join(names)}.")
        for method, names in _proved(ledger, check).items()
    ]
    return Section(inline("How the figures were found"), (Bullets(tuple(items)),))


def _proved(ledger: Ledger | None, check: Check | None) -> dict[str, list[str]]:
    """{how: the quantities whose errors over the span were proved so}."""
    figures = [(a.name, a.span) for a in (ledger.accounts if ledger else ())]
    figures += [(f"{j.claim.about} = {j.claim.formula}", j.span) for j in (check.claims if check else ())]
    found: dict[str, list[str]] = {}
    for name, figure in figures:
        if figure is not None and figure.proved:
            found.setdefault(figure.method, []).append(name)
    return found


def _by(method: str) -> str:
    words = method.removeprefix("proved: ")
    return f" ({words})" if words else ""


def _looked_at(found: Ledger | Check) -> str:
    if found.seed is None:
        return f"{found.points:,} bias points; {found.method}."
    words = f"{found.points:,} bias points, seed {found.seed}; {found.method}."
    return f"{words} Sampled figures are not proved: a worse point may lie between those tried."


def _cautions() -> Section:
    words = (
        "All figures are small-signal and linear, at the stated bias: they say nothing of distortion, slewing, noise "
        "or start-up, nor of what the stage leaves out. A bias point stands for devices only as well as its values do. "
        "Margins for safety follow local codes and licensed practice."
    )
    return Section(inline("What the figures do not say"), (Paragraph(inline(words)),))
