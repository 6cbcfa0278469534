"""Numbers and names as people read them."""

from __future__ import annotations

import re
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.circuit.stage import Asked
from symamp.show.words import asked_words, error_words, root_words, value_words, where_words


@pytest.mark.parametrize(
    ("value", "unit", "words"),
    [
        (None, "V", "none"),
        (0.0041, "S", "4.1 mS"),
        (-387.222, "", "−387.2"),
        (3.3e-12, "F", "3.3 pF"),
        (273e-6, "S", "273 µS"),
        (complex(-1e6, 2e6), "rad/s", "−1 Mrad/s + j·2 Mrad/s"),
        (complex(-1e6, -2e6), "rad/s", "−1 Mrad/s − j·2 Mrad/s"),
        (complex(-1e6, 0), "rad/s", "−1 Mrad/s"),
        (0.0, "ohm", "0 ohm"),
    ],
)
def test_values(value: complex | float | None, unit: str, words: str) -> None:
    assert value_words(value, unit) == words


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (-0.0504, "−5.04 %"),
        (0.1, "+10.0 %"),
        (0.09996, "+10.0 %"),  # not 10.00: rounding adds a digit in front
        (0.99996, "+100 %"),
        (0.0, "0 %"),
        (-1e-9, "−1.00e−07 %"),
        (15.43, "+1543 %"),
        (12345.6, "+1.23e+06 %"),
        (0.3 + 0.4j, "50.0 %"),
        (complex(-0.5, 0), "−50.0 %"),
        (None, "none"),
    ],
)
def test_relative_errors(value: complex | float | None, words: str) -> None:
    assert error_words(value, "", absolute=False) == words


def test_absolute_errors_have_their_unit() -> None:
    assert error_words(-0.1234, "dB", absolute=True) == "−0.123 dB"
    assert error_words(2.0, "deg", absolute=True) == "+2.00 deg"


def test_a_modulus_has_no_sign() -> None:
    assert error_words(0.5, "", absolute=False, modulus=True) == "50.0 %"


@given(st.floats(1e-7, 1e6))
def test_errors_have_three_significant_digits(value: float) -> None:
    words = error_words(value, "x", absolute=True)
    number, unit = words[1:].split(" ")
    assert unit == "x"
    digits = re.sub(r"e.*", "", number).replace(".", "").lstrip("0")
    assert len(digits) == 3 or (value > 999 and len(digits) <= 6)
    assert float(number.replace("−", "-")) == pytest.approx(value, rel=6e-3)


@pytest.mark.parametrize(
    ("root", "words"),
    [
        (complex(-6.2831853e6, 0), ("1 MHz", "real")),
        (complex(6.2831853e6, 0), ("1 MHz", "real, right half plane")),
        (complex(-3, 4), ("795.8 mHz", "ζ = 0.6")),
        (complex(3, -4), ("795.8 mHz", "ζ = 0.6, right half plane")),
        (0j, ("0 Hz", "at the origin")),
    ],
)
def test_roots(root: complex, words: tuple[str, str]) -> None:
    assert root_words(root) == words


def test_bias_points() -> None:
    units = {"gm1": "S", "CL": "F", "row": "ohm"}
    assert where_words({"gm1": 8e-3, "CL": 1e-12}, units) == "gm1 8 mS, CL 1 pF"
    assert where_words({"row": 3}, {"gm1": "S"}) == "row 3"
    many = where_words({f"g{k}": 1e-3 for k in range(6)}, {})
    assert many.endswith(", …")
    assert many.count(",") == 4


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        (Asked("g", {"VIN": Fraction(1)}, ("out", "gnd")), "V(out) / VIN"),
        (Asked("g", {"VIN": Fraction(1)}, ("a", "b"), over=("x", "gnd")), "V(a, b) / V(x), driven by VIN"),
        (
            Asked("g", {"VP": Fraction(1, 2), "VN": Fraction(-1, 2)}, ("o", "gnd")),
            "V(o) for VP = 1/2, VN = −1/2",
        ),
        (Asked("g", {"VP": Fraction(-1), "VN": Fraction(1)}, ("o", "gnd")), "V(o) for VP = −1, VN = 1"),
        (Asked("g", {"VP": Fraction(1)}, to_source="VM"), "I(VM) / VP"),
        (Asked("z", looking_into=("out", "gnd")), "impedance at out"),
        (Asked("z", looking_source="VIN", without=("RL",)), "impedance that VIN sees, without RL"),
    ],
)
def test_responses(asked: Asked, words: str) -> None:
    assert asked_words(asked) == words
