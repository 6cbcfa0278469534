"""Responses written out from their product diagrams: against those written out from the minor graph."""

from __future__ import annotations

import time
from fractions import Fraction

import pytest
from big_stages import bipolar_opamp, folded_cascode
from hypothesis import HealthCheck, assume, given, settings
from networks import RESPONSE, stages

from symamp.circuit.stage import Stage
from symamp.exact.cofactors import Ratio, ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import raw_polynomials, write_out
from symamp.exact.largest_written import may_share, write_out_products, written_products
from symamp.exact.modular import vanishes
from symamp.exact.system import build_system


def ratio(stage: Stage, name: str) -> Ratio:
    return ratio_of(build_system(stage, stage.asked[name].without), stage.asked[name])


@settings(max_examples=100, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=5, most_parts=6))
def test_random_networks_of_all_parts_are_written_out_alike(stage: Stage) -> None:
    both = ratio(stage, RESPONSE)
    assume(not any(vanishes(both.graph)) and sum(both.graph.count_terms()) < 20_000)
    numerator, denominator = written_products(both, stage.symbols)
    plain_numerator, plain_denominator = raw_polynomials(both, stage.symbols)
    assert numerator * plain_denominator == denominator * plain_numerator
    theirs = write_out(both, stage.symbols)
    ours = write_out_products(both, stage.symbols)
    assert ours.numerator == theirs.numerator
    assert ours.denominator == theirs.denominator


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=4, most_parts=5))
def test_a_factor_in_common_is_seen(stage: Stage) -> None:
    both = ratio(stage, RESPONSE)
    assume(not any(vanishes(both.graph)) and sum(both.graph.count_terms()) < 20_000)
    numerator, denominator = written_products(both, stage.symbols)
    common = numerator.gcd(denominator)
    assert may_share(both.graph) == (len(common) > 1)


def test_the_folded_cascode_with_all_capacitances_is_written_out_in_seconds() -> None:
    """5.8 million terms; from the minor graph it takes minutes and 19 GB, most of them for terms that cancel."""
    stage = folded_cascode()
    start = time.perf_counter()
    form = write_out_products(ratio(stage, "gain"), stage.symbols)
    assert time.perf_counter() - start < 60  # 7 s on a quiet machine
    assert form.terms == 171_792 + 5_763_764
    # Its DC gain and b1 against the nested form's exact numbers.
    nested = nested_of(stage, ratio(stage, "gain")).exact_coefficients(stage.bias)
    point = {name: Fraction(value) for name, value in stage.bias.items()}
    context = form.context
    names = context.names()
    sums = []
    for polynomial in (form.numerator[0], form.denominator[0], form.numerator[1]):
        total = Fraction(0)
        for exponents, coefficient in polynomial.terms():
            product = Fraction(int(coefficient))
            for name, power in zip(names, exponents, strict=True):
                if power:
                    product *= point[name] ** int(power)
            total += product
        sums.append(total)
    above, below = nested
    assert float(sums[0] / sums[1]) == pytest.approx(_number(above[0] / below[0]), rel=1e-12)
    assert float(sums[2] / sums[1]) == pytest.approx(_number(above[1] / below[0]), rel=1e-12)


def _number(value: object) -> float:
    return int(value.p) / int(value.q)  # type: ignore[attr-defined]


def test_large_stages_share_no_factor() -> None:
    assert not may_share(ratio(bipolar_opamp(with_rx=False), "gain").graph)
