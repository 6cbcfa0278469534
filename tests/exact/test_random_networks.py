"""Random stages with every kind of part: all forms of a response against a sparse tableau."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from flint import acb, fmpq_poly
from hypothesis import HealthCheck, assume, given, settings
from networks import KINDS, RESPONSE, stages
from tableau import DIGITS, Tableau, digits

from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.cofactors import Ratio, ratio_of
from symamp.exact.derive import dc_alone, derive, nested_of
from symamp.exact.forms import Coefficients, Expanded, Nested
from symamp.exact.response import Response
from symamp.exact.system import build_system
from symamp.exact.tape import term_dict

OMEGAS = (Fraction(10) ** 3, Fraction(77) * 10**5, Fraction(31) * 10**9)
ROUNDING = 3e-14  # of a double-precision sum of some hundred products, per unit of what cancels in it


def derived(stage: Stage) -> tuple[Response, Ratio]:
    """The response, and its ratio of cofactors; an example that is identically 0 or infinite is discarded."""
    asked = stage.asked[RESPONSE]
    try:
        response = derive(stage, asked)
    except StageError:
        assume(False)
    return response, ratio_of(build_system(stage, asked.without), asked)


def at(polynomial: fmpq_poly, omega: Fraction) -> acb:
    total = acb(0)
    s = acb(0, omega.numerator) / omega.denominator
    for coefficient in reversed(polynomial.coeffs()):
        total = total * s + acb(coefficient)
    return total


def exact_at(form: Expanded | Nested, stage: Stage, omega: Fraction) -> acb:
    numerator, denominator = form.exact_coefficients(stage.bias)
    return at(numerator, omega) / at(denominator, omega)


def singular_at_bias(form: Expanded | Nested, stage: Stage) -> bool:
    return form.exact_coefficients(stage.bias)[1] == 0


def tableau_says(stage: Stage, response: Response, omega: Fraction) -> acb:
    """The tableau's value; an example whose network has no solution is discarded.

    A voltage over another can be finite where both are infinite, as with a current gain of exactly 1 fed
    back: the ratio of cofactors then still has a value, and no set of equations for the whole network has.
    """
    try:
        return Tableau(stage, response.asked).response(omega)
    except ZeroDivisionError:
        assume(False)
        raise


def agrees(ours: acb, theirs: acb) -> bool:
    """Whether two values in balls agree to 40 digits, which takes balls that are smaller still."""
    size = max(abs(complex(ours)), abs(complex(theirs)))
    return bool(abs(ours - theirs) <= size * 1e-40 + 1e-45)  # where both are zero only balls are left


def cancelling(ratio: Ratio, stage: Stage, omega: float) -> float:
    """Sum of magnitudes over magnitude of the sum: the worse of the graph's numerator and denominator.

    Rounding errors of a double-precision walk over the graph are this many times those of one product.
    """
    worst = 1.0
    entries = [
        [(c * float(stage.bias[x]) ** p if x else c) * (1j * omega if sp else 1) for c, x, p, sp in entry]
        for entry in ratio.graph.entries
    ]
    values, sizes = [1.0 + 0j], [1.0]
    for edges in ratio.graph.edges[1:]:
        values.append(sum(sign * sum(entries[e]) * values[c] for c, e, sign in edges))
        sizes.append(sum(sum(map(abs, entries[e])) * sizes[c] for c, e, _ in edges))
    for side in (ratio.graph.numerator, ratio.graph.denominator):
        total = abs(sum(f * values[node] for f, node in side))
        size = sum(abs(f) * sizes[node] for f, node in side)
        worst = max(worst, size / total if total else np.inf)
    return worst


def cancelling_expanded(form: Expanded, stage: Stage, omega: float) -> float:
    """The same for a written-out form."""
    worst = 1.0
    for side in (form.numerator, form.denominator):
        total, size = 0j, 0.0
        for k, polynomial in enumerate(side):
            for monomial, coefficient in term_dict(polynomial).items():
                product = float(coefficient)
                for name, exponent in monomial:
                    product *= float(stage.bias[name]) ** exponent
                total += product * (1j * omega) ** k
                size += abs(product) * omega**k
        worst = max(worst, size / abs(total) if total else np.inf)
    return worst


def polynomial_ratio(given: Coefficients, omega: float) -> complex:
    sigma = 1j * omega / given.omega
    top, bottom = (
        sum(complex(row[0]) * sigma**k for k, row in enumerate(side))
        for side in (given.numerator, given.denominator)
    )
    return top / bottom


quick = settings(
    max_examples=60, deadline=None, suppress_health_check=[HealthCheck.filter_too_much, HealthCheck.too_slow]
)


@quick
@given(stages())
def test_exact_coefficients_of_both_forms_equal_the_tableau(stage: Stage) -> None:
    response, ratio = derived(stage)
    nested = nested_of(stage, ratio)
    assume(not singular_at_bias(nested, stage))
    with digits(DIGITS):
        for omega in OMEGAS:
            theirs = tableau_says(stage, response, omega)
            assert agrees(exact_at(response.form, stage, omega), theirs)
            assert agrees(exact_at(nested, stage, omega), theirs)


@pytest.mark.parametrize("kind", KINDS)
def test_each_kind_of_part_is_met_and_agrees(kind: str) -> None:
    met = 0

    @settings(quick, max_examples=12, database=None)
    @given(stages(kinds=(kind, kind, "resistor", "capacitor")))
    def run(stage: Stage) -> None:
        nonlocal met
        response, ratio = derived(stage)
        assume(not singular_at_bias(nested_of(stage, ratio), stage))
        met += any(part.kind.name == kind for part in stage.parts.values())
        with digits(DIGITS):
            theirs = tableau_says(stage, response, OMEGAS[1])
            assert agrees(exact_at(response.form, stage, OMEGAS[1]), theirs)

    run()
    assert met > 0


@quick
@given(stages())
def test_double_precision_is_as_good_as_cancelling_terms_allow(stage: Stage) -> None:
    response, ratio = derived(stage)
    nested = nested_of(stage, ratio)
    assume(not singular_at_bias(nested, stage))
    values = response.bias_values
    for omega in OMEGAS:
        exact = complex(exact_at(nested, stage, omega))
        assume(exact != 0)
        s = np.array([1j * float(omega)])
        allowed = ROUNDING * cancelling(ratio, stage, float(omega))
        assert abs(complex(nested.at(s, values).ravel()[0]) / exact - 1) <= allowed
        # Dividing out what both sides share takes roots, which near-double ones leave fewer digits.
        shared = 1e-7 if nested.skeleton.common else 0.0
        given = nested.coefficients(values, 1)
        assert abs(polynomial_ratio(given, float(omega)) / exact - 1) <= max(allowed * 10, shared)
        if isinstance(response.form, Expanded):
            allowed = ROUNDING * cancelling_expanded(response.form, stage, float(omega))
            given = response.coefficients(values, 1)
            assert abs(polynomial_ratio(given, float(omega)) / exact - 1) <= allowed
            assert abs(response.at(float(omega) / (2 * np.pi)) / exact - 1) <= allowed * 10


@quick
@given(stages())
def test_the_dc_value_written_out_alone_is_that_of_the_whole(stage: Stage) -> None:
    response, ratio = derived(stage)
    nested = nested_of(stage, ratio)
    above, below = nested.exact_coefficients(stage.bias)
    alone = dc_alone(replace(response, form=nested))
    assume(alone is not None and isinstance(alone.form, Expanded))
    top, bottom = alone.form.exact_coefficients(stage.bias)
    assume(bottom != 0 and below != 0)
    assert top.degree() <= 0
    assert bottom.degree() <= 0
    if below[0] != 0:
        assert top[0] * below[0] == above[0] * bottom[0]
