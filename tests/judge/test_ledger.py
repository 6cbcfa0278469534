"""The ledger: numbers worked out by hand, what does not depend on what, and what is said where there is no number."""

from __future__ import annotations

from itertools import permutations
from math import pi
from pathlib import Path

import pytest
from judged import CASCODE, COMMON_SOURCE, NO_BODY, SMALL_GDS, stage_of

from symamp.errors import InputError, StageError
from symamp.judge.ledger import Account, Ledger, make_ledger

GM1, GDS1, GM2, GDS2, GMB2, CL = 4.1e-3, 0.21e-3, 3.9e-3, 0.24e-3, 0.62e-3, 3.3e-12

LONG_LOAD = """
[[assumption]]
name = "one pole"
dominant_pole = true
"""

TWO_CAPACITORS = CASCODE.replace('gmb = "0.62 mS"', 'gmb = "0.62 mS", csb = "60 fF"')


def ledger(*texts: str, quantities: tuple[str, ...] = (), points: int = 32, folder: Path = Path()) -> Ledger:
    return make_ledger(stage_of(*texts, folder=folder), quantities=quantities, points=points)


def figures(account: Account, name: str) -> tuple[object, ...]:
    (share,) = (s for s in account.assumptions if s.name == name)
    return tuple(share.figures[f] for f in ("alone", "added", "last", "share"))


# By hand


def test_the_gain_of_a_cascode_by_hand() -> None:
    account = ledger(CASCODE, SMALL_GDS, NO_BODY)["gain.dc"]
    whole = GM2 + GMB2 + GDS2
    assert account.exact == pytest.approx(-GM1 * whole / (GDS1 * GDS2))
    assert account.approximate == pytest.approx(-GM1 * GM2 / (GDS1 * GDS2))
    assert account.error == pytest.approx(-(GMB2 + GDS2) / whole)
    # Both act on the one factor gm2 + gmb2 + gds2, each taking its own term away: no order matters.
    assert figures(account, "gds against gm") == pytest.approx([-GDS2 / whole] * 4)
    assert figures(account, "no body effect") == pytest.approx([-GMB2 / whole] * 4)
    assert account.error_formula is not None
    assert account.error_formula.shape.text() == "-(gmb2 + gds2)/(gm2 + gmb2 + gds2)"
    assert account.error_formula.leading is not None
    assert account.error_formula.leading.text() == "-gmb2/gm2"


def test_the_pole_of_a_cascode_by_hand() -> None:
    account = ledger(CASCODE, SMALL_GDS, NO_BODY)["gain.p1"]
    whole = GM2 + GMB2 + GDS2 + GDS1
    e_gds, e_body, e_both = (whole / left - 1 for left in (GM2 + GMB2, GM2 + GDS2 + GDS1, GM2))
    assert account.exact == pytest.approx(-GDS1 * GDS2 / (CL * whole))
    assert account.error == pytest.approx(e_both)
    by_gds = (e_gds, e_gds, e_both - e_body, (e_gds + e_both - e_body) / 2)
    by_body = (e_body, e_both - e_gds, e_both - e_gds, (e_body + e_both - e_gds) / 2)
    assert figures(account, "gds against gm") == pytest.approx(by_gds)
    assert figures(account, "no body effect") == pytest.approx(by_body)


def test_bandwidth_of_a_one_pole_stage_has_the_error_of_its_pole() -> None:
    found = ledger(CASCODE, SMALL_GDS, NO_BODY)
    assert found["gain.bandwidth"].exact == pytest.approx(abs(found["gain.p1"].exact or 0) / (2 * pi))
    assert found["gain.bandwidth"].error == pytest.approx(found["gain.p1"].error)


# What does not depend on what


@pytest.mark.parametrize("quantity", ["gain.dc", "gain.p1", "gain.unity_gain_frequency", "mid.z1"])
def test_the_order_of_listing_changes_added_alone(quantity: str) -> None:
    texts = (SMALL_GDS, NO_BODY, LONG_LOAD)
    accounts = [
        ledger(TWO_CAPACITORS, *order, quantities=(quantity,))[quantity] for order in permutations(texts)
    ]
    first = accounts[0]
    for account in accounts[1:]:
        assert account.error == pytest.approx(first.error, rel=1e-9, abs=1e-12)
        for share in first.assumptions:
            alone, _, last, mean = figures(account, share.name)
            for name, value in (("alone", alone), ("last", last), ("share", mean)):
                assert value == pytest.approx(share.figures[name], rel=1e-9, abs=1e-12)
    for account in accounts:
        added = [share.figures["added"] for share in account.assumptions]
        assert sum(x for x in added if x is not None) == pytest.approx(account.error, abs=1e-12)


