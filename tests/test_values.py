"""Values: what is read exactly, what is refused, and that what is written reads back."""

from __future__ import annotations

import math
import time
from contextlib import suppress
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.errors import ReadError
from symamp.values import read_frequency, read_percent, read_value, show_value, split_unit, write_value

READ = [
    ("4.1 mS", "S", Fraction(41, 10_000)),
    ("4.1mS", "S", Fraction(41, 10_000)),
    ("3.3p", "F", Fraction(33, 10**13)),
    ("3.3 pF", "F", Fraction(33, 10**13)),
    ("5 kohm", "ohm", Fraction(5000)),
    ("5kΩ", "ohm", Fraction(5000)),
    ("5 k\u2126", "ohm", Fraction(5000)),
    ("2.2u", "H", Fraction(22, 10**7)),
    ("2.2 \u00b5H", "H", Fraction(22, 10**7)),
    ("2.2 \u03bcH", "H", Fraction(22, 10**7)),
    ("1e-3", "S", Fraction(1, 1000)),
    ("1E3", "ohm", Fraction(1000)),
    (".5", "", Fraction(1, 2)),
    ("-2.", "", Fraction(-2)),
    ("+7 m", "", Fraction(7, 1000)),
    (" 10 MHz ", "Hz", Fraction(10**7)),
    ("3 aF", "F", Fraction(3, 10**18)),
    ("2 G", "ohm", Fraction(2 * 10**9)),
    ("1 THz", "Hz", Fraction(10**12)),
    ("10 mA", "A", Fraction(1, 100)),
    ("7 ms", "s", Fraction(7, 1000)),
    (3, "S", Fraction(3)),
    (0.1, "S", Fraction(1, 10)),
    (1e-12, "F", Fraction(1, 10**12)),
    (0, "S", Fraction(0)),
]


@pytest.mark.parametrize(("raw", "unit", "value"), READ)
def test_a_value_is_read_exactly(raw: str | int | float, unit: str, value: Fraction) -> None:
    assert read_value(raw, unit) == value


REFUSED = [
    ("4k7", "ohm", "k7"),
    ("6,2 mS", "S", "decimal mark"),
    ("10 K", "ohm", "small k"),
    ("3 mS", "F", "unit S"),
    ("3 pF", "", "pure number"),
    ("5 Ohm", "ohm", "written ohm"),
    ("2 meg", "ohm", "mega is M"),
    ("1 S S", "S", "no SI prefix"),
    ("1_000", "ohm", "no SI prefix"),
    ("MS", "S", "begin with a number"),
    ("", "S", "begin with a number"),
    ("0x10", "S", "no SI prefix"),
    ("nan", "S", "begin with a number"),
    ("inf", "S", "begin with a number"),
    (math.nan, "S", "no finite"),
    (-math.inf, "S", "no finite"),
    (True, "S", "true is no value"),
    (None, "S", "None is no value"),
    ([1], "S", "is no value"),
    ("1e999999", "S", "power of ten"),
    ("1e99999999999999999999", "S", "power of ten"),
    ("1e-999999", "S", "power of ten"),
    ("1e150", "S", "outside"),
    pytest.param(10**5000, "S", "hundreds of digits", id="huge"),
    ("9" * 5000, "S", "begin with a number"),
    ("٣ mS", "S", "begin with a number"),
]


@pytest.mark.parametrize(("raw", "unit", "words"), REFUSED)
def test_anything_else_is_refused_at_once_and_in_words(raw: object, unit: str, words: str) -> None:
    start = time.perf_counter()
    with pytest.raises(ReadError) as caught:
        read_value(raw, unit)  # type: ignore[arg-type]
    assert words in str(caught.value)
    assert len(str(caught.value)) < 300
    assert time.perf_counter() - start < 0.5


def test_the_remedy_shows_a_value_of_the_unit_that_is_wanted() -> None:
    with pytest.raises(ReadError) as caught:
        read_value("3 mS", "F")
    assert caught.value.remedy == 'write a number, an SI prefix and the unit F, such as "3.3 pF"'


