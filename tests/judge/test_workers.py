"""Ledgers and checks by several workers: the figures are those of one, to the last bit, and where they are too.

The reference is the run in this process alone, which other tests hold against slow and independent ones.
"""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import pytest
from judged import COMMON_SOURCE, stage_of
from test_errors_at import TWO_DEVICES
from worked import (
    BOX,
    CLAIMS,
    NO_FEEDTHROUGH,
    box_stage,
    check_figures,
    ledger_figures,
    ringing_stage,
    table_stage,
)

from symamp.api import Stage as Answering
from symamp.circuit.stage import Stage
from symamp.exact import derive as derive_module
from symamp.judge import span_errors as span_module
from symamp.judge.check import make_check
from symamp.judge.interrupted import Interrupted
from symamp.judge.ledger import make_ledger
from symamp.span import points as points_module
from symamp.span.executing import Engine
from symamp.span.workers import in_processes

POINTS = 3000


@pytest.fixture(scope="module", params=[1, 2, 3])
def engine(request: pytest.FixtureRequest) -> Iterator[Engine]:
    """Engines over one, two and three processes."""
    with in_processes(request.param) as made:
        yield made


@pytest.fixture(params=["box", "ringing", "table"])
def stage(request: pytest.FixtureRequest, tmp_path: Path) -> Stage:
    if request.param == "table":
        return table_stage(tmp_path)
    return box_stage() if request.param == "box" else ringing_stage()


def test_a_ledger_has_the_same_bits(engine: Engine, stage: Stage, monkeypatch: pytest.MonkeyPatch) -> None:
    for at_once in (span_module._AT_ONCE, 8 * 97, 8 * 13):
        monkeypatch.setattr(span_module, "_AT_ONCE", at_once)
        alone = make_ledger(stage, points=POINTS, prove=False)
        many = make_ledger(stage, points=POINTS, prove=False, executor=engine)
        assert ledger_figures(many) == ledger_figures(alone)


def test_a_check_has_the_same_bits(engine: Engine, stage: Stage, monkeypatch: pytest.MonkeyPatch) -> None:
    for block in (points_module.BLOCK, 500, 37):
        monkeypatch.setattr(points_module, "BLOCK", block)
        alone = make_check(stage, points=POINTS, prove=False)
        many = make_check(stage, points=POINTS, prove=False, executor=engine)
        assert check_figures(many) == check_figures(alone)