def test_an_assumption_on_what_the_response_lacks_changes_nothing() -> None:
    other = '\n[[assumption]]\nname = "elsewhere"\nneglect = ["csb2"]\n'
    beside = '[resistor]\nRF = ["far", "gnd"]\n\n[voltage_source]\nVF = ["far", "gnd"]'
    far = TWO_CAPACITORS.replace("[voltage_source]", beside).replace(
        'CL = "3.3 pF"', 'CL = "3.3 pF"\nRF = "1 kohm"'
    )
    away = '\n[[assumption]]\nname = "far away"\nopen = ["RF"]\n'
    plain = ledger(far, SMALL_GDS, other)
    more = ledger(far, SMALL_GDS, other, away)
    for account in plain.accounts:
        same = more[account.name]
        assert same.error == account.error
        assert figures(same, "far away")[0] == 0.0
        assert set(figures(same, "far away")) <= {0.0, None}  # None where p2 is lost with or without it
        for share in account.assumptions:
            assert figures(same, share.name) == pytest.approx(figures(account, share.name), abs=1e-13)


def test_an_assumption_for_one_response_is_not_in_the_others_account() -> None:
    found = ledger(CASCODE, SMALL_GDS, NO_BODY.rstrip() + '\nfor = ["mid"]\n')
    assert [s.name for s in found["gain.dc"].assumptions] == ["gds against gm"]
    assert [s.name for s in found["mid.dc"].assumptions] == ["gds against gm", "no body effect"]


# No value


def test_a_figure_without_value_says_which_smallest_set_is_to_blame() -> None:
    account = ledger(TWO_CAPACITORS, SMALL_GDS, LONG_LOAD, NO_BODY, quantities=("gain.p2",))["gain.p2"]
    assert account.error is None
    assert "p2, at 13.2 GHz, is lost" in account.why.replace("13.19", "13.2")
    assert figures(account, "one pole") == (None,) * 4
    assert figures(account, "gds against gm")[0] == pytest.approx(-0.0905, abs=2e-3)
    for share in account.assumptions:
        for name, why in share.why.items():
            assert share.figures[name] is None
            assert "'one pole'" in why
    (pole,) = (s for s in account.assumptions if s.name == "one pole")
    assert pole.why["alone"] == "under 'one pole' p2 is lost: it has no partner"
    (body,) = (s for s in account.assumptions if s.name == "no body effect")
    assert body.why["last"].startswith("under 'gds against gm' and 'one pole' ")


def test_an_assumption_that_leaves_nothing_is_said_in_words_and_never_as_a_number() -> None:
    open_drain = '\n[[assumption]]\nname = "no output conductance"\nneglect = ["gds1"]\n'
    account = ledger(CASCODE, open_drain, NO_BODY, quantities=("gain.dc",))["gain.dc"]
    assert account.error is None
    assert "infinite" in account.why
    assert figures(account, "no output conductance") == (None,) * 4
    assert figures(account, "no body effect")[0] == pytest.approx(-GMB2 / (GM2 + GMB2 + GDS2))
    (share,) = (s for s in account.assumptions if s.name == "no output conductance")
    assert share.why["alone"].startswith("under 'no output conductance' the quantity has no value: ")
    assert "infinite" in share.why["alone"]


def test_an_exact_value_of_zero_has_an_absolute_error() -> None:
    coupled = (
        COMMON_SOURCE.replace("[voltage_source]", 'CB = ["a", "g"]\n\n[voltage_source]')
        .replace('RS = ["in", "g"]', 'RS = ["in", "a"]\nRB = ["g", "gnd"]')
        .replace('CL = "0.7 pF"', 'CL = "0.7 pF"\nCB = "1 nF"\nRB = "1 Mohm"')
    )
    short = '\n[[assumption]]\nname = "CB is a short"\nshort = ["CB"]\n'
    account = ledger(coupled, short, quantities=("gain.dc",))["gain.dc"]
    assert account.exact == 0
    assert account.error is None
    assert (
        account.error_absolute
        == account.approximate
        == pytest.approx(-5e-3 / (0.2e-3 + 1 / 4e3) * 1e6 / 1.02e6)
    )
    assert account.why == "the exact value is 0, so there is no relative error"
    assert set(account.assumptions[0].why.values()) == {
        "the exact value is 0, so there is no relative error under 'CB is a short'"
    }


