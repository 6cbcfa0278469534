"""Proved errors of formulas for roots and crossings, against numpy's roots and against closed forms."""

from __future__ import annotations

import random
from collections.abc import Sequence
from fractions import Fraction
from math import inf, isfinite, sqrt

import numpy as np
import pytest
from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.exact.formulas import PolyRatio
from symamp.span.bounding import Proved
from symamp.span.boxes import ProofBox
from symamp.span.crossing_proof import prove_crossing_error
from symamp.span.root_proof import prove_root_error

NAMES = ("a", "b", "c", "d")
RING = fmpz_mpoly_ctx.get((*NAMES, "s"), Ordering.lex)
A, B, C, D, _ = RING.gens()
ONE = RING.constant(1)
Values = dict[str, float]


def value(polynomial: fmpz_mpoly, at: Values) -> float:
    """In doubles, term by term."""
    return sum(
        float(int(c))
        * float(np.prod([at.get(n, 0.0) ** int(e) for n, e in zip(NAMES, x, strict=False) if e]))
        for x, c in polynomial.terms()
    )


def points(box: ProofBox, count: int = 300) -> list[Values]:
    """Symbol values at corners and at random points."""
    draw = random.Random(9)
    found = []
    for _ in range(count):
        at = {}
        for side in box.sides:
            part = draw.choice((0.0, 1.0, draw.random(), draw.random()))
            low, high = float(side.low), float(side.high)
            at[side.name] = Fraction(low * (high / low) ** part if low > 0 else low + (high - low) * part)
            at[side.name] = min(side.high, max(side.low, at[side.name]))
        found.append({name: float(x) for name, x in box.symbol_values(at).items()})
    return found


def root_error(coefficients: Sequence[fmpz_mpoly], formula: PolyRatio, index: int, at: Values) -> float:
    """F/p − 1 with p by numpy."""
    found = np.roots([value(c, at) for c in coefficients][::-1])
    root = sorted(found, key=abs)[index - 1]
    assert abs(root.imag) <= 1e-9 * abs(root)
    return float(value(formula[0], at) / value(formula[1], at) / root.real - 1)


def hold_root(
    found: Proved,
    coefficients: Sequence[fmpz_mpoly],
    formula: PolyRatio,
    index: int,
    box: ProofBox,
    tolerance: float = 1e-4,
) -> None:
    """Assert that the proof finished, that no error lies outside, and that the witnesses have the errors told."""
    assert found.finished, found.why
    for at in points(box):
        error = root_error(coefficients, formula, index, at)
        assert found.least.lower - 1e-9 <= error <= found.greatest.upper + 1e-9
    for end in (found.least, found.greatest):
        assert end.gap <= tolerance * (1 + 1e-9)
        assert end.at is not None
        at = {name: float(x) for name, x in box.symbol_values(end.at).items()}
        assert end.lower - 1e-7 <= root_error(coefficients, formula, index, at) <= end.upper + 1e-7


# Two RC sections: D = 1 + (a + b + c)·s + a·b·s², with time constants a, b and a coupling c.
LADDER = (ONE, A + B + C, A * B)
LADDER_BOX = ProofBox.between(
    {"a": (1, 3), "b": (Fraction(1, 20), Fraction(1, 10)), "c": (0, Fraction(1, 10))}
)


@pytest.mark.parametrize("index", [1, 2])
def test_neighbouring_coefficients_for_a_pole(index: int) -> None:
    formula = (-LADDER[index - 1], LADDER[index])
    found = prove_root_error(LADDER, formula, index, LADDER_BOX)
    hold_root(found, LADDER, formula, index, LADDER_BOX)
    assert "signs of the polynomial" in found.method
    assert "Pellet" in found.method or "degree" in found.method
    assert found.boxes >= 2


def test_the_worst_error_of_a_quadratic_by_its_formula() -> None:
    """1 + s + q·s²: p = −(1 − √(1 − 4q))/(2q), so that e = −1/p − 1 has a closed form (quadratic formula)."""
    box = ProofBox.between({"a": (Fraction(1, 100), Fraction(1, 5))})
    found = prove_root_error((ONE, ONE, A), (-ONE, ONE), 1, box, tolerance=1e-6)
    errors = [2 * q / (1 - sqrt(1 - 4 * q)) - 1 for q in (0.2, 0.01)]
    assert found.finished
    assert found.least.lower <= errors[0] <= found.least.upper
    assert found.greatest.lower <= errors[1] <= found.greatest.upper
    assert found.least.gap <= 1e-6


