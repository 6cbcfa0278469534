"""Ledgers and checks on a real dask cluster of two processes: the figures of one process, to the last bit."""

from __future__ import annotations

import os
import signal
import socket
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner
from worked import box_stage, check_figures, ledger_figures, table_stage

from symamp.cli import cli
from symamp.errors import InputError
from symamp.judge import span_errors as span_module
from symamp.judge.check import make_check
from symamp.judge.ledger import make_ledger
from symamp.span import workers as workers_module
from symamp.span.executing import WorkerError, run_in_order
from symamp.span.workers import on_cluster

distributed = pytest.importorskip("distributed", reason="dask.distributed is not installed")


@pytest.fixture(scope="module")
def cluster() -> Iterator[Any]:
    """Two processes of two threads each."""
    import dask

    # A task is given up at the first worker that it ends: the engine's own retries are tested.
    with (
        dask.config.set({"distributed.scheduler.allowed-failures": 0}),
        distributed.LocalCluster(
            n_workers=2, threads_per_worker=2, processes=True, dashboard_address=None
        ) as made,
    ):
        yield made


def test_a_ledger_on_a_cluster_has_the_same_bits(
    cluster: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(span_module, "_AT_ONCE", 8 * 97)
    with on_cluster(cluster.scheduler_address) as engine:
        for stage in (box_stage(), table_stage(tmp_path)):
            alone = make_ledger(stage, points=3000, prove=False)
            many = make_ledger(stage, points=3000, prove=False, executor=engine)
            assert ledger_figures(many) == ledger_figures(alone)
            check = make_check(stage, points=20_000, prove=False, executor=engine)
            assert check_figures(check) == check_figures(make_check(stage, points=20_000, prove=False))


def test_an_executor_of_the_cluster_serves_as_it_is(cluster: Any) -> None:
    """As somebody would hand it over who has a client already."""
    alone = make_ledger(box_stage(), points=20_000, prove=False)
    with distributed.Client(cluster, set_as_default=False) as client, client.get_executor() as executor:
        many = make_ledger(box_stage(), points=20_000, prove=False, executor=executor)
    assert ledger_figures(many) == ledger_figures(alone)


def test_the_command_gives_the_same_text(cluster: Any, tmp_path: Path) -> None:
    path = tmp_path / "my.stage.toml"
    path.write_bytes(box_stage().source or b"")
    asked = ["ledger", str(path), "--points", "10000", "--json"]
    alone = CliRunner().invoke(cli, asked)
    many = CliRunner().invoke(cli, [*asked, "--scheduler", cluster.scheduler_address])
    assert (many.exit_code, many.stderr) == (alone.exit_code, alone.stderr) == (0, "")
    assert many.stdout == alone.stdout


def dies_once(flag: bytes, task: int) -> int:
    """The first worker that is given task 3 dies of it."""
    path = Path(flag.decode())
    if task == 3 and not path.exists():
        path.touch()
        os.kill(os.getpid(), signal.SIGKILL)
    return task * task


def always_dies(_: bytes, task: int) -> int:
    if task == 1:
        os.kill(os.getpid(), signal.SIGKILL)
    return task


@pytest.mark.skipif(os.name != "posix", reason="a signal that ends a process at once")
def test_a_worker_of_the_cluster_that_dies_is_done_without(cluster: Any, tmp_path: Path) -> None:
    flag = tmp_path / "died"
    with on_cluster(cluster.scheduler_address) as engine:
        found = list(run_in_order(engine, dies_once, str(flag).encode(), range(8)))
        assert found == [(n, n * n) for n in range(8)]
        assert flag.exists()
        with pytest.raises(WorkerError, match=r"^chunk 2 ended its worker 1 times \(KilledWorker: "):
            list(run_in_order(engine, always_dies, b"", range(3), retries=1))


def test_workers_of_another_version_are_refused(cluster: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    theirs = workers_module._versions()
    workers_module._check_versions({"tcp://10.0.0.7:4000": theirs})
    with pytest.raises(
        InputError, match=r"the worker at tcp://10.0.0.7:4000 has numpy 1.0, and this process has"
    ):
        workers_module._check_versions({"tcp://10.0.0.7:4000": (theirs[0], "1.0", theirs[2])})
    with pytest.raises(
        InputError, match=r"the worker at tcp://10.0.0.7:4000 cannot use symamp \(no such module\)"
    ):
        workers_module._check_versions({"tcp://10.0.0.7:4000": ImportError("no such module")})
    # And they are asked.
    monkeypatch.setattr("numpy.__version__", "1.0")
    with (
        pytest.raises(InputError, match=r"the worker at .* has numpy .*, and this process has 1\.0"),
        on_cluster(cluster.scheduler_address),
    ):
        pass


def test_an_address_where_no_scheduler_is(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(workers_module, "_PATIENCE", 0.5)
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        nobody = f"tcp://127.0.0.1:{taken.getsockname()[1]}"
        for address in (nobody, "nonsense", "carrier-pigeon://roof", ""):
            with (
                pytest.raises(
                    InputError, match=r"^--scheduler: no dask scheduler answers at .*tcp://10.0.0.5:8786$"
                ),
                on_cluster(address),
            ):
                pass
