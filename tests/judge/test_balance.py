"""Balances of random claims on random stages, held against dense nodal matrices and formulas worked out in floats.

A claim is an exact expression with terms dropped. The truth beside it: the stage solved by `nodal` at the same bias
point, and the formula's terms added up; neither knows of balances.
"""

from __future__ import annotations

import math
import random
import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from judged import stage_of
from random_claims import (
    Ratio,
    around,
    at_bias,
    bias_of,
    dc_claim,
    dense,
    exact_of,
    moving_alone,
    pole_claim,
    random_stage,
    shrinking,
    terms_of,
)

from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.judge.check import judged
from symamp.judge.claim_reading import claim_of
from symamp.judge.examined import Examined, Known
from symamp.judge.frontier import balance_error, frontier_of

SEEDS = st.integers(0, 100_000)
ONCE = settings(derandomize=True, deadline=None, max_examples=25)
FEW = 25  # ratios up to which a claim's frontier is put back


def examined(stage: Stage, claim: str, within: str = "10 %") -> Examined:
    """A claim beside the exact response, without the search for the assumptions behind it."""
    return Examined(Known(stage, ()), claim_of(stage, claim, within), with_ways=False)


def values_of(found: Examined, values: dict[str, float]) -> tuple[float, float]:
    """The sums of the ratios left over above and below."""
    at = {**values, "pi": math.pi}
    above, below = (
        sum(each.value(at) for each in found.tacit if each.side == side) for side in ("above", "below")
    )
    return above, below


@ONCE
@given(seed=SEEDS)
def test_error_from_terms_is_the_direct_difference(seed: int) -> None:
    """F/E − 1 from common and left-over terms, at the bias point and at random ones, against the nodal matrix."""
    pick, stage = random.Random(seed), random_stage(seed)
    formula = dc_claim(pick, exact_of(stage))
    found = examined(stage, f"gain.dc = {formula.text}")
    bias = bias_of(stage)
    assert found.error == pytest.approx(formula.value(bias) / dense(stage, bias).dc() - 1, rel=1e-7, abs=1e-9)
    for _ in range(3):
        at = around(pick, bias)
        direct = formula.value(at) / dense(stage, at).dc() - 1
        if abs(direct) > 1e6:  # next to a gain of nothing both are rounding
            continue
        assert balance_error(found, at) == pytest.approx(direct, rel=1e-6, abs=1e-8)
        if found.off is None:
            above, below = values_of(found, at)
            assert (below - above) / (1 + above) == pytest.approx(direct, rel=1e-6, abs=1e-8)


def pole_index(pick: random.Random, stage: Stage) -> int | None:
    """A pole to claim something about; None of a stage with poles that its response does not see, or with none."""
    count = len(exact_of(stage).form.denominator) - 1
    return pick.randint(1, count) if 0 < count == len(dense(stage, bias_of(stage)).poles()) else None


def test_poles_are_paired_by_the_least_logarithm() -> None:
    """The root that a claim is held against, and its error, by the eigenvalues of the nodal matrices."""
    done = others = 0
    for seed in range(60):
        pick, stage = random.Random(seed), random_stage(seed)
        k = pole_index(pick, stage)
        if k is None:
            continue
        poles = dense(stage, bias_of(stage)).poles()
        formula = pole_claim(pick, exact_of(stage), k)
        claimed = formula.value(bias_of(stage))
        costs = [abs(np.log(complex(claimed) / pole)) for pole in poles]
        mine = k - 1 if costs[k - 1] <= min(costs) * (1 + 1e-6) else int(np.argmin(costs))
        found = examined(stage, f"gain.p{k} = {formula.text}")
        error = claimed / poles[mine] - 1
        assert abs(found.error) == pytest.approx(abs(error), rel=1e-6, abs=1e-8), seed
        done += 1
        if abs(poles[mine].imag) < 1e-9 * abs(poles[mine]):
            assert found.other_root == ("" if mine == k - 1 else f"p{mine + 1}"), seed
            others += mine != k - 1
    assert done >= 30
    assert others >= 1


