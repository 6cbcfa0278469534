"""Names of quantities: what is read, what is refused and with what advice, and units."""

from __future__ import annotations

from fractions import Fraction

import pytest

from symamp import errors
from symamp.exact.asked_quantity import (
    NAMES,
    Quantity,
    faces_of,
    in_decibels_or_degrees,
    is_root,
    parse_quantity,
    unit_of,
)


@pytest.mark.parametrize(
    ("text", "quantity"),
    [
        ("dc", Quantity("dc")),
        ("p1", Quantity("p", index=1)),
        ("z2.hz", Quantity("z", index=2, face="hz")),
        ("b0", Quantity("b", index=0)),
        ("a12", Quantity("a", index=12)),
        ("at(10 MHz).db", Quantity("at", frequency=Fraction(10**7), face="db")),
        ("at(1.25 kHz)", Quantity("at", frequency=Fraction(1250))),
        ("phase_margin", Quantity("phase_margin")),
        ("dc.magnitude", Quantity("dc", face="magnitude")),
    ],
)
def test_reads_and_writes(text, quantity):
    assert parse_quantity(text) == quantity
    assert quantity.text == text


@pytest.mark.parametrize("spelling", ["at( 10MHz )", "at(10e6)", "at (10000 kHz)", " at(0.01 GHz) "])
def test_spellings_of_a_frequency_are_one_quantity(spelling):
    assert parse_quantity(spelling).text == "at(10 MHz)"


@pytest.mark.parametrize("name", [*NAMES, "p3", "z1", "a2", "b1", "at(47 Hz)"])
def test_every_name_with_every_face_comes_back(name):
    plain = parse_quantity(name)
    for face in faces_of(plain):
        assert parse_quantity(f"{name}.{face}").text == f"{name}.{face}"


@pytest.mark.parametrize(
    ("text", "advice"),
    [
        ("bandwith", "did you mean bandwidth?"),
        ("pole2", "did you mean p2?"),
        ("p0", "count from 1"),
        ("p01", "known are"),
        ("nonsense", "unity_gain_frequency"),
        ("", "known are"),
        ("dc.hz", ".magnitude, .db"),
        ("dc.", ".magnitude"),
        ("p1.db", ".hz"),
        ("dc.magnitud", "did you mean magnitude?"),
        ("at(10 MHz)db", ".db"),
    ],
)
def test_refuses_with_advice(text, advice):
    with pytest.raises(errors.ReadError) as caught:
        parse_quantity(text)
    assert advice in str(caught.value)


@pytest.mark.parametrize("text", ["at", "at()", "at(10 MV)", "at(-1 Hz)", "at(10 MHz", "at(1)(2)", "p1.hz.x"])
def test_refuses(text):
    with pytest.raises(errors.ReadError):
        parse_quantity(text)


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("dc", "ohm"),
        ("at(1 kHz)", "ohm"),
        ("at(1 kHz).re", "ohm"),
        ("peak", "ohm"),
        ("dc.db", "dB"),
        ("at(1 kHz).deg", "deg"),
        ("p1", "rad/s"),
        ("p1.magnitude", "rad/s"),
        ("p1.hz", "Hz"),
        ("bandwidth", "Hz"),
        ("phase_margin", "deg"),
        ("gain_margin", "dB"),
        ("gain_bandwidth", "ohm·Hz"),
        ("b0", ""),
        ("b1", "s"),
        ("b2", "s^2"),
        ("a0", "ohm"),
        ("a1", "ohm·s"),
    ],
)
def test_units(text, unit):
    assert unit_of(parse_quantity(text), "ohm") == unit


def test_units_of_a_plain_ratio():
    assert unit_of(parse_quantity("dc"), "") == ""
    assert unit_of(parse_quantity("gain_bandwidth"), "") == "Hz"
    assert unit_of(parse_quantity("a2"), "") == "s^2"


def test_which_errors_are_differences():
    absolute = {"dc.db", "at(1 Hz).deg", "phase_margin", "gain_margin", "p1.deg"}
    relative = {"dc", "p1", "bandwidth", "dc.magnitude", "b1"}
    assert all(in_decibels_or_degrees(parse_quantity(text)) for text in absolute)
    assert not any(in_decibels_or_degrees(parse_quantity(text)) for text in relative)
    assert is_root(parse_quantity("z1.hz"))
    assert not is_root(parse_quantity("b1"))