def test_the_dominant_pole_of_a_miller_stage() -> None:
    """−1/(R1·gm·R2·Cc) and −gm·Cc/(C1·C2 + Cc·(C1 + C2)), of text books (from memory): a = 1/(gm·R1), b = 1/(gm·R2).

    In units of gm and Cc with C1 = c, C2 = d: D = a·b + (a·(d + 1) + b·(c + 1) + 1)·s + (c·d + c + d)·s².
    """
    coefficients = (A * B, A * (D + 1) + B * (C + 1) + 1, C * D + C + D)
    sides = {"a": (Fraction(1, 100), Fraction(1, 20)), "b": (Fraction(1, 100), Fraction(1, 20))}
    box = ProofBox.between({**sides, "c": (Fraction(1, 10), Fraction(1, 2)), "d": (1, 3)})
    first, second = (-A * B, ONE), (-ONE, C * D + C + D)
    found = prove_root_error(coefficients, first, 1, box)
    hold_root(found, coefficients, first, 1, box)
    assert found.least.lower > 0  # the book's pole lies too high throughout
    found = prove_root_error(coefficients, second, 2, box)
    hold_root(found, coefficients, second, 2, box)


def test_a_pair_of_complex_roots_beyond() -> None:
    """(s + 1)·(s² + a·s + 4): Pellet's theorem does not part them, the argument principle does."""
    coefficients = (4 * ONE, A + 4, A + 1, ONE)
    box = ProofBox.between({"a": (Fraction(1, 10), Fraction(3, 10))})
    formula = (-ONE, ONE)
    found = prove_root_error(coefficients, formula, 1, box)
    hold_root(found, coefficients, formula, 1, box)
    assert "argument principle" in found.method
    assert found.least.lower <= 0 <= found.greatest.upper


def test_a_pair_of_complex_roots_nearer() -> None:
    """(s + 9)·(s² + a·s + 1): the third root is real, and its formula −9 exact."""
    coefficients = (9 * ONE, 9 * A + 1, A + 9, ONE)
    box = ProofBox.between({"a": (Fraction(1, 10), Fraction(1, 2))})
    found = prove_root_error(coefficients, (-9 * ONE, ONE), 3, box)
    hold_root(found, coefficients, (-9 * ONE, ONE), 3, box)
    assert not prove_root_error(coefficients, (-9 * ONE, ONE), 1, box).finished


def test_a_zero_in_the_right_half_plane() -> None:
    """gm − s·Cgd + small·s²: its first root is positive."""
    coefficients = (A, -B, C)
    sides = {"a": (1, 3), "b": (1, 2), "c": (Fraction(1, 1000), Fraction(1, 100))}
    box = ProofBox.between(sides)
    found = prove_root_error(coefficients, (A, B), 1, box)
    hold_root(found, coefficients, (A, B), 1, box)


def test_three_poles_apart_and_the_middle_one() -> None:
    coefficients = (ONE, A + B + C, A * B + A * C + B * C, A * B * C)
    box = ProofBox.between({"a": (100, 300), "b": (5, 10), "c": (Fraction(1, 5), Fraction(1, 2))})
    for index in (1, 2, 3):
        formula = (-coefficients[index - 1], coefficients[index])
        found = prove_root_error(coefficients, formula, index, box)
        hold_root(found, coefficients, formula, index, box)


def test_a_hint_that_is_worse_than_the_truth_loosens_the_bound_and_no_more() -> None:
    formula = (-LADDER[0], LADDER[1])
    plain = prove_root_error(LADDER, formula, 1, LADDER_BOX)
    hinted = prove_root_error(LADDER, formula, 1, LADDER_BOX, hint=(-0.5, 0.5))
    assert hinted.least.lower <= plain.least.upper
    assert hinted.greatest.upper >= 0.5
    assert not hinted.finished
    good = prove_root_error(LADDER, formula, 1, LADDER_BOX, hint=(plain.least.upper, plain.greatest.lower))
    assert good.finished


def test_roots_that_meet_are_not_parted() -> None:
    """1 + s + a·s² has a double root at a = 1/4 and a pair beyond."""
    formula = (-ONE, ONE)
    for high in (Fraction(1, 4), Fraction(1, 3)):
        box = ProofBox.between({"a": (Fraction(1, 100), high)})
        found = prove_root_error((ONE, ONE, A), formula, 1, box)
        assert not found.finished
        assert found.why
        assert found.least.lower == -inf


def test_what_cannot_be_asked_says_why() -> None:
    box = ProofBox.between({"a": (1, 2)})
    assert "no root 3" in prove_root_error((ONE, A, ONE), (-ONE, A), 3, box).why
    assert "d has no value" in prove_root_error((ONE, A), (-ONE, D), 1, box).why
    assert "sign" in prove_root_error((ONE, A), (-A + 1, ONE), 1, ProofBox.between({"a": (0, 2)})).why


