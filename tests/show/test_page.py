"""A page: headings, sentences broken between words, and nothing read as markup."""

from __future__ import annotations

import io

import pytest
from rich.console import Console

from symamp.show.page import WIDEST, Page, console_width


def test_a_heading_has_an_empty_line_above_it_unless_it_opens_the_page() -> None:
    page = Page()
    page.heading("one")
    page.heading("two")
    assert page.text() == "one\n\ntwo\n"


def test_sentences_are_broken_between_words_and_set_in() -> None:
    page = Page(20)
    page.prose("a sentence that is longer than the page", indent=2)
    assert page.text() == "  a sentence that is\n    longer than the\n    page\n"


def test_a_word_that_is_too_long_stays_whole() -> None:
    page = Page(10)
    page.prose("see averylongwordindeed-and-more now")
    assert "averylongwordindeed-and-more" in page.text()


def test_warnings_and_remarks_say_so() -> None:
    page = Page()
    page.notes(["beware"], ["by the way"])
    assert page.text() == "warning: beware\nremark: by the way\n"


def test_what_a_terminal_would_obey_is_taken_out() -> None:
    page = Page()
    page.heading("red \x1b[31malert\x07 and\nmore")
    page.line("cleared \x1b[2J\x9b2J")
    assert page.text() == "red  [31malert  and more\n" + "cleared  [2J 2J\n"


def test_what_looks_like_markup_is_printed_as_it_is() -> None:
    out = io.StringIO()
    page = Page()
    page.line("gain [bold]x[/bold] :smile: [/]")
    page.show(Console(file=out, highlight=False))
    assert out.getvalue() == "gain [bold]x[/bold] :smile: [/]\n"


@pytest.mark.parametrize(("columns", "width"), [(80, 80), (100, 100), (140, WIDEST)])
def test_the_width_is_the_terminals_and_never_too_wide_to_read(columns: int, width: int) -> None:
    assert console_width(Console(file=io.StringIO(), force_terminal=True, width=columns)) == width


def test_without_a_terminal_a_page_is_as_wide_as_can_be_read() -> None:
    assert console_width(Console(file=io.StringIO(), width=60)) == WIDEST
