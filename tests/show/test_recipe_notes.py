"""The design note of every recipe: compiled by pdflatex, opened in a browser, written as Markdown."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

import pytest
from noted import compiled, overfull

import symamp

STAGES = sorted((Path(__file__).resolve().parents[2] / "recipes").rglob("*.stage.toml"))
_PROBE = """<script>addEventListener("load", () => {
  const seen = name => [...document.querySelectorAll(name)].map(e => e.getBoundingClientRect())
    .map(b => b.width > 4 && b.height > 4);
  const count = name => { const all = seen(name); return all.length + " " + all.filter(x => x).length; };
  document.title = `equations ${count("math")} pictures ${count("figure svg")} wide ${document.body.scrollWidth}`;
});</script>"""


def note(path: Path, target: Path) -> Path:
    return symamp.load(path).note(target, points=256)


@pytest.mark.parametrize("path", STAGES, ids=lambda path: path.name)
def test_the_tex_note_compiles_with_no_line_too_wide(path: Path, tmp_path: Path) -> None:
    note(path, tmp_path / "note.tex")
    pages, log = compiled(tmp_path)
    assert not overfull(log)
    assert 2 <= pages <= 14
    assert (tmp_path / "note.pdf").read_bytes().startswith(b"%PDF")


@pytest.mark.parametrize("path", STAGES, ids=lambda path: path.name)
def test_a_browser_shows_the_equations_and_pictures(path: Path, tmp_path: Path) -> None:
    browser = shutil.which("chromium")
    if browser is None:
        pytest.skip("chromium is not installed: apt-get install chromium")
    target = note(path, tmp_path / "note.html")
    text = target.read_text(encoding="utf-8")
    target.write_text(text.replace("</body>", f"{_PROBE}</body>"), encoding="utf-8")
    flags = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"]
    flags += [
        "--disable-background-networking",
        f"--user-data-dir={tmp_path / 'profile'}",
        "--window-size=1000,900",
    ]
    command = [browser, *flags, "--dump-dom", target.as_uri()]
    made = subprocess.run(command, capture_output=True, text=True, errors="replace", timeout=120, check=False)
    found = re.search(r"<title>equations (\d+) (\d+) pictures (\d+) (\d+) wide (\d+)</title>", made.stdout)
    assert found is not None, made.stderr[-2000:]
    equations, shown, pictures, drawn, wide = map(int, found.groups())
    assert equations == shown >= 10
    assert pictures == drawn >= 1
    assert wide <= 1000


@pytest.mark.parametrize("path", STAGES, ids=lambda path: path.name)
def test_the_markdown_note_has_its_pictures_beside_it(path: Path, tmp_path: Path) -> None:
    text = note(path, tmp_path / "note.md").read_text(encoding="utf-8")
    pictures = re.findall(r"!\[[^\]]*\]\(<?([^)>]+)>?\)", text)
    assert pictures
    assert all((tmp_path / name).is_file() for name in pictures)
    assert "$$" in text


@pytest.mark.parametrize("ending", ["tex", "html", "md"])
def test_the_same_stage_gives_the_same_bytes(ending: str, tmp_path: Path) -> None:
    found = []
    for place in (tmp_path / "one", tmp_path / "two"):
        place.mkdir()
        note(STAGES[1], place / f"note.{ending}")
        files = sorted(p for p in place.rglob("*") if p.is_file())
        found.append({str(p.relative_to(place)): p.read_bytes() for p in files})
    assert found[0] == found[1]
