"""Published values, each asked twice: is the exact result right, and does the hand method give the print?"""

from __future__ import annotations

import pytest
from hand_methods import METHODS, NOISE, NOT_SAID, READ_AS
from published_values import (
    READ,
    RENAMED,
    Value,
    circuits,
    exact_response,
    figure,
    gain_stage_of,
    number,
    stage_of,
    values,
    with_assumptions,
)

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.labels import check_label
from symamp.errors import StageError
from symamp.exact.derive import derive
from symamp.exact.time_constants import time_constants

SILENT = [value for value in values().values() if value.id not in NOISE]
BY_EXACT_METHOD = [value for value in SILENT if value.method == "exact"]
BY_TIME_CONSTANTS = [value for value in SILENT if value.method == "octc"]
BY_HAND = [value for value in SILENT if value.id in METHODS]


def under(value: Value) -> Approximation:
    """The value's response under the assumptions that stand for its hand method."""
    stage = with_assumptions(stage_of(value.id), METHODS[value.id])
    return Approximator(exact_response(value.id)).under(read_assumptions(stage))


def names(chosen: list[Value]) -> list[str]:
    return [value.id for value in chosen]


def labels(chosen: list[Value]) -> list[str]:
    """Ids of tests, which say where a value was recalled and not seen."""
    return [f"{value.id} from memory" if value.from_memory else value.id for value in chosen]


def test_every_value_is_accounted_for() -> None:
    listed = [*NOISE, *NOT_SAID, *METHODS, *names(BY_EXACT_METHOD)]
    assert sorted(listed) == sorted(values())
    assert (len(circuits()), len(values())) == (68, 157)
    assert (len(NOISE), len(NOT_SAID), len(METHODS), len(BY_EXACT_METHOD)) == (3, 3, 73, 78)


def test_noise_values_alone_are_of_a_type_that_is_not_read() -> None:
    assert [v.id for v in values().values() if v.what["type"] not in READ] == list(NOISE)


def test_only_labels_that_cannot_be_are_renamed() -> None:
    for before, after in RENAMED.items():
        with pytest.raises(StageError):
            check_label(before)
        check_label(after)


@pytest.mark.parametrize("value", SILENT, ids=labels(SILENT))
def test_exact_result(value: Value) -> None:
    found = figure(value, exact_response(value.id))
    assert found == pytest.approx(value.exact, rel=1e-6), value.said_by


@pytest.mark.parametrize("value", BY_EXACT_METHOD, ids=labels(BY_EXACT_METHOD))
def test_published_by_an_exact_method(value: Value) -> None:
    found = figure(value, exact_response(value.id))
    assert found == pytest.approx(value.published, rel=value.tolerance), value.said_by


@pytest.mark.parametrize("value", BY_HAND, ids=labels(BY_HAND))
def test_published_by_a_hand_method(value: Value) -> None:
    made = under(value)
    assert made.response is not None, made.why
    read_as = READ_AS.get(value.id)
    found = number(made.response, read_as).real if read_as else figure(value, made.response)
    assert found == pytest.approx(value.published, rel=value.tolerance), value.said_by
    assert not made.warnings


def test_hand_methods_are_needed() -> None:
    """Many prints are far from exact: assumptions that did nothing would not meet them."""
    off = [v.id for v in BY_HAND if v.exact != pytest.approx(v.published, rel=v.tolerance)]
    assert len(off) == 47
    assert {"CS7-1", "CS7-2", "CAS2-5", "CAS4-1", "DP1-3", "EF1Z-3", "EF3-2"} <= set(off)


@pytest.mark.parametrize("value_id", NOT_SAID)
def test_what_no_assumption_says_is_off_the_exact_value(value_id: str) -> None:
    value = values()[value_id]
    assert value.exact != pytest.approx(value.published, rel=value.tolerance), NOT_SAID[value_id]


RESISTANCES = [value for value in SILENT if value.what["type"] == "rcap"]


@pytest.mark.parametrize("value", RESISTANCES, ids=labels(RESISTANCES))
def test_resistance_of_an_open_circuit_time_constant(value: Value) -> None:
    stage = gain_stage_of(value.id)
    found = {each.part: each.resistance for each in time_constants(stage, stage.asked["asked"])}
    assert found[value.what["cap"]] == pytest.approx(value.exact, rel=1e-6), value.said_by


@pytest.mark.parametrize("value", BY_TIME_CONSTANTS, ids=labels(BY_TIME_CONSTANTS))
def test_open_circuit_time_constants_add_up_to_b1(value: Value) -> None:
    """Cochrun and Grabel 1973."""
    stage = gain_stage_of(value.id)
    asked = stage.asked["asked"]
    total = sum(each.seconds for each in time_constants(stage, asked) if each.seconds is not None)
    assert total == pytest.approx(derive(stage, asked).quantity("b1").value, rel=1e-12)
