"""Chunks of work through executors: the order, how many are in flight, workers that die, an interrupted run."""

from __future__ import annotations

import os
import signal
import sys
import time
from collections.abc import Callable, Iterator
from concurrent.futures import BrokenExecutor, CancelledError, Executor, Future, ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from symamp.errors import InputError, MissingLibraryError
from symamp.span.chunks import Chunk, looked_at
from symamp.span.executing import Engine, WorkerError, for_workers, run_in_order
from symamp.span.extremes import Extremes, Summary
from symamp.span.workers import MOST_WORKERS, checked, in_processes, on_cluster, workers_of


class Inline(Executor):
    """The simplest executor: it works at once, and counts what is in flight."""

    def __init__(self) -> None:
        self.submitted = 0

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        self.submitted += 1
        future: Future[Any] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:
            future.set_exception(error)
        return future


class Mortal(Inline):
    """One whose workers die of some tasks, and with them, as in a pool of processes, all that is in flight."""

    def __init__(self, deadly: dict[int, int]) -> None:
        super().__init__()
        self.deadly = deadly
        self.broken = False

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        if self.broken:
            raise BrokenExecutor("the pool is broken")
        task = args[-1]
        if self.deadly.get(task, 0) > 0:
            self.deadly[task] -= 1
            self.broken = True
            future: Future[Any] = Future()
            future.set_exception(BrokenExecutor("a worker has gone"))
            return future
        return super().submit(fn, *args, **kwargs)


def added(offset: int, task: int) -> int:
    return offset + task


def slow_first(_: None, task: int) -> int:
    time.sleep(0.05 if task % 4 == 0 else 0.0)
    return task


def test_results_come_in_the_order_of_the_tasks() -> None:
    with ThreadPoolExecutor(4) as threads:
        found = list(run_in_order(Engine.through(threads), slow_first, None, range(20)))
    assert found == [(n, n) for n in range(20)]
    assert list(run_in_order(Engine.through(Inline()), added, 10, [])) == []


def test_few_tasks_are_taken_ahead_of_the_results() -> None:
    taken: list[int] = []

    def tasks() -> Iterator[int]:
        for n in range(50):
            taken.append(n)
            yield n

    engine = Engine(Inline, lambda *_: None, in_flight=3)
    for done, (task, result) in enumerate(run_in_order(engine, added, 1, tasks())):
        assert (task, result) == (done, done + 1)
        assert len(taken) <= done + 3
    assert taken == list(range(50))


def mortal(deadly: dict[int, int]) -> tuple[Engine, list[Mortal]]:
    made: list[Mortal] = []

    def start() -> Executor:
        made.append(Mortal(deadly))
        return made[-1]

    return Engine(start, lambda *_: None, in_flight=4), made


@pytest.mark.parametrize(
    "deadly", [{0: 1}, {5: 1}, {5: 3}, {9: 2}, {2: 1, 3: 2, 9: 1}, dict.fromkeys(range(10), 1)]
)
def test_what_dies_is_done_again(deadly: dict[int, int]) -> None:
    engine, made = mortal(dict(deadly))
    assert list(run_in_order(engine, added, 1, range(10))) == [(n, n + 1) for n in range(10)]
    assert len(made) > 1  # a broken executor takes no more work
    assert len(made) <= 1 + sum(deadly.values())


def test_the_task_that_always_ends_its_worker_is_named_and_those_before_it_are_done() -> None:
    engine, made = mortal({6: 1000})
    run = run_in_order(engine, added, 1, range(10), named=lambda _: "task six or so")
    assert [next(run) for _ in range(6)] == [(n, n + 1) for n in range(6)]
    with pytest.raises(WorkerError, match=r"^chunk 7 \(task six or so\) ended its worker 3 times .*fewer"):
        next(run)
    assert len(made) == 1 + 3  # once beside others, then three times alone


def test_an_executor_that_is_given_and_breaks_for_good_is_said() -> None:
    executor = Mortal({2: 1})
    with pytest.raises(
        WorkerError, match=r"^chunk 3 ended its worker 2 times .*the executor took no more work"
    ):
        list(run_in_order(Engine.through(executor), added, 1, range(10), retries=2))


def test_a_task_that_somebody_else_cancels_is_said() -> None:
    class Leaving(Inline):
        def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
            future: Future[Any] = Future() if args[-1] > 1 else super().submit(fn, *args)
            future.cancel()
            return future

    run = run_in_order(Engine.through(Leaving()), added, 1, range(10))
    assert [next(run), next(run)] == [(0, 1), (1, 2)]
    with pytest.raises(WorkerError, match=r"^chunk 3 was given up before it was done: "):
        next(run)


def test_an_executor_that_goes_on_after_a_death_is_kept() -> None:
    """As that of a cluster: what else is in flight is not done again."""
    died: list[int] = []

    class Cluster(Inline):
        def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
            if args[-1] == 2 and not died:
                died.append(2)
                self.submitted += 1
                future: Future[Any] = Future()
                future.set_exception(BrokenExecutor("a worker has gone"))
                return future
            return super().submit(fn, *args)

    cluster, ended = Cluster(), []
    engine = Engine(lambda: cluster, lambda *_: ended.append(1), in_flight=4, breaks=False)
    with engine:
        assert list(run_in_order(engine, added, 1, range(10))) == [(n, n + 1) for n in range(10)]
    assert cluster.submitted == 11
    assert ended == [1]