def test_prefixes_are_case_sensitive() -> None:
    assert read_value("1 MHz", "Hz") == 10**9 * read_value("1 mHz", "Hz")


def test_percentages() -> None:
    assert read_percent("30 %") == Fraction(3, 10)
    assert read_percent("0.5%") == Fraction(1, 200)
    for wrong in ("30", 0.3, "-5 %", "% 30", "3 m%", "1e999999 %", True):
        with pytest.raises(ReadError):
            read_percent(wrong)


def test_frequencies() -> None:
    assert read_frequency("10 MHz") == 10**7
    with pytest.raises(ReadError, match="unit s"):
        read_frequency("10 ms")


def test_units_are_split_from_their_prefix() -> None:
    assert split_unit("kohm") == (3, "ohm")
    assert split_unit("m") == (-3, "")
    assert split_unit("") == (0, "")
    assert split_unit("gm1") is None


SHOWN = [
    (4.1e-3, "S", "4.1 mS"),
    (243.96e3, "Hz", "244 kHz"),
    (999.99999e3, "Hz", "1 MHz"),
    (-3.3e-12, "F", "-3.3 pF"),
    (1e-25, "F", "1e-25 F"),
    (0.0, "S", "0 S"),
    (25.39, "", "25.39"),
    (-25.394, "", "-25.39"),
    (12345.6, "", "12346"),
    (0.05, "", "0.05"),
    (1.2e-7, "", "1.2e-7"),
    (1.23456e8, "", "1.235e8"),
    (45.25, "deg", "45.25 deg"),
    (1e7, "rad/s", "10 Mrad/s"),
    (math.nan, "S", "none"),
    (math.inf, "", "infinite"),
]


@pytest.mark.parametrize(("x", "unit", "text"), SHOWN)
def test_values_are_shown_as_people_read_them(x: float, unit: str, text: str) -> None:
    assert show_value(x, unit) == text


def test_fewer_digits_may_be_asked_for() -> None:
    assert show_value(4.1234e-3, "S", digits=2) == "4.1 mS"
    assert show_value(412.34e-3, "S", digits=2) == "410 mS"


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (Fraction(41, 10_000), "S", "4.1 mS"),
        (Fraction(33, 10**13), "F", "3.3 pF"),
        (Fraction(5000), "ohm", "5 kohm"),
        (Fraction(-1, 2), "", "-0.5"),
        (Fraction(25_000), "", "25000"),
        (Fraction(1, 10**30), "F", "1e-30 F"),
        (Fraction(0), "S", "0 S"),
    ],
)
def test_values_are_written_with_prefixes(value: Fraction, unit: str, text: str) -> None:
    assert write_value(value, unit) == text


def test_a_third_has_no_exact_text() -> None:
    with pytest.raises(ValueError, match="no finite decimal"):
        write_value(Fraction(1, 3), "S")


@given(
    st.integers(-(10**25), 10**25),
    st.integers(-45, 45),
    st.sampled_from(["S", "ohm", "F", "H", "Hz", "s", ""]),
)
def test_what_is_written_reads_back_to_the_same_value(mantissa: int, power: int, unit: str) -> None:
    value = mantissa * Fraction(10) ** power
    assert read_value(write_value(value, unit), unit) == value


@given(st.floats(1e-17, 1e14), st.sampled_from(["S", "ohm", "F", "Hz", ""]))
def test_what_is_shown_is_the_value_to_four_digits(x: float, unit: str) -> None:
    assert float(read_value(show_value(x, unit), unit)) == pytest.approx(x, rel=5.1e-4)


@given(st.text(max_size=30))
def test_no_text_raises_anything_but_a_read_error(text: str) -> None:
    value = Fraction(0)
    with suppress(ReadError):
        value = read_value(text, "S")
    assert abs(value) <= Fraction(10) ** 100
