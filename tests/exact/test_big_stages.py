"""Large stages: nested forms against dense nodal analysis in floating point, written here from the parts."""

from __future__ import annotations

import time
from functools import cache

import numpy as np
import pytest
from big_stages import bipolar_opamp, folded_cascode, ladder
from scipy.linalg import eig

from symamp.circuit.checks import nodes_of
from symamp.circuit.stage import GROUND, Asked, Part, Stage
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.derive import derive
from symamp.exact.figures import Figures
from symamp.exact.response import Response

STAGES = {
    "folded cascode": folded_cascode,
    "bipolar op amp": lambda: bipolar_opamp(with_rx=False),
    "bipolar op amp with rx": lambda: bipolar_opamp(with_rx=True),
}
CASES = [
    ("folded cascode", "gain"),
    ("folded cascode", "rout"),
    ("bipolar op amp", "gain"),
    ("bipolar op amp", "common"),
    ("bipolar op amp", "rout"),
    ("bipolar op amp", "rin"),
    ("bipolar op amp with rx", "gain"),
    ("bipolar op amp with rx", "rout"),
]
TIME_UNIT = 1e9  # the pencil is in s/TIME_UNIT, so that both its matrices are of like size


@cache
def stage_called(name: str) -> Stage:
    return STAGES[name]()


@cache
def response_called(name: str, asked: str) -> Response:
    stage = stage_called(name)
    return derive(stage, stage.asked[asked])


class Nodal:
    """G + s·C of a stage of resistors, capacitors, transistors and voltage sources, with its drive."""

    def __init__(self, stage: Stage, asked: Asked) -> None:
        self.stage, self.asked = stage, asked
        parts = stage.parts.values()
        inner = [f"{part.label} inner" for part in parts if "rx" in part.parameters]
        self.place = {name: k for k, name in enumerate((*nodes_of(stage), *inner))}
        sources = [part for part in parts if part.kind.name == "voltage_source"]
        self.current = {part.label: len(self.place) + k for k, part in enumerate(sources)}
        size = len(self.place) + len(sources)
        self.g, self.c, self.b = np.zeros((size, size)), np.zeros((size, size)), np.zeros(size)
        for part in parts:
            getattr(self, part.kind.name)(part)
        drive = {asked.looking_source: 1} if asked.looking_source else asked.drive
        for label, weight in drive.items():
            self.b[self.current[label]] = float(weight)
        for node, sign in zip(asked.looking_into or (), (1, -1), strict=False):
            if node != GROUND:
                self.b[self.place[node]] += sign

    def gm(self, matrix: np.ndarray, ends: tuple[str, str], control: tuple[str, str], value: float) -> None:
        for row, sign_of_row in zip(ends, (1, -1), strict=True):
            for column, sign in zip(control, (1, -1), strict=True):
                if GROUND not in (row, column):
                    matrix[self.place[row], self.place[column]] += sign_of_row * sign * value

    def resistor(self, part: Part) -> None:
        self.gm(self.g, part.nodes, part.nodes, 1 / float(self.stage.bias[part.label]))  # type: ignore[arg-type]

    def capacitor(self, part: Part) -> None:
        self.gm(self.c, part.nodes, part.nodes, float(self.stage.bias[part.label]))  # type: ignore[arg-type]

    def voltage_source(self, part: Part) -> None:
        row = self.current[part.label]
        self.g[self.place[part.nodes[0]], row] = self.g[row, self.place[part.nodes[0]]] = 1.0

    def mosfet(self, part: Part) -> None:
        g, d, s, b = part.nodes
        ends = {"gm": ((d, s), (g, s)), "gmb": ((d, s), (b, s)), "gds": ((d, s), (d, s))}
        for name, (a, z) in {
            "cgs": (g, s),
            "cgd": (g, d),
            "cgb": (g, b),
            "cdb": (d, b),
            "csb": (s, b),
        }.items():
            ends[name] = ((a, z), (a, z))
        self.device(part, ends)

    def bjt(self, part: Part) -> None:
        b, c, e = part.nodes
        ends = {}
        if "rx" in part.parameters:
            rx = float(self.stage.bias[part.symbol("rx")])
            inner = f"{part.label} inner"
            self.gm(self.g, (b, inner), (b, inner), 1 / rx)
            b = inner
        ends = {"gm": ((c, e), (b, e)), "gpi": ((b, e), (b, e)), "go": ((c, e), (c, e))}
        ends |= {"cpi": ((b, e), (b, e)), "cmu": ((b, c), (b, c)), "ccs": ((c, GROUND), (c, GROUND))}
        self.device(part, ends)

    def device(self, part: Part, ends: dict[str, tuple[tuple[str, str], tuple[str, str]]]) -> None:
        for name, (out, control) in ends.items():
            if name in part.parameters:
                matrix = self.c if name.startswith("c") else self.g
                self.gm(matrix, out, control, float(self.stage.bias[part.symbol(name)]))

    def response(self, hz: np.ndarray) -> np.ndarray:
        s = 2j * np.pi * hz[:, None, None]
        x = np.linalg.solve(self.g + s * self.c, np.broadcast_to(self.b[:, None], (hz.size, self.b.size, 1)))[
            ..., 0
        ]
        asked = self.asked
        if asked.looking_source:
            return np.asarray(-1 / x[:, self.current[asked.looking_source]])
        a, b = asked.looking_into or asked.to or ("", "")
        assert b == GROUND
        return np.asarray(x[:, self.place[a]])

    def natural_frequencies(self) -> np.ndarray:
        """Finite s at which G + s·C is singular, by the QZ algorithm.

        The drive does not matter where it is a source, at rest for them; for an impedance that a source sees
        the poles are those with the source open, which is another pencil.
        """
        found = eig(-self.g, self.c * TIME_UNIT, right=False)
        return np.asarray(found[np.isfinite(found) & (np.abs(found) < 1e9)]) * TIME_UNIT