def test_few_boxes_give_no_wrong_bound() -> None:
    coefficients = (ONE, A + B + C, A * B + A * C + B * C, A * B * C)
    box = ProofBox.between({"a": (100, 300), "b": (5, 10), "c": (Fraction(1, 5), Fraction(1, 2))})
    formula = (-ONE, A)
    found = prove_root_error(coefficients, formula, 1, box, budget=1)
    for at in points(box, 100):
        error = root_error(coefficients, formula, 1, at)
        assert found.least.lower - 1e-9 <= error <= found.greatest.upper + 1e-9


def test_random_products_of_real_roots() -> None:
    """Roots r1 … r3 as sides: e of −b_(k−1)/b_k, and of r_k itself, which is exact."""
    draw = random.Random(12)
    finished = 0
    for _ in range(12):
        r1 = draw.randint(1, 3)
        r2 = r1 * draw.randint(5, 9)
        r3 = r2 * draw.randint(5, 9)
        box = ProofBox.between({"a": (r1, r1 + 1), "b": (2 * r2, 2 * r2 + 3), "c": (4 * r3, 4 * r3 + 9)})
        coefficients = (A * B * C, A * B + A * C + B * C, A + B + C, ONE)
        index = draw.randint(1, 3)
        exact = (-(A, B, C)[index - 1], ONE)
        near = (-coefficients[index - 1], coefficients[index])
        for formula in (exact, near):
            found = prove_root_error(coefficients, formula, index, box, tolerance=1e-3)
            finished += found.finished
            for at in points(box, 40):
                error = root_error(coefficients, formula, index, at)
                assert found.least.lower - 1e-9 <= error <= found.greatest.upper + 1e-9
    assert finished >= 20


def crossing(
    numerator: Sequence[fmpz_mpoly], denominator: Sequence[fmpz_mpoly], level: float | None, at: Values
) -> float:
    """The first frequency at which |H|² falls to the level, by numpy's roots of a polynomial in ω²."""
    n, d = (np.array([value(c, at) for c in row]) for row in (numerator, denominator))

    def squared(row: np.ndarray) -> np.ndarray:
        signs = np.array([1j**k for k in range(len(row))])
        return np.convolve(row * signs, np.conj(row * signs))[::2].real

    weight = 0.5 * (n[0] / d[0]) ** 2 if level is None else level
    up, down = squared(n), squared(d)
    length = max(len(up), len(down))
    excess = np.pad(up, (0, length - len(up))) - weight * np.pad(down, (0, length - len(down)))
    found = np.roots(excess[::-1])
    return float(min(sqrt(r.real) for r in found if abs(r.imag) < 1e-9 * abs(r) and r.real > 0))


@pytest.mark.parametrize(
    ("numerator", "level", "formula"),
    [
        ((5 * ONE,), None, (ONE, A + B + C)),
        ((-5 * ONE, B), None, (ONE, A + B + C)),
        ((20 * ONE,), 1, (20 * ONE, A)),
    ],
)
def test_bandwidth_and_unity_gain(
    numerator: tuple[fmpz_mpoly, ...], level: int | None, formula: PolyRatio
) -> None:
    asked = None if level is None else Fraction(level)
    found = prove_crossing_error(numerator, LADDER, formula, LADDER_BOX, level=asked)
    assert found.finished, found.why
    assert "|N(jω)|²" in found.method
    for at in points(LADDER_BOX):
        error = value(formula[0], at) / value(formula[1], at) / crossing(numerator, LADDER, level, at) - 1
        assert found.least.lower - 1e-9 <= error <= found.greatest.upper + 1e-9
    for end in (found.least, found.greatest):
        assert isfinite(end.lower)
        assert end.gap <= 1e-4 * (1 + 1e-9)


def test_one_pole_has_its_bandwidth_at_the_pole() -> None:
    box = ProofBox.between({"a": (1, 1000)})
    found = prove_crossing_error((7 * ONE,), (ONE, A), (ONE, A), box)
    assert found.finished
    assert found.least.lower <= 0 <= found.greatest.upper


def test_a_peak_before_the_fall_is_no_crossing() -> None:
    """1/(1 + a·s + s²) rises first; where it falls to half is a root of a quadratic in ω² (by hand)."""
    box = ProofBox.between({"a": (Fraction(1, 5), Fraction(1, 2))})
    found = prove_crossing_error((ONE,), (ONE, A, ONE), (3 * ONE, 2 * ONE), box)
    assert found.finished
    errors = []
    for a in (0.2, 0.5):
        w = 1 - a * a / 2 + sqrt((1 - a * a / 2) ** 2 + 1)
        errors.append(1.5 / sqrt(w) - 1)
    assert found.least.lower <= min(errors) <= found.least.upper
    assert found.greatest.lower <= max(errors) <= found.greatest.upper


