"""Notes as Markdown: what a user wrote is text, tables stay tables."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from noted import Square, check_by_hand, stage_of
from test_note_tex import SPECIAL, STRANGE, everything

from symamp.judge.ledger import make_ledger
from symamp.show.latex_words import MathLine
from symamp.show.note_content import note_document
from symamp.show.note_files import write_note
from symamp.show.note_md import markdown_note, markdown_text
from symamp.show.note_model import (
    LEFT,
    POINT,
    WARNING,
    Box,
    Bullets,
    Code,
    Document,
    Equation,
    Figure,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    inline,
)


def lines_of(*blocks: object, title: str = "A note") -> list[str]:
    return markdown_note(Document(title, (), tuple(blocks)), "f").splitlines()  # type: ignore[arg-type]


def cells(row: str) -> int:
    """How many cells a reader finds in a row: bars that are not escaped, less the first."""
    return len(re.findall(r"(?<!\\)\|", row)) - 1


def test_headings_go_down_with_sections() -> None:
    inner = Section(inline("b"), (Paragraph(inline("x")),))
    assert lines_of(Section(inline("a"), (inner,))) == ["# A note", "", "## a", "", "### b", "", "x"]


@pytest.mark.parametrize(
    ("text", "markdown"),
    [
        ("gm_1 * ro_1", r"gm\_1 \* ro\_1"),
        ("<b>a</b> & [x](y)", r"\<b\>a\</b\> \& \[x\](y)"),
        ("a|b $5 `c`", r"a\|b \$5 \`c\`"),
        ("50 % − 3 dB", "50 % − 3 dB"),
        ("#1 ~ 2", r"\#1 \~ 2"),
        ("two\nlines\tand", "two lines and"),
    ],
)
def test_marks_are_escaped(text: str, markdown: str) -> None:
    assert markdown_text(text) == markdown


@pytest.mark.parametrize(
    ("text", "first"), [("1. one", r"1\. one"), ("- a", r"\- a"), ("+ b", r"\+ b"), ("2) c", r"2\) c")]
)
def test_a_paragraph_is_no_list(text: str, first: str) -> None:
    assert lines_of(Paragraph(inline(text)))[2] == first
    assert lines_of(Bullets((inline(text),)))[2] == f"- {first}"


@pytest.mark.parametrize(
    ("code", "written"), [("a*b", "`a*b`"), ("a`b", "`` a`b ``"), ("``", "``` `` ```"), (" ", " ")]
)
def test_code_has_as_many_backticks_as_it_needs(code: str, written: str) -> None:
    assert lines_of(Paragraph(((Code(code)), Strong("x"))))[2].removesuffix("**x**") == written


@pytest.mark.parametrize("words", ["plain", SPECIAL, STRANGE, "a || b", "x\\"])
def test_tables_keep_their_cells(words: str) -> None:
    table = Table(
        words,
        (inline(words), inline("y")),
        (((Code(words),), (Math("x"),)), (inline(words), inline(words))),
        (LEFT, POINT),
    )
    rows = [line for line in lines_of(table) if line.startswith("|")]
    assert len(rows) == 4
    assert {cells(row) for row in rows} == {2}
    assert rows[1] == "| --- | ---: |"


def test_equations_stand_between_dollar_signs() -> None:
    one = Equation((MathLine("a", "= b"),), "n")
    two = Equation((MathLine("a", "= b"), MathLine("", r"\quad{} + c")), "n")
    assert lines_of(one)[2:] == ["$$", "a = b", "$$"]
    assert lines_of(two)[2:] == [
        "$$",
        r"\begin{aligned}",
        r"a & = b \\",
        r"& \quad{} + c",
        r"\end{aligned}",
        "$$",
    ]


def test_boxes_and_pictures() -> None:
    lines = lines_of(Box(WARNING, inline("mind")), Figure(Square("one")), Figure(Square("two", caption="B")))
    assert "> **Warning.** mind" in lines
    assert "![One grey square](f/one.svg)" in lines
    assert "**Figure 2.** B" in lines


def test_a_folder_with_signs_is_quoted() -> None:
    text = markdown_note(Document("t", (), (Figure(Square()),)), "a b")
    assert "](a%20b/square.svg)" in text


def test_any_words_are_written(tmp_path: Path) -> None:
    for words in (SPECIAL, STRANGE):
        write_note(everything(words), tmp_path / "n.md")
        text = (tmp_path / "n.md").read_text(encoding="utf-8")
        assert not re.search("[\x00-\x09\x0b-\x1f]", text)


def test_a_whole_note(tmp_path: Path) -> None:
    stage = stage_of()
    document = note_document(stage, ledger=make_ledger(stage, points=16), check=check_by_hand(stage))
    write_note(document, tmp_path / "n.md")
    text = (tmp_path / "n.md").read_text(encoding="utf-8")
    assert text.startswith("# Cascode into a capacitive load\n")
    assert text.count("$$") % 2 == 0
    for block in re.findall(r"(?:^\|.*\n)+", text, re.MULTILINE):
        assert len({cells(row) for row in block.splitlines()}) == 1
