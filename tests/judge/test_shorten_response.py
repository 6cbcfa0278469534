"""The shortest N(s)/D(s): its error over frequency measured again by nodal analysis, bounds kept."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from nodal import Nodal

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.errors import StageError
from symamp.exact.derive import derive
from symamp.exact.forms import Expanded
from symamp.exact.polys import from_coefficients
from symamp.exact.shape import polynomial_text
from symamp.formula import evaluate, parse
from symamp.judge.response_errors import Band, ResponseError
from symamp.judge.shorten import make_shortest
from symamp.judge.shortest import ShortestResponse
from symamp.span.points import Box

RECIPE = Path(__file__).resolve().parents[2] / "recipes" / "the-shortest-formula" / "frontend.stage.toml"
LOWPASS = """
[resistor]
R1 = ["in", "x"]
R2 = ["x", "out"]
[capacitor]
C1 = ["x", "gnd"]
C2 = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
R1 = "1 kohm"
R2 = "1 kohm"
C1 = "10 nF"
C2 = "1 fF"
"""

OPAMP = """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "x", drain = "out", source = "gnd" }
[capacitor]
C1 = ["x", "gnd"]
C2 = ["out", "gnd"]
CC = ["x", "out"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "20 uS", gds = "4 uS" }
M2 = { gm = "4 mS", gds = "30 uS" }
C1 = "0.2 pF"
C2 = "5 pF"
CC = "2 pF"
"""


def stage_of(text: str, folder: Path = Path()) -> Stage:
    return parse_stage(text.encode(), file=None, folder=folder)


def shortest(stage: Stage, name: str, within: float, points: int = 512) -> ShortestResponse:
    made = make_shortest(stage, within, responses=[name], points=points)
    assert made.found == ()
    return made.responses[0]


def valued(found: ShortestResponse, values: dict[str, float], s: np.ndarray) -> np.ndarray:
    """N(s)/D(s) through the written text of its coefficients."""
    assert found.response is not None
    form = found.response.form
    assert isinstance(form, Expanded)
    sides = [
        sum(evaluate(parse(polynomial_text(c)), values.__getitem__) * s**k for k, c in enumerate(row))
        for row in (form.numerator, form.denominator)
    ]
    return np.asarray(sides[0] / sides[1])


@pytest.mark.parametrize(("name", "within"), [("gain", 0.05), ("rout", 0.02), ("gain", 0.2)])
def test_the_error_by_nodal_analysis_at_a_thousand_bias_points(name: str, within: float) -> None:
    """At frequencies of the test's own: 60 from far below the first pole to unity gain, or the highest root."""
    stage = read_stage(RECIPE)
    found = shortest(stage, name, within)
    assert found.span is not None
    assert found.span.figure is not None
    greatest = found.span.figure.greatest
    assert greatest <= within
    assert found.terms is not None
    assert found.terms < found.exact.terms
    box = Box.of(stage)
    points = box.values(np.random.default_rng(11).uniform(size=(box.dimensions, 1000)))
    worst = 0.0
    for k in range(1000):
        values = {n: float(np.ravel(v)[k] if np.ndim(v) else v) for n, v in points.items()}
        solved = Nodal(stage, stage.asked[name], values)
        poles = np.abs(solved.poles())
        s = 1j * np.geomspace(poles[0] / 300, poles[-1], 60)
        matrices = solved.constant + s[:, None, None] * solved.with_s
        exact = np.linalg.solve(matrices, solved.right[:, None])[:, solved.out, 0]
        if name == "gain":  # a plain ratio: no further than to where it falls through 1
            s, exact = s[np.abs(exact) >= 1], exact[np.abs(exact) >= 1]
        worst = max(worst, float(np.abs(valued(found, values, s) / exact - 1).max()))
    assert worst <= greatest * (1 + 1e-6)
    assert worst >= 0.5 * greatest  # and it is no empty bound


def test_what_lies_beyond_unity_gain_goes() -> None:
    """gm1·gm2/(gds1·gds2 + s·gm2·CC): one pole up to gm1/CC (Gray, Hurst, Lewis, Meyer, 5e, 9.4)."""
    found = shortest(stage_of(OPAMP), "gain", 0.05)
    assert found.shape is not None
    assert found.shape.text() == "gm1*gm2/(gds1*gds2 + gm2*CC*s)"


