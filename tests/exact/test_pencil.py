"""Poles and zeros from nodal matrices, against exact rational polynomials, mpmath's eigenvalues and closed forms."""

from __future__ import annotations

import random
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from big_stages import bipolar_opamp, folded_cascode, ladder
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from networks import RESPONSE, stages

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import Nested
from symamp.exact.hidden import nearest_pairs
from symamp.exact.nodal_pencil import evened, pencil_of
from symamp.exact.pencil import PencilRoots, has_many_roots, pencil_roots
from symamp.exact.response import Response
from symamp.exact.roots import roots
from symamp.exact.system import build_system


def nested(stage: Stage, name: str) -> Nested:
    return nested_of(stage, ratio_of(build_system(stage, stage.asked[name].without), stage.asked[name]))


def mesh(sections: int) -> Stage:
    """Two rows of resistors with rungs between them and a capacitor at every node."""
    build = StageBuilder("mesh")
    build.voltage_source("VIN", "a0", "gnd")
    for k in range(1, sections + 1):
        build.resistor(f"Ra{k}", f"a{k - 1}", f"a{k}", f"{800 + 70 * k} ohm")
        if k > 1:
            build.resistor(f"Rb{k}", f"b{k - 1}", f"b{k}", f"{900 + 60 * k} ohm")
        build.resistor(f"Rc{k}", f"a{k}", f"b{k}", "2 kohm")
        build.capacitor(f"Ca{k}", f"a{k}", "gnd", f"{1000 + 100 * k} fF")
        build.capacitor(f"Cb{k}", f"b{k}", "gnd", f"{1000 + 130 * k} fF")
    build.response("transfer", source="VIN", to=f"b{sections}")
    return build.stage()


def points_of(stage: Stage, count: int, seed: int = 3) -> list[dict[str, Fraction]]:
    """Random bias points that floats hold exactly; the bias point itself is not among them."""
    draw = random.Random(seed)
    return [
        {n: Fraction(float(v) * draw.uniform(0.3, 3)) for n, v in stage.bias.items()} for _ in range(count)
    ]


def arrays(points: list[dict[str, Fraction]]) -> dict[str, np.ndarray]:
    return {name: np.array([float(p[name]) for p in points]) for name in points[0]}


def exact_roots(polynomial) -> np.ndarray:
    """Roots of a rational polynomial in ball arithmetic (FLINT), each enclosed."""
    found = [
        complex(float(root.real.mid()), float(root.imag.mid()))
        for root, multiplicity in polynomial.numer().complex_roots()
        for _ in range(multiplicity)
    ]
    return np.array(found, dtype=complex)


def worst(found: np.ndarray, wanted: np.ndarray) -> float:
    """The largest relative distance between two sets of roots, each paired with its nearest."""
    assert found.shape == wanted.shape
    if not found.size:
        return 0.0
    found, wanted = found[:, None], wanted[:, None]
    mine, theirs = nearest_pairs(found, wanted, len(found))
    a, b = found[mine[:, 0]], wanted[theirs[:, 0]]
    return float(np.max(np.abs(a - b) / np.where(b == 0, 1.0, np.abs(b))))


def off(form: Nested, points: list[dict[str, Fraction]], found: PencilRoots) -> float:
    errors = []
    for k, point in enumerate(points):
        for side, polynomial in zip((found.zeros, found.poles), form.exact_coefficients(point), strict=True):
            errors.append(worst(side.roots[:, k], exact_roots(polynomial)))
    return max(errors)


LARGE = {
    "op amp": (lambda: bipolar_opamp(with_rx=False), "gain", 1e-11),
    "op amp, both inputs": (lambda: bipolar_opamp(with_rx=False), "common", 1e-10),
    "op amp, output": (lambda: bipolar_opamp(with_rx=False), "rout", 1e-11),
    "op amp with rx": (lambda: bipolar_opamp(with_rx=True), "gain", 1e-10),
    "op amp with rx, input": (lambda: bipolar_opamp(with_rx=True), "rin", 1e-10),
    "folded cascode": (folded_cascode, "gain", 1e-11),
    "folded cascode, output": (folded_cascode, "rout", 1e-11),
    "ladder": (lambda: ladder(41), "transfer", 1e-11),
    "mesh": (lambda: mesh(12), "transfer", 1e-10),
}


@pytest.mark.parametrize("name", LARGE)
@pytest.mark.parametrize("near", [None, 0.0], ids=["by vectors", "by the determinant"])
def test_roots_are_those_of_the_exact_polynomials(name: str, near: float | None) -> None:
    make, response, allowed = LARGE[name]
    stage = make()
    form, points = nested(stage, response), points_of(stage, 4)
    found = pencil_roots(form, arrays(points), 4, **({} if near is None else {"near": near}))
    assert found.settled.all()
    assert off(form, points, found) < allowed


