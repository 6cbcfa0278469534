"""A response over frequency, ready to be drawn (room: show): magnitude, phase without jumps, and its roots."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from symamp.exact.response import Response

_PER_DECADE = 80
_BEYOND = 2.0  # decades on either side of what there is to see
_MOST_DECADES = 18.0
_DEFAULT = (1.0, 1e9)  # Hz, where nothing says where to look
_UNDAMPED = 1e-6  # damping below which a root counts as undamped: its peak is a hundred decibels and more
_LIGHT = 0.2  # damping below which the curve bends sharply


@dataclass(frozen=True)
class Curve:
    """A response at the frequencies `hz`, ascending: `db` in dB over 1 `unit`, `deg` in degrees, without jumps.

    `db` is infinite where the response is 0 or infinite; `deg` is nan where it has no phase. `poles` and `zeros`
    are magnitudes over 2π in Hz, 0 included, a pair's twice; `undamped` are those at which the curve has no bound.
    """

    hz: np.ndarray
    db: np.ndarray
    deg: np.ndarray
    unit: str = ""
    poles: tuple[float, ...] = ()
    zeros: tuple[float, ...] = ()
    undamped: tuple[float, ...] = ()


def frequency_range(*responses: Response) -> tuple[float, float]:
    """The frequencies in Hz to look at: two decades beyond the poles, zeros and unity-gain frequencies, at decades."""
    seen: list[float] = []
    for response in responses:
        seen += [abs(root) / (2 * math.pi) for root in (*response.poles(), *response.zeros())]
        crossing = response.quantity("unity_gain_frequency").value
        if isinstance(crossing, float):
            seen.append(crossing)
    seen = [hz for hz in seen if 1e-30 < hz < 1e30]
    if not seen:
        return _DEFAULT
    low = round(math.log10(min(seen)) - _BEYOND)
    high = round(math.log10(max(seen)) + _BEYOND)
    return 10.0**low, 10.0 ** min(high, low + _MOST_DECADES)


def curve_of(response: Response, low: float, high: float) -> Curve:
    """The curve of a response at the bias point between two frequencies in Hz.

    Raises StageError where a symbol has no value, ValueError where the ends are no range of frequencies.
    """
    if not 0 < low < high < math.inf:
        raise ValueError(f"low={low!r} and high={high!r} must be positive and ascending")
    poles, zeros = _finite(response.poles()), _finite(response.zeros())
    hz = _frequencies(low, high, poles + zeros)
    values = np.asarray(response.at(hz), dtype=complex)
    with np.errstate(divide="ignore", invalid="ignore"):
        db = 20 * np.log10(np.abs(values))
    return Curve(
        hz,
        db,
        continuous_phase(hz, values, poles, zeros),
        response.unit,
        tuple(sorted(abs(p) / (2 * math.pi) for p in poles)),
        tuple(sorted(abs(z) / (2 * math.pi) for z in zeros)),
        tuple(sorted({abs(r) / (2 * math.pi) for r in poles + zeros if r and _damping(r) < _UNDAMPED})),
    )


def continuous_phase(
    hz: np.ndarray, values: np.ndarray, poles: Sequence[complex], zeros: Sequence[complex]
) -> np.ndarray:
    """The phase in degrees of a response's values, without jumps; its limit at the left lies in (−180, 180].

    The values settle the phase but for whole turns, and the roots in rad/s settle these, so that no frequency
    need lie near another. At an undamped root the phase steps as it would with the last trace of damping.
    """
    found = np.full(hz.shape, np.nan)
    sure = np.isfinite(values) & (values != 0)
    if not sure.any():
        return found
    raw = np.degrees(np.angle(values[sure]))
    omega = 2 * np.pi * hz[sure]
    turned = sum((_angle(omega, z) for z in zeros), np.zeros(omega.shape))
    turned = turned - sum((_angle(omega, p) for p in poles), np.zeros(omega.shape))
    steps, expected = np.diff(raw), np.diff(turned)
    steps += 360 * np.round((expected - steps) / 360)
    phase = raw[0] + np.concatenate(([0.0], np.cumsum(steps)))
    limit = 90 * round(float(phase[0]) / 90)  # what it starts from: a right angle for each root at 0 Hz
    start = limit - 360 * math.ceil((limit - 180) / 360)
    found[sure] = phase + (start - limit)
    return found


def _angle(omega: np.ndarray, root: complex) -> np.ndarray:
    """The angle of jω − root in degrees along rising ω, without jumps, but for a constant."""
    across = -root.real
    if _damping(root) < _UNDAMPED:
        across = abs(root) * 1e-30  # as if it lay just inside the left half plane
    with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
        ratio = np.where(omega == root.imag, 0.0, (omega - root.imag) / across if across else np.inf)
    return np.degrees(np.arctan(ratio))


def _damping(root: complex) -> float:
    return abs(root.real) / abs(root) if root else 0.0


def _finite(roots: Sequence[complex]) -> list[complex]:
    return [complex(r) for r in roots if math.isfinite(abs(r))]


def _frequencies(low: float, high: float, roots: Sequence[complex]) -> np.ndarray:
    """Even steps of log frequency, the roots themselves, and more where a light damping bends the curve."""
    count = math.ceil(_PER_DECADE * math.log10(high / low)) + 1
    near: list[float] = []
    for root in roots:
        hz, damping = abs(root) / (2 * math.pi), _damping(root)
        if damping >= _UNDAMPED:
            near.append(hz)
        else:  # at the root itself there is no value
            near += [hz * (1 + side * w) for side in (-1, 1) for w in (1e-9, 1e-7)]
        if damping < _LIGHT:
            width = max(damping, 1e-4)
            near += [hz * math.exp(side * width * w) for side in (-1, 1) for w in (0.25, 0.5, 1, 2, 4, 8, 16)]
    found = np.unique(np.concatenate((np.geomspace(low, high, count), np.array(near, dtype=float))))
    return found[(found >= low) & (found <= high)]
