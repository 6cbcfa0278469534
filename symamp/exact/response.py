"""A response: its form, its numbers at any bias points, and its quantities, each with a formula where one exists."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property, partial
from typing import Any

import numpy as np
from flint import fmpq_poly

from symamp.circuit.bias import solve
from symamp.circuit.stage import Asked, Stage
from symamp.errors import StageError
from symamp.exact.asked_quantity import Quantity, parse_quantity, unit_of
from symamp.exact.crossings import ends, without_common_s
from symamp.exact.ends import with_sure_ends
from symamp.exact.figures import Figures
from symamp.exact.forms import Coefficients, Expanded, Nested, Values
from symamp.exact.formulas import Formula, formula_of
from symamp.exact.graded import horner
from symamp.exact.missing_figures import remarks_beside, why_missing
from symamp.exact.pencil import has_many_roots, matrix_roots
from symamp.exact.shape import polynomial_latex, polynomial_sympy


@dataclass(frozen=True)
class QuantityValue:
    """A quantity at the bias point: its value (None with `why`), unit, and formula where one exists.

    `value` is a float, or complex for poles, zeros and responses at a frequency.
    """

    quantity: str
    value: float | complex | None
    unit: str
    why: str | None = None
    shape: Formula | None = None
    remarks: tuple[str, ...] = ()
    negative_ok: frozenset[str] = frozenset()

    @property
    def formula(self) -> Any:
        """The formula as a SymPy expression; None where there is none."""
        return None if self.shape is None else self.shape.sympy(self.negative_ok)

    @property
    def text(self) -> str | None:
        """The formula in the grammar of stage files."""
        return None if self.shape is None else self.shape.text()

    @property
    def latex(self) -> str | None:
        """The formula for LaTeX's math mode."""
        return None if self.shape is None else self.shape.latex()

    def _repr_latex_(self) -> str | None:
        return None if self.shape is None else f"$\\displaystyle {self.latex}$"


