"""Errors under every set: a nested response gives those of the written-out one."""

from __future__ import annotations

import numpy as np
import pytest
from judged import CASCODE, COMMON_SOURCE, NO_BODY, SMALL_GDS, stage_of

from symamp.assumptions import generated
from symamp.circuit.stage import Stage
from symamp.exact import derive as derive_module
from symamp.exact.asked_quantity import parse_quantity
from symamp.judge.errors_at import error_of
from symamp.judge.ledger import Ledger, make_ledger

TWO_DEVICES = COMMON_SOURCE.replace(
    "[resistor]", 'M2 = { gate = "out", drain = "out", source = "gnd" }\n\n[resistor]'
).replace("[bias]", '[bias]\nM2 = { gm = "4 mS", gds = "0.3 mS", cgs = "0.3 pF" }')


def assumption(name: str, what: str) -> str:
    return f'\n[[assumption]]\nname = "{name}"\n{what}\n'


ALIKE = assumption("alike", 'equal = ["M1", "M2"]')
ONE_POLE = assumption("one pole", "dominant_pole = true")
SETS = [
    (CASCODE, ALIKE, NO_BODY),
    (CASCODE, SMALL_GDS, NO_BODY),
    (COMMON_SOURCE, assumption("no gds", 'neglect = ["gds"]'), assumption("no load", 'open = ["RL"]')),
    (TWO_DEVICES, ALIKE, ONE_POLE),
    (COMMON_SOURCE, ONE_POLE, assumption("no source resistance", 'short = ["RS"]')),
    (
        COMMON_SOURCE,
        assumption("apart", "poles_far_apart = true"),
        assumption("cgs", 'dominant_capacitor = "cgs1"'),
    ),
]
SPAN = '\n[span]\ngm1 = ["2 mS", "8 mS"]\ngds1 = "40 %"\n'


def nested_ledger(stage: Stage, monkeypatch: pytest.MonkeyPatch) -> Ledger:
    with monkeypatch.context() as patched:
        patched.setattr(derive_module, "EXPAND_LIMIT", 0)
        assert not derive_module.derive(stage, stage.asked["gain"]).expanded
        return make_ledger(stage, points=16)


@pytest.mark.parametrize("texts", SETS)
def test_a_nested_ledger_is_the_written_out_one(
    texts: tuple[str, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    stage = stage_of(texts[0], SPAN, *texts[1:])
    expanded, nested = make_ledger(stage, points=16), nested_ledger(stage, monkeypatch)
    assert [a.name for a in nested.accounts] == [a.name for a in expanded.accounts]
    for one, two in zip(expanded.accounts, nested.accounts, strict=True):
        assert two.exact == pytest.approx(one.exact, rel=1e-9)
        assert two.error == (None if one.error is None else pytest.approx(one.error, rel=1e-7, abs=1e-9)), (
            one.name
        )
        assert [root.name for root in two.lost] == [root.name for root in one.lost]
        for share, other in zip(one.assumptions, two.assumptions, strict=True):
            for name, value in share.figures.items():
                same = None if value is None else pytest.approx(value, rel=1e-7, abs=1e-9)
                assert other.figures[name] == same, (one.name, share.name, name)
                assert (name in other.span) == (name in share.span)
                if name in share.span:
                    assert other.span[name].least == pytest.approx(share.span[name].least, rel=1e-6, abs=1e-8)
                    assert other.span[name].greatest == pytest.approx(
                        share.span[name].greatest, rel=1e-6, abs=1e-8
                    )


def test_dominance_in_a_nested_response_of_too_many_terms_is_refused_in_words(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(generated, "TERM_LIMIT", 1)
    found = nested_ledger(stage_of(CASCODE, SMALL_GDS, NO_BODY), monkeypatch)
    account = found["gain.dc"]
    assert account.error is None
    assert "not written out" in account.why
    (body,) = (s for s in account.assumptions if s.name == "no body effect")
    assert body.figures["alone"] == pytest.approx(-0.62 / 4.76)
    assert body.why["last"].startswith("under 'gds against gm' the quantity has no value: dominance")


def test_relative_errors_of_numbers() -> None:
    dc = parse_quantity("dc")
    found = error_of(dc, np.array([1.1, -2.0, 5.0, np.nan]), np.array([1.0, 2.0, 0.0, 1.0]))
    assert found == pytest.approx([0.1, -2.0, np.nan, np.nan], nan_ok=True)


def test_a_difference_of_rounding_is_no_error() -> None:
    assert error_of(parse_quantity("dc"), np.array([1.0 + 2e-16]), np.array([1.0])).tolist() == [0.0]


@pytest.mark.parametrize(
    ("approximate", "exact", "error"),
    [(179.0, -179.0, -2.0), (-179.0, 179.0, 2.0), (90, 0, 90), (180, -180, 0)],
)
def test_degrees_go_the_short_way_round(approximate: float, exact: float, error: float) -> None:
    found = error_of(parse_quantity("at(1 Hz).deg"), np.array([approximate]), np.array([exact]))
    assert found.tolist() == [error]


def test_margins_are_differences_and_never_wrapped() -> None:
    found = error_of(parse_quantity("phase_margin"), np.array([-100.0]), np.array([120.0]))
    assert found.tolist() == [-220.0]
