"""Notes as HTML: one page that is whole, offline and readable, also for those who hear it."""

from __future__ import annotations

import re
import shutil
import subprocess
from html.parser import HTMLParser
from itertools import pairwise
from pathlib import Path

import pytest
from noted import Square, check_by_hand, stage_of
from test_note_tex import SPECIAL, STRANGE, everything

from symamp.judge.ledger import make_ledger
from symamp.show.latex_words import MathLine
from symamp.show.note_content import note_document
from symamp.show.note_html import html_note, inner_svg, lines_mathml
from symamp.show.note_model import LEFT, POINT, Document, Equation, Figure, Math, Paragraph, Table, inline

_EMPTY = {"meta", "br", "rect", "mspace", "use", "path"}


class Reader(HTMLParser):
    """Reads a page, and notes what is opened and not closed, its texts, and its attributes."""

    def __init__(self, page: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text = ""
        self.feed(page)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in _EMPTY:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        if tag in _EMPTY:
            return
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text += data

    def all(self, tag: str) -> list[dict[str, str | None]]:
        return [attrs for name, attrs in self.tags if name == tag]


def page_of(*blocks: object, title: str = "A note") -> str:
    return html_note(Document(title, (), tuple(blocks)))  # type: ignore[arg-type]


@pytest.fixture(scope="module")
def whole_note() -> str:
    stage = stage_of()
    document = note_document(
        stage,
        ledger=make_ledger(stage, points=16),
        check=check_by_hand(stage),
        pictures={"response": [Square("gain-bode", "Bode plot", "Magnitude and phase")]},
    )
    return html_note(document)


@pytest.mark.parametrize(
    "words", ["plain", SPECIAL, STRANGE, "<script>alert(1)</script>", "</style></title>", '" onload="x']
)
def test_whatever_is_written_stays_text(words: str) -> None:
    page = html_note(everything(words))
    read = Reader(page)
    assert read.open == []
    assert not read.all("script")
    assert not any("onload" in attrs for _, attrs in read.tags)
    if words.isprintable():
        assert words in read.text
        assert read.all("svg")[0]["aria-label"] == words
    page.encode("utf-8")


def test_nothing_is_fetched(whole_note: str) -> None:
    read = Reader(whole_note)
    assert not [tag for tag in ("link", "img", "script", "iframe", "object") if read.all(tag)]
    urls = set(re.findall(r"(?:https?:)?//[\w.]+[\w/.]*", whole_note))
    assert urls <= {
        "http://www.w3.org/1998/Math/MathML",
        "http://www.w3.org/2000/svg",
        "http://www.w3.org/1999/xlink",
    }
    assert "@import" not in whole_note


def test_the_page_says_what_it_is(whole_note: str) -> None:
    read = Reader(whole_note)
    assert read.open == []
    assert read.all("html")[0]["lang"] == "en"
    assert "<title>Cascode into a capacitive load</title>" in whole_note
    assert len(read.all("h1")) == len(read.all("main")) == 1
    levels = [int(tag[1]) for tag, _ in read.tags if re.fullmatch("h[1-6]", tag)]
    assert all(after - before <= 1 for before, after in pairwise(levels))
    assert "width=device-width" in (read.all("meta")[1]["content"] or "")


def test_tables_can_be_heard(whole_note: str) -> None:
    read = Reader(whole_note)
    heads = read.all("th")
    assert heads
    assert {attrs.get("scope") for attrs in heads} == {"col", "row"}
    rows = re.findall(r"<tbody>\n<tr>(.*?)</tr>", whole_note, re.DOTALL)
    assert all(row.startswith('<th scope="row"') for row in rows)


def test_equations_and_pictures_have_names(whole_note: str) -> None:
    read = Reader(whole_note)
    named = [attrs for attrs in read.all("div") if "equation" in (attrs.get("class") or "")]
    assert named
    assert all(attrs["aria-label"] for attrs in named)
    assert read.all("svg")[0]["aria-label"] == "Magnitude and phase"


def test_lines_are_a_table_of_two_columns() -> None:
    lines = (
        MathLine("H(s)", r"= \frac{N(s)}{D(s)}"),
        MathLine("N(s)", "= a + b"),
        MathLine("", r"\quad{} + c"),
    )
    made = lines_mathml(lines)
    assert made.count("<mtr>") == 3
    assert made.count("<mtd") == 6
    assert '<mo form="infix">&#x0002B;</mo>' in made.split("<mtr>")[3]
    assert lines_mathml(lines[:1]).count("mtable") == 0


@pytest.mark.parametrize(
    ("latex", "has"),
    [
        (r"470\,\mathrm{k}\Omega", "<mtext>k</mtext>"),
        (r"H_{\mathrm{a\_b}}", "<mtext>a_b</mtext>"),
        (r"-b \pm c", "<mo>&#x000B1;</mo>"),
        (r"H(\infty)", "<mi>&#x0221E;</mi>"),
        ("g_{m1}", "<msub>"),
        (r"R_1 \parallel R_2", "&#x02225;"),
        (r"\lvert p_1 \rvert / 2 \pi", 'form="postfix">&#x0007C;</mo>'),
    ],
)
def test_signs_are_what_they_are(latex: str, has: str) -> None:
    assert has in page_of(Paragraph((Math(latex),)))


def test_figures_stand_on_their_point() -> None:
    rows = tuple((inline("a"), inline(cell)) for cell in ("4.1\u00a0mS", "−387.2", "none"))
    page = page_of(Table("t", (inline("x"), inline("y")), rows, (LEFT, POINT)))
    assert '<span style="min-width:4ch">4</span>.1\u00a0mS' in page
    assert '<td class="point">none</td>' in page


def test_pictures_keep_their_ids_apart() -> None:
    page = page_of(Figure(Square("one")), Figure(Square("two")))
    assert len(set(re.findall(r'\bid="([^"]+)"', page))) == 2
    assert set(re.findall(r"url\(#([^)]+)\)", page)) == set(re.findall(r'\bid="([^"]+)"', page))
    assert "<?xml" not in page
    assert page.count("<!DOCTYPE") == 1
    with pytest.raises(ValueError, match="no SVG"):
        inner_svg("<html></html>", "p", "alt")


def test_a_browser_shows_equations_and_pictures(tmp_path: Path, whole_note: str) -> None:
    browser = shutil.which("chromium")
    if browser is None:
        pytest.skip("chromium is not installed: apt-get install chromium")
    (tmp_path / "note.html").write_text(whole_note, encoding="utf-8")
    measure = (
        "<script>addEventListener('load', () => { const size = (name) => [...document.querySelectorAll(name)]"
        ".map((each) => { const box = each.getBoundingClientRect();"
        " return Math.round(Math.min(box.width, box.height)) });"
        "document.title = JSON.stringify({math: size('math'), svg: size('svg'), wide: document.body.scrollWidth,"
        " left: [...document.querySelectorAll('mtd.left')].map((e) => e.lastElementChild ? Math.round("
        "e.getBoundingClientRect().right - e.lastElementChild.getBoundingClientRect().right) : 0)}) })</script>"
    )
    measured = tmp_path / "measured.html"
    measured.write_text(whole_note.replace("</body>", f"{measure}</body>"), encoding="utf-8")
    options = [
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-quic",
        "--no-first-run",
        "--disable-background-networking",
    ]
    run = [
        browser,
        *options,
        f"--user-data-dir={tmp_path / 'profile'}",
        "--window-size=500,900",
        "--dump-dom",
    ]
    shown = subprocess.run(
        [*run, measured.as_uri()], capture_output=True, text=True, timeout=120, check=False
    )
    found = re.search(r"<title>(\{.*?\})</title>", shown.stdout)
    assert found, shown.stderr[-500:]
    sizes = {
        key: [int(x) for x in re.findall(r"-?\d+", text)]
        for key, text in re.findall(r'"(\w+)":(\[[^\]]*\]|\d+)', found[1])
    }
    assert len(sizes["math"]) == whole_note.count("<math") > 20
    assert min(sizes["math"]) >= 5  # every equation takes up room
    assert len(sizes["svg"]) == 1
    assert sizes["svg"][0] > 100
    assert sizes["wide"][0] <= 500  # what is too wide for a small screen scrolls within the page
    assert max(map(abs, sizes["left"])) <= 4  # the signs of equality stand below one another


def test_an_equation_of_one_line_needs_no_table() -> None:
    page = page_of(Equation((MathLine("a", "= b"),), "a & b"))
    assert 'aria-label="a &amp; b"' in page
    assert "<mtable" not in page
