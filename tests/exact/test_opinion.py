"""The second derivation by lcapy: random networks agree exactly, and what goes wrong is said."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path

import pytest
from flint import fmpq_poly
from hypothesis import HealthCheck, Phase, assume, given, settings
from networks import KINDS, RESPONSE, stages

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.errors import MissingLibraryError, StageError
from symamp.exact import opinion
from symamp.exact.derive import derive
from symamp.exact.opinion import ask, drawn_values, network_of, rational_text, same, second_opinion
from symamp.exact.opinion_worker import netlist_text


def common_source() -> Stage:
    build = StageBuilder("common source; with 'names' that no other program should read")
    build.mosfet("M1", gate="in[0]", drain="exit()", source="gnd", gm="4 mS", gds="0.2 mS", cgd="20 fF")
    build.capacitor("CL", "exit()", "gnd", "1 pF")
    build.voltage_source("VIN", "in[0]", "gnd")
    build.response("gain", source="VIN", to="exit()")
    return build.stage()


def drawn(count: int, **shape: object) -> list[Stage]:
    """So many random stages that have a response, the same each time."""
    found: list[Stage] = []

    @settings(
        max_examples=count,
        derandomize=True,
        database=None,
        deadline=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(stages(**shape))  # type: ignore[arg-type]
    def collect(stage: Stage) -> None:
        try:
            derive(stage, stage.asked[RESPONSE])
        except StageError:
            assume(False)
        found.append(stage)

    collect()
    return found


def test_random_networks_agree_exactly() -> None:
    many = drawn(16, most_nodes=11, most_parts=18)
    for kind in KINDS:
        some = drawn(6, most_nodes=6, kinds=(kind, kind, "resistor", "capacitor"))
        assert any(part.kind.name == kind for stage in some for part in stage.parts.values()), kind
        many += some
    networks, ours = [], []
    for stage in many:
        asked = stage.asked[RESPONSE]
        values, ratio = drawn_values(stage, derive(stage, asked).form, 1)
        networks.append(network_of(stage, asked, values))
        ours.append(ratio)
    answers = ask(networks, timeout=60)
    assert len(answers) == len(many)
    for stage, network, ratio, answer in zip(many, networks, ours, answers, strict=True):
        assert "error" not in answer, answer
        assert same(ratio, network.ratio(answer["voltages"])), (stage.source or b"").decode()


def test_a_stage_gets_its_second_opinion() -> None:
    stage = common_source()
    found = second_opinion(stage, stage.asked["gain"])
    assert found.agrees is True
    assert found.words == "both derivations agree exactly"
    assert found.ours == found.theirs
    assert set(found.values) == {"gm1", "gds1", "cgd1", "CL"}
    v = found.values
    # H = (s·cgd − gm)/(gds + s·(cgd + CL)), by hand
    by_hand = (
        f"({-v['gm1'] / v['gds1']} + {v['cgd1'] / v['gds1']}*s)/(1 + {(v['cgd1'] + v['CL']) / v['gds1']}*s)"
    )
    assert found.ours == by_hand
    assert found.seconds > 0


def test_the_seed_settles_the_values() -> None:
    stage = common_source()
    form = derive(stage, stage.asked["gain"]).form
    assert drawn_values(stage, form, 5) == drawn_values(stage, form, 5)
    assert drawn_values(stage, form, 5)[0] != drawn_values(stage, form, 6)[0]


def test_a_difference_is_seen(monkeypatch: pytest.MonkeyPatch) -> None:
    stage = common_source()
    right = opinion.network_of

    def wrong(stage: Stage, asked: object, values: dict[str, Fraction]) -> object:
        return right(stage, asked, {**values, "gds1": values["gds1"] + Fraction(1, 10**9)})  # type: ignore[arg-type]

    monkeypatch.setattr(opinion, "network_of", wrong)
    found = second_opinion(stage, stage.asked["gain"])
    assert found.agrees is False
    assert found.words == "the two derivations differ"
    assert found.ours != found.theirs


def test_no_answer_in_time_is_no_verdict() -> None:
    stage = common_source()
    found = second_opinion(stage, stage.asked["gain"], timeout=0.01)
    assert found.agrees is None
    assert found.theirs == ""
    assert found.words == "no second opinion: no answer within 0.01 s: the network is too large for it"


def test_a_missing_library_says_how_to_install_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "lcapy.py").write_text("raise ImportError('not here')\n")
    monkeypatch.setenv("PYTHONPATH", str(tmp_path))
    stage = common_source()
    with pytest.raises(MissingLibraryError, match=r'pip install "symamp\[second-opinion\]"'):
        second_opinion(stage, stage.asked["gain"])


def test_files_of_the_working_folder_are_not_imported(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    for name in ("lcapy.py", "json.py", "sympy.py"):
        (tmp_path / name).write_text("raise SystemExit('imported from the working folder')\n")
    monkeypatch.chdir(tmp_path)
    stage = common_source()
    assert second_opinion(stage, stage.asked["gain"]).agrees is True


def test_no_text_of_the_user_leaves_the_house() -> None:
    stage = common_source()
    asked = stage.asked["gain"]
    values, _ = drawn_values(stage, derive(stage, asked).form, 1)
    network = network_of(stage, asked, values)
    sent = json.dumps(network.elements)
    for name in (*stage.parts, *stage.symbols, "in[0]", "exit()"):
        assert f'"{name}"' not in sent
    assert {type(node) for element in network.elements for node in element["nodes"]} == {int}


@pytest.mark.parametrize(
    "element",
    [
        {"what": "R", "nodes": [1, 0], "value": "__import__('os')"},
        {"what": "R", "nodes": ["1\nV2 3 0", 0], "value": "1"},
        {"what": "R", "nodes": [1, 0, 2], "value": "1"},
        {"what": "D", "nodes": [1, 0], "value": "1"},
        {"what": "F", "nodes": [1, 0], "value": "1", "control": "1 {x}"},
    ],
)
def test_the_worker_writes_numbers_alone(element: dict[str, object]) -> None:
    with pytest.raises(ValueError, match=r"."):
        netlist_text([element])


def test_netlist_lines() -> None:
    elements = [
        {"what": "V", "nodes": [1, 0], "value": "1"},
        {"what": "G", "nodes": [0, 2, 1, 0], "value": "-3/7"},
        {"what": "H", "nodes": [3, 0], "value": "1", "control": 0},
    ]
    assert netlist_text(elements) == "V0 1 0 s {1}\nG1 0 2 1 0 {-3/7}\nH2 3 0 V0 {1}\n"


def test_a_rational_function_is_written_in_lowest_terms() -> None:
    numerator = fmpq_poly([0, 2, 2])  # 2s(1 + s)
    denominator = fmpq_poly([0, 4, 4, 0])  # 4s(1 + s)
    assert rational_text(numerator, denominator) == "(1/2)/(1)"
    assert rational_text(fmpq_poly([1, -3]), fmpq_poly([0, 2, 1])) == "(1/2 - 3/2*s)/(1*s + 1/2*s^2)"
    assert rational_text(fmpq_poly([]), fmpq_poly([5, 1])) == "(0)/(1)"