def test_what_lies_within_the_band_stays() -> None:
    """A gain of 1 never falls through 1, so its band goes up to the far pole."""
    found = shortest(stage_of(LOWPASS), "gain", 0.05)
    assert found.response is not None
    assert isinstance(found.response.form, Expanded)
    assert len(found.response.form.denominator) == 3
    assert found.terms == 4


def test_a_looser_bound_never_gives_a_longer_response() -> None:
    stage = read_stage(RECIPE)
    terms = [shortest(stage, "gain", within, 64).terms for within in (0.005, 0.03, 0.05, 0.25)]
    assert all(term is not None for term in terms)
    assert terms == sorted(terms, reverse=True)  # type: ignore[type-var]


def test_shares_add_up_to_the_error_of_the_named_ones() -> None:
    found = shortest(read_stage(RECIPE), "rout", 0.05)
    assert found.assumptions
    assert found.dropped == 0
    assert sum(each["share"] for each in found.figures) == pytest.approx(found.error, rel=1e-9)  # type: ignore[misc]
    assert found.own == 1
    assert len(found.tables) == len(found.assumptions) - 1


def test_the_exact_response_is_off_by_nothing() -> None:
    stage = read_stage(RECIPE)
    exact = derive(stage, stage.asked["gain"])
    assert isinstance(exact.form, Expanded)
    same = from_coefficients(exact.form.numerator), from_coefficients(exact.form.denominator)
    error = ResponseError(stage, exact, same)
    assert error.at_bias < 1e-12
    figure = error.over_span(32, 1).figure
    assert figure is not None
    assert figure.greatest < 1e-10


def test_the_band_ends_at_unity_gain_or_at_the_highest_root() -> None:
    stage = read_stage(RECIPE)
    for name in ("gain", "rout"):
        exact = derive(stage, stage.asked[name])
        top = float(np.abs(Band.of(exact, exact.bias_values, 1).s).max())
        unity = exact.quantity("unity_gain_frequency").value
        roots = [abs(r) for r in (*exact.poles(), *exact.zeros())]
        assert top == pytest.approx(max(roots) if unity is None else 2 * np.pi * unity)
        assert (unity is None) == (name == "rout")


def test_a_stage_without_frequency_and_without_span() -> None:
    text = LOWPASS.replace('[capacitor]\nC1 = ["x", "gnd"]\nC2 = ["out", "gnd"]\n', "")
    text = text.replace('C1 = "10 nF"\nC2 = "1 fF"\n', 'R3 = "1 Mohm"\n')
    found = shortest(stage_of(text.replace("[voltage", 'R3 = ["out", "gnd"]\n[voltage', 1)), "gain", 0.05)
    assert found.shape is not None
    assert found.shape.text() == "1"
    assert found.error == pytest.approx(1 - 1e6 / (1e6 + 2e3), rel=1e-2)
    assert found.span is not None
    assert found.span.figure is None


def test_a_table_is_held_row_by_row(tmp_path: Path) -> None:
    rows = ["R1 [kohm],C1 [nF]", *(f"{1 + k % 3},{5 + 2 * k}" for k in range(9))]
    (tmp_path / "rows.csv").write_text("\n".join(rows) + "\n")
    found = shortest(stage_of(LOWPASS + '[span]\ntable = "rows.csv"\n', tmp_path), "gain", 0.05)
    assert found.span is not None
    assert found.span.figure is not None
    assert found.span.points == 9
    assert found.span.seed is None
    assert "row" in found.span.figure.where_greatest
    assert found.span.figure.greatest <= 0.05


def test_a_response_that_is_not_written_out_says_so() -> None:
    import sys

    sys.path.append(str(Path(__file__).resolve().parents[1] / "exact"))
    from big_stages import folded_cascode

    found = shortest(folded_cascode(), "gain", 0.05)
    assert found.response is None
    assert "ask for gain.dc or gain.p1" in found.why


def test_an_unknown_response_is_refused() -> None:
    with pytest.raises(StageError, match=r"no response 'gian'.*gain"):
        make_shortest(read_stage(RECIPE), 0.05, responses=["gian"])