@pytest.mark.parametrize("pole", [False, True])
def test_effects_are_the_error_to_first_order(pole: bool) -> None:
    """All ratios shrunk at once, along powers of ε of the symbols: what the effects leave falls with their square."""
    done = 0
    for seed in range(160):
        pick, stage = random.Random(seed), random_stage(seed)
        k = pole_index(pick, stage) if pole else 0
        if k is None:
            continue
        formula = pole_claim(pick, exact_of(stage), k) if k else dc_claim(pick, exact_of(stage))
        claim = f"gain.{f'p{k}' if k else 'dc'} = {formula.text}"
        for largest, rest in shrunk(stage, claim):
            assert rest <= 50 * largest**2 + 1e-9, (seed, claim)
            done += 1
    assert done >= 20


def shrunk(stage: Stage, claim: str) -> list[tuple[float, float]]:
    """(largest ratio, error less the sum of effects) as all ratios shrink; empty where they cannot all."""
    found = examined(stage, claim)
    if found.off is not None or not 0 < len(found.tacit) <= FEW or found.balanced.balance.comparison.numbers:
        return []
    bias = bias_of(stage)
    powers = shrinking([(terms_of(t.numerator), terms_of(t.denominator)) for t in found.tacit], sorted(bias))
    sizes = []
    for epsilon in (1e-3, 1e-4) if powers is not None else ():
        moved = at_bias(stage, {n: v * epsilon ** powers[n] for n, v in bias.items()})
        judgement = judged(examined(moved, claim))
        if isinstance(judgement.error, complex) or judgement.root != found.other_root:
            return []  # along the way the claim has come nearer to another root
        largest = max(abs(c.at_bias) for c in judgement.conditions)
        rest = abs(judgement.error - sum(c.effect for c in judgement.conditions))
        if largest < 2e-2:
            sizes.append((largest, rest))
    return sizes


def put_back(stage: Stage, claim: str, formula: Ratio) -> int:
    """Moves the symbols so that one ratio alone comes to its limit; how many could be moved so."""
    found = examined(stage, claim)
    if found.off is not None or not 0 < len(found.tacit) <= FEW or found.balanced.balance is None:
        return 0
    bias = bias_of(stage)
    ratios = [(terms_of(t.numerator), terms_of(t.denominator)) for t in found.tacit]
    common = terms_of(found.balanced.balance.comparison.common)
    values = [t.value(found.values) for t in found.tacit]
    done = 0
    for limit in frontier_of(found).limits:
        which = [n for n, value in enumerate(values) if value == limit.at_bias]
        if len(which) != 1 or limit.limit is None:
            continue
        powers = moving_alone(which[0], ratios, common, sorted(bias))
        if powers is None or abs(math.log(limit.margin)) * max(map(abs, powers.values())) > 40:
            continue
        moved = {n: v * limit.margin ** powers[n] for n, v in bias.items()}
        network = dense(stage, moved)
        exact = network.dc() if found.root is None else network.poles()[found.root - 1]
        assert abs(formula.value(moved) / exact - 1) == pytest.approx(0.1, abs=1e-6), limit.ratio.text()
        done += 1
    return done


@pytest.mark.parametrize(("pole", "least"), [(False, 20), (True, 8)])
def test_frontiers_put_back_on_random_stages(pole: bool, least: int) -> None:
    """A claim's error is what it is allowed where one ratio alone, symbols moved, is at its frontier."""
    done = 0
    for seed in range(300 if pole else 120):
        pick, stage = random.Random(seed), random_stage(seed)
        for k in range(1, len(exact_of(stage).form.denominator)) if pole else (0,):
            if k and pole_index(random.Random(0), stage) is None:
                continue
            formula = pole_claim(pick, exact_of(stage), k) if k else dc_claim(pick, exact_of(stage))
            done += put_back(stage, f"gain.{f'p{k}' if k else 'dc'} = {formula.text}", formula)
    assert done >= least