@dataclass(frozen=True)
class Response:
    """A response of a stage, exact or approximate.

    `form` is Expanded or Nested. `apart` says that each root is taken as the ratio of two neighbouring
    coefficients; with `single_pole` too, all else comes from a0 and b0 + b1·s. `first_zero`, where given, is
    the numerator from which z1 alone is taken.
    """

    stage: Stage
    asked: Asked
    unit: str
    form: Expanded | Nested
    apart: bool = False
    first_zero: Expanded | Nested | None = None
    single_pole: bool = False
    remarks: tuple[str, ...] = field(default=())

    @property
    def name(self) -> str:
        return self.asked.name

    @property
    def expanded(self) -> bool:
        """Whether the terms are written out."""
        return isinstance(self.form, Expanded)

    @property
    def terms(self) -> int:
        """Terms written out; of a nested response the product terms that its graph stands for."""
        return self.form.terms

    @cached_property
    def negative_ok(self) -> frozenset[str]:
        """Symbols that may be negative (controlled-source gains, turns ratios)."""
        return frozenset(n for n, s in self.stage.symbols.items() if s.parameter.may_be_negative)

    @property
    def numerator(self) -> list[Any] | None:
        """Coefficients of s, ascending, as SymPy expressions; None while nested."""
        return self._sympy("numerator")

    @property
    def denominator(self) -> list[Any] | None:
        """Coefficients of s, ascending, as SymPy expressions; None while nested."""
        return self._sympy("denominator")

    def _sympy(self, which: str) -> list[Any] | None:
        if not isinstance(self.form, Expanded):
            return None
        return [polynomial_sympy(c, self.negative_ok) for c in getattr(self.form, which)]

    @cached_property
    def missing(self) -> tuple[str, ...]:
        """Symbols of this response that have no bias value."""
        held = self.form.symbols
        return tuple(n for n in self.stage.symbols if n in held and n not in self.stage.bias)

    @cached_property
    def bias_values(self) -> dict[str, float]:
        """Bias values as floats."""
        return {name: float(value) for name, value in self.stage.bias.items()}

    def at(self, hz: Any, bias: Mapping[str, Any] | None = None) -> Any:
        """The complex response at a frequency in Hz, or an array of them.

        `bias` replaces bias values by symbol or alias, each a number or an array that broadcasts with `hz`. A
        complex number for scalars, else an array. Raises StageError where a symbol has no value, or has two.
        """
        given = bias or {}
        arrays = np.broadcast_arrays(
            np.asarray(hz, dtype=float), *(np.asarray(value, dtype=float) for value in given.values())
        )
        shape = arrays[0].shape
        s = 2j * np.pi * arrays[0].ravel()
        values = self.with_values(dict(zip(given, (array.ravel() for array in arrays[1:]), strict=True)))
        lacking = [name for name in self.missing if name not in values]
        if lacking:
            raise StageError(f"{', '.join(lacking)} has no value", "give it in [bias], or pass bias={...}")
        with np.errstate(all="ignore"):  # infinite at a pole, and not a number where all is 0
            result = self._at(s, values).reshape(shape)
        return complex(result) if shape == () else result

    def with_values(self, given: Mapping[str, np.ndarray]) -> dict[str, Any]:
        """The bias values with those given in their place, symbols before the aliases that may need them."""
        known = {
            name: powers for name, powers in self.stage.aliases.items() if name not in self.stage.symbols
        }
        aliases = {name: solve(known[name]) for name in given if name in known}
        targets = [aliases[name].target if name in aliases else name for name in given]
        for name, target in zip(given, targets, strict=True):
            if target not in self.stage.symbols:
                raise StageError(f"{name!r} is no symbol of this stage")
            if targets.count(target) > 1:
                raise StageError(f"{name} and another value both set {target}", "give one of the two")
        values: dict[str, Any] = {**self.bias_values, **{n: v for n, v in given.items() if n not in aliases}}
        for name in sorted(aliases, key=lambda alias: len(aliases[alias].times)):
            found = given[name] ** float(aliases[name].exponent)
            for other, power in aliases[name].times.items():
                if other not in values:
                    raise StageError(f"{name} needs a value of {other} beside it", f"give {other} too")
                found = found * values[other] ** power
            values[aliases[name].target] = found
        return values

    def _at(self, s: np.ndarray, values: Values) -> np.ndarray:
        varied = any(isinstance(v, np.ndarray) and v.ndim for v in values.values())
        points = s.size if varied else 1
        if isinstance(self.form, Nested) and self.form.plain and not self.apart:
            found = np.broadcast_to(self.form.at(s, values), s.shape)
            if not self.form.ends_cancel:
                return found
            return with_sure_ends(found, self.form.coefficients(values, points), s)
        given = self.coefficients(values, points)
        sigma = s / given.omega
        top = horner(given.numerator, sigma)
        return np.asarray(top / horner(given.denominator, sigma))

    def coefficients(self, values: Values, points: int) -> Coefficients:
        """Coefficients of s/omega at `points` bias points.

        With `apart` those of the roots' product; with a single pole too, a0 and b0 + b1·s.
        """
        return self._levels(self.form.coefficients(values, points))

    def _levels(self, given: Coefficients) -> Coefficients:
        """The coefficients from which all but the roots come."""
        if not self.apart:
            return given
        numerator, denominator = without_common_s(given.numerator, given.denominator)
        if self.single_pole:
            return Coefficients(numerator[:1], denominator[:2], given.omega)
        return Coefficients(_apart(numerator), _apart(denominator), given.omega)

    def figures(self, values: Values, points: int) -> Figures:
        """All quantities at `points` bias points (without `first_zero`, which `value` minds)."""
        raw = self.form.coefficients(values, points)
        given = self._levels(raw)
        found = Figures(given.numerator, given.denominator, self.unit, given.omega)
        if isinstance(self.form, Nested) and not self.apart and has_many_roots(self.form):
            found.find_roots_by(partial(matrix_roots, self.form, values, points))
        if self.apart:
            above, below = without_common_s(raw.numerator, raw.denominator)
            found.set_roots(_ratios(above) * raw.omega, _ratios(below) * raw.omega)
            if not self.single_pole:  # a_k and b_k stay those from whose ratios the roots are taken
                found.set_coefficients(above, below)
        return found

    def zero_figures(self, values: Values, points: int) -> Figures | None:
        """Where z1 is taken from a numerator of its own: the figures that know it."""
        if self.first_zero is None:
            return None
        given = self.first_zero.coefficients(values, points)
        return Figures(given.numerator, given.denominator, self.unit, given.omega)

    @cached_property
    def bias_figures(self) -> Figures:
        """All quantities at the bias point; roots from exact rational coefficients where these are the roots."""
        if self.apart:
            return self.figures(self.bias_values, 1)
        numerator, denominator = self.exact_coefficients
        omega = self.form.coefficients(self.bias_values, 1).omega if isinstance(self.form, Nested) else 1.0
        return _ExactlyRooted(numerator, denominator, self.unit, omega)

    @cached_property
    def exact_coefficients(self) -> tuple[fmpq_poly, fmpq_poly]:
        """Numerator and denominator in s at the bias point, exactly."""
        return self.form.exact_coefficients(self.stage.bias)

    def poles(self) -> list[complex]:
        """Poles at the bias point in rad/s, by increasing magnitude."""
        return [complex(p[0]) for p in self.bias_figures.poles if not np.isnan(p[0])]

    def zeros(self) -> list[complex]:
        """Zeros at the bias point in rad/s, by increasing magnitude."""
        figures = self.zero_figures(self.bias_values, 1) or self.bias_figures
        return [complex(z[0]) for z in figures.zeros if not np.isnan(z[0])]

    def unit_of(self, quantity: Quantity) -> str:
        """The unit of a quantity of this response."""
        return unit_of(quantity, self.unit, self._first_power)

    @cached_property
    def _first_power(self) -> int:
        """The lowest power of s in the denominator, numerator and denominator sharing none."""
        above, below = self.form.powers
        return below[0] - min(above[0], below[0]) if above and below else 0

    def quantity(self, name: str) -> QuantityValue:
        """A quantity by name ("dc", "p1.hz", "at(10 MHz).db"): value at the bias point, and formula."""
        asked = parse_quantity(name)
        unit = self.unit_of(asked)
        shape = formula_of(self, asked)
        if self.missing:
            why = f"{', '.join(self.missing)} has no bias value"
            return QuantityValue(asked.text, None, unit, why, shape, (), self.negative_ok)
        figures = self.bias_figures
        if asked.name == "z" and self.first_zero is not None:
            figures = self.zero_figures(self.bias_values, 1) or figures
        value = figures.value(asked)[0]
        if np.isnan(value):
            return QuantityValue(
                asked.text, None, unit, why_missing(figures, asked), shape, (), self.negative_ok
            )
        plain = complex(value) if np.iscomplexobj(value) else float(value)
        remarks = tuple(remarks_beside(figures, asked))
        return QuantityValue(asked.text, plain, unit, None, shape, remarks, self.negative_ok)

    def _repr_latex_(self) -> str | None:
        if not isinstance(self.form, Expanded):
            return None
        parts = []
        for coefficients in (self.form.numerator, self.form.denominator):
            written = [
                f"\\left({polynomial_latex(c)}\\right)"
                + ("" if k == 0 else " s" if k == 1 else f" s^{{{k}}}")
                for k, c in enumerate(coefficients)
                if not c.is_zero()
            ]
            parts.append(" + ".join(written) or "0")
        return f"$\\displaystyle \\frac{{{parts[0]}}}{{{parts[1]}}}$"