def test_a_gain_below_one_has_no_unity_crossing_that_could_be_proved() -> None:
    box = ProofBox.between({"a": (1, 2)})
    found = prove_crossing_error((ONE,), (2 * ONE, A), (ONE, A), box, level=Fraction(1))
    assert not found.finished
    assert "above the level" in found.why


def test_roots_that_no_one_circle_parts_are_parted_in_parts_of_the_box() -> None:
    """−1/a and −1/(a·b): against a formula that is a constant they wander over two decades together."""
    coefficients = (ONE, A + A * B, A * A * B)
    box = ProofBox.between({"a": (1, 100), "b": (Fraction(1, 40), Fraction(1, 20))})
    formula = (-ONE, 10 * ONE)
    found = prove_root_error(coefficients, formula, 1, box, tolerance=1e-3)
    hold_root(found, coefficients, formula, 1, box, 1e-3)
    assert "parts of the box" in found.method
    assert found.greatest.lower <= 9 <= found.greatest.upper
    assert found.least.lower <= -0.9 <= found.least.upper
    hinted = prove_root_error(coefficients, formula, 1, box, tolerance=1e-3, hint=(-0.9, 9.0))
    assert hinted.finished


def random_coefficients(draw: random.Random, degree: int) -> list[fmpz_mpoly]:
    """Sums of a few products, mostly positive, of the size that well spread roots have."""
    rows = []
    for k in range(degree + 1):
        row = 0 * ONE
        for _ in range(draw.randint(1, 3)):
            sign = -1 if draw.random() < 0.05 else 1
            row += sign * draw.randint(1, 9) * A ** draw.randint(0, 1) * B ** draw.randint(0, 2)
        rows.append(row * draw.choice((1, 6, 30)) ** (degree - k) ** 2)
    return rows


@pytest.mark.parametrize("part", range(4))
def test_no_bound_of_random_roots_is_ever_wrong(part: int) -> None:
    """Real, complex and meeting roots, formulas good and bad: what is bounded holds, by numpy's roots."""
    bounded = 0
    for number in range(30):
        draw = random.Random(100 * part + number)
        degree = draw.randint(2, 4)
        coefficients = random_coefficients(draw, degree)
        box = ProofBox.between({"a": (1, draw.choice((2, 5))), "b": (Fraction(1, 2), draw.choice((1, 3)))})
        index = draw.randint(1, degree)
        formula = (-coefficients[index - 1], coefficients[index])
        found = prove_root_error(coefficients, formula, index, box, tolerance=1e-2, budget=200)
        if not isfinite(found.least.lower) and not isfinite(found.greatest.upper):
            continue
        bounded += 1
        for at in points(box, 150):
            error = root_error(coefficients, formula, index, at)
            slack = 1e-6 * (1 + abs(error))
            assert found.least.lower - slack <= error <= found.greatest.upper + slack
    assert bounded >= 2  # where roots meet there is no proof


@pytest.mark.parametrize("part", range(3))
def test_no_bound_of_random_crossings_is_ever_wrong(part: int) -> None:
    """Peaks, dips and zeros before the fall: what is bounded holds, by numpy's roots."""
    bounded = 0
    for number in range(30):
        draw = random.Random(1000 + 100 * part + number)
        denominator = random_coefficients(draw, draw.randint(1, 3))
        more = random_coefficients(draw, 1)[: draw.randint(0, 2)]
        numerator = [draw.randint(2, 60) * denominator[0], *more]
        numerator = numerator[: len(denominator)]
        box = ProofBox.between({"a": (1, draw.choice((2, 4))), "b": (Fraction(1, 2), draw.choice((1, 2)))})
        level = draw.choice((None, Fraction(1)))
        formula = (denominator[0], denominator[1])
        found = prove_crossing_error(
            numerator, denominator, formula, box, level=level, tolerance=1e-2, budget=200
        )
        if not isfinite(found.least.lower) and not isfinite(found.greatest.upper):
            continue
        bounded += 1
        for at in points(box, 150):
            first = crossing(numerator, denominator, None if level is None else 1.0, at)
            error = value(formula[0], at) / value(formula[1], at) / first - 1
            slack = 1e-6 * (1 + abs(error))
            assert found.least.lower - slack <= error <= found.greatest.upper + slack
    assert bounded >= 6  # where roots meet there is no proof
