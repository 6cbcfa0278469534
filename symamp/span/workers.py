"""Where workers come from: processes of this machine, or a cluster that is running (room: span)."""

from __future__ import annotations

import gc
import logging
import signal
from collections.abc import Iterator
from concurrent.futures import BrokenExecutor, Executor, ProcessPoolExecutor
from contextlib import closing, contextmanager
from hashlib import blake2b
from multiprocessing.context import SpawnContext, SpawnProcess
from multiprocessing.process import BaseProcess
from pathlib import Path
from typing import Any

import flint
import numpy as np

from symamp.errors import InputError, MissingLibraryError
from symamp.span.executing import Engine, for_workers

MOST_WORKERS = 256
_MASKS = hasattr(signal, "pthread_sigmask")  # on POSIX systems
_PATIENCE = 10  # seconds within which a scheduler answers
_LEAST_IN_FLIGHT = 32  # on a cluster, which may grow as work comes
_ALIKE = ("the source of symamp", "numpy", "python-flint")  # the same everywhere, or the bits may differ


@contextmanager
def workers_of(workers: int | None = None, scheduler: str | None = None) -> Iterator[Engine | None]:
    """The engine that these options ask for; None where this process does all alone.

    Raises InputError where both are given, the number is out of range, or no scheduler answers; MissingLibraryError
    where a scheduler is named and dask.distributed is not installed.
    """
    if workers is not None and scheduler is not None:
        raise InputError(
            "--workers starts processes here, and --scheduler names workers elsewhere",
            "give one of them",
            key="--scheduler",
        )
    if scheduler is not None:
        with on_cluster(scheduler) as engine:
            yield engine
    elif workers is not None and checked(workers) > 1:
        with in_processes(workers) as engine:
            yield engine
    else:
        yield None


def checked(workers: int) -> int:
    """The number of workers. Raises InputError where it is no number from 1 to 256."""
    if isinstance(workers, bool) or not isinstance(workers, int) or not 1 <= workers <= MOST_WORKERS:
        raise InputError(
            f"there can be 1 to {MOST_WORKERS} workers, and {workers!r} is asked for",
            "one a core is best",
            key="workers",
        )
    return workers


@contextmanager
def in_processes(workers: int) -> Iterator[Engine]:
    """An engine over so many processes of this machine, each started when work first waits for it.

    They are started afresh ("spawn") and not forked, on every system alike: a process forked while a thread of numpy or
    of a progress bar holds a lock may never end. A start takes a few tenths of a second, for that of Python and numpy.
    """
    made: list[_Context] = []

    def start() -> Executor:
        made.append(_Context())
        return ProcessPoolExecutor(workers, mp_context=made[-1], initializer=_quiet)

    def end(executor: Executor, now: bool) -> None:
        executor.shutdown(wait=not now, cancel_futures=now)
        if now:
            made[-1].terminate()

    # A pool's own thread stumbles over a chunk that was cancelled as its workers died, and says so with a traceback;
    # an end of the whole pool cancels what waits without that.
    with Engine(start, end, for_workers(workers), cancels=False) as engine:
        yield engine


class _Worker(SpawnProcess):
    """A process that does not hear Ctrl-C until it is set up: Python's own start would answer with a traceback."""

    def start(self) -> None:
        if not _MASKS:
            super().start()
            return
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})  # which the process inherits
        try:
            super().start()
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)


class _Context(SpawnContext):
    """Starts processes, and knows them, so that an interrupted run does not wait for what they work on."""

    def __init__(self) -> None:
        super().__init__()
        self._made: list[BaseProcess] = []

    def Process(self, *given: Any, **named: Any) -> BaseProcess:  # type: ignore[override]
        self._made.append(_Worker(*given, **named))
        return self._made[-1]

    def terminate(self) -> None:
        """Put an end to all of them."""
        for process in self._made:
            if process.is_alive():
                process.terminate()


def _quiet() -> None:
    """Ctrl-C reaches workers too: they end without a word, and the run itself says what it had."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)
    if _MASKS:
        signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGINT})


@contextmanager
def on_cluster(address: str) -> Iterator[Engine]:
    """An engine over the workers of a running dask cluster, whose scheduler is at that address.

    The scheduler hands chunks of workers that die to others, and gives a chunk up that has ended several. Raises as
    `workers_of`, and InputError where a worker has other versions than this process.
    """
    try:
        from distributed import KilledWorker
    except ImportError:
        raise MissingLibraryError(
            '--scheduler needs dask.distributed: pip install "symamp[cluster]"'
        ) from None
    with _hushed(), closing(_client(address)) as client:
        _check_versions(client.run(_versions, on_error="return"))
        engine = Engine(
            # Not "pure": the cluster would take a chunk that is handed over again for the one that failed.
            lambda: client.get_executor(pure=False),
            lambda executor, now: executor.shutdown(wait=not now),
            max(_LEAST_IN_FLIGHT, for_workers(sum(client.ncores().values()))),
            (BrokenExecutor, KilledWorker),
            breaks=False,
            # As a task of its own what all chunks need goes once to each worker, and is made again where one dies.
            shared=lambda parcel: client.submit(bytes, parcel, pure=False),
        )
        with engine:
            yield engine


@contextmanager
def _hushed() -> Iterator[None]:
    """Without the client's own log, for what it says with a traceback the run says in words."""
    log = logging.getLogger("distributed.client")
    before, log.disabled = log.disabled, True
    try:
        yield
    finally:
        log.disabled = before


def _client(address: str) -> Any:
    """The connection to a scheduler."""
    from distributed import Client

    try:
        return Client(address, timeout=_PATIENCE, set_as_default=False)
    except Exception as error:  # of many kinds, for anything may listen at an address
        why = str(error).partition("\n")[0] or type(error).__name__
    gc.collect()  # the half-made client ends while what it runs on is still there
    raise InputError(
        f"no dask scheduler answers at {address!r} ({why})",
        "give the address that the scheduler says when it starts, such as tcp://10.0.0.5:8786",
        key="--scheduler",
    )


def _versions() -> tuple[str, ...]:
    """Of symamp a digest of its source, which tells apart what one version number may not."""
    package = Path(__file__).parent.parent
    source = blake2b(digest_size=6)
    for path in sorted(package.rglob("*.py")):
        source.update(path.read_bytes())
    return source.hexdigest(), np.__version__, flint.__version__


def _check_versions(workers: dict[str, Any]) -> None:
    for address, theirs in workers.items():
        if isinstance(theirs, Exception):
            raise InputError(
                f"the worker at {address} cannot use symamp ({theirs})",
                "install it there, of the same version as here",
                key="--scheduler",
            )
        for name, mine, other in zip(_ALIKE, _versions(), theirs, strict=True):
            if mine != other:
                raise InputError(
                    f"the worker at {address} has {name} {other}, and this process has {mine}",
                    "install the same versions, or the bits may differ",
                    key="--scheduler",
                )
