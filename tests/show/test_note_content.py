"""What a note says: the result first, nothing that is not there, and every figure the ledger's or the check's."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from noted import Square, check_by_hand, compiled, nested_text, overfull, stage_of
from shown import ASSUMPTIONS, CASCODE, SPAN
from test_latex_lines import TWO_STAGE

from symamp.judge.ledger import make_ledger
from symamp.judge.span_errors import SpanFigure
from symamp.show.assumption_words import assumption_words
from symamp.show.note_content import note_document
from symamp.show.note_files import write_note
from symamp.show.note_model import (
    Block,
    Box,
    Bullets,
    Document,
    Equation,
    Figure,
    Math,
    Paragraph,
    Section,
    Table,
    every,
    plain,
)


def titles(document: Document) -> list[str]:
    return [plain(block.title) for block in document.blocks if isinstance(block, Section)]


def section(document: Document, title: str) -> Section:
    return next(b for b in document.blocks if isinstance(b, Section) and plain(b.title) == title)


def words(blocks: tuple[Block, ...]) -> str:
    """All that is written, formulas in LaTeX."""
    found = []
    for block in every(blocks):
        match block:
            case Section():
                found.append(plain(block.title))
            case Paragraph() | Box():
                found.append(plain(block.pieces))
            case Bullets():
                found += map(plain, block.items)
            case Table():
                found += [
                    block.caption,
                    *map(plain, block.header),
                    *(plain(cell) for row in block.rows for cell in row),
                ]
            case Equation():
                found += [f"{line.left} {line.right}" for line in block.lines]
            case Figure():
                found.append(block.picture.caption)
    return "\n".join(found).replace("\u00a0", " ")


def whole() -> Document:
    stage = stage_of()
    pictures = {
        "response": [Square("gain-bode", "Bode plot of gain")],
        "gain.dc": [
            Square("gain.dc-shares", "Shares of gain.dc"),
            Square("gain.dc-1-span", "Error over the span"),
        ],
    }
    return note_document(
        stage, ledger=make_ledger(stage, points=16), check=check_by_hand(stage), pictures=pictures
    )


def test_the_result_comes_first() -> None:
    assert titles(whole()) == [
        "Result",
        "Simplified expressions",
        "Assumptions",
        "Frequency response",
        "The stage",
        "Hand formulas in detail",
        "What each assumption adds to the error",
        "Exact expressions",
        "How the figures were found",
        "What the figures do not say",
    ]


def test_a_stage_without_claims_assumptions_or_span_has_no_section_of_them() -> None:
    stage = stage_of(CASCODE)
    document = note_document(stage)
    assert titles(document) == [
        "Result",
        "The stage",
        "Exact expressions",
        "How the figures were found",
        "What the figures do not say",
    ]
    text = words(document.blocks)
    assert "No span is given" in text
    assert "simplified" not in text
    assert "−387.2 (51.76 dB)" in text  # gm1·(gm2 + gmb2 + gds2)/(gds1·gds2) = 4.1·4.76/(0.21·0.24)


def test_without_a_bias_point_there_are_formulas_alone() -> None:
    text = words(note_document(stage_of(CASCODE[: CASCODE.index("[bias]")])).blocks)
    assert r"H_{\mathrm{gain}}(0) = -\frac{g_{m1}" in text
    assert "for want of a bias value of gm1, gds1" in text
    assert "Bias point." not in text


def test_verdicts_are_said_with_their_figures() -> None:
    document = whole()
    text = words(section(document, "Result").blocks)
    assert "0 of 2 hand formulas hold over the whole span" in text.replace("\n", "")
    assert r"H_{\mathrm{gain}}(0) \approx -g_{m1} g_{m2} r_{o1} r_{o2}" in text
    assert r"\lvert p_1 \rvert / 2 \pi \approx 1 / (2 \pi C_L (r_{o1} \parallel r_{o2}))" in text
    assert r"\lvert p_1 \rvert / 2 \pi \approx 1 / (2 \pi C_L (r_{o1} \parallel r_{o2}))" in text
    assert "−18.1 %" in text
    assert "−22.0 % to −14.0 %" in text
    detail = words(section(document, "Hand formulas in detail").blocks)
    for part in (
        "The error reaches 22 % over the span, and 20 % are allowed.",
        "What the formula takes to be small.",
        "g_{mb2}/g_{m2}",
        "Within 20.0 %: holds here. The error",
        "0.159",
        "What the stage takes to be 1.",
        "It follows from no body effect.",
        "It follows from all & sundry and 100 % sure (not assumed in the stage file).",
        "worst at g_{m2} = 3.12 mS.",
        "Within 5.00 %: wrong for p2, not p1.",
        "no error: the formula has no value.",
        "The formula is that of p2, not of p1.hz",
        r"\lvert p_1 \rvert / 2 \pi \approx \frac{1}{2 \pi C_L (r_{o1} \parallel r_{o2})}",
        "A remark_with an underscore.",
        "Error over the span",
    ):
        assert part in detail, part
    assert any(isinstance(b, Box) and plain(b.pieces) == "one <warning> & more" for b in document.blocks)


def test_the_ledger_is_said_with_its_figures() -> None:
    document = whole()
    stage = stage_of()
    account = make_ledger(stage, points=16)["gain.dc"]
    text = words(section(document, "What each assumption adds to the error").blocks)
    for share in account.assumptions:
        assert share.name in text
    assert "exact −387.2, simplified −317.3; error −18.1 %" in text
    assert r"\varepsilon = -\frac{g_{mb2} + g_{ds2}}{g_{m2} + g_{mb2} + g_{ds2}}" in text
    assert "Lost under all assumptions, of gain: p2 at" in text
    assert text.count("Shares of gain.dc") == 1
    assert "Error over the span" not in text  # it stands beside the claim


def test_accounts_with_the_same_figures_stand_together() -> None:
    made = section(whole(), "What each assumption adds to the error")
    heads = [plain(block.title) for block in made.blocks if isinstance(block, Section)]
    assert "gain: pole 1; gain: bandwidth; rout: pole 1; rout: bandwidth" in heads


def test_what_was_sampled_is_never_called_proved() -> None:
    stage = stage_of()
    ledger, check = make_ledger(stage, points=16), check_by_hand(stage)
    sampled = [replace(a, span=replace(a.span, proved=False)) if a.span else a for a in ledger.accounts]
    text = words(note_document(stage, ledger=replace(ledger, accounts=tuple(sampled)), check=check).blocks)
    assert "seed 1" in text
    assert "seed 7" in text
    assert "Sampled figures are not proved" in text
    assert "over the span (sampled)" in text
    assert "proved)" not in text
    assert "Proved for every point" not in text


def test_what_was_proved_is_called_so_with_its_method() -> None:
    stage = stage_of()
    ledger = make_ledger(stage, points=16)
    span = SpanFigure(-0.2, 0.1, {"gm1": 0.002}, {"gm1": 0.008}, False, 0, 0, True, "ball arithmetic")
    accounts = (replace(ledger["gain.dc"], span=span),)
    text = words(note_document(stage, ledger=replace(ledger, accounts=accounts)).blocks)
    assert "over the span (proved)" in text
    assert "Proved for every point of the span (ball arithmetic): gain.dc." in text


def test_both_roots_of_a_quadratic_are_one_formula() -> None:
    text = words(section(whole(), "Exact expressions").blocks)
    assert r"p_{1,2} = \frac{-b \pm \sqrt{b^2 - 4 a c}}{2 a}" in text
    assert text.count(r"\sqrt") == 2  # of gain and of rout


def test_a_nested_response_says_so_and_has_figures() -> None:
    text = words(note_document(stage_of(nested_text())).blocks)
    assert "product terms and is not written out" in text
    assert "Not written out, and evaluated as a graph of minors" in text
    assert "DC value" in text


STATEMENTS = [
    ({"neglect": ["gmb"]}, "g_{mb} is neglected"),
    ({"neglect": ["gmb", "cgs1", "M2"]}, "g_{mb}, C_{gs1} and M2 are neglected"),
    ({"open": ["RS"]}, "R_S is open"),
    ({"open": "RS"}, "R_S is open"),
    ({"short": ["CC", "RS"]}, "C_C and R_S are shorts"),
    ({"small": ["gds"], "against": ["gm"]}, "g_{ds} is small against g_m"),
    ({"small": ["1"], "against": ["gm1*RS"]}, "1 is small against g_{m1} R_S"),
    ({"small": ["gds1", "gds2"], "against": ["gm"]}, "g_{ds1} and g_{ds2} are small against g_m"),
    ({"dominant_capacitor": "CL"}, "every capacitor but C_L is neglected"),
    ({"equal": ["M1", "M2"]}, "M1 and M2 are alike, symbol by symbol"),
    ({"set": {"RZ": "1/gm2"}}, r"R_Z = \frac{1}{g_{m2}}"),
    (
        {"miller": {"part": "CC", "from": "a", "to": "out"}},
        "C_C between nodes a and out stands as one part to ground at each end, by the gain at s = 0 (Miller’s theorem)",
    ),
    (
        {"miller": {"part": "CC", "from": "a", "to": "out", "ends": "from"}},
        "C_C between nodes a and out stands as one part to ground at node a, by the gain at s = 0 (Miller’s theorem)",
    ),
    (
        {"dominant_pole": True},
        "the lowest pole alone counts: the denominator is b_0 + b_1 s, the numerator a_0",
    ),
    (
        {"poles_far_apart": True},
        "poles and zeros lie far apart: each is minus the ratio of two neighbouring coefficients",
    ),
    ({"band": "10 MHz"}, "near 10 MHz one power of s counts in the numerator and one in the denominator"),
    ({"dominant_pole": False, "neglect": ["gmb"], "for": ["gain"]}, "g_{mb} is neglected (for gain alone)"),
    ({"neglect": ["gmb"], "open": ["RS"]}, "g_{mb} is neglected; R_S is open"),
]


@pytest.mark.parametrize(("table", "statement"), STATEMENTS)
def test_assumptions_in_the_words_of_a_designer(table: dict[str, object], statement: str) -> None:
    stage = stage_of(TWO_STAGE)
    assert plain(assumption_words({"name": "n", **table}, stage)) == statement
    assert all(piece.latex for piece in assumption_words(table, stage) if isinstance(piece, Math))


def test_every_kind_of_assumption_has_words() -> None:
    from symamp.assumptions.kinds import KEYS
    from symamp.show.assumption_words import _STATEMENTS

    assert set(KEYS) - {"against"} == set(_STATEMENTS)


@pytest.mark.parametrize("texts", [(CASCODE,), (CASCODE, SPAN, ASSUMPTIONS), (TWO_STAGE,)])
def test_whole_notes_compile_and_nothing_sticks_out(tmp_path: Path, texts: tuple[str, ...]) -> None:
    stage = stage_of(*texts)
    ledger = make_ledger(stage, points=16) if stage.assumptions else None
    check = check_by_hand(stage) if stage.assumptions else None
    write_note(note_document(stage, ledger=ledger, check=check), tmp_path / "note.tex")
    pages, log = compiled(tmp_path)
    assert 2 <= pages <= 9
    assert overfull(log) == []