def test_a_draw_of_points_for_shares_has_the_same_bits(
    engine: Engine, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Where sets times points are many, shares are looked at in a draw, and the rest without them."""
    monkeypatch.setattr(span_module, "_ENOUGH", 8 * 400)
    monkeypatch.setattr(span_module, "_AT_ONCE", 8 * 97)
    alone = make_ledger(box_stage(), points=POINTS, prove=False)
    assert alone.share_points is not None
    assert alone.share_points < alone.points / 3
    many = make_ledger(box_stage(), points=POINTS, prove=False, executor=engine)
    assert ledger_figures(many) == ledger_figures(alone)


NESTED_SETS = [
    (COMMON_SOURCE, NO_FEEDTHROUGH),
    (TWO_DEVICES, '\n[[assumption]]\nname = "alike"\nequal = ["M1", "M2"]\n'),
    (COMMON_SOURCE, '\n[[assumption]]\nname = "slope"\nset = { RL = "2/gm1" }\n'),
    (
        COMMON_SOURCE,
        '\n[[assumption]]\nname = "apart"\npoles_far_apart = true\n'
        '\n[[assumption]]\nname = "bridge"\nmiller = { part = "cgd1", from = "g", to = "out", ends = "both" }\n',
    ),
]


@pytest.mark.parametrize("pieces", NESTED_SETS, ids=["limits", "equal", "set", "miller"])
def test_nested_responses_travel_too(pieces: tuple[str, ...], monkeypatch: pytest.MonkeyPatch) -> None:
    stage = stage_of(*pieces, BOX, CLAIMS)
    monkeypatch.setattr(derive_module, "EXPAND_LIMIT", 0)
    assert not derive_module.derive(stage, stage.asked["gain"]).expanded
    alone, check = make_ledger(stage, prove=False), make_check(stage, prove=False)
    with in_processes(1) as engine:
        assert ledger_figures(make_ledger(stage, prove=False, executor=engine)) == ledger_figures(alone)
        assert check_figures(make_check(stage, prove=False, executor=engine)) == check_figures(check)


class Inline(Executor):
    """An executor of one's own."""

    def __init__(self) -> None:
        self.submitted = 0

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        self.submitted += 1
        future: Future[Any] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


def test_an_executor_of_ones_own_serves(stage: Stage, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(span_module, "_AT_ONCE", 8 * 97)
    monkeypatch.setattr(points_module, "BLOCK", 200)
    ledger = ledger_figures(make_ledger(stage, points=POINTS, prove=False))
    check = check_figures(make_check(stage, points=POINTS, prove=False))
    inline = Inline()
    with ThreadPoolExecutor(4) as threads:
        for executor in (inline, threads):
            made = make_ledger(stage, points=POINTS, prove=False, executor=executor)
            assert ledger_figures(made) == ledger
            found = make_check(stage, points=POINTS, prove=False, executor=executor)
            assert check_figures(found) == check
    assert inline.submitted >= 4


def test_proofs_stand_beside_what_workers_found(engine: Engine) -> None:
    stage = box_stage()
    assert ledger_figures(make_ledger(stage, executor=engine)) == ledger_figures(make_ledger(stage))
    assert check_figures(make_check(stage, executor=engine)) == check_figures(make_check(stage))


def test_from_python() -> None:
    stage = Answering(box_stage())
    assert ledger_figures(stage.ledger(workers=2).plain) == ledger_figures(stage.ledger().plain)
    assert check_figures(stage.check(workers=2).plain) == check_figures(stage.check().plain)


def test_a_parcel_is_small(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """What each chunk carries does not grow with the table's rows, nor with what the run has looked at before."""
    parcels: list[int] = []

    class Weighed(Inline):
        def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
            parcels.append(len(args[0]))
            return super().submit(fn, *args, **kwargs)

    for rows in (10, 3000):
        stage = table_stage(tmp_path, rows)
        make_ledger(stage, prove=False, executor=Weighed())
        make_check(stage, prove=False, executor=Weighed())
    few, many = parcels[:2], parcels[-2:]
    assert max(parcels) < 40_000
    assert max(abs(a - b) for a, b in zip(few, many, strict=True)) < 200


def end_once(flag: str) -> None:
    """The first worker dies as it starts."""
    if not Path(flag).exists():
        Path(flag).touch()
        os.kill(os.getpid(), signal.SIGKILL)


@pytest.mark.skipif(os.name != "posix", reason="a signal that ends a process at once")
def test_a_ledger_outlives_a_worker(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(span_module, "_AT_ONCE", 8 * 97)
    flag = tmp_path / "died"
    made: list[Executor] = []

    def start() -> Executor:
        context = get_context("spawn")
        made.append(ProcessPoolExecutor(2, context, initializer=end_once, initargs=(str(flag),)))
        return made[-1]

    alone = make_ledger(box_stage(), points=POINTS, prove=False)
    with Engine(start, lambda executor, now: executor.shutdown(wait=not now), in_flight=4) as engine:
        many = make_ledger(box_stage(), points=POINTS, prove=False, executor=engine)
    assert flag.exists()
    assert len(made) == 2
    assert ledger_figures(many) == ledger_figures(alone)


# An interrupted run.


def pressed_after(calls: int) -> Callable[[str, int, int], None]:
    """A progress that interrupts once so many chunks have been looked at."""
    left = [calls]

    def progress(what: str, done: int, total: int) -> None:
        if what == "bias points":
            left[0] -= 1
            if left[0] == 0:
                raise KeyboardInterrupt

    return progress


@pytest.mark.parametrize("by", ["this process", "threads"])
def test_an_interrupted_ledger_says_what_it_had(
    by: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Four chunks of 13 rows: the figures are those of a table that ends there."""
    monkeypatch.setattr(span_module, "_AT_ONCE", 8 * 13)
    whole, part = table_stage(tmp_path), make_ledger(table_stage(tmp_path, 52), prove=False)
    with ThreadPoolExecutor(2) as threads:
        executor = threads if by == "threads" else None
        with pytest.raises(Interrupted) as caught:
            make_ledger(whole, prove=False, progress=pressed_after(4), executor=executor)
    found = caught.value.so_far
    assert (found.done, found.total) == (52, 301)
    assert [(e.name, e.least, e.greatest) for e in found.errors] == [
        (a.name, a.span.least, a.span.greatest) for a in part.accounts if a.span
    ]
    words = str(caught.value)
    assert words.startswith("52 of 301 bias points were looked at; least and greatest error so far: gain.dc ")
    assert isinstance(caught.value, KeyboardInterrupt)


def test_an_interrupted_check_says_what_it_had(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(points_module, "BLOCK", 20)
    whole, part = table_stage(tmp_path), make_check(table_stage(tmp_path, 40), prove=False)
    with pytest.raises(Interrupted) as caught:
        make_check(whole, prove=False, progress=pressed_after(2), executor=Inline())
    found = caught.value.so_far
    assert (found.done, found.total) == (40, 301)
    assert [(e.name, e.least, e.greatest) for e in found.errors] == [
        (j.claim.about, j.span.least, j.span.greatest) for j in part.claims if j.span
    ]


def test_an_interrupt_during_the_search_says_so() -> None:
    stage = box_stage()
    with pytest.raises(
        Interrupted, match="bias points were looked at, and the search from the worst was under"
    ):
        make_ledger(stage, points=100, prove=False, progress=pressed_after(4))


def test_an_interrupt_before_any_point_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    def pressed(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(span_module._Errors, "at", pressed)
    with pytest.raises(Interrupted, match=r"^none of 109 bias points was looked at$"):
        make_ledger(box_stage(), points=100, prove=False)