@pytest.mark.parametrize("name", ["ladder", "mesh", "op amp with rx"])
def test_coefficients_alone_are_off_where_the_matrices_are_right(name: str) -> None:
    """Why there is this module: roots of the coefficients, as good as double precision holds these, are off."""
    make, response, allowed = LARGE[name]
    stage = make()
    form, points = nested(stage, response), points_of(stage, 4)
    given = form.coefficients(arrays(points), 4)
    poles = roots(given.denominator) * given.omega
    errors = [worst(poles[:, k], exact_roots(form.exact_coefficients(p)[1])) for k, p in enumerate(points)]
    assert max(errors) > 1e3 * allowed


def test_the_bias_point_of_the_op_amp_with_rx() -> None:
    stage = bipolar_opamp(with_rx=True)
    form = nested(stage, "gain")
    point = {name: Fraction(float(value)) for name, value in stage.bias.items()}
    assert off(form, [point], pencil_roots(form, arrays([point]), 1)) < 1e-10


def test_the_poles_of_an_even_ladder_are_those_of_the_closed_form() -> None:
    """n equal sections, driven and open: s = −(4/RC)·sin²((2k − 1)·π/(4n + 2)), from memory of the text-book result."""
    n = 40
    form = nested(ladder(n + 1), "transfer")
    values = {name: 1e3 if name.startswith("R") else 1e-12 for name in form.symbols}
    found = pencil_roots(form, values, 1)
    k = np.arange(1, n + 1)
    wanted = -4e9 * np.sin((2 * k - 1) * np.pi / (4 * n + 2)) ** 2
    assert found.settled.all()
    np.testing.assert_allclose(found.poles.roots[:, 0], wanted, rtol=1e-12)
    assert (found.poles.roots.imag == 0).all()


def test_eigenvalues_are_those_of_mpmath() -> None:
    """The same pencil's eigenvalues in 50 digits: of C⁻¹·G, which the ladder's matrices have."""
    stage = ladder(16)
    form = nested(stage, "transfer")
    point = points_of(stage, 1)[0]
    found = pencil_roots(form, arrays([point]), 1).poles.roots[:, 0]
    g, c = pencil_of(form.graph, "denominator").matrices(arrays([point]), 1)
    with mpmath.workdps(50):
        values, _ = mpmath.eig(mpmath.inverse(mpmath.matrix(c[0])) * mpmath.matrix(g[0]))
    wanted = np.array([-complex(v) for v in values])
    assert worst(found, wanted) < 1e-12


def test_the_matrix_of_each_side_has_the_determinant_that_the_graph_has() -> None:
    """A dense determinant by LU at complex frequencies, against the graph's own sum, up to one factor without s."""
    stage = bipolar_opamp(with_rx=False)
    for name in stage.asked:
        form = nested(stage, name)
        values = arrays(points_of(stage, 1))
        s = np.array([1e4 + 2e4j, 3e6 - 1e6j, 2e8 + 5e8j])
        dense = []
        for side in ("numerator", "denominator"):
            pencil = pencil_of(form.graph, side)
            g, c = pencil.matrices(values, 1)
            dense.append(np.linalg.det(g + s[:, None, None] * c))
        ratio = dense[0] / dense[1] / form.at(s, values)
        np.testing.assert_allclose(ratio, ratio[0], rtol=1e-8)


def test_evening_out_rounds_nothing_and_keeps_the_eigenvalues() -> None:
    rng = np.random.default_rng(5)
    g = rng.normal(size=(3, 5, 5)) * np.exp(rng.normal(size=(3, 5, 1)) * 8)
    c = rng.normal(size=(3, 5, 5)) * 1e-12
    unit = np.full(3, 2.0**36)
    even_g, even_c = evened(g, c, unit)
    size = np.maximum(np.abs(even_g), np.abs(even_c))
    for axis in (1, 2):
        assert (size.max(axis=axis) < 4).all()
        assert (size.max(axis=axis) > 0.1).all()
    assert set(np.unique(np.frexp(np.abs(even_g / g))[0])) == {0.5}


def shared_ladders() -> Stage:
    """A source that drives two ladders: the response of one does not see the other's poles, whatever the values."""
    build = StageBuilder("two ladders")
    build.voltage_source("VIN", "in", "gnd")
    build.vcvs("E1", out=("x", "gnd"), control=("in", "gnd"), value=2)
    build.resistor("RX", "x", "y", "1 kohm")
    build.capacitor("CX", "y", "gnd", "1 pF")
    build.capacitor("CY", "y", "z", "2 pF")
    build.resistor("RY", "z", "gnd", "3 kohm")
    last = "in"
    for k in range(1, 15):
        build.resistor(f"R{k}", last, f"n{k}", f"{900 + 37 * k} ohm")
        build.capacitor(f"C{k}", f"n{k}", "gnd", f"{1000 + 55 * k} fF")
        last = f"n{k}"
    build.capacitor("CB", "n7", "n9", "1 pF")
    build.response("transfer", source="VIN", to=last)
    return build.stage()


def test_roots_that_both_sides_share_are_left_out() -> None:
    stage = shared_ladders()
    form, points = nested(stage, "transfer"), points_of(stage, 3)
    assert form.skeleton.common == 2
    found = pencil_roots(form, arrays(points), 3)
    assert found.settled.all()
    assert found.poles.roots.shape[0] == 14
    assert off(form, points, found) < 1e-10


