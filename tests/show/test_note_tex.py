"""Notes as LaTeX: they compile as they are, whatever a user wrote, and nothing sticks out."""

from __future__ import annotations

import random
from pathlib import Path

import pytest
from noted import Square, compiled, overfull

from symamp.show.latex_words import MathLine
from symamp.show.note_files import write_note
from symamp.show.note_model import (
    LEFT,
    POINT,
    REMARK,
    WARNING,
    Box,
    Bullets,
    Code,
    Document,
    Equation,
    Figure,
    Inline,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    Text,
    inline,
)
from symamp.show.note_tex import tex_note
from symamp.show.note_tex_table import at_point
from symamp.show.tex_text import tex_code, tex_text

SPECIAL = r"""\{}$&#%_^~<>|"`'[]*-+=/:;,.?!@()"""
STRANGE = (
    "äöüßéèêñçåøæœłŁőžšİığþÐđħŋ" "ΑΩαβγδεπμσφωΔΣ" "−±×÷·∞≈≤≥≠≪∥→⇒√∑∂µΩ℧" "²³₁½…–—‘’“”„«»°†•"
    "日本語中文한국Привет" "🚀😀👩‍🔬"
    "\u200b\u200d\ufeff\u202e\u0301a\u0301\u0338x\u0000\u0007\x1b\x7f\u2028\u00a0\u2009"
    "ﬁ℃Å①ⅷ㎶"
)  # fmt: skip
WIDE = (
    "anumberofletterswithoutasinglespacewhichnobodywouldwritebutacomputercould" * 3,
    "gm1*gm2*ro1*ro2/(1+gm2*ro2)" * 8,
)


def everything(words: str) -> Document:
    """A document that has these words wherever words can be."""
    text, code = inline(words), (Code(words),)
    table = Table(
        words, (text, text, text), ((text, code, (Strong(words),)), (text, text, text)), (LEFT, LEFT, POINT)
    )
    blocks = (
        Paragraph((*text, *code, Strong(words))),
        Box(WARNING, text),
        Box(REMARK, code),
        Bullets((text, code)),
        table,
        Equation((MathLine("a", "= b"), MathLine("", r"\quad{} + c")), words),
        Figure(Square(caption=words, alt=words)),
        Section(text, (Section((*text, Math("x_1")), (Section(code, (Paragraph(text),)),)),)),
    )
    return Document(words, text, blocks)


def written(folder: Path, document: Document) -> tuple[int, str]:
    write_note(document, folder / "note.tex")
    return compiled(folder)


def test_every_block_compiles(tmp_path: Path) -> None:
    pages, log = written(tmp_path, everything("plain words"))
    assert pages == 2
    assert overfull(log) == []


@pytest.mark.parametrize(
    "words", [SPECIAL, STRANGE, SPECIAL[::-1], "--''``,,<<>>!`?`", "\\end{document}", "% gone", *WIDE]
)
def test_hostile_words_compile(tmp_path: Path, words: str) -> None:
    pages, log = written(tmp_path, everything(words))
    assert 1 <= pages <= 8
    assert overfull(log) == []


def test_random_characters_compile(tmp_path: Path) -> None:
    """Characters from all over Unicode, in titles, paragraphs and cells."""
    draw = random.Random(20)
    blocks, pool = [], SPECIAL + STRANGE
    for _ in range(300):
        some = [
            chr(
                draw.choice(
                    (
                        draw.randrange(32, 0x250),
                        draw.randrange(0x250, 0xD800),
                        draw.randrange(0xE000, 0x1FFFF),
                    )
                )
            )
            for _ in range(6)
        ]
        words = "".join(draw.sample([*some, *draw.choices(pool, k=10), " ", "word"], k=14))
        blocks.append(Section(inline(words), (Paragraph(inline(words, Code(words), Strong(words))),)))
    pages, log = written(tmp_path, Document("all sorts", (), tuple(blocks)))
    assert pages > 5
    assert overfull(log) == []