@pytest.mark.parametrize(("name", "asked"), CASES)
def test_a_thousand_frequencies_agree_with_dense_nodal_analysis(name: str, asked: str) -> None:
    response = response_called(name, asked)
    hz = np.logspace(-1, 10, 1000)
    theirs = Nodal(stage_called(name), response.asked).response(hz)
    np.testing.assert_allclose(response.at(hz), theirs, rtol=1e-8)


@pytest.mark.parametrize(("name", "asked"), [case for case in CASES if case[1] != "rin"])
def test_poles_are_generalised_eigenvalues(name: str, asked: str) -> None:
    response = response_called(name, asked)
    natural = Nodal(stage_called(name), response.asked).natural_frequencies()
    poles = np.array(response.poles())
    assert len(poles) >= 7
    nearest = natural[np.argmin(np.abs(natural[None, :] - poles[:, None]), axis=1)]
    np.testing.assert_allclose(nearest, poles, rtol=1e-6)


def test_sizes_are_those_that_the_names_promise() -> None:
    assert len(nodes_of(stage_called("folded cascode"))) == 8
    assert len(nodes_of(stage_called("bipolar op amp"))) == 23
    count = [part.kind.name for part in stage_called("bipolar op amp").parts.values()].count("bjt")
    assert count == 20
    for stage in (stage_called("folded cascode"), stage_called("bipolar op amp with rx")):
        assert set(stage.bias) == set(stage.symbols)
        assert not stage.warnings


def test_the_op_amp_stays_nested_and_counts_its_terms() -> None:
    without, with_rx = (
        response_called(name, "gain") for name in ("bipolar op amp", "bipolar op amp with rx")
    )
    assert not without.expanded
    assert not with_rx.expanded
    assert 1e19 < without.terms < 1e20
    assert without.terms < with_rx.terms
    assert without.form.graph.minors < 2000  # type: ignore[union-attr]
    assert with_rx.form.graph.minors < 5000  # type: ignore[union-attr]
    assert without.numerator is None


def test_the_op_amp_is_an_op_amp() -> None:
    """Its figures are of the size that a designer expects, so that the stage is worth measuring on."""
    gain = response_called("bipolar op amp", "gain")
    assert abs(gain.quantity("dc").value or 0) > 1e5
    assert 0.5e6 < (gain.quantity("gain_bandwidth").value or 0) < 2e6  # gm1/(4π·CC) is about 0.5 to 1 MHz
    assert 50 < (response_called("bipolar op amp", "rout").quantity("dc").value or 0) < 200


def test_a_ladder_of_200_nodes_is_quick() -> None:
    stage = ladder(200)
    start = time.perf_counter()
    response = derive(stage, stage.asked["transfer"])
    assert time.perf_counter() - start < 5  # 0.2 s on a quiet machine
    assert not response.expanded
    assert response.at(0.0) == pytest.approx(1.0, rel=1e-12)
    hz = np.array([1e2, 1e3, 1e4, 1e5])
    # Each section by hand: V(k−1) = V(k)·(1 + s·R·C) + R·(current into what follows), from the far end back.
    z = 2j * np.pi * hz * 1e3 * 1e-12
    voltage, drop = np.ones(4, complex), np.zeros(4, complex)
    for _ in range(199):
        drop = drop + z * voltage
        voltage = voltage + drop
    np.testing.assert_allclose(response.at(hz), 1 / voltage, rtol=1e-9)


def test_a_long_ladder_has_no_gain_to_fall_through_one() -> None:
    """Its squared magnitude is a polynomial of degree 99, whose rounding must not be taken for a crossing."""
    stage = ladder(100)
    figures = derive(stage, stage.asked["transfer"]).bias_figures
    assert np.isnan(figures.value(parse_quantity("unity_gain_frequency"))[0])
    assert np.isnan(figures.value(parse_quantity("phase_margin"))[0])
    louder = Figures(1000 * figures.num, figures.den, "", figures.scale)
    # By 1/A of the chain of sections in 120 digits, halving an interval.
    assert louder.value(parse_quantity("unity_gain_frequency"))[0] == pytest.approx(
        1855723.31684957, rel=1e-12
    )