def test_thirteen_assumptions_have_no_shares_and_say_so() -> None:
    # Assumptions that compare products of the cascode's symbols; most of them find nothing to drop.
    pairs = [
        ("gds1", "gm1"),
        ("gds1", "gm2"),
        ("gds2", "gm1"),
        ("gds2", "gm2"),
        ("gmb2", "gm1"),
        ("gmb2", "gm2"),
    ]
    pairs += [
        ("gds1", "gm1*gm2*ro1"),
        ("gds2", "gm1*gm2*ro2"),
        ("gds2", "gm1*gm1*ro2"),
        ("gmb2", "gm1*gm1*ro2"),
    ]
    pairs += [("gds1", "gm1*gm1*ro1"), ("gmb2", "gm2*gm1*ro2"), ("gds2", "gm2*gm2*ro2")]
    texts = [
        f'\n[[assumption]]\nname = "{k}"\nsmall = ["{x}"]\nagainst = ["{y}"]\n'
        for k, (x, y) in enumerate(pairs)
    ]
    found = ledger(CASCODE, *texts, quantities=("gain.dc",))
    account = found["gain.dc"]
    assert len(account.assumptions) == 13
    whole = GM2 + GMB2 + GDS2
    assert account.error == pytest.approx(-(GMB2 + GDS2) / whole)
    assert sum(s.figures["added"] or 0.0 for s in account.assumptions) == pytest.approx(account.error)
    for share in account.assumptions:
        assert share.figures["share"] is None
        assert "12" in share.why["share"]
        assert "share" not in share.span
    assert figures(account, "3")[0] == pytest.approx(-GDS2 / whole)
    assert any("up to 12 assumptions" in remark for remark in found.remarks)


# Faces and units


@pytest.mark.parametrize(
    ("quantity", "unit"),
    [
        ("gain.dc.db", "dB"),
        ("gain.phase_margin", "deg"),
        ("mid.at(1 MHz).deg", "deg"),
        ("gain.at(1 MHz).db", "dB"),
    ],
)
def test_decibels_and_degrees_are_off_by_a_difference(quantity: str, unit: str) -> None:
    account = ledger(CASCODE, SMALL_GDS, NO_BODY, quantities=(quantity,))[quantity]
    assert account.unit == unit
    assert account.absolute
    assert isinstance(account.exact, float)
    assert isinstance(account.approximate, float)
    assert account.error == pytest.approx(account.approximate - account.exact)
    assert account.error_formula is None


def test_degrees_are_off_by_less_than_half_a_turn() -> None:
    # The exact phase is just short of 180°, the approximate one 180° itself, written as either sign.
    flat = '\n[[assumption]]\nname = "no load"\nneglect = ["CL"]\n'
    account = ledger(CASCODE, flat, quantities=("gain.at(1 kHz).deg",))["gain.at(1 kHz).deg"]
    assert account.error == pytest.approx(0.117, abs=0.01)  # atan(1 kHz / 489 kHz)


def test_hertz_and_magnitude_of_a_pole_have_its_error() -> None:
    found = ledger(CASCODE, SMALL_GDS, NO_BODY, quantities=("gain.p1", "gain.p1.hz", "gain.p1.magnitude"))
    assert found["gain.p1.hz"].unit == "Hz"
    errors = [account.error for account in found.accounts]
    assert errors[1] == pytest.approx(errors[0])
    assert errors[2] == pytest.approx(errors[0])


# Spans


def test_a_table_gives_its_rows_by_number_and_every_one(tmp_path: Path) -> None:
    gmb = [0.3, 0.9, 0.5, 0.1, 0.7]
    (tmp_path / "t.csv").write_text("gmb2 [mS]\n" + "".join(f"{x}\n" for x in gmb))
    found = ledger(CASCODE, '\n[span]\ntable = "t.csv"\n', NO_BODY, quantities=("gain.dc",), folder=tmp_path)
    span = found["gain.dc"].span
    assert span is not None
    errors = [-x * 1e-3 / (GM2 + x * 1e-3 + GDS2) for x in gmb]
    assert (span.least, span.greatest) == pytest.approx((min(errors), max(errors)))
    assert (span.where_least, span.where_greatest) == ({"row": 2}, {"row": 4})
    assert (found.points, found.seed) == (5, None)
    assert "every row" in found.method


def test_the_worst_of_a_box_is_at_its_corner() -> None:
    span = '\n[span]\ngmb2 = ["0.1 mS", "1 mS"]\ngm2 = "20 %"\n'
    account = ledger(CASCODE, span, NO_BODY, quantities=("gain.dc",), points=0)["gain.dc"]
    assert account.span is not None
    assert account.span.least == pytest.approx(-1e-3 / (0.8 * GM2 + 1e-3 + GDS2))
    assert account.span.where_least == pytest.approx({"gm2": 0.8 * GM2, "gmb2": 1e-3})
    assert account.span.greatest == pytest.approx(-0.1e-3 / (1.2 * GM2 + 0.1e-3 + GDS2))