def test_the_file_is_ascii() -> None:
    assert tex_note(everything(STRANGE), "f").isascii()


@pytest.mark.parametrize(
    ("text", "tex"),
    [
        ("50 % of R_1 & #2", r"50 \% of R\_1 \& \#2"),
        ("Verstärker", r"Verst\"{a}rker"),
        ("−3 µA", r"\ensuremath{-}3 \ensuremath{\mu}A"),
        ("470\u00a0kΩ", r"470~k\ensuremath{\Omega}"),
        ("a--b", "a-{}-b"),
        ("naïve", r"na\"{\i}ve"),
        ("x²", r"x\textsuperscript{2}"),
        ("🚀", "{[}U+1F680{]}"),
        ("a\u200db", "ab"),
        ("e\u0301", r"\'{e}"),
        ("gain", "gain"),
    ],
)
def test_text_is_what_tex_reads_as_that_text(text: str, tex: str) -> None:
    assert tex_text(text) == tex


def test_code_may_be_broken_after_signs() -> None:
    assert tex_code("gm1*ro1") == r"\texttt{gm1{*}\allowbreak{}ro1}"


def test_columns_wrap_and_stay_on_the_page(tmp_path: Path) -> None:
    sentence = "an assumption with a name of many words that says all that there is to say"
    figures = ("−0.00370\u00a0%", "+12.5\u00a0%", "0\u00a0%", "none", "−100\u00a0%")
    rows = tuple(
        tuple(inline(cell) for cell in (sentence[k:], *figures[:4], f"−{k}.5\u00a0% to +{k}7.25\u00a0%"))
        for k in range(6)
    )
    header = tuple(
        inline(cell) for cell in ("assumption", "alone", "added", "last", "share", "share over the span")
    )
    table = Table("", header, rows, (LEFT, POINT, POINT, POINT, POINT, LEFT))
    pages, log = written(tmp_path, Document("t", (), (table,)))
    assert pages == 1
    assert overfull(log) == []


@pytest.mark.parametrize(
    "words", ["short", "a rather long name of a thing that wraps in its column, since " * 2]
)
def test_a_long_table_runs_over_pages_in_one_run(tmp_path: Path, words: str) -> None:
    rows = tuple((inline(f"{k} {words}"), inline(f"{k / 7:.3f}\u00a0mS"), inline(words)) for k in range(150))
    table = Table("Long.", (inline("n"), inline("value"), inline("x")), rows, (LEFT, POINT, LEFT))
    pages, log = written(tmp_path, Document("t", (), (table,)))
    assert pages >= 3
    assert overfull(log) == []
    write_note(Document("t", (), (table,)), tmp_path / "again.tex")
    assert (
        compiled(tmp_path, "again.tex")[0] == compiled(tmp_path, "again.tex")[0]
    )  # a second run changes nothing


@pytest.mark.parametrize(
    ("cell", "before", "after"),
    [
        (inline("−387.2"), "−387", ".2"),
        (inline("4.1\u00a0mS"), "4", ".1\u00a0mS"),
        (inline("12\u00a0mS"), "12", "\u00a0mS"),
        (inline("none"), "", "none"),
        ((Strong("+5.04\u00a0%"),), "+5", ".04\u00a0%"),
        ((), "", ""),
        (inline("7"), "7", ""),
    ],
)
def test_figures_are_cut_at_their_point(cell: Inline, before: str, after: str) -> None:
    halves = at_point(cell)
    assert tuple("".join(p.text for p in half if isinstance(p, Text | Strong)) for half in halves) == (
        before,
        after,
    )


def test_a_name_with_signs_is_no_trouble_for_pictures(tmp_path: Path) -> None:
    write_note(everything("x"), tmp_path / "50% #1 ä.tex")
    (tmp_path / "50% #1 ä.tex").rename(tmp_path / "plain.tex")
    assert compiled(tmp_path, "plain.tex")[0] == 2