def test_a_double_pole_and_roots_at_zero() -> None:
    """Two equal sections with a buffer between them, into a coupling capacitor: a double pole and a zero at 0."""
    build = StageBuilder("double pole")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("R1", "in", "a", "1 kohm")
    build.capacitor("C1", "a", "gnd", "1 pF")
    build.vcvs("E1", out=("b", "gnd"), control=("a", "gnd"), value=1)
    build.resistor("R2", "b", "c", "1 kohm")
    build.capacitor("C2", "c", "gnd", "1 pF")
    build.vcvs("E2", out=("d", "gnd"), control=("c", "gnd"), value=1)
    build.capacitor("C3", "d", "out", "1 nF")
    build.resistor("R3", "out", "gnd", "1 Mohm")
    build.response("transfer", source="VIN", to="out")
    stage = build.stage()
    form = nested(stage, "transfer")
    found = pencil_roots(form, {n: float(v) for n, v in stage.bias.items()}, 1)
    assert found.zeros.roots[:, 0].tolist() == [0]
    np.testing.assert_allclose(found.poles.roots[:, 0], [-1e3, -1e9, -1e9], rtol=1e-6)


def test_a_root_that_a_point_takes_to_infinity_is_none() -> None:
    stage = ladder(17)
    form, points = nested(stage, "transfer"), points_of(stage, 3)
    points[1]["C5"] = Fraction(0)  # one pole less at one point
    found = pencil_roots(form, arrays(points), 3)
    assert found.settled.all()
    assert np.isnan(found.poles.roots[-1]).tolist() == [False, True, False]
    for k, point in enumerate(points):
        wanted = exact_roots(form.exact_coefficients(point)[1])
        assert worst(found.poles.roots[: len(wanted), k], wanted) < 1e-11


def test_at_its_bias_point_the_op_amp_has_a_zero_less() -> None:
    """Its two input branches are alike there: the highest coefficient cancels, and is rounding in the graph's sum."""
    stage = bipolar_opamp(with_rx=False)
    form = nested(stage, "gain")
    points = [{name: Fraction(float(value)) for name, value in stage.bias.items()}, *points_of(stage, 2)]
    wanted = exact_roots(form.exact_coefficients(points[0])[0])
    found = pencil_roots(form, arrays(points), 3)
    assert found.settled.all()
    assert np.isnan(found.zeros.roots[-1]).tolist() == [True, False, False]
    assert len(wanted) == 19
    assert worst(found.zeros.roots[:19, 0], wanted) < 1e-11


def test_what_does_not_settle_falls_back_to_the_coefficients() -> None:
    stage = ladder(17)
    form = nested(stage, "transfer")
    values = arrays(points_of(stage, 3))
    values["C5"] = values["C5"] * np.array([1.0, np.nan, 1.0])
    found = pencil_roots(form, values, 3)
    assert found.settled.tolist() == [True, False, True]
    assert np.isnan(found.poles.roots[:, 1]).all()


def test_residuals_say_how_far_the_coefficients_agree() -> None:
    stage = folded_cascode()
    form, points = nested(stage, "gain"), points_of(stage, 5)
    found = pencil_roots(form, arrays(points), 5)
    assert (found.poles.residual < 1e-13).all()
    s, c = found.poles.roots[:, 0], [float(v.p) / float(v.q) for v in form.exact_coefficients(points[0])[1]]
    for root, residual in zip(s, found.poles.residual[:, 0], strict=True):
        terms = np.array([value * root**k for k, value in enumerate(c)])
        assert abs(terms.sum()) / np.abs(terms).sum() == pytest.approx(residual, abs=1e-13)


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=5, most_parts=9), st.integers(0, 1000))
def test_random_networks_of_all_parts(stage: Stage, seed: int) -> None:
    form = nested(stage, RESPONSE)
    assume(min(form.skeleton.degrees) >= 0 and max(form.skeleton.degrees) > 0)
    points = points_of(stage, 2, seed)
    found = pencil_roots(form, arrays(points), 2)
    count = 0
    for k, point in enumerate(points):
        for side, polynomial in zip((found.zeros, found.poles), form.exact_coefficients(point), strict=True):
            if found.settled[k]:
                wanted = exact_roots(polynomial)
                apart = np.abs(wanted[:, None] - wanted[None]) + np.diag(np.full(len(wanted), np.inf))
                close = (apart < 1e-3 * np.abs(wanted)[:, None]).any()  # those are as uncertain as √eps
                assert worst(side.roots[:, k], wanted) < (1e-4 if close else 1e-9)
                count += 1
    assume(count)


def test_figures_over_points_take_their_roots_from_the_matrices() -> None:
    stage = ladder(31)
    form = nested(stage, "transfer")
    assert has_many_roots(form)
    response = Response(stage, stage.asked["transfer"], "", form)
    points = points_of(stage, 3)
    figures = response.figures(arrays(points), 3)
    for k, point in enumerate(points):
        wanted = exact_roots(form.exact_coefficients(point)[1])
        assert worst(figures.poles[:, k], wanted) < 1e-11
        assert worst(figures.at_point(k).poles[:, 0], wanted) < 1e-11
