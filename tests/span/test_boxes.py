"""Boxes as proofs see them: every symbol as a product of sides, and polynomials in the sides' coordinates."""

from __future__ import annotations

import random
from fractions import Fraction

import numpy as np
import pytest
from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.span.boxes import NoProof, ProofBox, Varied
from symamp.span.monotone import exact_value
from symamp.span.points import Box

RING = fmpz_mpoly_ctx.get(("x", "y", "z", "s"), Ordering.lex)
X, Y, Z, _ = RING.gens()
HALF = Fraction(1, 2)


def staged() -> Stage:
    """A stage whose span has a side, an alias, an alias with a factor, followers of each, and a gain through zero."""
    build = StageBuilder("two devices")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="4 mS", gds="0.2 mS")
    build.bjt("Q2", base="x", collector="out", emitter="gnd", gm="40 mS", gpi="0.4 mS", go="0.1 mS")
    build.resistor("RL", "out", "gnd", "5 kohm")
    build.vcvs("A3", out=("y", "gnd"), control=("out", "gnd"), value="2")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="y")
    build.span("gm1", "2 mS", "8 mS")
    build.span("ro1", "2 kohm", "20 kohm")
    build.span("beta2", "50", "200")
    build.follows("gm2", "gm1")
    build.follows("go2", "gds1")
    build.span("A3", "-1", "3")
    return build.stage()


def test_symbols_have_the_values_that_sampling_gives_them() -> None:
    stage = staged()
    box, sampled = ProofBox.of(stage), Box.of(stage)
    assert [side.name for side in box.sides] == ["gm1", "ro1", "beta2", "A3"]
    u = np.random.default_rng(4).random((4, 50))
    values = sampled.values(u)
    for p in range(50):
        at = {}
        for side, component in zip(box.sides, u[:, p], strict=True):
            low, high = float(side.low), float(side.high)
            at[side.name] = Fraction(
                low * (high / low) ** component if low > 0 else low + (high - low) * component
            )
        for name, value in box.symbol_values(at).items():
            assert float(value) == pytest.approx(np.broadcast_to(values[name], 50)[p], rel=1e-12)


def test_a_follower_and_an_alias_are_products_of_sides() -> None:
    box = ProofBox.of(staged())
    assert box.symbols["gm2"].factor == 10
    assert box.symbols["gm2"].powers == (1, 0, 0, 0)
    assert box.symbols["gds1"].powers == (0, -1, 0, 0)
    assert box.symbols["go2"].powers == (0, -1, 0, 0)
    assert box.symbols["gpi2"].powers == (1, 0, -1, 0)  # gm2/beta2, with gm2 a follower
    assert box.symbols["RL"].powers == (0, 0, 0, 0)


def value(polynomial: fmpz_mpoly, at: dict[str, Fraction]) -> Fraction:
    """Term by term, in exact numbers."""
    names = polynomial.context().names()
    total = Fraction(0)
    for exponents, coefficient in polynomial.terms():
        term = Fraction(int(coefficient))
        for name, exponent in zip(names, exponents, strict=True):
            term *= at[name] ** int(exponent) if exponent else 1
        total += term
    return total


def test_polynomials_keep_their_ratio_at_every_point() -> None:
    stage = staged()
    box = ProofBox.of(stage)
    ring = fmpz_mpoly_ctx.get((*stage.symbols, "s"), Ordering.lex)
    g = dict(zip(ring.names(), ring.gens(), strict=True))
    above = g["gm1"] * g["gm2"] * g["A3"] ** 2 - 3 * g["gpi2"] * g["gds1"]
    below = (g["gds1"] + g["gpi2"]) * (g["go2"] + g["gm1"])
    n, d = box.polynomials((above, below))
    draw = random.Random(5)
    for _ in range(40):
        point = [low + (high - low) * Fraction(draw.randint(0, 16), 16) for low, high in box.domain]
        symbols = box.symbol_values(box.side_values(point))
        assert exact_value(n, point) / exact_value(d, point) == value(above, symbols) / value(below, symbols)


@pytest.mark.parametrize(
    ("low", "high", "interval"),
    [(1, 3, (1, 3)), (0, 3, (0, 3)), (-3, -1, (1, 3)), (-3, 0, (0, 3)), (-1, 3, (0, 4)), (-2, -2, (2, 2))],
)
def test_coordinates_are_nowhere_negative(low: int, high: int, interval: tuple[int, int]) -> None:
    box = ProofBox.between({"x": (low, high)}, y=3)
    assert box.domain == (interval,)
    (p,) = box.polynomials([X**3 - 2 * X * Y + 5])
    for t in (interval[0], Fraction(sum(interval), 2), interval[1]):
        at = box.side_values([Fraction(t)])
        assert low <= at["x"] <= high
        assert exact_value(p, [Fraction(t)]) == at["x"] ** 3 - 6 * at["x"] + 5


def test_a_negative_side_as_a_denominator() -> None:
    """x = −t: what is lifted by t keeps its sign."""
    box = ProofBox((Varied("x", Fraction(-3), Fraction(-1)),), ProofBox.between({"x": (-3, -1)}).symbols)
    inverse = {"y": type(box.symbols["x"])(Fraction(1), (-1,)), **box.symbols}
    box = ProofBox(box.sides, inverse)
    p, q = box.polynomials([X + Y, X * 0 + 1])
    at = [Fraction(2)]
    assert exact_value(p, at) / exact_value(q, at) == Fraction(-2) - HALF


def test_what_has_no_value_is_no_proof() -> None:
    with pytest.raises(NoProof, match="z has no value"):
        ProofBox.between({"x": (1, 2)}).polynomials([X + Z])
    box = ProofBox.between({"x": (-1, 2)})
    box = ProofBox(box.sides, {**box.symbols, "y": type(box.symbols["x"])(Fraction(1), (-1,))})
    with pytest.raises(NoProof, match="where x is 0"):
        box.polynomials([X + Y])


def test_a_box_without_sides_and_a_side_of_one_point() -> None:
    p, q = ProofBox.between({}, x=2, y=HALF).polynomials([X * Y + X, Y * 0 + 1])
    assert exact_value(p, []) / exact_value(q, []) == 3
    (p,) = ProofBox.between({"x": (2, 2), "y": (0, 1)}).polynomials([X * Y + X])
    assert p.degrees() == (0, 1)


def test_ends_that_are_reversed_are_refused() -> None:
    with pytest.raises(ValueError, match="reversed"):
        ProofBox.between({"x": (2, 1)})