class _ExactlyRooted(Figures):
    """Figures at one bias point whose roots are found, when they are asked for, from rational coefficients."""

    def __init__(self, numerator: fmpq_poly, denominator: fmpq_poly, unit: str, omega: float) -> None:
        super().__init__(*_floats(numerator, denominator, omega), unit, omega)
        self._exactly = (numerator, denominator)

    @cached_property
    def zeros(self) -> np.ndarray:
        return _exact_roots(self._exactly[0])

    @cached_property
    def poles(self) -> np.ndarray:
        return _exact_roots(self._exactly[1])


def _ratios(coefficients: np.ndarray) -> np.ndarray:
    """The roots of a polynomial whose roots lie far apart, ascending in magnitude; nan for none."""
    found = _neighbours(coefficients)
    found = np.where(np.isfinite(found), found, np.nan)
    order = np.argsort(np.abs(found), axis=0, kind="stable")
    return np.take_along_axis(found, order, axis=0).astype(complex)


def _neighbours(coefficients: np.ndarray) -> np.ndarray:
    """−c_(k−1)/c_k for every k; 0 below the lowest coefficient that is not zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        found = -coefficients[:-1] / coefficients[1:]
    below = np.cumsum(coefficients[:-1] != 0, axis=0) == 0
    return np.where(below, 0.0, found)


def _apart(coefficients: np.ndarray) -> np.ndarray:
    """The polynomial with `_ratios` for roots and the same lowest coefficient: its factors are s and 1 − s/root."""
    roots = _neighbours(coefficients)
    with np.errstate(divide="ignore", invalid="ignore"):
        slopes = np.where(coefficients[1:] == 0, 0.0, -1 / roots)  # no root where the next coefficient is 0
    low, _ = ends(coefficients)
    total = coefficients[low, np.arange(coefficients.shape[1])][None]
    for k, slope in enumerate(slopes):
        shifted = np.zeros((total.shape[0] + 1, total.shape[1]))
        shifted[:-1] += np.where(k < low, 0.0, total)
        shifted[1:] += np.where(k < low, total, total * np.where(k < low, 0.0, slope))
        total = shifted
    return total


def _floats(numerator: fmpq_poly, denominator: fmpq_poly, omega: float) -> tuple[np.ndarray, np.ndarray]:
    """Coefficients of s/omega as floats, both divided by the denominator's largest so that none bursts."""
    scale = Fraction(omega)
    rows = [
        [Fraction(int(p[k].p), int(p[k].q)) * scale**k for k in range(p.degree() + 1)]
        for p in (numerator, denominator)
    ]
    largest = max((abs(c) for c in rows[1]), default=Fraction(1)) or Fraction(1)
    above, below = (np.array([float(c / largest) for c in row] or [0.0]).reshape(-1, 1) for row in rows)
    return above, below


def _exact_roots(polynomial: fmpq_poly) -> np.ndarray:
    """Roots by increasing magnitude, upper one of a pair first, correctly rounded: (degree, 1)."""
    if polynomial.degree() < 1:
        return np.empty((0, 1), dtype=complex)
    found: list[complex] = []
    roots: Any = polynomial.numer().complex_roots()
    for root, multiplicity in roots:
        value = complex(float(root.real.mid()), float(root.imag.mid()))
        found.extend([value] * multiplicity)
    found.sort(key=lambda r: (abs(r), -abs(r.imag), -r.imag))  # pairs of one magnitude stay together
    return np.array(found, dtype=complex).reshape(-1, 1)