LADDER = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "out"]
capacitor.C1 = ["a", "gnd"]
capacitor.C2 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { R1 = 1e3, R2 = 2e3, C1 = 1e-9, C2 = 0.1e-9 }
"""


@pytest.mark.parametrize(("k", "claim"), [(1, "1/(R1*C1)"), (2, "1/(R2*C2)"), (1, "1/(R1*(C1 + C2))")])
@pytest.mark.parametrize("within", ["2 %", "5 %", "10 %", "20 %"])
def test_the_balance_of_a_quadratic_at_its_limit(k: int, claim: str, within: str) -> None:
    """D(s) = 1 + s(R1C1 + R1C2 + R2C2) + s²R1C1R2C2: a ratio at its limit in the polynomial makes y = 1 ± within."""
    stage = stage_of(LADDER)
    found = examined(stage, f"gain.p{k} = -{claim}", within)
    comparison = found.balanced.balance.comparison
    levels = comparison.levels(found.values)
    w = float(within.split()[0]) / 100
    for limit in frontier_of(found).limits:
        if limit.limit is None:
            continue
        powers = dict.fromkeys(range(3), 0.0)
        for n, level in levels.items():
            powers[n] += level
        for each in found.tacit:
            own = each.value(found.values)
            for n, share in each.powers.items():
                powers[n] += each.sign * share * (limit.limit if own == limit.at_bias else own)
        x = np.roots([powers[2], powers[1], powers[0]])
        assert min(abs(abs(1 / each - 1) - w) for each in x) < 1e-9


def test_terms_that_cancel_at_different_powers_of_s() -> None:
    """F = −1/(R1·C1) in the ladder: R2C2/(R1C1) stands at s and at s², and is common; C2/C1 is left over."""
    found = examined(stage_of(LADDER), "gain.p1 = -1/(R1*C1)")
    (tacit,) = found.tacit
    ratio = 0.1 / (1 + 0.2)  # (C2/C1)/(1 + R2·C2/(R1·C1))
    assert tacit.value(found.values) == pytest.approx(ratio, rel=1e-12)
    one, two = 1e-6 + 0.1e-6 + 0.2e-6, 0.2e-12
    exact = -2 / (one + math.sqrt(one**2 - 4 * two))
    assert found.error == pytest.approx(-1e6 / exact - 1, rel=1e-9)
    # 1 + 0.2·x² above and 1.2·x below are common: their slope at x = 1, over 1.2
    assert found.slope == pytest.approx((2 * 0.2 - 1.2) / 1.2, rel=1e-12)


def test_left_over_multiples_stand_at_their_powers() -> None:
    """Equal sections: 1 − 1.5·x + 0.25·x² at F = −1/(2RC) has a pure number left over, at x¹."""
    made = '\nassumption = [{ name = "alike", set = { R2 = "R1", C2 = "C1" } }]\n'
    found = examined_with(stage_of(LADDER.replace("2e3", "1e3").replace("0.1e-9", "1e-9"), made))
    (number,) = found.balanced.balance.comparison.numbers
    assert number.powers == {1: 1.0}
    assert number.value(found.values) == pytest.approx(0.2)


def examined_with(stage: Stage) -> Examined:
    known = Known(stage, read_assumptions(stage))
    return Examined(known, claim_of(stage, "gain.p1 = -1/(2*R1*C1)", "10 %"), with_ways=False)


def test_many_ratios_take_bounded_time() -> None:
    """A pole of which some 180 ratios are left over, each over 176 terms."""
    pick, stage = random.Random(1), random_stage(1)
    exact = exact_of(stage)
    dc_claim(pick, exact)
    found = examined(stage, f"gain.p1 = {pole_claim(pick, exact, 1).text}")
    assert len(found.tacit) > 100
    start = time.monotonic()
    assert len(frontier_of(found).limits) == len(found.tacit)
    assert time.monotonic() - start < 10
