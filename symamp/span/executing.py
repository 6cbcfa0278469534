"""Chunks of work through any executor: results in order, few in flight, workers that die replaced (room: span)."""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import BrokenExecutor, CancelledError, Executor, Future
from dataclasses import dataclass, field
from types import TracebackType
from typing import Any, TypeVar

from symamp.errors import SymampError

RETRIES = 3  # how often a chunk that has ended its worker is tried again, alone
_PER_WORKER = 2  # chunks in flight for each worker: one that it works on, one that waits for it
_UNKNOWN = max(32, _PER_WORKER * (os.cpu_count() or 1))  # where nothing says how many workers there are
_Shared = TypeVar("_Shared")
_Task = TypeVar("_Task")
_Result = TypeVar("_Result")
_Work = tuple[Callable[[Any, Any], Any], Any]  # a function and its first argument


class WorkerError(SymampError):
    """Workers could not do a chunk of work: it ended each one that was given it, or nobody handed it out."""


@dataclass
class Engine:
    """An executor, and how it is made anew when its workers have died.

    `start` makes it, `end` puts an end to it (at once where the second argument is true). `in_flight` chunks are
    handed to it at a time. `deaths` are the errors by which it says that a worker has died, and `breaks` says that it
    is then broken itself, with all that is in flight. `shared` makes of what all chunks need that which is handed
    over with each of them. `cancels` says that what waits may be cancelled chunk by chunk.
    """

    start: Callable[[], Executor]
    end: Callable[[Executor, bool], None]
    in_flight: int = _UNKNOWN
    deaths: tuple[type[BaseException], ...] = (BrokenExecutor,)
    breaks: bool = True
    cancels: bool = True
    shared: Callable[[Any], Any] = lambda thing: thing
    _executor: Executor | None = field(default=None, init=False, repr=False)

    @classmethod
    def through(cls, executor: Executor, workers: int | None = None) -> Engine:
        """An engine over an executor that is there and stays: whoever made it puts an end to it.

        `workers` says how many it has; where they are not told, 32 chunks and more are in flight.
        """
        in_flight = _UNKNOWN if workers is None else for_workers(workers)
        return cls(lambda: executor, lambda *_: None, in_flight)

    @property
    def executor(self) -> Executor:
        """The executor, started when it is first asked for."""
        if self._executor is None:
            self._executor = self.start()
        return self._executor

    def renew(self) -> None:
        """Leave an executor that is broken; the next one is started when it is asked for."""
        if self.breaks:
            self.close(now=True)

    def cancel(self, future: Future[Any] | None) -> None:
        """Whoever waits for it does so no more."""
        if self.cancels and future is not None:
            future.cancel()

    def close(self, now: bool = False) -> None:
        """Put an end to the executor: `now` without waiting for what it works on."""
        executor, self._executor = self._executor, None
        if executor is not None:
            self.end(executor, now)

    def __enter__(self) -> Engine:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close(now=kind is not None)


def for_workers(workers: int) -> int:
    """How many chunks so many workers have in flight."""
    return _PER_WORKER * max(1, workers)


@dataclass
class _Flight:
    """A task that was handed over; `future` is None where the executor did not take it."""

    number: int
    task: Any
    future: Future[Any] | None

    @property
    def landed(self) -> bool:
        future = self.future
        return future is not None and future.done() and not future.cancelled() and future.exception() is None


def run_in_order(
    engine: Engine,
    function: Callable[[_Shared, _Task], _Result],
    shared: _Shared,
    tasks: Iterable[_Task],
    *,
    retries: int = RETRIES,
    named: Callable[[_Task], str] = lambda _: "",
) -> Iterator[tuple[_Task, _Result]]:
    """Each task with function(shared, task), in the order of the tasks, whichever worker comes first.

    No more than `engine.in_flight` tasks are taken from `tasks` ahead of the results. When a worker dies, all that was
    in flight is done again, one after the other, so that the task that ends its worker is told from those that were
    beside it. Raises WorkerError, with the task's number and what `named` calls it, where it has done so `retries`
    times alone, and where somebody else cancels a task; and whatever the function raises.
    Where the run ends early, what waits is cancelled.
    """
    work = (function, engine.shared(shared))
    numbered = enumerate(tasks, start=1)
    flying: deque[_Flight] = deque()
    try:
        while True:
            while len(flying) < engine.in_flight:
                following = next(numbered, None)
                if following is None:
                    break
                flying.append(_Flight(*following, None))
                flying[-1].future = _submitted(engine, work, following[1])
            if not flying:
                return
            try:
                result = _result(flying[0])
            except engine.deaths:
                landed = [flight.landed for flight in flying] if engine.breaks else [False]
                engine.renew()
                for there in landed:
                    flight = flying[0]
                    again = _result(flight) if there else _alone(engine, work, flight, retries, named)
                    flying.popleft()
                    yield flight.task, again
                continue
            yield flying.popleft().task, result
    finally:
        for flight in flying:
            engine.cancel(flight.future)


def _submitted(engine: Engine, work: _Work, task: Any) -> Future[Any] | None:
    """The future of a task, None where the executor is broken: that is dealt with when its turn comes."""
    try:
        function, shared = work
        return engine.executor.submit(function, shared, task)
    except engine.deaths:
        return None


def _result(flight: _Flight) -> Any:
    if flight.future is None:
        raise BrokenExecutor("the executor took no more work")
    try:
        return flight.future.result()
    except CancelledError:
        raise WorkerError(
            f"chunk {flight.number} was given up before it was done: whoever hands out the work has gone, or has "
            "cancelled it; see that it runs, and run this again"
        ) from None


def _alone(
    engine: Engine,
    work: _Work,
    flight: _Flight,
    retries: int,
    named: Callable[[Any], str],
) -> Any:
    """The result of a task with no other in flight, tried again where its worker dies."""
    engine.cancel(flight.future)
    for _ in range(retries):
        flight.future = _submitted(engine, work, flight.task)
        try:
            return _result(flight)
        except engine.deaths as death:
            last = death
            engine.renew()
    what = named(flight.task)
    raise WorkerError(
        f"chunk {flight.number}{f' ({what})' if what else ''} ended its worker {retries} times "
        f"({type(last).__name__}: {last}); fewer workers need less memory, and one worker needs no other process; "
        'a script that asks for workers does so under if __name__ == "__main__"'
    ) from last
