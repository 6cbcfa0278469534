"""Each kind of assumption against formulas worked out by hand, on several stages."""

from __future__ import annotations

from typing import Any

import assumed_stages as stages
import pytest

from symamp.assumptions.kinds import KINDS

G_X = "(gm2 + gmb2 + gds2 + gds1)"  # conductance at the cascode's inner node, out at ground
MILLER_CS = "(1 + gm1*RL/(1 + gds1*RL))"  # 1 − A of the common source

# kind → (stage, response, assumption, {quantity: formula by hand}); poles in rad/s
BY_HAND: dict[str, list[tuple[Any, str, Any, dict[str, str]]]] = {
    "equal": [
        (
            stages.cascode,
            "gain",
            {"equal": ["M2", "M1"]},
            {"dc": "-gm1*(gm1 + gmb2 + gds1)/gds1^2"},
        ),
        # i1 = −i2 without tail conductance, and the mirror's two nodes carry −gds3·vout/(2·gm3 + gds3).
        (
            stages.differential_pair,
            "gain",
            [{"equal": ["M1", "M2"]}, {"equal": ["M3", "M4"]}, {"neglect": "gds5"}],
            {"dc": "gm1*(2*gm3 + gds3)/(2*(gm3 + gds3)*(gds1 + gds3))"},
        ),
        (stages.two_stage, "gain", {"equal": ["M1", "M6"]}, {"dc": "gm1^2/gds1^2"}),
    ],
    "set": [
        (stages.two_stage, "gain", {"set_": {"RZ": "1/gm6"}}, {"dc": "gm1*gm6/(gds1*gds6)"}),
        (stages.cascode, "gain", {"set_": {"gmb2": "0.2*gm2"}}, {"dc": "-gm1*(1.2*gm2 + gds2)/(gds1*gds2)"}),
        (stages.common_source, "gain", {"set_": {"RL": "1/gds1"}}, {"dc": "-gm1/(2*gds1)"}),
        (stages.follower, "gain", {"set_": {"gm1": "2*gmb1"}}, {"dc": "2*gmb1*RS/(1 + (3*gmb1 + gds1)*RS)"}),
    ],
    "neglect": [
        (stages.common_source, "gain", {"neglect": "gds"}, {"dc": "-gm1*RL"}),
        (stages.common_source, "gain", {"neglect": "cgd"}, {"p2": "-1/(RS*cgs1)", "p1": "-(1/RL + gds1)/CL"}),
        (stages.cascode, "gain", {"neglect": "gmb"}, {"dc": "-gm1*(gm2 + gds2)/(gds1*gds2)"}),
        (
            stages.follower,
            "gain",
            {"neglect": ["gds", "gmb"]},
            {"dc": "gm1*RS/(1 + gm1*RS)", "z1": "-gm1/cgs1"},
        ),
        (stages.degenerated, "rout", {"neglect": ["go", "cpi", "cmu"]}, {"dc": "RC"}),
        (stages.cascode, "rout", {"neglect": "gds1"}, {"b0": "0", "b1": "1"}),
    ],
    "open": [
        (stages.common_source, "gain", {"open_": "RL"}, {"dc": "-gm1/gds1"}),
        (stages.follower, "gain", {"open_": "RS"}, {"dc": "gm1/(gm1 + gmb1 + gds1)"}),
        (stages.cascode, "gain", {"open_": "CL"}, {"dc": f"-gm1*({G_X} - gds1)/(gds1*gds2)"}),
        (stages.common_source, "rout", {"open_": ["RL", "CL"]}, {"dc": "1/gds1"}),
    ],
    "short": [
        (
            stages.common_source,
            "gain",
            {"short": "RS"},
            {"dc": "-gm1*RL/(1 + gds1*RL)", "p1": "-(1/RL + gds1)/(CL + cgd1)", "z1": "gm1/cgd1"},
        ),
        (
            stages.degenerated,
            "gain",
            {"short": ["CIN", "COUT", "CE"]},
            {"dc": "-gm1/(go1 + 1/RC + 1/RL)/RG/(1/RG + 1/RB + gpi1)"},
        ),
        (stages.follower, "rout", {"short": ["RG", "RS"]}, {"dc": "0"}),
        (stages.two_stage, "gain", {"short": "RZ"}, {"z1": "gm6/CC"}),
    ],
    "dominant_capacitor": [
        (stages.common_source, "gain", {"dominant_capacitor": "CL"}, {"p1": "-(1/RL + gds1)/CL"}),
        (stages.cascode, "gain", {"dominant_capacitor": "CL"}, {"p1": f"-gds1*gds2/({G_X}*CL)"}),
        (stages.follower, "gain", {"dominant_capacitor": "cgs1"}, {"z1": "-gm1/cgs1"}),
        (
            stages.two_stage,
            "gain",
            {"dominant_capacitor": "CL"},
            {"p1": "-gds6/CL", "dc": "gm1*gm6/(gds1*gds6)"},
        ),
    ],
    "miller": [
        (
            stages.common_source,
            "gain",
            {"miller": {"part": "cgd1", "from": "g", "to": "out"}},
            {
                "p1": f"-1/(RS*(cgs1 + cgd1*{MILLER_CS}))",
                "p2": "-(1/RL + gds1)/(CL + cgd1*(1 + (1 + gds1*RL)/(gm1*RL)))",
                "dc": "-gm1*RL/(1 + gds1*RL)",
            },
        ),
        (
            stages.common_source,
            "gain",
            {"miller": {"part": "cgd1", "from": "g", "to": "out", "ends": "from"}},
            {"p1": f"-1/(RS*(cgs1 + cgd1*{MILLER_CS}))", "p2": "-(1/RL + gds1)/CL"},
        ),
        (
            stages.two_stage,
            "gain",
            {"miller": {"part": "CC", "from": "a", "to": "r"}, "short": "RZ"},
            {"p1": "-gds1/(C1 + CC*(1 + gm6/gds6))", "p2": "-gds6/(CL + CC*(1 + gds6/gm6))"},
        ),
        # A follower: the bridge to the output is bootstrapped, 1 − A = 1/(1 + gm·R) where gds = gmb = 0.
        (
            stages.follower,
            "gain",
            {
                "miller": {"part": "cgs1", "from": "g", "to": "out", "ends": "from"},
                "neglect": ["gds", "gmb", "cgd"],
            },
            {"p2": "-(1 + gm1*RS)/(RG*cgs1)", "p1": "-(1 + gm1*RS)/(RS*CL)"},
        ),
        # gds across a stage driven by a source: from out to ground, V(to) = 0, A = 0: nothing changes.
        (
            stages.cascode,
            "mid",
            {"miller": {"part": "gds1", "from": "x", "to": "gnd", "ends": "from"}, "open_": "CL"},
            {"dc": "-gm1/gds1"},
        ),
    ],
    "dominance": [
        (
            stages.cascode,
            "gain",
            {"small": "gds", "against": "gm"},
            {"dc": "-gm1*(gm2 + gmb2)/(gds1*gds2)"},
        ),
        (stages.follower, "gain", {"small": ["gds", "gmb"], "against": "gm"}, {"dc": "gm1*RS/(1 + gm1*RS)"}),
        (
            stages.common_source,
            "gain",
            {"small": "gds", "against": "1/RL"},
            {"dc": "-gm1*RL", "z1": "gm1/cgd1"},
        ),
        (stages.degenerated, "rout", {"small": "go1", "against": "1/RC"}, {"dc": "RC"}),
    ],
    "dominant_pole": [
        (
            stages.common_source,
            "gain",
            {"dominant_pole": True},
            {
                "p1": f"-(1 + gds1*RL)/(RS*(cgs1 + cgd1*{MILLER_CS})*(1 + gds1*RL) + RL*(CL + cgd1))",
                "bandwidth": f"(1 + gds1*RL)/(RS*(cgs1 + cgd1*{MILLER_CS})*(1 + gds1*RL) + RL*(CL + cgd1))/(2*pi)",
                "z1": "gm1/cgd1",
            },
        ),
        (
            stages.cascode,
            "gain",
            {"dominant_pole": True},
            {"p1": f"-gds1*gds2/({G_X}*CL + gds2*(cdb1 + cgs2))"},
        ),
        (
            stages.two_stage,
            "gain",
            {"dominant_pole": True, "neglect": "C1"},
            {
                "p1": "-gds1*gds6/(gds1*CL + (gm6 + gds6 + gds1)*CC + gds1*gds6*RZ*CC)",
                "z1": "-1/(CC*(RZ - 1/gm6))",
            },
        ),
        (stages.common_source, "gate", {"dominant_pole": True}, {"dc": "1", "a0": "1", "a1": "0"}),
    ],
    "poles_far_apart": [
        (
            stages.common_source,
            "gain",
            {"poles_far_apart": True},
            {
                "p1": f"-(1 + gds1*RL)/(RS*(cgs1 + cgd1*{MILLER_CS})*(1 + gds1*RL) + RL*(CL + cgd1))",
                "p2": f"-(RS*(cgs1 + cgd1*{MILLER_CS})*(1 + gds1*RL) + RL*(CL + cgd1))"
                "/(RS*RL*(cgs1*cgd1 + cgs1*CL + cgd1*CL))",
                "z1": "gm1/cgd1",
            },
        ),
        (
            stages.cascode,
            "gain",
            {"poles_far_apart": True},
            {"p2": f"-({G_X}*CL + gds2*(cdb1 + cgs2))/(CL*(cdb1 + cgs2))"},
        ),
        (
            stages.two_stage,
            "gain",
            {"poles_far_apart": True, "short": "RZ", "neglect": "gds"},
            {"p1": "0", "p2": "-gm6*CC/(C1*CC + C1*CL + CC*CL)", "z1": "gm6/CC"},
        ),
    ],
    "band": [
        (stages.common_source, "gain", {"band": "1 kHz"}, {"dc": "-gm1*RL/(1 + gds1*RL)"}),
        (
            stages.cascode,
            "gain",
            {"band": "100 MHz"},
            {"a0": f"-gm1*(gm2 + gmb2 + gds2)/({G_X}*CL + gds2*(cdb1 + cgs2))", "b0": "0"},
        ),
        (stages.follower, "gain", {"band": "1 Hz"}, {"dc": "gm1*RS/(1 + (gm1 + gmb1 + gds1)*RS)"}),
        (stages.degenerated, "gain", {"band": "1 uHz"}, {"a0": "0", "b0": "1"}),
    ],
}

ROWS = [(kind, row) for kind, rows in BY_HAND.items() for row in rows]


def test_every_kind_stands_on_three_stages():
    assert set(BY_HAND) == set(KINDS)
    assert all(len(rows) >= 3 for rows in BY_HAND.values())


@pytest.mark.parametrize(
    ("kind", "row"), ROWS, ids=[f"{k} {r[0].__name__} {i}" for i, (k, r) in enumerate(ROWS)]
)
def test_by_hand(kind, row):
    make, name, asked, formulas = row
    b = make()
    for number, assumption in enumerate(asked if isinstance(asked, list) else [asked]):
        b.assume(f"assumption {number}", **assumption)
    made = stages.under(b, name)
    assert made.response is not None, made.why
    bias = made.response.bias_values
    for quantity, formula in formulas.items():
        found = made.response.quantity(quantity)
        assert found.value is not None, (quantity, found.why)
        assert found.value == pytest.approx(stages.formula_value(formula, bias), rel=1e-9, abs=1e-300), (
            quantity
        )
        if found.text is not None and "sqrt" not in found.text:
            own = stages.formula_value(found.text, bias)
            assert own == pytest.approx(found.value.real, rel=1e-9, abs=1e-300), quantity
