"""The ledger as text: what stands where, and that it fits."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, run, saved

from symamp.circuit.stagefile import parse_stage
from symamp.judge.ledger import Ledger, make_ledger
from symamp.show.html import ledger_html
from symamp.show.ledger_text import ledger_page
from symamp.show.page import Page

GOLDEN = """\
Cascode into a capacitive load
  1  output conductance is negligible against transconductance
  2  no body effect
  3  one pole

gain.dc
            gm1·(gm2 + gmb2 + gds2)
  exact = − ───────────────────────
                   gds1·gds2
                   gm1·gm2
  approximate = − ─────────
                  gds1·gds2
  exact −387.2, approximate −317.3, error −18.1 %
  error = −(gmb2 + gds2)/(gm2 + gmb2 + gds2)
  its leading term −gmb2/gm2

  assumption                         alone      added      last       share
  1 output conductance is negligi…    −5.04 %    −5.04 %    −5.04 %    −5.04 %
  2 no body effect                   −13.0 %    −13.0 %    −13.0 %    −13.0 %
  3 one pole                           0 %        0 %        0 %        0 %
  all                                                                 −18.1 %

The stage gives no span: all figures are at the bias point.
"""

COMPLEX = """\
title = "Resonator"
[resistor]
R1 = ["in", "a"]
R2 = ["a", "b"]
[inductor]
L1 = ["b", "out"]
[capacitor]
C1 = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
R1 = "100 ohm"
R2 = "30 ohm"
L1 = "10 uH"
C1 = "1 nF"
[span]
R1 = "50 %"
[[assumption]]
name = "R2 is a short"
short = ["R2"]
"""


def ledger(*texts: str, quantities: tuple[str, ...] = ()) -> Ledger:
    stage = parse_stage("".join(texts).encode(), file="my.stage.toml", folder=Path())
    return make_ledger(stage, quantities=quantities, points=16)


def text(found: Ledger, width: int = 100) -> str:
    page = Page(width)
    ledger_page(page, found)
    return page.text()


def test_the_gain_of_a_cascode() -> None:
    assert text(ledger(CASCODE, ASSUMPTIONS, quantities=("gain.dc",))) == GOLDEN


@pytest.mark.parametrize("width", [80, 100, 120])
def test_lines_are_no_wider_than_the_page(width: int) -> None:
    for found in (ledger(CASCODE, SPAN, ASSUMPTIONS), ledger(CASCODE, ASSUMPTIONS), ledger(COMPLEX)):
        for line in text(found, width).splitlines():
            assert len(line) <= width, line


@pytest.mark.parametrize("width", [80, 100, 120])
def test_every_width_says_the_same(width: int) -> None:
    shown = text(ledger(CASCODE, SPAN, ASSUMPTIONS, quantities=("gain.p1",)), width)
    flat = " ".join(shown.split())
    for words in (
        "share least",
        "share greatest",
        "worst at",
        "Sampled, not proved",
        "lost under all assumptions: p2",
    ):
        assert words in flat
    assert len(re.findall(r"gm1 \d", shown)) >= 3


@pytest.mark.parametrize("width", [80, 120])
def test_figures_stand_on_their_decimal_points(width: int) -> None:
    shown = text(ledger(CASCODE, SPAN, ASSUMPTIONS, quantities=("gain.dc",)), width).splitlines()
    rows = [line for line in shown if re.match(r"  ([12] |all)", line) and "%" in line]
    for first, second in ((rows[0], rows[1]),):
        assert [m.start() for m in re.finditer(r"\.\d+ %", first)] == [
            m.start() for m in re.finditer(r"\.\d+ %", second)
        ]


def test_minus_is_a_minus_and_never_a_hyphen() -> None:
    shown = text(ledger(CASCODE, SPAN, ASSUMPTIONS))
    assert "−18.1 %" in shown
    assert not re.search(r"-\d", shown)
    assert "e-" not in shown


def test_a_lost_pole_is_said_with_why_and_frequency() -> None:
    shown = " ".join(text(ledger(CASCODE, ASSUMPTIONS, quantities=("gain.p2",))).split())
    assert "approximate none, error none: p2, at 13.2 GHz, is lost: it has no partner" in shown.replace(
        "13.19", "13.2"
    )
    assert "under 'one pole' p2 is lost: it has no partner" in shown


def test_what_no_assumption_changes_is_said_in_one_line() -> None:
    body = '\n[[assumption]]\nname = "no body effect"\nneglect = ["gmb"]\n'
    shown = text(ledger(CASCODE.replace('to = "out"', 'to = "x"'), SPAN, body, quantities=("gain.dc",)))
    assert "exact −19.52; no assumption changes it" in shown
    assert "alone" not in shown


def test_complex_errors_say_modulus() -> None:
    shown = text(ledger(COMPLEX, quantities=("gain.p1",)), 120)
    assert "(modulus)" in shown
    assert "modulus least" in shown
    assert not re.search(r"[+−]\d+\.?\d* %", shown)  # a modulus has no sign


def test_points_without_value_are_counted_beside_the_worst() -> None:
    wide = '\n[span]\ngm1 = ["0.1 mS", "8 mS"]\n'
    found = ledger(
        CASCODE.replace('to = "out"', 'to = "x"'),
        wide,
        ASSUMPTIONS,
        quantities=("gain.unity_gain_frequency",),
    )
    assert re.search(r"\(no value at \d+ points\)", text(found, 120))


def test_absolute_errors_are_in_their_unit() -> None:
    shown = text(ledger(CASCODE, ASSUMPTIONS, quantities=("gain.dc.db", "gain.phase_margin")))
    assert re.search(r"error −1\.73 dB", shown)
    assert re.search(r"error [+−][\d.]+ deg", shown)


def test_a_quantity_without_exact_value_says_why() -> None:
    shown = " ".join(text(ledger(CASCODE, ASSUMPTIONS, quantities=("rout.unity_gain_frequency",))).split())
    assert "exact none: the response has a unit (ohm), so a magnitude of 1 means nothing" in shown


def test_without_any_figure_there_is_no_table() -> None:
    shown = text(ledger(CASCODE, SPAN, ASSUMPTIONS, quantities=("gain.hf", "gain.p1.im", "gain.hf.db")))
    assert "alone" not in shown
    assert shown.count(", approximate 0 too\n") == 2
    assert "exact none: hf is 0, which has no value in dB" in shown


def test_an_error_of_an_exact_zero_is_absolute() -> None:
    shown = text(ledger(COMPLEX.replace('short = ["R2"]', "set = { C1 = 0 }"), quantities=("gain.hf",)))
    assert "exact 0, approximate 1, error none: the exact value is 0, so there is no relative error" in shown
    assert "\n  absolute error 1\n" in shown


def test_the_worst_point_in_full_where_a_row_cuts_it_short() -> None:
    wide = SPAN + 'gmb2 = "10 %"\ncsb2 = "10 %"\nCL = "10 %"\n'
    shown = text(ledger(CASCODE, wide, ASSUMPTIONS, quantities=("gain.dc",)), 120)
    assert ", …" in shown
    assert re.search(r"  the worst of all lies at gm1 .*, gds1 .*, gm2 .*, gmb2 .*, ", shown)
    assert "the worst of all" not in text(ledger(CASCODE, SPAN, ASSUMPTIONS, quantities=("gain.dc",)), 120)


def test_a_long_formula_of_an_error_gives_way_to_its_leading_term() -> None:
    parts = "".join(f'R{k} = ["x{k - 1}", "x{k}"]\nQ{k} = ["x{k}", "gnd"]\n' for k in range(1, 9))
    values = "".join(f'R{k} = "{k} kohm"\nQ{k} = "{k}00 kohm"\n' for k in range(1, 9))
    ladder = (
        f'title = "Ladder"\n[resistor]\n{parts}[voltage_source]\nVIN = ["x0", "gnd"]\n'
        f'[response]\ngain = {{ from = "VIN", to = "x8" }}\n[bias]\n{values}'
        '[[assumption]]\nname = "no load"\nopen = ["Q1"]\n'
    )
    shown = text(ledger(ladder, quantities=("gain.dc",)), 80)
    assert "the error's formula is too long to be read here; --json has it" in shown
    assert "its leading term" in shown or "its largest term" in shown


def test_thirteen_assumptions_show_what_each_adds_over_the_span() -> None:
    many = "".join(
        f'\n[[assumption]]\nname = "a{k}"\nsmall = ["gds1"]\nagainst = ["{against}"]\n'
        for k, against in enumerate(["gm1", "gm2", *[f"gm1*gm2^{n}*ro1^{n}" for n in range(1, 12)]])
    )
    shown = text(ledger(CASCODE, SPAN, many, quantities=("gain.p1",)), 120)
    assert "added least" in shown
    assert "share least" not in shown
    assert "shares are worked out for up to 12 assumptions" in shown


def test_through_the_command_line(tmp_path: Path) -> None:
    path = saved(tmp_path, CASCODE, ASSUMPTIONS)
    result = run("ledger", path, "--quantity", "gain.dc")
    assert result.exit_code == 0
    assert result.stdout == GOLDEN


def test_html_has_the_same_figures_and_escapes_names() -> None:
    sharp = '\n[[assumption]]\nname = "<b>no</b> & more"\nneglect = ["gmb"]\n'
    page = ledger_html(ledger(CASCODE, SPAN, sharp, quantities=("gain.dc", "gain.p2")))
    assert "&lt;b&gt;no&lt;/b&gt; &amp; more" in page
    assert "−13.0 %" in page
    assert page.count("<table>") == page.count("</table>") == 2
    moduli = ledger_html(ledger(COMPLEX, quantities=("gain.p1",)))
    assert "share over the span, modulus" in moduli


def test_a_figure_that_is_the_same_all_over_the_span_is_worst_anywhere() -> None:
    shown = text(ledger(CASCODE, '[span]\ngm1 = "20 %"\n', ASSUMPTIONS, quantities=("gain.dc",)), 120)
    rows = re.findall(r"^  (\d|all).*?(anywhere|gm1 .*)?$", shown, re.MULTILINE)
    assert [row for row in rows if row[1]] == [("1", "anywhere"), ("2", "anywhere"), ("all", "anywhere")]
