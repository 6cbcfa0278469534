"""Properties of claims at random bias points: errors from terms, first order, identities, rewriting, frontiers.

The truth beside each is the closed form by hand in floats, or the response's quadratic solved in numbers. Sources of
the forms: Gray, Hurst, Lewis & Meyer 3.4 (cascode, from memory) and equation (7.33), common source.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from judged import CASCODE, COMMON_SOURCE, stage_of

from symamp.circuit.stage import Stage
from symamp.judge.check import examine, make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.examined import Examined
from symamp.judge.frontier import balance_error, make_frontiers
from symamp.judge.verdict import Judged

Values = Mapping[str, float]
ONCE = settings(derandomize=True, deadline=None, max_examples=25)
CASCODE_SYMBOLS = ("gm1", "gds1", "gm2", "gds2", "gmb2", "CL")
SOURCE_SYMBOLS = ("gm1", "gds1", "cgs1", "cgd1", "RS", "RL", "CL")


def without_bias(text: str) -> str:
    return text.split("[bias]")[0]


def stage_at(text: str, values: Values) -> Stage:
    """The stage with this bias, each symbol by itself."""
    lines = ["[bias]"]
    for part in sorted({name[-1] for name in values if name[-1].isdigit()}):
        own = {n[:-1]: v for n, v in values.items() if n.endswith(part)}
        lines.append(f"M{part} = {{ {', '.join(f'{n} = {v!r}' for n, v in own.items())} }}")
    lines += [f"{name} = {value!r}" for name, value in values.items() if not name[-1].isdigit()]
    return stage_of(without_bias(text), "\n".join(lines))


def examined(stage: Stage, claim: str, within: str = "10 %") -> Examined:
    (found,) = examine(stage, [claim_of(stage, claim, within)])
    return found


def judged(stage: Stage, claim: str, within: str = "10 %") -> Judged:
    claims = [claim_of(stage, claim, within)]
    return make_check(stage, claims=claims, prove=False, points=16).claims[0]


def scale(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(math.log(low), math.log(high)).map(math.exp)


CASCODE_BIAS = st.fixed_dictionaries(
    {
        "gm1": scale(1e-4, 1e-1), "gds1": scale(1e-6, 1e-3), "gm2": scale(1e-4, 1e-1), "gds2": scale(1e-6, 1e-3),
        "gmb2": scale(1e-5, 1e-2), "CL": scale(1e-14, 1e-10),
    }
)  # fmt: skip
SOURCE_BIAS = st.fixed_dictionaries(
    {
        "gm1": scale(1e-3, 3e-2), "gds1": scale(1e-5, 1e-3), "cgs1": scale(1e-14, 1e-12),
        "cgd1": scale(1e-15, 1e-13), "RS": scale(1e2, 1e5), "RL": scale(1e2, 1e5), "CL": scale(1e-14, 1e-12),
    }
)  # fmt: skip
SOME_CASCODE = {
    "gm1": 4.1e-3,
    "gds1": 0.21e-3,
    "gm2": 3.9e-3,
    "gds2": 0.24e-3,
    "gmb2": 0.62e-3,
    "CL": 3.3e-12,
}
SOME_SOURCE = {
    "gm1": 5e-3, "gds1": 0.2e-3, "cgs1": 0.4e-12, "cgd1": 0.1e-12, "RS": 20e3, "RL": 4e3, "CL": 0.7e-12,
}  # fmt: skip


def cascode_gain(v: Values) -> float:
    return -v["gm1"] * (v["gm2"] + v["gmb2"] + v["gds2"]) / (v["gds1"] * v["gds2"])


def cascode_pole(v: Values) -> float:
    return -v["gds1"] * v["gds2"] / (v["gm2"] + v["gmb2"] + v["gds1"] + v["gds2"]) / v["CL"]


def source_b(v: Values) -> tuple[float, float]:
    """b1 and b2 of the common source, its load RL beside ro."""
    load = v["RL"] / (1 + v["RL"] * v["gds1"])
    miller = v["cgs1"] + v["cgd1"] * (1 + v["gm1"] * load)
    one = v["RS"] * miller + load * (v["cgd1"] + v["CL"])
    pairs = v["cgs1"] * v["cgd1"] + v["cgs1"] * v["CL"] + v["cgd1"] * v["CL"]
    return one, v["RS"] * load * pairs


def source_poles(v: Values) -> tuple[float, float]:
    one, two = source_b(v)
    root = math.sqrt(one**2 - 4 * two)
    return -2 / (one + root), -(one + root) / (2 * two)


Hand = Callable[[Values], float]
# Claim, its value by hand, the exact value by hand.
RATIONAL: tuple[tuple[str, Hand, Hand], ...] = (
    ("gain.dc = -gm1*gm2*ro1*ro2", lambda v: -v["gm1"] * v["gm2"] / v["gds1"] / v["gds2"], cascode_gain),
    ("gain.dc = -gm1*ro1*(1 + gm2*ro2)", lambda v: -v["gm1"] / v["gds1"] * (1 + v["gm2"] / v["gds2"]), cascode_gain),
    ("gain.dc = -gm1*ro1", lambda v: -v["gm1"] / v["gds1"], cascode_gain),
    (
        "gain.dc = -gm1*ro1*gm2*(ro1 || ro2)",
        lambda v: -v["gm1"] / v["gds1"] * v["gm2"] / (v["gds1"] + v["gds2"]), cascode_gain,
    ),
    ("gain.p1 = -1/(gm2*ro1*ro2*CL)", lambda v: -v["gds1"] * v["gds2"] / v["gm2"] / v["CL"], cascode_pole),
    (
        "gain.p1.hz = 1/(2*pi*(gm2 + gmb2)*ro1*ro2*CL)",
        lambda v: -v["gds1"] * v["gds2"] / (v["gm2"] + v["gmb2"]) / v["CL"], cascode_pole,
    ),
)  # fmt: skip


@pytest.mark.parametrize(("claim", "by_hand", "exact"), RATIONAL, ids=[row[0] for row in RATIONAL])
@ONCE
@given(v=CASCODE_BIAS)
def test_error_from_common_and_left_over_terms(claim: str, by_hand: Hand, exact: Hand, v: Values) -> None:
    """(below − above)/(1 + above) of what is left over, each over what is common, is F/E − 1."""
    direct = by_hand(v) / exact(v) - 1
    found = examined(stage_at(CASCODE, SOME_CASCODE), claim)
    values = {**v, "pi": math.pi}
    above, below = (
        sum(each.value(values) for each in found.tacit if each.side == side) for side in ("above", "below")
    )
    assert (below - above) / (1 + above) == pytest.approx(direct, rel=1e-9, abs=1e-12)
    assert balance_error(found, v) == pytest.approx(direct, rel=1e-7, abs=1e-9)


@ONCE
@given(v=SOURCE_BIAS)
def test_error_of_a_root_from_its_balance(v: Values) -> None:
    """−1/b1 of the common source: |p1| taken as 1/b1 is too small by what the balance says, at every bias point."""
    one, two = source_b(v)
    if one**2 < 4.4 * two:
        return  # near the double root the balance is stationary in x
    load = "(RL || ro1)"
    claim = f"gain.p1 = -1/(RS*(cgs1 + cgd1*(1 + gm1*{load})) + {load}*(cgd1 + CL))"
    found = examined(stage_at(COMMON_SOURCE, SOME_SOURCE), claim)
    assert balance_error(found, v) == pytest.approx(-1 / one / source_poles(v)[0] - 1, rel=1e-6, abs=1e-9)


# Claim, the symbols that are shrunk, and of which stage.
SHRUNK = (
    (CASCODE, SOME_CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", ("gds2", "gmb2")),
    (CASCODE, SOME_CASCODE, "gain.dc = -gm1*(gm2 + gmb2)*ro1*ro2", ("gds2",)),
    (CASCODE, SOME_CASCODE, "gain.p1.magnitude = 1/(gm2*ro1*ro2*CL)", ("gds1", "gds2", "gmb2")),
    (CASCODE, SOME_CASCODE, "gain.gain_bandwidth = gm1/(2*pi*CL)", ("gds1",)),
    (COMMON_SOURCE, SOME_SOURCE, "gain.dc = -gm1*RL", ("gds1",)),
    (COMMON_SOURCE, SOME_SOURCE, "gain.p1 = -1/(RS*(cgs1 + cgd1*(1 + gm1*RL)))", ("gds1", "CL", "cgd1")),
    (COMMON_SOURCE, SOME_SOURCE, "gain.p1.hz = 1/(2*pi*RS*cgs1)", ("CL", "cgd1")),
    (COMMON_SOURCE, SOME_SOURCE, "gain.p2 = -1/(RL*CL)", ("gds1", "cgs1", "cgd1")),
)


@pytest.mark.parametrize(("text", "bias", "claim", "small"), SHRUNK, ids=[row[2] for row in SHRUNK])
def test_effects_add_up_to_first_order(text: str, bias: Values, claim: str, small: tuple[str, ...]) -> None:
    """Error − Σ effect falls with the square of the error, or faster, as the left-over symbols are shrunk."""

    def sizes(factor: float) -> tuple[float, float]:
        at = {n: v * (factor if n in small else 1.0) for n, v in bias.items()}
        found = judged(stage_at(text, at), claim)
        assert isinstance(found.error, float)
        total = sum(c.effect for c in found.conditions if c.effect is not None)
        return abs(found.error), abs(found.error - total)

    (error, rest), (smaller, less) = sizes(1e-3), sizes(1e-4)
    assert smaller < error < 0.1
    if rest > 1e-13:  # else the error is linear in the ratios
        assert math.log(rest / less) / math.log(error / smaller) > 1.95
    assert rest < 2 * error**2 + 1e-13


FACTORS = ("gm2", "gm2 + gmb2", "gm2 + gds2", "gm2 + gmb2 + gds2", "gm2 + gds1", "gmb2 + gds2")


@ONCE
@given(v=CASCODE_BIAS, up=st.sampled_from(FACTORS), shape=st.integers(0, 2))
def test_no_left_over_terms_means_identity(v: Values, up: str, shape: int) -> None:
    written = ("-gm1*({})*ro1*ro2", "-gm1/gds1*(({})/gds2)", "-({})*gm1/(gds1*gds2)")[shape].format(up)
    found = examined(stage_at(CASCODE, SOME_CASCODE), f"gain.dc = {written}")
    by_hand = -v["gm1"] * sum(v[n] for n in up.split(" + ")) / v["gds1"] / v["gds2"]
    alike = math.isclose(by_hand, cascode_gain(v), rel_tol=1e-12)
    assert found.identity == alike == (not found.tacit and found.off is None)


REWRITTEN = (
    (CASCODE, SOME_CASCODE, "gain.dc", (
        "-gm1*gm2*ro1*ro2", "-(gm1/gds1)*(gm2/gds2)", r"-g_{m1} g_{m2} r_{o1} r_{o2}",
        r"-\frac{g_{m1}\,g_{m2}}{g_{ds1} \cdot g_{ds2}}", "-sqrt(gm1**2*gm2**2*ro1**2*ro2**2)",
        "gm2*ro2*(gm1*ro1 - 2*gm1*ro1)",
    )),
    (CASCODE, SOME_CASCODE, "gain.p1", (
        "-(gds1 + gds2)/((1 + gm2/gds1)*CL)", "-(1/(ro1 || ro2))/((1 + gm2*ro1)*CL)",
        "-gds1*(gds1 + gds2)/(CL*gds1 + CL*gm2)", r"-\frac{g_{ds1}(g_{ds1}+g_{ds2})}{C_L (g_{ds1}+g_{m2})}",
        "-1/(CL*(1 + gm2*ro1)*(1/(1/ro1 + 1/ro2)))",
    )),
    (COMMON_SOURCE, SOME_SOURCE, "gain.dc", (
        "-gm1*(RL || ro1)", "-gm1/(1/RL + gds1)", r"-g_{m1} (R_L \parallel r_{o1})", "-gm1*RL*ro1/(RL + ro1)",
        "-abs(gm1*(RL || ro1))", "-gm1*RL + gm1*RL - gm1*(ro1 || RL)",
    )),
    (COMMON_SOURCE, SOME_SOURCE, "gain.p1.hz", (
        "1/(2*pi*RS*(cgs1 + cgd1*(1 + gm1*RL)))", "1/(2*pi*(RS*cgs1 + RS*cgd1 + RS*cgd1*gm1*RL))",
        r"\frac{1}{2\pi R_S \left(C_{gs1} + C_{gd1}(1 + g_{m1} R_L)\right)}", "1/RS/(cgs1 + (1 + gm1*RL)*cgd1)/pi/2",
    )),
)  # fmt: skip


@pytest.mark.parametrize(
    ("text", "bias", "about", "forms"), REWRITTEN, ids=["dc", "p1", "source dc", "p1.hz"]
)
def test_rewriting_changes_nothing(text: str, bias: Values, about: str, forms: tuple[str, ...]) -> None:
    stage = stage_at(text, bias)
    first, *others = [judged(stage, f"{about} = {form}") for form in forms]
    limits = make_frontiers(stage, [first.claim])[0].limits
    for form, other in zip(forms[1:], others, strict=True):
        assert other.verdict == first.verdict, form
        assert other.error == pytest.approx(first.error, rel=1e-12)
        assert [c.ratio.text() for c in other.conditions] == [c.ratio.text() for c in first.conditions]
        assert [c.effect for c in other.conditions] == pytest.approx([c.effect for c in first.conditions])
        again = make_frontiers(stage, [other.claim])[0].limits
        assert [(x.ratio.text(), x.formula) for x in again] == [(x.ratio.text(), x.formula) for x in limits]


# Claim, and the symbol that moves one ratio alone, in proportion; the exact value and the claimed one by hand.
MOVED = (
    (CASCODE, SOME_CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", "gmb2/gm2", "gmb2", RATIONAL[0][1], cascode_gain),
    (CASCODE, SOME_CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", "gds2/gm2", "gds2", RATIONAL[0][1], cascode_gain),
    (
        CASCODE,
        SOME_CASCODE,
        "gain.p1.hz = 1/(2*pi*gm2*ro1*ro2*CL)",
        "gmb2/gm2",
        "gmb2",
        RATIONAL[4][1],
        cascode_pole,
    ),
    (
        CASCODE,
        SOME_CASCODE,
        "gain.p1 = -1/(gm2*ro1*ro2*CL)",
        "gds1/gm2",
        "gds1",
        RATIONAL[4][1],
        cascode_pole,
    ),
)


@pytest.mark.parametrize("row", MOVED, ids=[f"{row[2]}: {row[3]}" for row in MOVED])
@pytest.mark.parametrize("within", ["25 %", "40 %"])
def test_frontier_put_back(row: tuple, within: str) -> None:
    """At the bias point moved to the frontier, the claim's error, evaluated anew, is `within`; alone likewise."""
    text, bias, claim, ratio, symbol, claimed, exact = row
    stage = stage_at(text, bias)
    (found,) = make_frontiers(stage, [claim_of(stage, claim, within)])
    by_ratio = {limit.ratio.text(): limit for limit in found.limits}
    limit = by_ratio[ratio]
    allowed = float(within.split()[0]) / 100
    assert limit.limit is not None
    moved = {**bias, symbol: bias[symbol] * limit.margin}
    assert abs(claimed(moved) / exact(moved) - 1) == pytest.approx(allowed, abs=1e-6)
    again = judged(stage_at(text, moved), claim, within)
    assert abs(again.error) == pytest.approx(allowed, abs=1e-6)
    # alone: what moves the other ratios is next to nothing
    others = [n for n in ("gds1", "gds2", "gmb2") if n != symbol]
    alone = {**bias, **dict.fromkeys(others, 1e-14), symbol: limit.alone * bias["gm2"]}
    assert abs(claimed(alone) / exact(alone) - 1) == pytest.approx(allowed, abs=1e-6)