def test_an_error_of_the_work_itself_is_raised_as_it_is() -> None:
    def fails(_: None, task: int) -> float:
        return 1 / (3 - task)

    with pytest.raises(ZeroDivisionError):
        list(run_in_order(Engine.through(Inline()), fails, None, range(10)))


def test_what_waits_is_cancelled_when_a_run_ends_early() -> None:
    made: list[Future[Any]] = []

    class Idle(Executor):
        def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
            future: Future[Any] = Future()
            if not made:
                future.set_result(fn(*args))
            made.append(future)
            return future

    run = run_in_order(Engine(Idle, lambda *_: None, in_flight=5), added, 1, range(10))
    assert next(run) == (0, 1)
    run.close()
    assert len(made) == 5
    for future in made[1:]:
        with pytest.raises(CancelledError):
            future.result(0)


# Real processes.


def dies_once(flag: str, task: int) -> int:
    """The first worker that is given task 3 dies of it."""
    if task == 3 and not Path(flag).exists():
        Path(flag).touch()
        os.kill(os.getpid(), signal.SIGKILL)
    return task * task


def always_dies(_: None, task: int) -> int:
    if task == 2:
        os.kill(os.getpid(), signal.SIGKILL)
    return task


@pytest.mark.skipif(os.name != "posix", reason="a signal that ends a process at once")
def test_a_process_that_kills_itself_once_is_replaced(tmp_path: Path) -> None:
    flag = tmp_path / "died"
    with in_processes(2) as engine:
        found = list(run_in_order(engine, dies_once, str(flag), range(8)))
    assert flag.exists()
    assert found == [(n, n * n) for n in range(8)]


@pytest.mark.skipif(os.name != "posix", reason="a signal that ends a process at once")
def test_a_chunk_that_kills_every_process_is_named() -> None:
    said = r"^chunk 3 ended its worker 2 times \(BrokenProcessPool: "
    with pytest.raises(WorkerError, match=said), in_processes(2) as engine:
        list(run_in_order(engine, always_dies, None, range(8), retries=2))


def test_the_number_of_workers_is_checked() -> None:
    assert [checked(n) for n in (1, 2, MOST_WORKERS)] == [1, 2, 256]
    for wrong in (0, -1, MOST_WORKERS + 1, True, 1.5):
        with pytest.raises(InputError, match=r"^workers: there can be 1 to 256 workers, and "):
            checked(wrong)  # type: ignore[arg-type]


def test_one_worker_is_this_process() -> None:
    for workers in (None, 1):
        with workers_of(workers) as engine:
            assert engine is None
    with workers_of(3) as engine:
        assert engine is not None
        assert engine.in_flight == for_workers(3) == 6


def test_workers_here_and_elsewhere_at_once_are_refused() -> None:
    with pytest.raises(InputError, match="give one of them"), workers_of(2, "tcp://127.0.0.1:1"):
        pass


def test_a_cluster_without_its_library_says_how_to_install_it(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with (
        pytest.raises(MissingLibraryError, match=r'pip install "symamp\[cluster\]"'),
        on_cluster("tcp://x:1"),
    ):
        pass


# Figures in chunks.


@dataclass(frozen=True)
class Waves:
    """Figures of a place, two real ones and a complex one, some without a value."""

    wanted: float

    def at(self, chunk: Chunk) -> list[Summary]:
        u = chunk.places
        real = np.array([np.sin(9 * u).sum(axis=0), np.where(u[0] > 0.9, np.nan, u[0] * self.wanted)])
        return [Summary.of(real), Summary.of(np.exp(7j * u[:1]))]


def extremes_of(chunks: list[Chunk], executor: Executor | Engine | None) -> list[Extremes]:
    found = [Extremes(2), Extremes(1)]
    for chunk, summaries in looked_at(Waves(3.0), chunks, executor):
        for extremes, summary in zip(found, summaries, strict=True):
            extremes.merge(summary, chunk.places)
    return found


@pytest.mark.parametrize("size", [1, 7, 64, 1000])
def test_summaries_of_chunks_leave_what_the_chunks_themselves_would(size: int) -> None:
    u = np.random.default_rng(3).random((2, 300))
    chunks = [Chunk("", u[:, start : start + size]) for start in range(0, 300, size)]
    taken = [Extremes(2), Extremes(1)]
    for chunk in chunks:
        v = chunk.places
        taken[0].take(np.array([np.sin(9 * v).sum(axis=0), np.where(v[0] > 0.9, np.nan, v[0] * 3.0)]), v)
        taken[1].take(np.exp(7j * v[:1]), v)
    with ThreadPoolExecutor(3) as threads:
        for executor in (None, Inline(), threads):
            for mine, theirs in zip(extremes_of(chunks, executor), taken, strict=True):
                assert mine.seen.tolist() == theirs.seen.tolist()
                assert mine.missing.tolist() == theirs.missing.tolist()
                assert mine.any_complex == theirs.any_complex
                for row in range(mine.rows):
                    for modulus in (False, True):
                        one, other = mine.result(row, modulus), theirs.result(row, modulus)
                        assert one is not None
                        assert other is not None
                        assert (one.least, one.greatest) == (other.least, other.greatest)
                        assert (one.at_least == other.at_least).all()
                        assert (one.at_greatest == other.at_greatest).all()
