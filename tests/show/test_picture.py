"""Pictures: the same bytes each time, files whole or not at all, settings left alone."""

from __future__ import annotations

import os
import struct
import subprocess
import sys
import time
import xml.etree.ElementTree as ET
from functools import partial
from pathlib import Path
from typing import Any

import matplotlib
import pytest

from symamp.errors import InputError, MissingLibraryError
from symamp.show.ink import MISSING, drawable, new_figure, spread_legend, symbol_label, wrapped
from symamp.show.picture import Picture, checked_ending


def _draw(label: str) -> Any:
    figure = new_figure(4, 3)
    axes = figure.subplots()
    axes.plot([1, 2], [3, 4], label=label)
    axes.fill_between([1, 2], [3, 4], hatch="//")
    axes.set_xlabel(symbol_label("gm_tail"))
    return figure


def picture(caption: str = "A line", alt: str = "It rises.") -> Picture:
    return Picture("line", caption, alt, partial(_draw, "gm1"))


def test_the_same_bytes_at_another_time() -> None:
    first = [picture().svg().encode(), picture().png(), picture().pdf()]
    time.sleep(1.1)  # dates in files have seconds
    assert [picture().svg().encode(), picture().png(), picture().pdf()] == first


def test_the_same_bytes_in_another_process() -> None:
    script = (
        "import hashlib, sys; sys.path.insert(0, sys.argv[1])\n"
        "from test_picture import picture\n"
        "p = picture(); print(hashlib.sha256(p.svg().encode() + p.png() + p.pdf()).hexdigest())\n"
        "assert 'matplotlib.pyplot' not in sys.modules  # which looks for a screen"
    )
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).resolve().parents[2])}
    line = [sys.executable, "-c", script, str(Path(__file__).parent)]
    found = {
        subprocess.run(
            line,
            env={**environment, "PYTHONHASHSEED": seed},
            capture_output=True,
            text=True,
            check=True,
            timeout=120,
        ).stdout
        for seed in ("1", "2")
    }
    assert len(found) == 1


def test_no_date_is_written() -> None:
    svg, pdf, png = picture().svg(), picture().pdf(), picture().png()
    assert "dc:date" not in svg
    assert b"Date" not in pdf
    assert b"tEXt" not in png
    assert b"tIME" not in png


def test_svg_says_what_it_shows() -> None:
    root = ET.fromstring(picture("A & B < C", 'It "rises"\n\x01 \ud800.').svg())
    space = "{http://www.w3.org/2000/svg}"
    assert root.get("role") == "img"
    assert [child.tag for child in root][:2] == [f"{space}title", f"{space}desc"]
    assert root[0].text == "A & B < C"
    assert root[1].text == f'It "rises" {MISSING} {MISSING}.'
    assert not list(root.iter(f"{space}text"))  # outlines, so that no font is needed


def test_png_has_the_pixels_asked_for() -> None:
    assert struct.unpack(">II", picture().png(100)[16:24]) == (400, 300)
    assert struct.unpack(">II", picture().png()[16:24]) == (800, 600)
    for dpi in (0, -1, 1e9, float("nan")):
        with pytest.raises(ValueError, match="dpi="):
            picture().png(dpi)


def test_settings_of_others_are_left_alone_and_do_not_matter() -> None:
    first = picture().svg()
    before = dict(matplotlib.rcParams)
    with matplotlib.rc_context({"font.size": 30.0, "lines.linewidth": 9.0, "svg.fonttype": "none"}):
        assert picture().svg() == first
        assert matplotlib.rcParams["font.size"] == 30.0
    assert dict(matplotlib.rcParams) == before


@pytest.mark.parametrize(
    ("name", "start"), [("a.svg", b"<?xml"), ("a.PNG", b"\x89PNG"), ("b.c.pdf", b"%PDF")]
)
def test_saved_by_the_ending(tmp_path: Path, name: str, start: bytes) -> None:
    assert picture().save(tmp_path / name) == tmp_path / name
    assert (tmp_path / name).read_bytes().startswith(start)
    assert [p.name for p in tmp_path.iterdir()] == [name]


@pytest.mark.parametrize("name", ["a.jpg", "a", ".svg", "a.svg.gz", ""])
def test_another_ending_is_refused(tmp_path: Path, name: str) -> None:
    with pytest.raises(InputError, match=r"let it end in \.svg, \.png, \.pdf"):
        checked_ending(name)
    with pytest.raises(InputError):
        picture().save(os.path.join(tmp_path, name) if name else name)
    assert not list(tmp_path.iterdir())


def test_a_place_that_cannot_be_written_to(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be written: No such file or directory"):
        picture().save(tmp_path / "none" / "a.svg")
    (tmp_path / "folder.svg").mkdir()
    with pytest.raises(InputError, match="cannot be written"):
        picture().save(tmp_path / "folder.svg")
    assert [p.name for p in tmp_path.iterdir()] == ["folder.svg"]


def test_the_old_file_stays_whole_where_drawing_fails(tmp_path: Path) -> None:
    path = tmp_path / "a.svg"
    path.write_text("old")

    def fail() -> Any:
        raise RuntimeError("no")

    with pytest.raises(RuntimeError):
        Picture("a", "a", "a", fail).save(path)
    assert path.read_text() == "old"
    (tmp_path / "link.svg").symlink_to(path)
    picture().save(tmp_path / "link.svg")
    assert (tmp_path / "link.svg").is_symlink()
    assert path.read_text().startswith("<?xml")


def test_without_the_library_the_way_out_is_said(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    with pytest.raises(MissingLibraryError, match="pip install matplotlib"):
        picture().save(tmp_path / "a.svg")
    assert not list(tmp_path.iterdir())


def test_names_are_names_of_files() -> None:
    for name, plain in (
        ("gain.at(10 MHz).db-span", "gain.at-10-MHz-.db-span"),
        ("a/../b", "a-..-b"),
        ("", "picture"),
    ):
        assert Picture(name, "a", "b", partial(_draw, "a")).name == plain


def test_symbols_are_labelled_as_the_trade_writes_them() -> None:
    assert symbol_label("gm1") == "$g_{m1}$"
    assert symbol_label("gm_tail") == "$g_{m,tail}$"
    assert symbol_label("rpi1") == r"$r_{\pi 1}$"
    assert symbol_label("") == ""
    assert symbol_label("日1") == f"{MISSING}1"
    assert symbol_label("a#b") == "a#b"  # what no formula can hold stands as it is


def test_words_are_cut_into_lines() -> None:
    assert wrapped("gds is small against gm", 12) == "gds is small\nagainst gm"
    assert wrapped("x" * 25, 10) == "\n".join(["x" * 10, "x" * 10, "x" * 5])
    assert wrapped(" \n ", 10) == " "
    assert drawable("a\x00\tb Ωµ−°") == f"a{MISSING} b Ωµ−°"


def test_no_legend_where_nothing_is_to_be_explained() -> None:
    with matplotlib.rc_context():
        assert spread_legend(new_figure(), []) is None