def test_figures_of_one_seed_repeat() -> None:
    text = (CASCODE, '\n[span]\ngm1 = "50 %"\ngmb2 = "50 %"\n', SMALL_GDS, NO_BODY)
    assert ledger(*text, points=40) == ledger(*text, points=40)


def test_points_without_value_are_counted() -> None:
    span = '\n[span]\ngm1 = ["0.1 mS", "8 mS"]\n'
    account = ledger(CASCODE, span, NO_BODY, quantities=("gain.dc", "mid.unity_gain_frequency"))[
        "mid.unity_gain_frequency"
    ]
    assert account.span is not None
    assert account.span.missing > 0


# What is asked for


def test_a_stage_without_assumptions_has_no_ledger() -> None:
    with pytest.raises(StageError, match="makes no assumption"):
        ledger(CASCODE)


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("gane.dc", "responses are gain, mid"),
        ("gain", "gain.dc"),
        ("gain.bandwith", "bandwidth"),
        (".dc", "responses"),
    ],
)
def test_an_unknown_quantity_is_refused_with_what_is_known(name: str, words: str) -> None:
    with pytest.raises(InputError) as caught:
        ledger(CASCODE, NO_BODY, quantities=(name,))
    assert caught.value.key == "--quantity"
    assert words in str(caught.value)


def test_a_missing_bias_value_is_asked_for() -> None:
    with pytest.raises(StageError) as caught:
        ledger(CASCODE.replace('CL = "3.3 pF"\n', ""), NO_BODY)
    assert "CL" in caught.value.problem
    assert caught.value.key == "bias"


def test_a_quantity_asked_twice_is_accounted_for_once() -> None:
    found = ledger(CASCODE, NO_BODY, quantities=("gain.dc", "gain.dc", "mid.dc"))
    assert [account.name for account in found.accounts] == ["gain.dc", "mid.dc"]
    with pytest.raises(KeyError):
        found["gain.p1"]


def test_a_value_beyond_the_range_of_numbers_is_none_with_a_why() -> None:
    """Admissible values, each within 1e±100, of which a quantity comes out larger than numbers go."""
    text = COMMON_SOURCE
    for old, new in {
        "5 mS": "1e-70 S",
        "0.2 mS": "1e-100 S",
        "0.4 pF": "1e30 F",
        "0.1 pF": "1e70 F",
        "20 kohm": "1e-30 ohm",
        "4 kohm": "1 ohm",
        "0.7 pF": "1e-100 F",
    }.items():
        assert old in text
        text = text.replace(old, new)
    account = ledger(text, LONG_LOAD, quantities=("gain.bandwidth",))["gain.bandwidth"]
    assert account.exact is None
    assert account.error is None
    assert account.why == "the value is beyond the range of numbers"
    assert all(
        why.startswith("the exact bandwidth has no value") for why in account.assumptions[0].why.values()
    )


CANCELLING = """\
title = "Two ways that cancel"
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "in", drain = "out", source = "gnd" }
M3 = { gate = "x", drain = "out", source = "gnd" }
[resistor]
R1 = ["x", "gnd"]
R2 = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "1 mS", gds = "1 uS" }
M2 = { gm = "0.98 mS", gds = "1 uS" }
M3 = { gm = "1 mS", gds = "1 uS" }
R1 = "1 kohm"
R2 = "1 kohm"
[[assumption]]
name = "resistors load more than the devices"
small = ["gds"]
against = ["gm", "1/R1", "1/R2"]
"""

EQUAL = """
[[assumption]]
name = "M1 and M2 are one"
equal = ["M1", "M2"]
"""


def test_a_warning_of_some_sets_alone_says_of_which() -> None:
    """With M1 and M2 one the two ways cancel more, so that is a warning of both; without, of the first alone."""
    (warning,) = ledger(CANCELLING, quantities=("gain.dc",)).warnings
    assert warning.endswith("the dropped term -gm2*gds1*R1*R2 may matter")
    far = CANCELLING.replace('gm = "0.98 mS"', 'gm = "0.5 mS"')
    assert ledger(far, quantities=("gain.dc",)).warnings == ()
    (warning,) = ledger(far, EQUAL, quantities=("gain.dc",)).warnings
    assert warning.endswith("may matter")  # under all: then M2 is as M1
    neglecting = '\n[[assumption]]\nname = "M3 is off"\nneglect = ["gm3"]\n'
    (warning,) = ledger(CANCELLING, neglecting, quantities=("gain.dc",)).warnings
    assert warning.endswith("may matter (with 'resistors load more than the devices' alone)")
