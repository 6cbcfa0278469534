"""Documents as data: what does not fit together is refused where it is made."""

from __future__ import annotations

from pathlib import Path

import pytest
from noted import Square

from symamp.errors import InputError
from symamp.show.note_files import check_ending, figures_folder, write_note
from symamp.show.note_model import (
    LEFT,
    Box,
    Code,
    Document,
    Equation,
    Figure,
    Math,
    Paragraph,
    Section,
    Strong,
    Table,
    Text,
    every,
    inline,
    pictures_of,
    plain,
)


def document(*blocks: object, title: str = "A note") -> Document:
    return Document(title, (), tuple(blocks))  # type: ignore[arg-type]


def test_text_in_a_line_may_be_written_as_text() -> None:
    pieces = inline("a ", Strong("b"), "", Math("c_1"), Code("d"))
    assert pieces == (Text("a "), Strong("b"), Math("c_1"), Code("d"))
    assert plain(pieces) == "a bc_1d"


@pytest.mark.parametrize(
    ("rows", "align", "words"),
    [
        (((inline("a"),),), (LEFT, LEFT), "1 cells, not 2"),
        ((), (LEFT,), "for each column"),
        ((), (LEFT, "middle"), "for each column"),
    ],
)
def test_a_table_is_rectangular(
    rows: tuple[tuple[tuple[Text, ...], ...], ...], align: tuple[str, ...], words: str
) -> None:
    with pytest.raises(ValueError, match=words):
        Table("t", (inline("x"), inline("y")), rows, align)
    with pytest.raises(ValueError, match="no columns"):
        Table("t", (), (), ())


def test_an_equation_has_lines_and_a_box_a_kind() -> None:
    with pytest.raises(ValueError, match="no lines"):
        Equation((), "nothing")
    with pytest.raises(ValueError, match="kind="):
        Box("shout", inline("x"))


def test_blocks_are_found_in_order_within_sections() -> None:
    inner = Section(inline("b"), (Figure(Square("one")), Paragraph(inline("x"))))
    outer = Section(inline("a"), (inner, Figure(Square("two"))))
    assert [type(block).__name__ for block in every((outer,))] == [
        "Section",
        "Section",
        "Figure",
        "Paragraph",
        "Figure",
    ]
    assert [picture.name for picture in pictures_of(document(outer))] == ["one", "two"]


def test_two_pictures_of_one_name_would_overwrite_each_other() -> None:
    with pytest.raises(ValueError, match="one name"):
        pictures_of(document(Figure(Square()), Figure(Square())))


@pytest.mark.parametrize("name", ["note.pdf", "note", "note.tex.txt", "note.htm"])
def test_another_ending_names_the_three(tmp_path: Path, name: str) -> None:
    with pytest.raises(InputError, match=r"\.tex, \.html or \.md"):
        write_note(document(), tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_the_ending_may_be_in_capitals() -> None:
    assert check_ending("NOTE.TEX") == ".tex"


def test_pictures_stand_beside_the_note(tmp_path: Path) -> None:
    note = document(Figure(Square("one")), Figure(Square("two")))
    written = write_note(note, tmp_path / "my note.tex")
    folder = figures_folder(Path("my note.tex"))
    assert [path.relative_to(tmp_path).as_posix() for path in written] == [
        "my note.tex",
        f"{folder}/one.pdf",
        f"{folder}/two.pdf",
    ]
    assert all(path.is_file() for path in written)
    assert (tmp_path / folder / "one.pdf").read_bytes().startswith(b"%PDF")
    assert len(list(tmp_path.iterdir())) == 2  # nothing is left of the work
    assert write_note(note, tmp_path / "a.html") == (tmp_path / "a.html",)
    assert (write_note(note, tmp_path / "a.md")[1]).read_text().startswith("<?xml")


def test_folders_are_told_apart_where_a_name_must_be_made_plain() -> None:
    assert figures_folder(Path("note.tex")) == "note-figures"
    assert figures_folder(Path("a/two_stage.v2.tex")) == "two_stage.v2-figures"
    names = {
        figures_folder(Path(name)) for name in ("a b.tex", "a-b.tex", "a%b.tex", "ä.tex", "ö.tex", "#.tex")
    }
    assert len(names) == 6
    assert all(name.isascii() and not set(name) & set(" %#~") for name in names)


def test_what_was_there_is_there_again_after_a_failure(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "note.md"
    write_note(document(Figure(Square("one")), title="old"), target)
    kept = tmp_path / "note-figures" / "mine.txt"
    kept.write_text("not ours")
    before = {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()}
    done = []

    def stumble(self: Path, place: Path) -> Path:
        done.append(place)
        if len(done) == 4:  # the second picture; the note and the first one are in place by then
            raise OSError(28, "No space left on device")
        return original(self, place)

    original = Path.rename
    monkeypatch.setattr(Path, "rename", stumble)
    new = document(Figure(Square("one", caption="new")), Figure(Square("two")), title="new")
    with pytest.raises(InputError, match="No space left"):
        write_note(new, target)
    assert len(done) >= 4
    monkeypatch.undo()
    assert {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()} == before
    write_note(new, target)
    assert kept.read_text() == "not ours"
    assert "new" in target.read_text()


@pytest.mark.parametrize("where", ["nowhere/note.tex", "."])
def test_a_place_that_cannot_be_written_to_is_said(tmp_path: Path, where: str) -> None:
    (tmp_path / "folder.tex").mkdir()
    target = tmp_path / where if where != "." else tmp_path / "folder.tex"
    with pytest.raises(InputError, match="cannot be written"):
        write_note(document(), target)
