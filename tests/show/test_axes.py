"""Ticks: which, and what exactly they say."""

from __future__ import annotations

import math
import random
from itertools import pairwise

import pytest

from symamp.show.axes import (
    linear_ticks,
    log_ticks,
    signed_log_ticks,
    tick_label,
    whole_ticks,
    widened,
)


@pytest.mark.parametrize(
    ("low", "high", "unit", "labels"),
    [
        (1e4, 1e8, "Hz", "10 kHz, 100 kHz, 1 MHz, 10 MHz, 100 MHz"),
        (1, 1e12, "Hz", "1 Hz, 100 Hz, 10 kHz, 1 MHz, 100 MHz, 10 GHz, 1 THz"),
        (1e-3, 1e-2, "S", "1 mS, 2 mS, 5 mS, 10 mS"),
        (2e-3, 8e-3, "S", "2 mS, 4 mS, 6 mS, 8 mS"),
        (1e-15, 1e-12, "F", "1 fF, 3 fF, 10 fF, 30 fF, 100 fF, 300 fF, 1 pF"),
        (1.47e-4, 2.73e-4, "S", "160 µS, 180 µS, 200 µS, 220 µS, 240 µS, 260 µS"),
        (1e3, 1e6, "ohm", "1 kΩ, 3 kΩ, 10 kΩ, 30 kΩ, 100 kΩ, 300 kΩ, 1 MΩ"),
        (1e-4, 1e2, "%", "0.0001 %, 0.001 %, 0.01 %, 0.1 %, 1 %, 10 %, 100 %"),
        (1e-30, 1e-22, "F", "10⁻³⁰ F, 10⁻²⁸ F, 10⁻²⁶ F, 10⁻²⁴ F, 10⁻²² F"),
        (1, 1e9, "", "1, 100, 10000, 10⁶, 10⁸"),
    ],
)
def test_labels_of_logarithmic_axes(low: float, high: float, unit: str, labels: str) -> None:
    assert ", ".join(log_ticks(low, high, unit).labels) == labels


@pytest.mark.parametrize(
    ("low", "high", "unit", "labels"),
    [
        (0, 2e-3, "S", "0, 0.5 mS, 1 mS, 1.5 mS, 2 mS"),
        (0, 1.0e-14, "F", "0, 2 fF, 4 fF, 6 fF, 8 fF, 10 fF"),
        (-1e-3, 3e-3, "S", "−1 mS, 0, 1 mS, 2 mS, 3 mS"),
        (-0.1, 0.25, "dB", "−0.1 dB, −0.05 dB, 0, 0.05 dB, 0.1 dB, 0.15 dB, 0.2 dB, 0.25 dB"),
        (-5, 12.3, "%", "−5 %, −2.5 %, 0, 2.5 %, 5 %, 7.5 %, 10 %"),
        (-112, 50, "decibels", "−100, −80, −60, −40, −20, 0, 20, 40"),
        (-10, 190, "degrees", "0, 30, 60, 90, 120, 150, 180"),
        (-4, 100, "degrees", "0, 15, 30, 45, 60, 75, 90"),
        (-400, 20, "degrees", "−360, −270, −180, −90, 0"),
        (999e3, 1001e3, "Hz", "0.999 MHz, 0.9995 MHz, 1 MHz, 1.0005 MHz, 1.001 MHz"),
        (-1.5, 1.5, "deg", "−1.5°, −1°, −0.5°, 0, 0.5°, 1°, 1.5°"),
        (0, 4e7, "", "0, 10⁷, 2·10⁷, 3·10⁷, 4·10⁷"),
    ],
)
def test_labels_of_even_axes(low: float, high: float, unit: str, labels: str) -> None:
    found = linear_ticks(low, high, unit, most=8)
    assert ", ".join(found.labels) == labels


def test_single_labels() -> None:
    assert tick_label(1, 4, "Hz") == "10 kHz"
    assert tick_label(-25, -4, "S") == "−2.5 mS"
    assert tick_label(25, -4, "S", -6) == "2500 µS"
    assert tick_label(-1, 7, "%") == "−10⁷ %"
    assert tick_label(0, 3, "S") == "0"
    assert tick_label(-3, -9, "deg") == "−3·10⁻⁹°"


def test_any_range_has_readable_ticks() -> None:
    """Inside the ends, ascending, no two labels alike, not too many; and at least two."""
    draw = random.Random(7)
    for _ in range(2000):
        low = 10 ** draw.uniform(-30, 30)
        high = low * 10 ** (10 ** draw.uniform(-4, 1.7))
        unit = draw.choice(["Hz", "S", "ohm", "F", "%", "", "dB"])
        for found, start in ((log_ticks(low, high, unit), low), (linear_ticks(-low, high, unit), -low)):
            assert 2 <= len(found.at) <= 7, (low, high)
            assert list(found.at) == sorted(set(found.at))
            assert len(set(found.labels)) == len(found.labels)
            size = max(abs(start), high)
            assert start - 1e-8 * size <= found.at[0]
            assert found.at[-1] <= high + 1e-8 * size
            assert not set(found.minor) & set(found.at)


def test_labels_of_logarithmic_axes_stand_apart() -> None:
    draw = random.Random(3)
    for _ in range(500):
        low = 10 ** draw.uniform(-9, 9)
        high = low * 10 ** draw.uniform(0.2, 12)
        at = [math.log(x) for x in log_ticks(low, high, "Hz").at]
        gaps = [b - a for a, b in pairwise(at)]
        assert min(gaps) >= math.log(high / low) / 8 - 1e-9


@pytest.mark.parametrize(("low", "high"), [(0, 1), (-1, 1), (1, 1), (2, 1), (1, math.inf), (math.nan, 1)])
def test_no_range_no_ticks(low: float, high: float) -> None:
    with pytest.raises(ValueError, match="low="):
        log_ticks(low, high, "Hz")


@pytest.mark.parametrize(
    ("low", "high"), [(1, 1), (2, 1), (-math.inf, 1), (math.nan, 1), (-1.7e308, 1.7e308)]
)
def test_no_range_no_even_ticks(low: float, high: float) -> None:
    with pytest.raises(ValueError, match="low="):
        linear_ticks(low, high, "Hz")


def test_counts_have_no_halves() -> None:
    assert whole_ticks(1, 4).labels == ("1", "2", "3", "4")
    assert whole_ticks(7, 7).labels == ("7",)
    assert whole_ticks(1, 40, most=10).labels == ("5", "10", "15", "20", "25", "30", "35", "40")
    for high in range(1, 300):
        assert all(x == int(x) for x in whole_ticks(1, high).at)
        assert len(whole_ticks(1, high).at) >= 1


def test_decades_on_both_sides_of_zero() -> None:
    found = signed_log_ticks(-300, 4000, 5, "%")
    assert found.labels == ("−100 %", "−10 %", "0", "10 %", "100 %", "1000 %")
    assert signed_log_ticks(0, 3e8, 2, "%").labels == ("0", "100 %", "10000 %", "10⁶ %", "10⁸ %")
    for top in range(2, 60):
        labels = signed_log_ticks(-(10.0**top), 10.0**top, 1.0, "%").labels
        assert "0" in labels
        assert len(labels) <= 10


def test_a_point_is_widened() -> None:
    assert widened(1, 2) == (1, 2)
    assert widened(0, 0) == (-1, 1)
    low, high = widened(5, 5)
    assert low < 5 < high