@ONCE
@given(k=scale(1.5, 50), within=st.sampled_from([2, 5, 10, 20]))
def test_frontier_of_a_root_put_back(k: float, within: int) -> None:
    """|p1| taken as 1/b1 with b2/b1² the one ratio: CL is moved until it is at its frontier, poles solved by hand."""
    load = "(RL || ro1)"
    claim = f"gain.p1 = -1/(RS*(cgs1 + cgd1*(1 + gm1*{load})) + {load}*(cgd1 + CL))"
    bias = {**SOME_SOURCE, "CL": SOME_SOURCE["CL"] * k}
    stage = stage_at(COMMON_SOURCE, bias)
    (found,) = make_frontiers(stage, [claim_of(stage, claim, f"{within} %")])
    assert found.limits
    assert all(limit.alone is not None and limit.alone > 0 for limit in found.limits)
    # (1 + e)² − (1 + e) + r = 0 at e = −within, r = Σ b2/b1²: each alone has the same frontier.
    e = -within / 100
    assert [limit.alone for limit in found.limits] == pytest.approx(
        [-(1 + e) * e] * len(found.limits), rel=1e-9
    )
    r = -(1 + e) * e
    one = 1.0
    smaller = -2 / (one + math.sqrt(one - 4 * r))
    assert -1 / one / smaller - 1 == pytest.approx(e, abs=1e-6)
