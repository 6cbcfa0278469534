"""What the tests of notes share: a drawing, a check made by hand, and LaTeX's own opinion of a document."""

from __future__ import annotations

import re
import shutil
import subprocess
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.shape import Shape
from symamp.exact.terms import Factor
from symamp.formula import parse
from symamp.judge.claim import Claim
from symamp.judge.span_errors import SpanFigure
from symamp.judge.verdict import HOLDS_HERE, WRONG, Check, Condition, Judged, Way

_ROOM = 1.0  # pt by which a line may stick out unseen


@dataclass(frozen=True)
class Square:
    """A drawing of one square, made by hand in both formats."""

    name: str = "square"
    caption: str = "A square"
    alt: str = "One grey square"

    def svg(self) -> str:
        return (
            '<?xml version="1.0"?>\n<!DOCTYPE svg>\n<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 20 20">'
            '<defs><clipPath id="c"><rect width="20" height="20"/></clipPath></defs>'
            '<g clip-path="url(#c)"><rect x="4" y="4" width="12" height="12" fill="#888"/></g></svg>\n'
        )

    def pdf(self) -> bytes:
        stream = b"0.5 g 20 20 60 60 re f"
        objects = [
            b"<< /Type /Catalog /Pages 2 0 R >>",
            b"<< /Type /Pages /Kids [3 0 R] /Count 1 >>",
            b"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 100 100] /Contents 4 0 R /Resources << >> >>",
            b"<< /Length %d >>\nstream\n%s\nendstream" % (len(stream), stream),
        ]
        body, places = b"%PDF-1.4\n", []
        for number, each in enumerate(objects, start=1):
            places.append(len(body))
            body += b"%d 0 obj\n%s\nendobj\n" % (number, each)
        table = b"".join(b"%010d 00000 n \n" % place for place in places)
        tail = b"trailer << /Size 5 /Root 1 0 R >>\nstartxref\n%d\n%%%%EOF\n" % len(body)
        return body + b"xref\n0 5\n0000000000 65535 f \n" + table + tail


def stage_of(*texts: str) -> Stage:
    """The cascode of `shown`, with span and assumptions, or any other text."""
    text = "".join(texts or (CASCODE, SPAN, ASSUMPTIONS))
    return parse_stage(text.encode(), file="my.stage.toml", folder=Path())


def check_by_hand(stage: Stage) -> Check:
    """Two verdicts with figures worked out by hand: gm·gm/(gds·gds) against that with gmb2 and gds2."""
    error = -(0.62 + 0.24) / (3.9 + 0.62 + 0.24)
    over = SpanFigure(-0.22, -0.14, {"gm2": 0.00312}, {"gm2": 0.00468, "gds1": 0.0001}, False, 100)
    formula = "-gm1*gm2*ro1*ro2"
    ratio = Shape(Fraction(1), (Factor("gmb2"),), (Factor("gm2"),))
    first = Judged(
        Claim("gain", parse_quantity("dc"), formula, parse(formula), 0.2),
        "",
        -387.2,
        -317.3,
        error,
        HOLDS_HERE,
        "the error reaches 22 % over the span, and 20 % are allowed",
        span=over,
        conditions=(
            Condition(ratio, ratio, 0.159, -0.13, over),
            Condition(ratio, ratio, 1.02, 0.02, None, "twins"),
        ),
        ways=(Way(("no body effect",), True), Way(("all & sundry", "100 % sure"), False)),
        remarks=("a remark_with an underscore",),
    )
    second = Judged(
        Claim(
            "gain",
            parse_quantity("p1.hz"),
            "1/(2*pi*CL*(ro1 || ro2))",
            parse("1/(2*pi*CL*(ro1 || ro2))"),
            0.05,
        ),
        "Hz",
        488.7e3,
        None,
        None,
        WRONG,
        "a factor of 2 is missing",
        why_not="the formula has no value",
        root="p2",
    )
    return Check(stage, (first, second), ("one <warning> & more",), (), 100, 7, "Sobol points")


def compiled(folder: Path, name: str = "note.tex") -> tuple[int, str]:
    """(pages, log) of one run of pdflatex, which must end without an error."""
    if shutil.which("pdflatex") is None:
        pytest.skip("pdflatex is not installed: apt-get install texlive-latex-base")
    run = ["pdflatex", "-interaction=nonstopmode", "-halt-on-error", name]
    result = subprocess.run(run, cwd=folder, capture_output=True, timeout=120, check=False)
    log = (folder / name).with_suffix(".log").read_text(errors="replace")
    assert result.returncode == 0, "\n".join(re.findall(r"^!.*(?:\n.*){3}", log, re.MULTILINE)) or log[-2000:]
    pages = re.search(r"Output written on .*?\((\d+)\s+page", re.sub(r"\n", "", log))
    return int(pages[1]) if pages else 0, log


def overfull(log: str) -> list[str]:
    """Boxes that are too wide to be overlooked."""
    found = re.findall(r"Overfull \\hbox \(([\d.]+)pt too wide\).*", log)
    return [each for each in found if float(each) > _ROOM]


def nested_text(devices: int = 12) -> str:
    """A stage file of a chain of devices with all their capacitances: too many terms to be written out."""
    bias = '{ gm = "2 mS", gds = "50 uS", cgs = "40 fF", cgd = "9 fF", cdb = "15 fF", csb = "20 fF", gmb = "0.3 mS" }'
    label = [f"M{k}" for k in range(1, devices + 1)]
    parts = [f'{m} = {{ gate = "n{k}", drain = "n{k + 1}", source = "s{k}" }}' for k, m in enumerate(label)]
    loads = [f'R{k} = ["n{k}", "gnd"]\nE{k} = ["s{k - 1}", "gnd"]' for k in range(1, devices + 1)]
    values = [f"{m} = {bias}" for m in label]
    values += [f'R{k} = "10 kohm"\nE{k} = "1 kohm"' for k in range(1, devices + 1)]
    sections = [
        'title = "A long chain"\n[mosfet]',
        *parts,
        "[resistor]",
        *loads,
        '[voltage_source]\nVIN = ["n0", "gnd"]',
        f'[response]\ngain = {{ from = "VIN", to = "n{devices}" }}\n[bias]',
        *values,
    ]
    return "\n".join(sections) + "\n"
